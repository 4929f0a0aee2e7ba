"""Expansions at a singular point in powers and logarithms, and what they say about coefficients.

    f(x) = sum c_(p,q) x^p L^q + O(x^P L^Q),     x -> 0+,   L = log(1/x),   p rational, q integer

With x = log(zeta/z) at the singular point zeta of a power series f in z, each term transfers by Hankel's integral to
all orders in 1/n, with no further corrections:

    [z^n] x^p L^q  ~  zeta^-n n^(-p-1) sum_j binomial(q, j) (log n)^(q-j) (d/ds)^j (1/Gamma(s)) at s = -p

(a finite sum for q >= 0, an asymptotic one for q < 0).  Sums, products and inverses stay in the family; no truncation
is without its remainder, and a remainder transfers like a term.  Source: siam-j-discrete-math-3-216 for the transfer
of remainders; the choice of x is derived here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import comb, factorial

from derive.exact.field import Element, Field

Place = tuple[Fraction, int]
"""(p, q) of x^p L^q."""


def rank(place: Place) -> tuple[Fraction, int]:
    """Smaller terms rank higher: by power of x, then against the power of the logarithm."""
    return place[0], -place[1]


def times(a: Place, b: Place) -> Place:
    return a[0] + b[0], a[1] + b[1]


class Singular:
    """sum terms[p, q] x^p L^q + O(x^P L^Q), (P, Q) = remainder; terms that the remainder swallows are dropped."""

    __slots__ = ("field", "terms", "remainder")

    def __init__(self, field: Field, terms: Mapping[Place, Element], remainder: Place):
        self.field = field
        self.remainder = remainder
        kept = {place: c for place, c in terms.items() if c and rank(place) < rank(remainder)}
        self.terms: dict[Place, Element] = dict(sorted(kept.items(), key=lambda item: rank(item[0])))

    @staticmethod
    def powers(field: Field, coefficients: list[Element], start: Fraction = Fraction(0)) -> Singular:
        """sum_k coefficients[k] x^(start+k) + O(x^(start + length))."""
        terms = {(start + k, 0): c for k, c in enumerate(coefficients)}
        return Singular(field, terms, (start + len(coefficients), 0))

    def __add__(self, other: Singular) -> Singular:
        terms = dict(self.terms)
        for place, c in other.terms.items():
            terms[place] = terms[place] + c if place in terms else c
        return Singular(self.field, terms, min(self.remainder, other.remainder, key=rank))

    def __sub__(self, other: Singular) -> Singular:
        return self + other.scaled(-self.field.one)

    def __mul__(self, other: Singular) -> Singular:
        terms: dict[Place, Element] = {}
        for p1, c1 in self.terms.items():
            for p2, c2 in other.terms.items():
                place = times(p1, p2)
                terms[place] = terms[place] + c1 * c2 if place in terms else c1 * c2
        ends = [times(self.remainder, other.remainder)]
        ends += [times(self.remainder, other.leading())] if other.terms else []
        ends += [times(other.remainder, self.leading())] if self.terms else []
        return Singular(self.field, terms, min(ends, key=rank))

    def scaled(self, c: Element) -> Singular:
        return Singular(self.field, {place: c * d for place, d in self.terms.items()}, self.remainder)

    def moved(self, p: Fraction) -> Singular:
        """x^p times the expansion."""
        shift = (p, 0)
        terms = {times(place, shift): c for place, c in self.terms.items()}
        return Singular(self.field, terms, times(self.remainder, shift))

    def leading(self) -> Place:
        """Place of the largest term."""
        if not self.terms:
            raise ZeroDivisionError("nothing of this expansion is known but its remainder")
        return next(iter(self.terms))

    def inverse(self) -> Singular:
        """1/f = (1/lead) sum_j (-delta)^j, f = lead (1 + delta), as far as the remainder of f lets one see."""
        lead = self.leading()
        back = (-lead[0], -lead[1])
        front = self.field.invert(self.terms[lead])
        end = times(self.remainder, back)
        delta = {times(place, back): -(front * c) for place, c in self.terms.items() if place != lead}
        step = Singular(self.field, delta, end)
        total = power = Singular(self.field, {(Fraction(0), 0): self.field.one}, end)
        while power.terms and step.terms:
            power = Singular(self.field, (power * step).terms, end)
            total = total + power
        terms = {times(place, back): front * c for place, c in total.terms.items()}
        return Singular(self.field, terms, times(end, back))

    def coefficient(self, p: Fraction | int, q: int = 0) -> Element:
        """c_(p,q); asking beyond the remainder is an error."""
        place = (Fraction(p), q)
        if rank(place) >= rank(self.remainder):
            raise ValueError(f"the coefficient of x^{p} L^{q} lies beyond the remainder")
        return self.terms.get(place, self.field.zero)


def root_series(field: Field, slope: Element, exponent: Fraction, length: int) -> Singular:
    """(1 + slope x)^exponent to x^(length-1)."""
    c, found = field.one, [field.one]
    for k in range(1, length):
        c = c * slope.scaled((exponent - k + 1) / k)
        found.append(c)
    return Singular.powers(field, found)


@dataclass(frozen=True, slots=True)
class Tail:
    """c n^power (log n)^logs: one term of a coefficient's large-n law, before the factor zeta^-n."""

    power: Fraction
    logs: int
    factor: Element


def transferred(f: Singular, gamma: GammaSeries, depth: int) -> tuple[list[Tail], tuple[Fraction, int]]:
    """The law of [z^n] f: its terms, largest first, and (power, logs) of what is left out.

    `depth` terms of the asymptotic sum over j are kept where q < 0.  Terms x^p L^0 with p = 0, 1, 2, ... are analytic
    and leave nothing.
    """
    found: dict[tuple[Fraction, int], Element] = {}
    ends = [_decay(f.remainder)]
    for (p, q), c in f.terms.items():
        derivatives = gamma.derivatives(-p, q if q >= 0 else depth)
        for j, d in enumerate(derivatives):
            term = c * d.scaled(Fraction(_binomial(q, j)))
            place = (-p - 1, q - j)
            if term:
                found[place] = found[place] + term if place in found else term
        if q < 0:
            ends.append((-p - 1, q - depth - 1))
    last = max(ends)
    kept = sorted((place for place in found if place > last and found[place]), reverse=True)
    return [Tail(power, logs, found[power, logs]) for power, logs in kept], last


def _decay(remainder: Place) -> tuple[Fraction, int]:
    """Order of the coefficients of O(x^P L^Q); an analytic power without logarithm counts as one with."""
    p, q = remainder
    return -p - 1, q


def _binomial(q: int, j: int) -> int:
    """binomial(q, j), also for q < 0."""
    return comb(q, j) if q >= 0 else (-1) ** j * comb(j - q - 1, j)


class GammaSeries:
    """Derivatives of 1/Gamma(s) at whole and half-integer s, in a field that holds pi, sqrt(pi), gamma_E, log 2, ...

    log Gamma(1 + e) = -gamma_E e + sum_(k>=2) zeta(k) (-e)^k/k, and for Gamma(1/2 + e) the same with (2^k - 1) zeta(k),
    gamma_E + 2 log 2 and log sqrt(pi) (DLMF 5.7.3, 5.4.13, 5.15.3); other points by Gamma(s + 1) = s Gamma(s).
    `zeta` lists zeta(2), zeta(3), ... as elements, `root_pi` is sqrt(pi).
    """

    def __init__(self, field: Field, euler: Element, log_two: Element, root_pi: Element, zeta: list[Element]):
        self.field = field
        self.euler = euler
        self.log_two = log_two
        self.root_pi = root_pi
        self.zeta = zeta

    def derivatives(self, s: Fraction, highest: int) -> list[Element]:
        """(d/ds)^j 1/Gamma(s) for j = 0 ... highest."""
        if s.denominator > 2:
            raise ValueError(f"1/Gamma is expanded at whole and half-integer points, not at {s}")
        base = Fraction(1, 2) if s.denominator == 2 else Fraction(1)
        series = self._at_base(base, highest + 1)
        point = base
        while point > s:  # 1/Gamma(s) = s/Gamma(s + 1)
            point -= 1
            series = self._times_linear(series, point)
        while point < s:  # 1/Gamma(s + 1) = 1/(s Gamma(s))
            series = self._over_linear(series, point)
            point += 1
        return [c.scaled(Fraction(factorial(j))) for j, c in enumerate(series[: highest + 1])]

    def _at_base(self, base: Fraction, length: int) -> list[Element]:
        """Taylor coefficients of 1/Gamma(base + e) = front exp(-sum_k a_k e^k)."""
        half = base.denominator == 2
        first = self.euler + self.log_two.scaled(Fraction(2)) if half else self.euler
        exponents = [self.field.zero, first]
        for k in range(2, length):
            weight = Fraction((-1) ** (k + 1) * (2**k - 1 if half else 1), k)
            exponents.append(self.zeta[k - 2].scaled(weight))
        found = [self.field.invert(self.root_pi) if half else self.field.one]
        for k in range(1, length):  # the derivative of exp(g) is g' exp(g)
            total = self.field.zero
            for j in range(1, k + 1):
                total = total + exponents[j].scaled(Fraction(j, k)) * found[k - j]
            found.append(total)
        return found

    def _times_linear(self, series: list[Element], point: Fraction) -> list[Element]:
        """(point + e) times the series."""
        below = [self.field.zero, *series[:-1]]
        return [c.scaled(point) + b for c, b in zip(series, below, strict=True)]

    def _over_linear(self, series: list[Element], point: Fraction) -> list[Element]:
        """The series over (point + e), point not 0."""
        found: list[Element] = []
        for k, c in enumerate(series):
            found.append((c - (found[k - 1] if k else self.field.zero)).scaled(1 / point))
        return found
