"""Energies written down: roots of a factor of the characteristic polynomial as formulas, where they have short ones.

    linear        E + c
    quadratic     E^2 + b E + c                     roots (-b +- sqrt(b^2 - 4 c))/2, squares taken out of the root
    cosines       E^d + ... = h^d Psi_n(E/h)        roots 2 h cos(2 pi k/n); Psi_n minimal polynomial of 2 cos(2 pi/n)
    in squares    f(E^2), f linear or quadratic     plus and minus the roots of its roots

Everything else has no formula here; `None` says so.  Textbook algebra; `Psi_n` is published as the minimal polynomial
of 2 cos(2 pi/n), and flint gives it.
"""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from math import gcd

from flint import fmpz_poly

from derive.algebra.factor import Factor
from derive.algebra.polynomial import Polynomial
from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Element, Field
from derive.formula.tree import PI, Formula, call, number, plus, times

HIGHEST_COSINE = 240  # order of the root of unity whose cosines are recognised


def energies_of(field: Field, factors: Iterable[Factor]) -> list[Formula] | None:
    """All roots of all factors as formulas, or None where one factor has none here."""
    found: list[Formula] = []
    for f, _ in factors:
        roots = roots_of(f)
        if roots is None:
            return None
        found += roots
    return found


def roots_of(f: Polynomial) -> list[Formula] | None:
    """The roots of one monic factor."""
    field, degree = f[-1].field, len(f) - 1
    if degree == 1:
        return [field.formula(-f[0])]
    try:
        return (_two(f) if degree == 2 else None) or _cosines(f) or (_in_squares(f) if degree == 4 else None)
    except NotCovered:
        return None


def _two(f: Polynomial) -> list[Formula] | None:
    field = f[-1].field
    middle = f[1].scaled(Fraction(-1, 2))
    reach = square_root(middle * middle - f[0])
    if reach is None:
        return None
    centre = field.formula(middle)
    return [_sum(centre, -reach), _sum(centre, reach)]


def _sum(a: Formula, b: Formula) -> Formula:
    return b if a == number(0) else plus(a, b)


def square_root(x: Element) -> Formula | None:
    """A formula whose square is x, square factors outside the root; None where the rest is not known positive."""
    field = x.field
    p = x.num if x.den is None else x.num * x.den
    content, factors = p.factor()
    outside, inside = field.one, Element(field, field.ring.constant(content))
    for factor, e in factors:
        shared = Element(field, factor)
        for _ in range(int(e) // 2):
            outside = outside * shared
        inside = inside * shared if int(e) % 2 else inside
    if x.den is not None:
        outside = outside / Element(field, x.den)
    rest = _plain_root(field, inside)
    return None if rest is None else times(field.formula(outside), rest)


def _plain_root(field: Field, inside: Element) -> Formula | None:
    shown = field.formula(inside)
    if shown.head == "number":
        value = shown.args[0]
        root = Fraction(_isqrt(value.numerator), _isqrt(value.denominator))
        if value > 0 and root * root == value:
            return number(root)
    return call("sqrt", shown) if is_positive(shown, field.domains) else None


def _isqrt(n: int) -> int:
    from math import isqrt

    return isqrt(abs(n))


def _cosines(f: Polynomial) -> list[Formula] | None:
    """2 h cos(2 pi k/n) for the first n whose minimal polynomial, stretched by h, is f."""
    field, degree = f[-1].field, len(f) - 1
    for n in range(5, HIGHEST_COSINE + 1):
        psi = [int(c) for c in fmpz_poly.cos_minpoly(n).coeffs()] if _totient(n) == 2 * degree else []
        if len(psi) == degree + 1:
            h = _stretch(f, psi)
            if h is not None and all(_matches(field, f, psi, h, k) for k in range(degree)):
                shown = field.formula(h)
                ks = [k for k in range(1, n // 2 + 1) if gcd(k, n) == 1]
                return [times(number(2), shown, call("cos", times(number(Fraction(2 * k, n)), PI))) for k in ks]
    return None


def _stretch(f: Polynomial, psi: list[int]) -> Element | None:
    """h from the sum of the squared roots, in the field itself."""
    field = f[-1].field
    squares = psi[-2] ** 2 - 2 * psi[-3]
    root = square_root((f[-2] * f[-2] - f[-3].scaled(Fraction(2))).scaled(Fraction(1, squares)))
    if root is None:
        return None
    try:
        h = field.element(root)
    except NotCovered:
        return None
    return -h if f[-2] and f[-2] == h.scaled(Fraction(-psi[-2])) else h


def _matches(field: Field, f: Polynomial, psi: list[int], h: Element, k: int) -> bool:
    power = field.one
    for _ in range(len(f) - 1 - k):
        power = power * h
    return f[k] == power.scaled(Fraction(psi[k]))


def _totient(n: int) -> int:
    return sum(1 for k in range(1, n) if gcd(k, n) == 1)


def _in_squares(f: Polynomial) -> list[Formula] | None:
    """+-sqrt(x), x the roots of f as a polynomial in E^2; only where each x is known to be positive."""
    if f[1] or f[3]:
        return None
    squares = _two([f[0], f[2], f[4]])
    if squares is None or not all(is_positive(x, f[-1].field.domains) for x in squares):
        return None
    return [s for x in squares for s in (times(number(-1), call("sqrt", x)), call("sqrt", x))]
