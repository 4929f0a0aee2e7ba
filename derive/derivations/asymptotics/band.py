"""A generating function at the edges of a band, and the law of the amplitudes that follows.

a = 2|h| tau is half the band's width in phase.  On the unit circle z = exp(i theta), a real sequence of Bessel
functions J_k(a n) has the transform N/s + R near theta = a, s = sqrt(a^2 - theta^2), t = theta/a:

    N_k = i^k T_k(t),     R_k = -i^(k+1) U_(k-1)(t)/a + delta_k0/2 + images

(T, U Chebyshev's polynomials); what stands in R beside the 1/2 is a power series in theta - a with coefficients
i^(k+1) times real numbers, which are letters here (`Rest`) and image sums in the end.  With u = N_u/s + R_u and
v = N_v/s + R_v the first-detection function is

    phi = v/u = even part + s H,     H = (R_v N_u - N_v R_u)/(N_u^2 - R_u^2 s^2)

and only s H is singular.  As a power series in sigma = s^2, H = sum_k (p_k + q_k i t) sigma^(k-1) with real p_k, q_k,
at both edges alike, and each term has an exact transform (DLMF 10.9.4):

    [z^n] s^(2k-1) = (2k-1)!! (a/n)^k J_k(a n),      [z^n] i t s^(2k-1) = (2k-1)!! (a/n)^k J_(k+1)(a n).

At a = pi, 2 pi, ... both edges fall on one point; there phi is a series in x^(1/2), theta = a + i x.
Derived here; checked by dividing the series themselves.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.singular import Singular, root_series
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, letter
from derive.problem.setting import POSITIVE, Domain

Wave = tuple[tuple[int, int], ...]
"""Real combination of Bessel functions of a n: (sign, order) pairs."""
A = letter("a")
HALF = Fraction(1, 2)
REAL = Domain("real", "real")


@dataclass(frozen=True)
class Pair:
    """The real sequences u_n and v_n/(power of the hopping's phase); `returns`: v_0 = 1 is left out."""

    u: Wave
    v: Wave
    returns: bool


@dataclass(frozen=True)
class EdgeLaw:
    """p_k, q_k for k = 1 ... K as elements; `rests` says what the letters in them stand for.

    `h` is H itself, complex: with s and s^3 in the powers of -i (theta - a) that they begin with, the amplitudes go
    like n^(-3/2) (C_1 + C_2/n + ...) exp(-i a n) + c. c., C_2/C_1 = 3 i a (h_1/h_0 - 1/(8 a^2)).
    """

    field: Field
    p: list[Element]
    q: list[Element]
    h: list[Element]
    rests: dict[str, Rest]


@dataclass(frozen=True)
class Rest:
    """The coefficient of (theta - a)^j (of x^j where the edges meet) in R, without the 1/2.

    Below aliasing the factor i^(k+1), k the wave's lowest order, is taken out and it is real.
    """

    name: str
    wave: Wave
    j: int


def rest_letters(pair: Pair, length: int) -> dict[str, Rest]:
    """Letters r_0, r_1, ... for u and, where the start is another site, s_0, s_1, ... for v."""
    named = {"r": pair.u} if pair.v == pair.u else {"r": pair.u, "s": pair.v}
    return {f"{name}_{j}": Rest(name, wave, j) for name, wave in named.items() for j in range(length)}


def edge_law(pair: Pair, terms: int, aliased: bool) -> EdgeLaw:
    """The first `terms` coefficients.  With aliasing the rests are complex, and p, q are to be read as real parts."""
    edge = _Edge(pair, terms + 2, aliased)
    h = _regular(pair, edge.parts, Fraction(1))
    tilted = h * root_series(edge.field, edge.slope, -HALF, terms + 2)
    if aliased:
        p = [h.coefficient(k) for k in range(terms)]
        q = [edge.turned(tilted.coefficient(k)) for k in range(terms)]
    else:
        p = [edge.real(h.coefficient(k)) for k in range(terms)]
        q = [edge.imaginary(tilted.coefficient(k)) for k in range(terms)]
    return EdgeLaw(edge.field, p, q, [h.coefficient(k) for k in range(2)], edge.rests)


def _regular(pair: Pair, parts: Callable[[Wave], tuple[Singular, Singular]], step: Fraction) -> Singular:
    """H = (R_v N_u - N_v R_u)/(N_u^2 - R_u^2 sigma), sigma = x^step."""
    n_u, r_u = parts(pair.u)
    n_v, r_v = parts(pair.v)
    if pair.returns:  # the sum over asks begins with the first, v = u - 1
        field = n_u.field
        r_v = r_v - Singular(field, {(Fraction(0), 0): field.one}, r_v.remainder)
    return (r_v * n_u - n_v * r_u) * (n_u * n_u - (r_u * r_u).moved(step)).inverse()


class _Edge:
    """Series in sigma at theta = a t, t = sqrt(1 - sigma/a^2)."""

    def __init__(self, pair: Pair, length: int, aliased: bool):
        self.length = length
        self.rests = rest_letters(pair, length)
        self.aliased = aliased
        self.field = Field.of([A, I_UNIT, *map(letter, self.rests)], {"a": POSITIVE, **dict.fromkeys(self.rests, REAL)})
        self.a, self.i = self.field.element(A), self.field.element(I_UNIT)
        self.slope = -self.field.invert(self.a * self.a)
        self.t = root_series(self.field, self.slope, HALF, length)

    def parts(self, wave: Wave) -> tuple[Singular, Singular]:
        """(N, R) of a combination."""
        n, r = self._constant(self.field.zero), self._constant(self.field.zero)
        for sign, k in wave:
            factor = self.field.rational(sign)
            n = n + chebyshev(self.t, k, False).scaled(factor * power_of(self.i, k))
            if k == 0:
                r = r + self._constant(factor.scaled(HALF))
        return n, r + self._rest(wave)

    def _constant(self, c: Element) -> Singular:
        return Singular(self.field, {(Fraction(0), 0): c}, (Fraction(self.length), 0))

    def _rest(self, wave: Wave) -> Singular:
        """sum_j (letter) (theta - a)^j."""
        away = (self.t - self._constant(self.field.one)).scaled(self.a)
        turn = self.field.one if self.aliased else power_of(self.i, lowest(wave) + 1)
        total, moved = self._constant(self.field.zero), self._constant(turn)
        for name, rest in self.rests.items():
            if rest.wave == wave:
                total = total + moved.scaled(self.field.element(letter(name)))
                moved = moved * away
        return total

    def real(self, x: Element) -> Element:
        return (x + self.field.conjugate(x)).scaled(HALF)

    def imaginary(self, x: Element) -> Element:
        return self.turned(x - self.field.conjugate(x)).scaled(HALF)

    def turned(self, x: Element) -> Element:
        """x/i: its real part is the imaginary part of x."""
        return -(x * self.i)


def lowest(wave: Wave) -> int:
    return min(k for _, k in wave)


def power_of(x: Element, k: int) -> Element:
    out = x.field.one
    for _ in range(k % 4):
        out = out * x
    return out


def chebyshev(t: Singular, k: int, second: bool) -> Singular:
    """T_k(t), or U_k(t) with `second`."""
    one = Singular(t.field, {(Fraction(0), 0): t.field.one}, t.remainder)
    twice = t + t
    last, this = one, twice if second else t
    for _ in range(k):
        last, this = this, twice * this - last
    return last


# -- both edges on one point


@dataclass(frozen=True)
class MeetingLaw:
    """phi's odd part h_0 x^(1/2) + h_1 x^(3/2) + ..., real; root_a stands for sqrt(a)."""

    field: Field
    h: list[Element]
    rests: dict[str, Rest]


def meeting_law(pair: Pair, terms: int, vanishing: frozenset[str] = frozenset()) -> MeetingLaw:
    """The first `terms` coefficients at a = pi, 2 pi, ...; the rests in `vanishing` are 0."""
    meeting = _Meeting(pair, terms + 2, vanishing)
    odd = _regular(pair, meeting.parts, Fraction(1))
    return MeetingLaw(meeting.field, [odd.coefficient(k) for k in range(terms)], meeting.rests)


class _Meeting:
    """Series in x at theta = a + i x, where u = N x^(-1/2) + R with real N, R."""

    def __init__(self, pair: Pair, length: int, vanishing: frozenset[str]):
        self.length = length
        self.rests = rest_letters(pair, length)
        self.vanishing = vanishing
        domains = {"root_a": POSITIVE, **dict.fromkeys(self.rests, REAL)}
        self.field = Field.of([letter("root_a"), I_UNIT, *map(letter, self.rests)], domains)
        self.root_a, self.i = self.field.element(letter("root_a")), self.field.element(I_UNIT)
        step = self.i / (self.root_a * self.root_a)
        self.t = Singular.powers(self.field, [self.field.one, step, *[self.field.zero] * (length - 2)])
        self.bend = root_series(self.field, step.scaled(HALF), -HALF, length)

    def parts(self, wave: Wave) -> tuple[Singular, Singular]:
        """(N, R): 1/s = exp(i pi/4) (2 a x)^(-1/2) (1 + i x/(2a))^(-1/2) at one edge, its conjugate at the other."""
        n = r = Singular(self.field, {}, (Fraction(self.length), 0))
        front = (self.field.one + self.i) / self.root_a.scaled(Fraction(2))
        for sign, k in wave:
            factor = self.field.rational(sign)
            edge = (chebyshev(self.t, k, False) * self.bend).scaled(front * power_of(self.i, k))
            n = n + self._doubled(edge).scaled(factor)
            if k == 0:
                r = r + Singular(self.field, {(Fraction(0), 0): factor.scaled(HALF)}, r.remainder)
        mine = [self._rest(name) for name, x in self.rests.items() if x.wave == wave]
        return n, r + Singular.powers(self.field, mine)

    def _rest(self, name: str) -> Element:
        return self.field.zero if name in self.vanishing else self.field.element(letter(name))

    def _doubled(self, f: Singular) -> Singular:
        """f plus its conjugate at real x."""
        terms = {place: c + self.field.conjugate(c) for place, c in f.terms.items()}
        return Singular(self.field, terms, f.remainder)
