"""Where a real polynomial in a letter, or in a phase u = exp(i a), vanishes: exact values where they have short ones.

    cyclotomic factor of order n     a = 2 pi k/n, k prime to n
    u^2 - 2 c u + 1, |c| < 1         a = +-acos(c)
    linear, quadratic in x           x by the quadratic formula

Other factors: their zeros are counted and put in order, but not written.  Order is read off doubles, which can only
misplace zeros closer than about 10^-12 to each other.  Textbook algebra.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import acos, gcd, pi

from flint import fmpq, fmpq_poly, fmpz_poly

from derive.formula.tree import PI, ZERO, Formula, call, number, plus, times


@dataclass(frozen=True)
class Zero:
    """Its formula (None where it has no short one) and its place on the line."""

    formula: Formula | None
    place: float


Coefficients = Sequence[Fraction]
"""Constant first."""


def on_circle(polynomials: Iterable[Coefficients]) -> list[Zero]:
    """The different a in (-pi, pi] at which one of the polynomials vanishes at exp(i a), ascending."""
    return _ascending(z for f in _factors(polynomials) for z in _turns(f))


def on_line(polynomials: Iterable[Coefficients]) -> list[Zero]:
    """The different real zeros of any of the polynomials, ascending."""
    return _ascending(z for f in _factors(polynomials) for z in _reals(f))


def _ascending(zeros: Iterable[Zero]) -> list[Zero]:
    return sorted(zeros, key=lambda z: z.place)


def _factors(polynomials: Iterable[Coefficients]) -> list[fmpq_poly]:
    """Irreducible factors, each once."""
    product = fmpq_poly([1])
    for p in polynomials:
        product *= fmpq_poly([fmpq(c.numerator, c.denominator) for c in p])
    return [f for f, _ in product.factor()[1]]


def _turns(f: fmpq_poly) -> list[Zero]:
    order = int(f.numer().is_cyclotomic())
    if order:
        return [_share(Fraction(2 * k, order)) for k in range(1, order + 1) if gcd(k, order) == 1]
    if list(f.coeffs()) != list(reversed(f.coeffs())) or f.degree() % 2:
        return []  # irreducible and not its own mirror image: no zero on the circle
    angles = [(z, acos(z.place)) for z in _reals(_in_cosine(f)) if abs(z.place) < 1]
    out = []
    for z, angle in angles:
        shown = None if z.formula is None else call("acos", z.formula)
        out += [Zero(shown, angle), Zero(None if shown is None else -shown, -angle)]
    return out


def _share(turns: Fraction) -> Zero:
    """turns * pi, brought to (-pi, pi]."""
    turns = turns - 2 if turns > 1 else turns
    return Zero(times(number(turns), PI) if turns else ZERO, float(turns) * pi)


def _in_cosine(f: fmpq_poly) -> fmpq_poly:
    """f(u) u^(-d/2) as a polynomial in c = cos a: u^k + u^-k = 2 T_k(c)."""
    half = f.degree() // 2
    total = fmpq_poly([f[half]])
    for k in range(1, half + 1):
        total += fmpq_poly(fmpz_poly.chebyshev_t(k)) * f[half + k] * 2
    return total


def _reals(f: fmpq_poly) -> list[Zero]:
    degree = f.degree()
    if degree == 1:
        return [_rational(-f[0] / f[1])]
    if degree == 2:
        return _two(f)
    return [Zero(None, x) for x in approx_real_zeros(f)]


def _rational(x: fmpq) -> Zero:
    value = Fraction(int(x.p), int(x.q))
    return Zero(number(value), float(value))


def _two(f: fmpq_poly) -> list[Zero]:
    """(-b +- sqrt(b^2 - 4 c))/2."""
    b, c = (Fraction(int(x.p), int(x.q)) for x in (f[1] / f[2], f[0] / f[2]))
    reach = b * b / 4 - c
    if reach < 0:
        return []
    root, middle = call("sqrt", number(reach)), number(-b / 2)
    place = float(reach) ** 0.5
    signed = [(-root, -place), (root, place)]
    return [Zero(plus(middle, r) if b else r, float(-b / 2) + x) for r, x in signed]


def approx_real_zeros(f: fmpq_poly) -> list[float]:
    """Real zeros of a square-free polynomial as doubles: isolated exactly, then rounded."""
    from sympy import Poly, Symbol

    x = Symbol("x")
    coefficients = [int(c) for c in reversed(f.numer().coeffs())]
    return [float(r) for r in Poly(coefficients, x).real_roots(radicals=False)]
