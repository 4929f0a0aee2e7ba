"""Fractions from power series, over truncated series in tau: against mpmath's Pade and exact hand values."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest

from derive.algebra.pade import continued, inverted, multiplied, pade
from derive.derivations.absorber.cascade import half_cotangent
from derive.exact.field import Field

FIELD = Field.of([], {})


def series(*values) -> list:
    return [FIELD.rational(Fraction(v)) for v in values]


def number(x) -> Fraction:
    return Fraction(str(FIELD.formula(x).args[0]))


def test_series_inverse() -> None:
    a = series(2, 3, -1, 5)
    assert [number(x) for x in multiplied(a, inverted(a))] == [1, 0, 0, 0]
    with pytest.raises(ZeroDivisionError):
        inverted(series(0, 1))


def test_exponential_s_fraction() -> None:
    """mpmath.pade of exp: the same numerator and denominator."""
    f = [series(Fraction(1, int(mpmath.factorial(k)))) for k in range(6)]
    above, below = pade(f, 2, 3)
    p, q = mpmath.pade([mpmath.mpf(1) / mpmath.factorial(k) for k in range(6)], 2, 3)
    assert [float(number(x[0])) for x in above] == pytest.approx([float(x) for x in p])
    assert [float(number(x[0])) for x in below] == pytest.approx([float(x) for x in q])


def test_continued_fraction_gives_the_polynomials_back() -> None:
    """(x^3 + 2 x + 1)/(x^2 + 3): evaluated at x = 5/7, with a tau in every coefficient."""
    above = [series(1, 2), series(2, 0), series(0, 1), series(1, 0)]
    below = [series(3, 1), series(0, 0), series(1, 1)]
    levels = continued(above, below)
    assert len(levels) == 2 or len(levels) == 3
    x = series(Fraction(5, 7), 0)
    value = None
    for alpha, beta in reversed(levels):
        term = [a + b for a, b in zip(multiplied(alpha, x), beta, strict=True)]
        value = term if value is None else [a + b for a, b in zip(term, inverted(value), strict=True)]
    assert value is not None
    expected = multiplied(_at(above, x), inverted(_at(below, x)))
    assert [number(a) for a in value] == [number(a) for a in expected]


def _at(poly, x):
    total = series(0, 0)
    for c in reversed(poly):
        total = [a + b for a, b in zip(multiplied(total, x), c, strict=True)]
    return total


def test_half_cotangent() -> None:
    """1/x - cot(x/2)/2 by mpmath.taylor; 1/12, 1/720, 1/30240 (DLMF 4.19.6, from memory)."""
    assert half_cotangent(3) == [Fraction(1, 12), Fraction(1, 720), Fraction(1, 30240)]
    with mpmath.workdps(30):
        x = mpmath.mpf(1) / 3
        terms = enumerate(half_cotangent(12))
        total = sum(mpmath.mpf(b.numerator) / b.denominator * x ** (2 * k + 1) for k, b in terms)
        assert abs(total - (1 / x - mpmath.cot(x / 2) / 2)) < mpmath.mpf(10) ** -25
