"""Every word a worksheet may use, a line each: `watchpot words`.  All of it comes from the tables that reading uses."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from derive.formula.grammar import CONSTANTS, FUNCTIONS
from derive.problem.families import FAMILIES, INFINITE
from derive.problem.quantities import QUANTITIES
from derive.worksheet import keys, served
from derive.worksheet.keys import Key

FUNCTION_WORDS = {
    "floor": "largest integer not above x",
    "Gamma": "the gamma function",
    "binomial": "n choose k",
    "bessel_J": "Bessel function of order n",
    "bessel_I": "modified Bessel function of order n",
    "elliptic_K": "complete elliptic integral of the first kind, of the parameter m",
    "conj": "complex conjugate",
    "Re": "real part",
    "Im": "imaginary part",
    "abs": "absolute value",
}
FORMS = {
    "n!": "factorial",
    "sum(k from 1 to L: ...)": "a sum; empty it is 0",
    "integral(x from a to b: ...)": "an integral over real x",
    "root(x^3 - 2*x + 1, x, 2)": "a real root, ascending, counted from 1",
    "rootsum(x in x^3 - 2*x + 1: ...)": "a sum over all roots",
}
CONSTANT_WORDS = {
    "i": "the imaginary unit",
    "pi": "3.14159...",
    "euler_gamma": "0.57721...",
    "infinity": "only in holds and in the limits of sums and integrals",
}
PLACES = {
    '"centre"': "the one site of least eccentricity",
    '"end"': "the lowest-numbered site with a single neighbour",
    '"root"': "site 0 of a tree",
    '"detector"': "in start.at: the detector's own state",
    '"x,y"': "a site of the square lattice",
}


def words() -> Iterator[str]:
    """Section by section; a word that no topic serves yet says so."""
    yield from _keys("", keys.TOP)
    yield from _keys("symbols.<letter>.", keys.LETTER)
    yield from (f'"{name}": domain. {says}' for name, says in keys.DOMAINS.items())
    yield from _keys("graph.", keys.GRAPH)
    yield from _keys("graph.flux.", keys.FLUX)
    yield from _keys("graph.singular.", keys.SINGULAR)
    yield from _keys("graph.band.", keys.BAND)
    for name, plan in FAMILIES.items():
        sizes = ", ".join(k for k, _ in plan.sizes) + (f" or {plan.instead[0]}" if plan.instead else "")
        yield f'"{name}": family with {sizes}. {plan.says}'
    yield from (f'"{name}": infinite family. {says}{_feature("lattice")}' for name, says in INFINITE.items())
    yield from (f"graph.{name}: size. {says}" for name, says in keys.SIZES.items())
    yield from _keys("detector.", keys.DETECTOR)
    yield from _keys("start.", keys.START)
    yield from _keys("start.mixture.", keys.MIXED)
    yield from (f"{name}: place. {says}" for name, says in PLACES.items())
    yield from _keys("interval.", keys.INTERVAL)
    yield from (
        f'"{law}": law of the interval.{_not_yet(law == "fixed" or bool(served.serving(law)))}' for law in keys.LAWS
    )
    for name, topic in keys.TOPICS.items():
        yield f"derive.{name}: topic. {topic.says}{_not_yet(name in served.TOPICS)}"
        yield from _keys(f"derive.{name}.", (o.key for o in topic.options))
    for line, key in zip(_keys("derive.<topic>.", keys.ANY_TOPIC), keys.ANY_TOPIC, strict=True):
        yield line if key.name == "set" else f"{line}; with {served.now(served.serving(key.name))}"
    yield from _keys("claim.<name>.", keys.CLAIM)
    yield from _keys("claim.<name>.cases.", keys.CASE)
    yield from _keys("claim.<name>.per_root.", keys.PER_ROOT)
    for name, spec in QUANTITIES.items():
        brings = f", brings {', '.join(spec.brings)}" if spec.brings else ""
        which = f", which: {spec.which}" if spec.which else ""
        yield f'"{name}": quantity, {spec.shape}{which}{brings}.{_not_yet(name in served.QUANTITIES)}'
    yield from (f'"{phrase}": holds. {says}' for phrase, says in keys.HOLDS.items())
    yield from _keys("check.", keys.CHECK)
    yield from (f"{name}: number. {CONSTANT_WORDS[name]}" for name in CONSTANTS)
    for name, count in FUNCTIONS.items():
        arguments = {"binomial": "n, k", "elliptic_K": "m"}.get(name, "n, x" if count == 2 else "x")
        yield f"{name}({arguments}): function. {FUNCTION_WORDS.get(name, '')}".rstrip(" .") + "."
    yield from (f"{form}: formula. {says}" for form, says in FORMS.items())


def _feature(name: str) -> str:
    return _not_yet(bool(served.serving(name)))


def _not_yet(is_served: bool) -> str:
    return "" if is_served else " (not served yet)"


def _keys(prefix: str, table: Iterable[Key]) -> Iterator[str]:
    for key in table:
        tail = " (required)" if key.required else f" (left out: {key.default})" if key.default else ""
        yield f"{prefix}{key.name}: {key.takes}. {key.says}{tail}"
