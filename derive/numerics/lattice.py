"""Amplitudes between asks on infinite lattices, in balls, straight from the Hamiltonian.

    u_n = <d|U^n|d>,   v_n = <d|U^n|psi>,   U = exp(-i H tau),   H_xy = h between neighbours

On the line <x|exp(-i H t)|y> = w^k J_k(2|h|t), k = |x - y|, w = -i h/|h| (its conjugate hop to the other side); the
half line subtracts the mirror image behind its end, J_(x+y+2); the square lattice is the product of two lines.
(textbook; DLMF 10.12.1 expands the band's plane waves.)  Everything but a power of w is real, and that power is kept
apart: v_n = factor * (real v_n).  One site with an energy of its own adds what it scatters (`numerics/impurity.py`);
then both sequences are complex.
"""

from __future__ import annotations

from dataclasses import dataclass

from flint import acb, arb

from derive.errors import NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.tree import ONE, Formula
from derive.numerics.evaluate import Values, enclose, enclose_real, whole_number
from derive.numerics.impurity import Impurity, Scattered, added, enclose_scattered, split, unfading
from derive.problem.setting import Lattice, Setting

Product = tuple[int, tuple[int, ...]]
"""sign and Bessel orders: sign * J_k1(a n) J_k2(a n) ..."""


@dataclass(frozen=True)
class Waves:
    """u_n and v_n as sums of products of Bessel functions of a n, a = 2 |h| tau; `factor` stands before v_n.

    `scattered`: what an impurity adds to u_n and to v_n, if there is one.
    """

    a: arb
    u: tuple[Product, ...]
    v: tuple[Product, ...]
    factor: acb
    returns: bool
    scattered: tuple[Scattered, Scattered] | None = None


def waves(setting: Setting, values: Values) -> Waves:
    """The lattice, its detector and its start at one point."""
    space = setting.space
    if not isinstance(space, Lattice) or space.hopping is None or space.name not in _SHAPES:
        raise NotCovered("amplitudes between asks are known on the line, the half line and the square lattice")
    hopping = enclose(space.hopping, values)
    if hopping.contains(0):
        raise OutsideValidity("the hopping vanishes")
    size = arb(abs(hopping))
    a = 2 * size * enclose_real(setting.interval.length, values)
    d, x = _place(setting, values, False), _place(setting, values, True)
    shape = _SHAPES[space.name]
    ahead, behind = (sum(max(0, s * (q - p)) for p, q in zip(d, x, strict=True)) for s in (1, -1))
    turn, back = (acb(0, -1) * h / size for h in (hopping, hopping.conjugate()))
    scattered = _scattered(space, a, enclose_real(setting.interval.length, values), (d, x), values)
    return Waves(a, shape(d, d), shape(d, x), turn**ahead * back**behind, d == x, scattered)


def _scattered(
    space: Lattice, a: arb, length: arb, ends: tuple[tuple[int, ...], tuple[int, ...]], values: Values
) -> tuple[Scattered, Scattered] | None:
    """What the one site with an energy of its own adds; None where there is none, or its energy is 0."""
    impurity = _impurity(space, length, values)
    if impurity is None:
        return None
    (d,), (x,) = ends
    return split(added(impurity, a, d, d)), split(added(impurity, a, d, x))


def _impurity(space: Lattice, length: arb, values: Values) -> Impurity | None:
    if not space.energies:
        return None
    if len(space.energies) > 1 or space.name == "square lattice":
        raise NotCovered("of site energies one is measured, on the line or the half line")
    place, energy = space.energies[0]
    e = enclose_real(energy, values) * length
    if e.is_zero():
        return None
    return Impurity(e, whole_number(parse(place), values, "a site"), space.name == "half line")


def enclose_bound(setting: Setting, values: Values) -> list[tuple[arb, arb]]:
    """(energy, weight on the detector's site) of every bound state: what in u_n turns for ever and never fades."""
    w, length = waves(setting, values), enclose_real(setting.interval.length, values)
    found = unfading(w.scattered[0], w.a) if w.scattered is not None else []
    return [(turn / length, weight) for turn, weight in found]


def _place(setting: Setting, values: Values, start: bool) -> tuple[int, ...]:
    """Coordinates of the detector, or of the start."""
    if len(setting.detectors) != 1 or setting.detectors[0].place is None:
        raise NotCovered("on an infinite lattice one site is watched")
    if setting.detectors[0].efficiency != ONE:
        raise NotCovered("a detector of efficiency below 1 is not measured on an infinite lattice yet")
    watched = _coordinates(setting.detectors[0].place, values)
    if not start:
        return watched
    if setting.start is None:
        raise NotCovered("the law of detection depends on the start, and none is given")
    if setting.start.distance is not None:
        away = whole_number(setting.start.distance, values, "the distance of the start")
        return (watched[0] + away, *watched[1:])
    if setting.start.place is None:
        raise NotCovered("on an infinite lattice the start is one site, or a distance from the detector")
    return _coordinates(setting.start.place, values)


def _coordinates(place: Formula | str, values: Values) -> tuple[int, ...]:
    if isinstance(place, Formula):
        return (whole_number(place, values, "a site"),)
    return tuple(int(part) for part in place.split(","))


def _line(d: tuple[int, ...], x: tuple[int, ...]) -> tuple[Product, ...]:
    return ((1, (abs(d[0] - x[0]),)),)


def _half_line(d: tuple[int, ...], x: tuple[int, ...]) -> tuple[Product, ...]:
    """J_k - w^(2m+2) J_(k+2m+2), m the site nearer to the end; w^2 = -1."""
    k, m = abs(d[0] - x[0]), min(d[0], x[0])
    if m < 0:
        raise OutsideValidity("a half line has no site below 0")
    return ((1, (k,)), (-((-1) ** (m + 1)), (k + 2 * m + 2,)))


def _square(d: tuple[int, ...], x: tuple[int, ...]) -> tuple[Product, ...]:
    return ((1, tuple(sorted(abs(p - q) for p, q in zip(d, x, strict=True)))),)


_SHAPES = {"line": _line, "half line": _half_line, "square lattice": _square}


def enclose_returns(w: Waves, count: int) -> tuple[list[arb], list[arb]] | tuple[list[acb], list[acb]]:
    """(u_0 ... u_count, v_0 ... v_count over the factor) at the working precision; v_0 is the start's own overlap."""
    orders = sorted({k for _, ks in (*w.u, *w.v) for k in ks})
    u, v = [], []
    for n in range(count + 1):
        x = w.a * n
        values = {k: x.bessel_j(arb(k)) for k in orders}
        u.append(_summed(w.u, values))
        v.append(_summed(w.v, values))
    if w.scattered is None:
        return u, v
    more = enclose_scattered(w.scattered, w.a, count)
    return [x + y for x, y in zip(u, more[0], strict=True)], [x + y for x, y in zip(v, more[1], strict=True)]


def _summed(products: tuple[Product, ...], values: dict[int, arb]) -> arb:
    total = arb(0)
    for sign, orders in products:
        term = arb(sign)
        for k in orders:
            term *= values[k]
        total += term
    return total
