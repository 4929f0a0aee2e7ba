"""Amplitudes between asks for a local density of states rho, in balls: u_n = int rho(E) exp(-i E tau n) dE.

A density of bands is integrated as it stands.  With E = m - h cos q on a band, m its middle and h half its width,

    int = h^(p+r+1) int_0^pi (1 - cos q)^(p+1/2) (1 + cos q)^(r+1/2) factor(E) exp(-i E tau n) dq,

and for half-integer powers p, r the integrand is 2 pi-periodic and analytic in a strip |Im q| <= d, where it is at
most M: N equal steps over a turn leave out no more than 2 (2 pi) M/(exp(d N) - 1), halved for half a turn (textbook,
trapezoidal rule).  Other powers with a factor that does not depend on E: Kummer's function (DLMF 13.4.1).

A density given by its singular points alone is completed: cut off by exponentials at a spread s, and filled up to the
weight 1 with one Gaussian, FILL/tau wide, which is analytic.  With t = tau n

    u(t) = sum_k A_k Gamma(p_k+1) exp(-i E_k t) (1/s +- i t)^(-p_k-1) + rest exp(-(FILL n)^2/2),

upper sign above E_k.  A law that follows from the points holds for every such s.  Derived here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from itertools import pairwise
from math import ceil, isqrt, log

from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters
from derive.numerics.evaluate import Values, enclose, enclose_analytic, enclose_real, rational
from derive.problem.setting import Band, Lattice, Setting, Singular

ENERGY = "E"
HALF = Fraction(1, 2)
STRIPS = (0.5, 0.25, 0.125, 0.0625)
"""Half widths of the strip that are tried in turn."""
BOXES = 64
"""Boxes that cover half a turn of the strip."""
HELD = Fraction(7, 8)
"""The most that the singular points hold of a completed density's weight."""
FILL = 8
SHARES = (1, 2)
"""A density given by its points is completed at the widest spread over these."""


@dataclass(frozen=True)
class Point:
    """A singular point at given values of the letters: rho ~ amplitude |E - energy|^power on one side."""

    energy: arb
    power: Fraction
    amplitude: arb
    above: bool


Returns = Callable[[int], list[acb]]
"""count -> u_0, ..., u_count at the working precision."""


def lattice_of(setting: Setting) -> Lattice:
    if not isinstance(setting.space, Lattice) or not setting.space.singular:
        raise NotCovered("no local density of states is given")
    return setting.space


def points_at(setting: Setting, values: Values) -> list[Point]:
    """Every singular point, side by side where it has both."""
    found = []
    for s in lattice_of(setting).singular:
        if s.logs.head != "number" or s.logs.args[0] != 0:
            raise NotCovered("a density with logarithms is not measured from its singular points")
        sides = {"above": (True,), "below": (False,), "both": (False, True)}[s.side]
        found += [_point(s, values, above) for above in sides]
    return found


def _point(s: Singular, values: Values, above: bool) -> Point:
    front = enclose_real(s.amplitude, values)
    if not front > 0:
        raise OutsideValidity("an amplitude of the density is not surely positive here")
    return Point(enclose_real(s.energy, values), power_of(s.power), front, above)


def power_of(f: Formula) -> Fraction:
    if f.head != "number":
        raise NotCovered("a density whose powers are no numbers is not measured")
    return Fraction(f.args[0])


def _about_zero(x: acb) -> acb:
    """A ball that holds x; a part that holds 0 has its middle there.

    Middles of every size would cut a product of series into as many blocks: 25 times slower, measured at n = 4096.
    """
    re, im = (arb(0, abs(part).upper()) if part.contains(0) else part for part in (x.real, x.imag))
    return acb(re, im)


# -- completed


@dataclass(frozen=True)
class Completed:
    """A density with these singular points and no others, cut off at the spread."""

    points: tuple[Point, ...]
    spread: Fraction

    def at(self, n: int, tau: arb) -> acb:
        """u_n."""
        t = tau * n
        total = acb(self._rest * arb(-((FILL * n) ** 2) / 2).exp())
        for p in self.points:
            total += acb(0, -p.energy * t).exp() * self._weight(p, t)
        return total

    def _weight(self, p: Point, t: arb) -> acb:
        away = acb(1 / self._s, t if p.above else -t)
        e = rational(p.power + 1)
        return away.pow(-e) * p.amplitude * e.gamma()

    @cached_property
    def _s(self) -> arb:
        return rational(self.spread).real

    @cached_property
    def _rest(self) -> arb:
        return 1 - self.weight

    @property
    def weight(self) -> arb:
        """What the singular points hold."""
        return sum((self._weight(p, arb(0)).real for p in self.points), arb(0))


def completed(points: list[Point], share: int) -> Completed:
    """Completed at the widest spread over `share`: the largest power of two at which the points hold less than HELD."""
    spread = Fraction(1)
    while _hold_less(points, 2 * spread):
        spread *= 2
    while not _hold_less(points, spread):
        spread /= 2
    return Completed(tuple(points), spread / share)


def _hold_less(points: list[Point], spread: Fraction) -> bool:
    """Whether the points surely hold less than HELD of the weight."""
    return bool(Completed(tuple(points), spread).weight < rational(HELD).real)


def completed_returns(points: Callable[[], list[Point]], tau: Callable[[], arb], share: int) -> Returns:
    """u_n of the completed density; points and interval are enclosed anew at each precision."""

    def returns(count: int) -> list[acb]:
        whole, step = completed(points(), share), tau()
        return [acb(1), *(_about_zero(whole.at(n, step)) for n in range(1, count + 1))]

    return returns


# -- bands


def band_returns(setting: Setting, values: Callable[[], Values], tau: Callable[[], arb]) -> Returns:
    """u_n of a density of bands."""
    bands = lattice_of(setting).bands

    def returns(count: int) -> list[acb]:
        known, step = values(), tau()
        _check_order(bands, known)
        parts = [_band(b, known, step, count) for b in bands]
        total = [sum(column, acb(0)) for column in zip(*parts, strict=True)]
        if not total[0].contains(1):
            raise OutsideValidity(f"the bands hold a weight of {float(total[0].real.mid()):.6g}, and it should be 1")
        return [_about_zero(x) for x in total]

    return returns


def _check_order(bands: tuple[Band, ...], values: Values) -> None:
    ends = [enclose_real(e, values) for b in bands for e in (b.low, b.high)]
    if not all(a < b or (k % 2 and (a - b).contains(0)) for k, (a, b) in enumerate(pairwise(ends))):
        raise OutsideValidity("the bands do not follow each other from low to high here")


def _band(b: Band, values: Values, tau: arb, count: int) -> list[acb]:
    p, r = power_of(b.low_power), power_of(b.high_power)
    low, high = enclose_real(b.low, values), enclose_real(b.high, values)
    if p.denominator == r.denominator == 2:
        return _by_steps(_Turn(b.factor, values, (low + high) / 2, (high - low) / 2, p, r), tau, count)
    if ENERGY in free_letters(b.factor):
        raise NotCovered("of bands with other powers than halves those with a constant factor are measured")
    return _by_kummer(enclose(b.factor, values), low, high, p, r, tau, count)


def _by_kummer(front: acb, low: arb, high: arb, p: Fraction, r: Fraction, tau: arb, count: int) -> list[acb]:
    """front W^(p+r+1) B(p+1, r+1) exp(-i low t) M(p+1, p+r+2, -i W t), W = high - low."""
    a, b = (arb(x.numerator) / x.denominator + 1 for x in (p, r))
    width = high - low
    front = front * (width ** (a + b - 1)) * a.gamma() * b.gamma() / (a + b).gamma()
    found = []
    for n in range(count + 1):
        t = tau * n
        found.append(front * acb(0, -low * t).exp() * acb(0, -width * t).hypgeom_1f1(acb(a), acb(a + b)))
    return found


@dataclass(frozen=True)
class _Turn:
    """The density on a band, E = m - h cos q, times dE/dq."""

    factor: Formula
    values: Values
    m: arb
    h: arb
    p: Fraction
    r: Fraction

    def energy(self, q: acb) -> acb:
        return self.m - self.h * q.cos()

    def at(self, q: acb, analytic: bool) -> acb:
        """h^(p+r+1) (1 - cos q)^(p+1/2) (1 + cos q)^(r+1/2) factor."""
        c = q.cos()
        known = self.values.with_letter(ENERGY, self.energy(q))
        factor = enclose_analytic(self.factor, known) if analytic else enclose(self.factor, known)
        return factor * (1 - c) ** int(self.p + HALF) * (1 + c) ** int(self.r + HALF) * self._scale()

    def _scale(self) -> arb:
        return self.h ** int(self.p + self.r + 1)

    def bound(self) -> tuple[float, arb]:
        """(d, M without the exponential): |density| <= M for |Im q| <= d."""
        for d in STRIPS:
            try:
                return d, self._largest(d)
            except NeedsPrecision:
                continue
        raise NotCovered("the factor of a band has a singularity too close to the band, or on it")

    def _largest(self, d: float) -> arb:
        """Over boxes of a quarter of the strip; the others hold the same values and their complex conjugates."""
        largest, step = arb(0), arb.pi() / BOXES
        for k in range(BOXES):
            box = acb(step * k + step * arb(0.5, 0.5), arb(d) / 2 + arb(0, d) / 2)
            largest = largest.max(self.at(box, True).abs_upper())
        return largest


def _by_steps(turn: _Turn, tau: arb, count: int) -> list[acb]:
    """Half a turn in N/2 equal steps, the ends at half weight, with what that leaves out."""
    d, bound = turn.bound()
    reach = float((tau * turn.h).upper()) * count
    growth = reach * float(arb(d).sinh().upper())
    steps = 2 * ceil((growth + ctx.prec * log(2) + 40) / (2 * d)) + 2
    left_out = (2 * arb.pi() * bound * arb(growth).exp() / ((arb(d) * steps).exp() - 1)).upper()
    nodes = [acb(2 * arb.pi() * k / steps) for k in range(steps // 2 + 1)]
    weights = [turn.at(q, False) * (2 * arb.pi() / steps) for q in nodes]
    weights[0], weights[-1] = weights[0] / 2, weights[-1] / 2
    found = _phases(weights, [turn.energy(q) * tau for q in nodes], count)
    around = acb(arb(0, left_out), arb(0, left_out))
    return [x + around for x in found]


def _phases(weights: list[acb], angles: list[acb], count: int) -> list[acb]:
    """sum_j w_j exp(-i x_j n) for n = 0 ... count: one product of matrices, n = rows * stride + columns."""
    stride = isqrt(count) + 1
    ones = [(acb(0, -1) * x).exp() for x in angles]
    leaps = [x**stride for x in ones]
    left = acb_mat(_powers(weights, leaps, count // stride + 1))
    right = acb_mat([list(column) for column in zip(*_powers([acb(1)] * len(ones), ones, stride), strict=True)])
    return list((left * right).entries())[: count + 1]


def _powers(first: list[acb], ratio: list[acb], count: int) -> list[list[acb]]:
    rows = [first]
    for _ in range(count - 1):
        rows.append([a * b for a, b in zip(rows[-1], ratio, strict=True)])
    return rows
