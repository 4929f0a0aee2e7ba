"""What a formula can be about.

One table: the quantity's name as the worksheet writes it, the topic that derives it, what its keys are, the
letters it brings along, and its shape.  Checks and claims are keyed by `Quantity`, never by how a formula was found.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Quantity:
    """A measurable thing: its name in the table below and its typed keys, e.g. ("order", 2), ("entry", (3, 5))."""

    name: str
    keys: tuple[tuple[str, object], ...] = ()

    def key(self, name: str, default: object = None) -> object:
        return dict(self.keys).get(name, default)


@dataclass(frozen=True, slots=True)
class Spec:
    """topic; what `which` selects (None: nothing to select); letters brought along; scalar, matrix or either."""

    topic: str
    which: str | None = None
    brings: tuple[str, ...] = ()
    shape: str = "scalar"


QUANTITIES: dict[str, Spec] = {
    "generator": Spec("generator", "order", shape="matrix"),
    "absorber strength": Spec("absorber", "absorber"),
    "absorber coupling": Spec("absorber", "absorber", shape="either"),
    "absorber loss": Spec("absorber", "absorber"),
    "energy error": Spec("absorber", "absorber"),
    "rate error": Spec("absorber", "absorber"),
    "state map": Spec("absorber", "absorber", shape="matrix"),
    "return factor": Spec("absorber"),
    "averaged loss": Spec("absorber"),
    "averaged dephasing": Spec("absorber"),
    "absorber amplitude": Spec("absorber", brings=("t",)),
    "absorbed fraction": Spec("absorber"),
    "radius of convergence": Spec("validity"),
    "remainder bound": Spec("validity", "order"),
    "state error bound": Spec("validity", "order"),
    "relative state error bound": Spec("validity", "order"),
    "largest interval": Spec("validity", "order"),
    "secular function": Spec("levels", brings=("E",)),
    "level energy": Spec("levels", "level", ("k",)),
    "level multiplicity": Spec("levels", "level", ("k",)),
    "level weight": Spec("levels", "level", ("k",)),
    "dark level energy": Spec("levels", "level", ("k",)),
    "dark level multiplicity": Spec("levels", "level", ("k",)),
    "decay rate": Spec("levels", "level", ("k",)),
    "survival probability": Spec("survival", brings=("t", "n")),
    "survival density": Spec("survival", brings=("t",)),
    "survival regime": Spec("survival", "regime", ("t",)),
    "classical survival": Spec("classical", brings=("t", "n")),
    "classical density": Spec("classical", brings=("t", "n")),
    "classical mean": Spec("classical"),
    "classical mean of steps": Spec("classical"),
    "crossover time": Spec("survival", "regime"),
    "generating function": Spec("renewal", "component", ("z",)),
    "detection amplitude": Spec("renewal", "ask", ("n",)),
    "detection probability": Spec("renewal", "ask", ("n",)),
    "pole": Spec("renewal", "pole"),
    "tail start": Spec("asymptotics"),
    "bound state energy": Spec("asymptotics"),
    "bound state weight": Spec("asymptotics"),
    "tail rate": Spec("asymptotics"),
    "pole modulus": Spec("asymptotics", "pole"),
    "pole angle": Spec("asymptotics", "pole"),
    "total detection probability": Spec("detection"),
    "bright dimension": Spec("detection"),
    "dark dimension": Spec("detection"),
    "number of phases": Spec("detection"),
    "dark state": Spec("detection", "state", shape="matrix"),
    "splitting probability": Spec("detection", "detector"),
    "mean": Spec("moments"),
    "conditional mean": Spec("moments"),
    "variance": Spec("moments"),
    "moment": Spec("moments", "power"),
    "exceptional interval": Spec("exceptional", "interval"),
    "merging levels": Spec("exceptional", "interval"),
    "drop of phases": Spec("exceptional", "interval"),
    "divergence coefficient": Spec("exceptional", "interval"),
    "exceptional value": Spec("exceptional", "value"),
    "phases at exceptional value": Spec("exceptional", "value"),
    "total probability at exceptional value": Spec("exceptional", "value"),
}
