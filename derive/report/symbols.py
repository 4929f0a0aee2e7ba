"""The letter each quantity is printed by, with its keys as subscripts."""

from __future__ import annotations

from derive.problem.quantities import Quantity
from derive.report.boxes import Box, Fence, Script, Sign, Words, listed, row
from derive.report.letters import named, operator_name, snippet, with_scripts

_SYMBOLS = {
    "generator": "G",
    "absorber strength": "\\Gamma",
    "absorber coupling": "s",
    "absorber loss": "\\Gamma",
    "energy error": "\\delta E",
    "rate error": "\\delta\\gamma",
    "state map": "M",
    "return factor": "r",
    "absorber amplitude": "f",
    "absorbed fraction": "A",
    "radius of convergence": "\\tau_{\\text{c}}",
    "remainder bound": "R",
    "largest interval": "\\tau_{\\text{max}}",
    "secular function": "D",
    "level energy": "E",
    "level multiplicity": "m",
    "level weight": "w",
    "decay rate": "\\gamma",
    "survival probability": "S",
    "crossover time": "t",
    "survival regime": "S",
    "generating function": "\\varphi",
    "detection amplitude": "\\varphi",
    "detection probability": "F",
    "pole": "z",
    "total detection probability": "P_{\\text{det}}",
    "bright dimension": "b",
    "dark dimension": "d",
    "number of phases": "w",
    "splitting probability": "p",
    "mean": "\\langle n\\rangle",
    "conditional mean": "\\langle n\\rangle_{\\text{det}}",
    "variance": "\\mathrm{Var}\\,n",
    "exceptional interval": "\\tau",
    "divergence coefficient": "c",
    "state error bound": "\\epsilon",
    "relative state error bound": "\\epsilon_{\\text{rel}}",
    "dark level energy": "E^{\\text{dark}}",
    "dark level multiplicity": "m^{\\text{dark}}",
    "dark state": "\\psi^{\\text{dark}}",
    "survival density": "f",
    "classical survival": "S_{\\text{cl}}",
    "classical density": "f_{\\text{cl}}",
    "classical mean": "\\langle t\\rangle_{\\text{cl}}",
    "classical mean of steps": "\\langle n\\rangle_{\\text{cl}}",
    "averaged loss": "\\bar{\\Gamma}",
    "averaged dephasing": "\\bar{\\gamma}",
    "drop of phases": "\\Delta w",
    "exceptional value": "\\hat{x}",
    "phases at exceptional value": "\\hat{w}",
    "total probability at exceptional value": "\\hat{P}_{\\text{det}}",
    "tail start": "n_{\\text{tail}}",
    "bound state energy": "E_{\\text{b}}",
    "bound state weight": "p_{\\text{b}}",
    "tail rate": "\\kappa",
    "pole modulus": "\\rho",
    "pole angle": "\\theta",
}
_ARGUMENTS = {
    "remainder bound": "τ", "secular function": "E", "generating function": "z", "survival density": "t",
    "absorber amplitude": "t",
}
_SELECTS = (
    "order", "level", "absorber", "regime", "ask", "pole", "detector", "interval", "value", "component", "state",
    "power", "which",
)
_OF_N = ("detection amplitude", "detection probability")


def symbol(quantity: Quantity) -> Box:
    """G_2, gamma_1, F_n ...; an entry of a matrix as (G_2)_{3,5}."""
    keys = dict(quantity.keys)
    chosen = next((keys[name] for name in _SELECTS if keys.get(name) is not None), None)
    if chosen is None and quantity.name in _OF_N:
        chosen = "n"
    if quantity.name == "moment":
        return Fence("⟨", Script(Sign("n"), sup=_key(chosen or "p")), "⟩")
    key = None if chosen is None else _key(chosen)
    if keys.get("arm") is not None and key is not None:
        key = listed([key, Words(f"arm {keys['arm']}")], tight=True)
    box = _selected(snippet(_SYMBOLS.get(quantity.name, "")) or Words(quantity.name), key)
    if keys.get("side") is not None:
        box = with_scripts(box, None, Words(str(keys["side"])))
    place = keys.get("entry")
    if isinstance(place, (tuple, list)) and len(place) == 2:
        return entry(box, str(place[0]), str(place[1]))
    argument = "τ" if quantity.name == "generator" and chosen is None else _ARGUMENTS.get(quantity.name)
    return row(box, Fence("(", Sign(argument), ")")) if argument else box


def _selected(base: Box, key: Box | None) -> Box:
    """The letter with its key as subscript, behind one that it has already."""
    if key is None:
        return base
    if isinstance(base, Script) and base.sub is not None:
        return Script(base.base, listed([base.sub, key], tight=True), base.sup)
    return with_scripts(base, key, None)


def _key(value: object) -> Box:
    text = str(value)
    if text.isdigit():
        return Sign(text, "number")
    return named(text) if len(text) == 1 else Words(text)


def entry(base: Box, x: str, y: str) -> Box:
    """(base)_{x,y}, sites by name."""
    inside = base if isinstance(base, Sign) else Fence("(", base, ")")
    return Script(inside, sub=listed([site(x), site(y)], tight=True))


def site(name: str) -> Box:
    """A site's number or name as a subscript."""
    if name.isdigit():
        return Sign(name, "number")
    return Sign(name, "upright") if name.isascii() and name.isalnum() else Words(name)


def named_operator(name: str, sub: int | str | None = None) -> Box:
    return operator_name(name, sub, False)
