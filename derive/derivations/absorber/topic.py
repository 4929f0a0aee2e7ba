"""Topic `absorber`: complex potentials that do what a repeatedly asked detector does.

With chi the detector's part of a level eps of the null-outcome step (lambda = exp(-i eps tau), hbar = 1),

    P cot((H - eps) tau/2) P chi = -i coth(kappa/2) chi,      kappa = -(1/2) log(1 - eta),

so P (H - eps)^-1 P = Y(eps) = -i (tau/2) c + (tau^2/12) P(H-eps)P + (tau^4/720) P(H-eps)^3 P + ..., c = coth(kappa/2).
Each absorber keeps a part of Y (`absorber_kinds.py`).  Where its levels part from the measured ones, and by which
maps its states become the measured ones, follows from the slow subspaces of both (`absorber_maps.py`).
Any Hermitian H, any rank, 0 < eta <= 1; expansions in tau at fixed kappa, for h tau c well below 1.  Random intervals
go to `absorber_random.py`.

Source: derived here; the plain strength and the factor 4 are published (phys-rev-a-102-012218).
"""

from __future__ import annotations

from derive.derivations.absorber import steps
from derive.derivations.absorber.cascade import MOST_SITES, cascade_network
from derive.derivations.absorber.kinds import network, parameters
from derive.derivations.absorber.maps import Maps, Placed, maps_of
from derive.derivations.absorber.random import derive_averaged
from derive.derivations.imperfect import Imperfect, efficiency_of, watched_with_coth, written_out
from derive.derivations.watched import Watched
from derive.errors import NotCovered
from derive.formula.tree import (
    TAU,
    ZERO,
    Formula,
    number,
    order,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Finite, Setting, Wish
from derive.record.said import Claim, Derivation, Expansion, Kind, Matrix, Step

CLOSED = 2  # the cascade that has closed forms and state maps
WEAK_ORDERS = {"plain": (2, 2), "dressed": (4, 4), "ancilla": (4, 4), "cascade": (6, 6)}
VALID = "h*tau*coth(kappa/2) well below 1, h half the width of the spectrum of H; levels that live off the detector"
SOURCE = "phys-rev-a-102-012218"
NAMES = {"strength": "absorber strength", "coupling": "absorber coupling", "loss": "absorber loss"}


def derive_absorber(setting: Setting, wish: Wish) -> Derivation:
    """Strengths, couplings, errors and state maps of every absorber that the detector allows."""
    detector = _detector(setting)
    if setting.interval.law != "fixed":
        return derive_averaged(setting, detector)
    kinds = ["plain", "dressed", "ancilla", *_cascade(setting)]
    found = {kind: maps_of(kind, detector.is_perfect) for kind in kinds}
    weak, sites = detector.is_weak, _sites(wish)
    values: dict[str, dict[str, Expansion]] = {kind: {} for kind in kinds}
    if not weak:
        highest = max(m.order for m in found.values())
        watched, c = watched_with_coth(setting, detector, highest)
        placed = Placed(watched, highest, c)
        mapped = {k: m for k, m in found.items() if k != "cascade" or sites == CLOSED}
        values |= {kind: _inserted(maps, placed, detector) for kind, maps in mapped.items()}
    closed = parameters(detector)
    auxiliary = _network(setting, detector, sites) if "cascade" in kinds else None
    parting = {kind: WEAK_ORDERS[kind] if weak else orders(found[kind]) for kind in kinds}
    if sites != CLOSED and "cascade" in kinds:
        parting["cascade"] = (2 * sites + 2, 2 * sites + (2 if weak else 3))
    claims: list[Claim] = []
    for kind in kinds:
        claims += _parameters(kind, closed, auxiliary)
        claims += _errors(kind, parting[kind])
        claims += [_map(kind, side, value) for side, value in values[kind].items()]
    claims.append(_claim("return_factor", "return factor", closed["return_factor"]))
    told = _steps(detector, found, values, closed, auxiliary, parting)
    left_out = steps.notes(weak, setting.detectors[0].rank, sites == CLOSED)
    return Derivation("absorber", tuple(claims), told, left_out, (SOURCE,))


def _detector(setting: Setting) -> Imperfect:
    """The one detector's efficiency; what is not served is said in a sentence."""
    if not isinstance(setting.space, Finite):
        raise NotCovered("an absorber is derived on a finite graph with numbers for its sizes")
    if len(setting.detectors) != 1:
        raise NotCovered("an absorber stands in for one detector; with several told apart each needs its own")
    return efficiency_of(setting)


def _cascade(setting: Setting) -> list[str]:
    return ["cascade"] if setting.detectors[0].rank == 1 else []


def _sites(wish: Wish) -> int:
    """M, the number of sites of the cascade."""
    sites = wish.option("cascade", CLOSED)
    if not isinstance(sites, int):
        raise TypeError(f"cascade is {sites!r}, not an integer")
    if not 1 <= sites <= MOST_SITES:
        raise NotCovered(f"a cascade of {sites} sites is not derived; 1 to {MOST_SITES} are")
    return sites


def orders(maps: Maps) -> tuple[int, int]:
    """(energy, rate): levels part at order k; energies are even in tau and rates odd, so one of them gains one."""
    k = maps.order
    return (k, k + 1) if k % 2 == 0 else (k + 1, k)


# -- on the graph at hand


def _inserted(maps: Maps, placed: Placed, detector: Imperfect) -> dict[str, Expansion]:
    """Each map as a series of matrices; for a perfect detector nothing stays on the detector."""
    series = {"left": maps.left, "right": maps.right}
    if maps.kind != "cascade":
        series |= {"from detector": maps.entering, "to detector": maps.staying}
    found = {}
    for side, words in series.items():
        powers = tuple(k for k, paths in enumerate(words) if paths)
        terms = tuple(written_out(placed.matrix(words[k], k), detector) for k in powers)
        if terms:
            found[side] = Expansion("tau", powers, terms, len(words))
    return found


def _network(setting: Setting, detector: Imperfect, sites: int) -> Matrix:
    """The cascade's matrix: row 0 the detector, the other rows the sites beside it."""
    if sites != CLOSED:
        return cascade_network(setting, detector, sites)
    watched = Watched(setting, 2)
    moments = watched.moments(watched.krylov(2), 1)
    c, mu0, mu1 = moments.c[0][0], moments.mu[0][0][0], moments.mu[1][0][0]
    written = watched.field.formula
    skew = mu1 - c * mu0
    cells = network(detector, written(c), written(mu0), written(skew), written(skew * skew))
    cells = {place: f for place, f in cells.items() if f != ZERO}
    return Matrix(3, (), tuple((x, tuple((y, cells[x, y]) for y in range(3) if (x, y) in cells)) for x in range(3)))


# -- claims


def _claim(name: str, quantity: str, value: Formula | Matrix, kind: str | None = None) -> Claim:
    keys = () if kind is None else (("absorber", kind),)
    source = SOURCE if name == "plain.strength" else "derived here"
    return Claim(f"absorber.{name}", "absorber", Quantity(quantity, keys), value, valid_for=VALID, source=source)


def _parameters(kind: str, closed: dict[str, Formula], auxiliary: Matrix | None) -> list[Claim]:
    if kind == "cascade" and auxiliary is not None:
        return [_claim("cascade", NAMES["coupling"], auxiliary, "cascade")]
    mine = [(name, value) for name, value in closed.items() if name.startswith(kind + ".")]
    return [_claim(name, NAMES[name.split(".")[1]], value, kind) for name, value in mine]


def _errors(kind: str, powers: tuple[int, int]) -> list[Claim]:
    """O(tau^k) as a formula: the error of an absorber's levels at small tau and fixed kappa."""
    names = (("energy_error", "energy error"), ("rate_error", "rate error"))
    return [
        _claim(f"{kind}.{name}", quantity, order(power(TAU, number(k))), kind)
        for (name, quantity), k in zip(names, powers, strict=True)
    ]


def _map(kind: str, side: str, value: Expansion) -> Claim:
    name = side.replace(" ", "_")
    phrase = f"up to O(tau^{value.remainder})"
    return Claim(
        f"absorber.{kind}.map.{name}",
        "absorber",
        Quantity("state map", (("absorber", kind), ("side", side))),
        _added_up(value),
        Kind("order", phrase, value.remainder),
        valid_for=VALID,
    )


def _added_up(value: Expansion) -> Matrix:
    """One matrix whose entries are polynomials in tau, lowest power first."""
    rows: dict[int, dict[int, list[Formula]]] = {}
    size = 0
    for k, term in zip(value.powers, value.terms, strict=True):
        if isinstance(term, Matrix):
            size = term.size
            for x, y, f in term.entries():
                part = f if k == 0 else times(f, power(TAU, number(k)) if k > 1 else TAU)
                rows.setdefault(x, {}).setdefault(y, []).append(part)
    patch = tuple((x, tuple((y, plus(*rows[x][y])) for y in sorted(rows[x]))) for x in sorted(rows))
    return Matrix(size, (), patch)


# -- steps


def _steps(
    detector: Imperfect,
    found: dict[str, Maps],
    values: dict[str, dict[str, Expansion]],
    closed: dict[str, Formula],
    auxiliary: Matrix | None,
    parting: dict[str, tuple[int, int]],
) -> tuple[Step, ...]:
    perfect = detector.is_perfect
    told = [*steps.one_step(perfect), *steps.secular(perfect), *steps.parameters(detector, closed)]
    if auxiliary is not None:
        told += steps.cascade(auxiliary, perfect) if auxiliary.size == CLOSED + 1 else steps.long_cascade(auxiliary)
    told += steps.slow_subspaces()
    for kind, maps in found.items():
        if detector.is_weak or (kind == "cascade" and not values[kind]):
            told += steps.levels_counted(kind, parting[kind], detector.is_weak)
        else:
            told += steps.levels_part(kind, maps, parting[kind])
            told += steps.maps(kind, maps, values[kind])
    return (*told, *steps.return_factor(detector, closed["return_factor"]))
