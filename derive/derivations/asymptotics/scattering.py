"""A line or half line with one impurity, seen at the upper edge of the band: the exact part of a late-time law.

H = H_0 + eps |p><p|, e = eps tau, a = 2|h| tau, s = sqrt(a^2 - theta^2), lambda = (theta - i s)/a, z = exp(i theta).
With G = G_0 + G_0 |p> eps <p| G_0/(1 - eps <p|G_0|p>) (textbook) and the images under aliasing in R, the generating
functions of detector d and start x are quotients over one K, without a pole in e or at the edge:

    u = N/K + R_u,    v = w^k i^k (M/K + R_v),    phi = v/u,    k = |d - x|,    w = -i h/|h|

    line:       K = s + i e,             N = 1 + i e D_(2|d-p|),             M = lambda^k (1 + i e D_(|d-p|+|p-x|-k))
    half line:  K = 1 + i e D_(p,p),     N = D_(d,d) K - i e D_(d,p)^2,      M = D_(d,x) K - i e D_(d,p) D_(p,x)

    D_n = (1 - lambda^n)/s,     D_(x,y) = lambda^|x-y| D_(2 min(x,y)+2)

All of them are X + Y s with power series X, Y in sigma = s^2.  Of phi = even part + s h only h is singular:

    h = (n_o d_e - n_e d_o)/(d_e^2 - d_o^2 sigma),      n = M + R_v K,     d = N + R_u K      (return: n = d - K)

R enters linearly above and squared below, so that what an impurity does is in a few elements of Q(a, e, i).  The lower
edge is the complex conjugate with e turned round.  Derived here; checked by dividing the series themselves.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.singular import Singular, root_series
from derive.derivations.asymptotics.band import HALF, REAL, A, chebyshev
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, letter
from derive.problem.setting import POSITIVE

LENGTH = 5
"""Powers of sigma that are carried; two are used, and each D loses one."""


@dataclass(frozen=True)
class Place:
    """Sites: detector, start, impurity; `ends` on the half line."""

    ends: bool
    detector: int
    start: int
    impurity: int

    @property
    def k(self) -> int:
        return abs(self.detector - self.start)

    @property
    def returns(self) -> bool:
        return self.detector == self.start

    @property
    def detour(self) -> int:
        """Steps from the start to the detector over the impurity."""
        return abs(self.detector - self.impurity) + abs(self.impurity - self.start)


@dataclass(frozen=True)
class Edge:
    """Coefficients of sigma^0 and sigma^1 at the upper edge.

    h (d_e^2 - d_o^2 sigma) = free + in_u R_u + in_v R_v;  d_e = n_even + R_u k_even, d_o the same with n_odd, k_odd.
    """

    field: Field
    free: list[Element]
    in_u: list[Element]
    in_v: list[Element]
    n_even: list[Element]
    n_odd: list[Element]
    k_even: list[Element]
    k_odd: list[Element]


def scattering_edge(place: Place) -> Edge:
    """The edge's elements; `in_u` and `in_v` hold what multiplies R_u and R_v in the numerator of h."""
    series = _Series()
    k, n, m = series.line(place) if not place.ends else series.half_line(place)
    free, in_u, in_v = m.cross(n), m.cross(k), k.cross(n)
    if place.returns:  # n = d - K: what R multiplies drops out
        free, in_u, in_v = n.cross(k), series.zero, series.zero
    lists = [_two(x) for x in (free, in_u, in_v, n.even, n.odd, k.even, k.odd)]
    return Edge(series.field, *lists)


def _two(x: Singular) -> list[Element]:
    return [x.coefficient(0), x.coefficient(1)]


@dataclass(frozen=True)
class Pair:
    """even + odd s."""

    even: Singular
    odd: Singular

    def __add__(self, other: Pair) -> Pair:
        return Pair(self.even + other.even, self.odd + other.odd)

    def __sub__(self, other: Pair) -> Pair:
        return Pair(self.even - other.even, self.odd - other.odd)

    def __mul__(self, other: Pair) -> Pair:
        even = self.even * other.even + (self.odd * other.odd).moved(Fraction(1))
        return Pair(even, self.even * other.odd + self.odd * other.even)

    def scaled(self, c: Element) -> Pair:
        return Pair(self.even.scaled(c), self.odd.scaled(c))

    def cross(self, other: Pair) -> Singular:
        """What s multiplies in self * (other with s turned round)."""
        return self.odd * other.even - self.even * other.odd


class _Series:
    """Powers of lambda and what is built of them, at theta = a t, t = sqrt(1 - sigma/a^2)."""

    def __init__(self) -> None:
        e = letter("e")
        self.field = Field.of([A, e, I_UNIT], {"a": POSITIVE, "e": REAL})
        self.a, self.i = self.field.element(A), self.field.element(I_UNIT)
        self.turn = self.i * self.field.element(e)
        slope = -self.field.invert(self.a * self.a)
        self.t = root_series(self.field, slope, HALF, LENGTH)
        self.zero = self._constant(self.field.zero)
        self.one = Pair(self._constant(self.field.one), self.zero)

    def _constant(self, c: Element) -> Singular:
        return Singular(self.field, {(Fraction(0), 0): c}, (Fraction(LENGTH), 0))

    def line(self, place: Place) -> tuple[Pair, Pair, Pair]:
        """(K, N, M)."""
        k = Pair(self._constant(self.turn), self._constant(self.field.one))
        n = self.one + self._lacking(2 * abs(place.detector - place.impurity)).scaled(self.turn)
        m = self.one + self._lacking(place.detour - place.k).scaled(self.turn)
        return k, n, self._power(place.k) * m

    def half_line(self, place: Place) -> tuple[Pair, Pair, Pair]:
        """(K, N, M)."""
        d, x, p = place.detector, place.start, place.impurity
        k = self.one + self._between(p, p).scaled(self.turn)
        n = self._between(d, d) * k - (self._between(d, p) * self._between(d, p)).scaled(self.turn)
        m = self._between(d, x) * k - (self._between(d, p) * self._between(p, x)).scaled(self.turn)
        return k, n, m

    def _power(self, n: int) -> Pair:
        """lambda^n = T_n(t) - i s U_(n-1)(t)/a."""
        if n == 0:
            return self.one
        second = chebyshev(self.t, n - 1, True).scaled(-(self.i * self.field.invert(self.a)))
        return Pair(chebyshev(self.t, n, False), second)

    def _lacking(self, n: int) -> Pair:
        """D_n = (1 - lambda^n)/s."""
        gap = self.one - self._power(n)
        return Pair(gap.odd, gap.even.moved(Fraction(-1)))

    def _between(self, x: int, y: int) -> Pair:
        """D_(x,y)."""
        return self._power(abs(x - y)) * self._lacking(2 * min(x, y) + 2)
