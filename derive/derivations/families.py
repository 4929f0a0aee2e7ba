"""Families of symbolic size, seen from one watched site: what is left when it is cut out, in closed form.

arms    m equal paths of L sites, each joined to the watched site by its first one: a chain at its end (m = 1) or in
        the middle (m = 2), a star at its centre
ring    one path of L = N - 1 sites, joined to the watched site by both ends, the second with the flux's phase
unequal paths of different lengths at the watched site: a chain watched anywhere, a star with unequal arms
cube    a hypercube watched at a corner: its states are known, the levels of what is left are roots of an equation
layers  what is reached is a chain of a few states, whatever the size: complete and complete bipartite graphs

T > 0 is the hopping's size: E = -2 T cos(theta) on every path.  C is the energy of the watched site.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from derive.errors import NotCovered
from derive.exact.arguments import is_nonnegative, is_positive
from derive.exact.field import Field
from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, call, negate, number, times
from derive.problem.graphs import assemble
from derive.problem.setting import Family, Relation, Setting, Shape, Start, Watcher


@dataclass(frozen=True)
class Paths:
    """`count` paths of `length` sites at a watched site of energy C; `flux` for the ring, whose two ends are joined.

    `turned`: the hopping is positive, so that around the ring its sign counts.
    """

    count: Formula
    length: Formula
    T: Formula
    C: Formula
    closed: bool = False
    flux: Formula | None = None
    turned: bool = False


@dataclass(frozen=True)
class Unequal:
    """Paths of the given lengths at a watched site of energy C."""

    lengths: tuple[Formula, ...]
    T: Formula
    C: Formula


@dataclass(frozen=True)
class Cube:
    """A hypercube of the given dimension, hopping t, energies 0."""

    dimension: Formula
    t: Formula


@dataclass(frozen=True)
class Layers:
    """The chain that is reached, as a finite setting of its own, and the dark levels (energy, multiplicity).

    `assume`: sizes at which the chain is not shorter; a dark level is told where there is one.
    """

    setting: Setting
    dark: tuple[tuple[Formula, Formula], ...]
    says: str
    assume: tuple[Relation, ...] = ()


def seen_from_detector(setting: Setting) -> Paths | Unequal | Cube | Layers:
    """The family as its watched site sees it, or `NotCovered`."""
    family = setting.space
    if not isinstance(family, Family):
        raise TypeError("a family of symbolic size is needed here")
    readers: dict[str, Callable[[Setting, Family], Paths | Unequal | Cube | Layers]] = {
        "chain": _chain, "star": _star, "ring": _ring, "complete": _complete, "complete bipartite": _bipartite,
        "hypercube": _cube,
    }
    if family.name not in readers:
        raise NotCovered(f"the family {family.name} with a letter for its size is not served here yet")
    if family.bonds:
        raise NotCovered("bonds of their own, on a graph whose size is a letter, are not served here yet")
    return readers[family.name](setting, family)


def hopping_size(family: Family, setting: Setting) -> tuple[Formula, bool]:
    """(T, whether the hopping is +T); `NotCovered` where its sign is not known."""
    domains = setting.domains()
    opposite = _tidy(negate(family.hopping), setting)
    if is_positive(opposite, domains):
        return opposite, False
    if is_positive(family.hopping, domains):
        return family.hopping, True
    raise NotCovered(f"the hopping {text(family.hopping)} is not known to be positive or negative")


def _tidy(f: Formula, setting: Setting) -> Formula:
    field = Field.of([f], setting.domains())
    return field.formula(field.element(f))


def _watched(setting: Setting) -> Formula | str:
    place = setting.detectors[0].place
    if place is None:
        raise NotCovered("on a graph whose size is a letter the detector stands on one site")
    return place


def _only_on_detector(family: Family, setting: Setting, sites: tuple[Formula, ...]) -> Formula:
    """The watched site's energy; another energy is not served."""
    found = ZERO
    for x, energy in family.energies:
        if not any(_same(x, site, setting) for site in sites):
            raise NotCovered("on a graph whose size is a letter only the detector's own energy is served")
        found = energy
    return found


def _same(a: Formula, b: Formula, setting: Setting) -> bool:
    return vanishes(a - b, setting.domains()) is True


def _chain(setting: Setting, family: Family) -> Paths | Unequal:
    sites = dict(family.sizes)["sites"]
    place = _watched(setting)
    last = _tidy(sites - 1, setting)
    half = _tidy(last / 2, setting)
    T, turned = hopping_size(family, setting)
    if place == "centre" or isinstance(place, Formula) and _same(place, half, setting):
        return Paths(number(2), half, T, _only_on_detector(family, setting, (half,)), turned=turned)
    if place == "end" or isinstance(place, Formula) and (place == ZERO or _same(place, last, setting)):
        at = (ZERO,) if place in ("end", ZERO) else (last,)
        return Paths(ONE, last, T, _only_on_detector(family, setting, at), turned=turned)
    if not isinstance(place, Formula):
        raise NotCovered(f"{place} is no site of a chain")
    energy = _only_on_detector(family, setting, (place,))
    return Unequal((place, _tidy(last - place, setting)), T, energy)


def _star(setting: Setting, family: Family) -> Paths | Unequal:
    sizes = dict(family.sizes)
    if _watched(setting) not in (ZERO, "centre"):
        raise NotCovered("a star whose size is a letter is watched at its centre here")
    T, turned = hopping_size(family, setting)
    if "arms" not in sizes:
        lengths = tuple(f for key, f in family.sizes if key.startswith("lengths"))
        return Unequal(lengths, T, _only_on_detector(family, setting, (ZERO,)))
    return Paths(sizes["arms"], sizes["length"], T, _only_on_detector(family, setting, (ZERO,)), turned=turned)


def _ring(setting: Setting, family: Family) -> Paths:
    sites = dict(family.sizes)["sites"]
    place = _watched(setting)
    if not isinstance(place, Formula):
        raise NotCovered("a ring has no centre and no end")
    T, turned = hopping_size(family, setting)
    flux = _flux(family, setting)
    if turned and flux is None:
        raise NotCovered("a ring of positive hopping whose size is a letter needs a flux here")
    energy = _only_on_detector(family, setting, (place,))
    return Paths(number(2), _tidy(sites - 1, setting), T, energy, True, flux, turned)


def _flux(family: Family, setting: Setting) -> Formula | None:
    """The flux, None where it is a whole turn; at half a turn other levels are dark, which is not served."""
    if family.flux is None or vanishes(call("cos", family.flux) - 1, setting.domains()) is True:
        return None
    if vanishes(call("cos", family.flux) + 1, setting.domains()) is True:
        raise NotCovered("a ring with half a turn of flux and a letter for its size is not served here; give its size")
    return family.flux


def _cube(setting: Setting, family: Family) -> Cube:
    _watched(setting)
    if family.energies:
        raise NotCovered("energies on a hypercube whose dimension is a letter are not served here yet")
    return Cube(dict(family.sizes)["dimension"], family.hopping)


def _complete(setting: Setting, family: Family) -> Layers:
    n, t = dict(family.sizes)["sites"], family.hopping
    energy = _only_on_detector(family, setting, _sites_of(setting))
    others = _tidy(n - 2, setting)
    bond = times(call("sqrt", _tidy(n - 1, setting)), t)
    reached = _layers(setting, [energy, _tidy(times(others, t), setting)], [bond], [n - 1])
    return Layers(reached, ((_tidy(negate(t), setting), others),), "the equal superposition of all other sites")


def _bipartite(setting: Setting, family: Family) -> Layers:
    sizes, t = dict(family.sizes), family.hopping
    place = _watched(setting)
    if place != ZERO:
        raise NotCovered("a complete bipartite graph whose size is a letter is watched at site 0 here")
    energy = _only_on_detector(family, setting, (ZERO,))
    left, right = sizes["left"], sizes["right"]
    first = times(call("sqrt", right), t)
    second = times(call("sqrt", _tidy((left - 1) * right, setting)), t)
    reached = _layers(setting, [energy, ZERO, ZERO], [first, second], [right, left - 1])
    return Layers(reached, ((ZERO, _tidy(left + right - 3, setting)),),
                  "the equal superposition of one side's sites, then of the other's", at_least(left, 2, setting))


def at_least(size: Formula, least: int, setting: Setting) -> tuple[Relation, ...]:
    """size >= least, where the letters' domains do not say so."""
    known = is_nonnegative(_tidy(size - least, setting), setting.domains())
    return () if known else (Relation(size, ">=", number(least)),)


def _sites_of(setting: Setting) -> tuple[Formula, ...]:
    place = _watched(setting)
    return (place,) if isinstance(place, Formula) else ()


def _layers(setting: Setting, energies: list[Formula], bonds: list[Formula], sizes: list[Formula]) -> Setting:
    """A chain of layers watched at its first; a start `distance` steps out, as far as it can be seen."""
    edges = [(x, x + 1, f) for x, f in enumerate(bonds)]
    on = {x: f for x, f in enumerate(energies) if f != ZERO}
    space = assemble(len(energies), edges, on, Shape("hamiltonian"), setting.domains())
    watcher = Watcher((((0, ONE),),))
    return Setting(setting.title, setting.letters, space, (watcher,), _layer_start(setting, sizes), setting.interval,
                   setting.assume)


def _layer_start(setting: Setting, sizes: list[Formula]) -> Start | None:
    """One site of the layer `distance`: its part in the equal superposition is 1/sqrt(size)."""
    start = setting.start
    if start is None or start.distance is None or start.distance.head != "number":
        return None
    steps = int(start.distance.args[0])
    if not 1 <= steps <= len(sizes):
        return None
    size = _tidy(sizes[steps - 1], setting)
    return Start(((ONE, ((steps, call("sqrt", size) ** number(-1)),)),))
