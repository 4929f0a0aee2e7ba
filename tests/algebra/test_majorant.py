"""The majorant's coefficients."""

from fractions import Fraction

import mpmath
from hypothesis import given
from hypothesis import strategies as st

from derive.algebra.majorant import majorant_coefficients


def test_first_coefficients_from_mpmath():
    """mpmath's Taylor coefficients of -log(2 - e^y), numerical differentiation at 40 digits."""
    with mpmath.workdps(40):
        taylor = mpmath.taylor(lambda y: -mpmath.log(2 - mpmath.exp(y)), 0, 8)
        for c, found in zip(taylor[1:], majorant_coefficients(8), strict=True):
            assert abs(c - mpmath.mpf(found.numerator) / found.denominator) < mpmath.mpf(10) ** -12


def test_whole_numbers_behind_them():
    """c_d d! = 1, 2, 6, 26, 150, 1082: twice the numbers of ordered set partitions, from memory (1, 3, 13, 75, 541)."""
    factor, seen = 1, []
    for d, c in enumerate(majorant_coefficients(6), start=1):
        factor *= d
        seen.append(c * factor)
    assert seen == [1, 2, 6, 26, 150, 1082]


@given(st.integers(1, 12))
def test_it_is_minus_the_logarithm_of_two_minus_exp(n):
    """exp(-f) = 2 - e^y, degree by degree, by the recursion m e_m = -sum j f_j e_(m-j)
    (common practice, no source)."""
    f = [Fraction(0), *majorant_coefficients(n)]
    e = [Fraction(1)]
    factorial = 1
    for m in range(1, n + 1):
        e.append(-sum(j * f[j] * e[m - j] for j in range(1, m + 1)) / m)
        factorial *= m
        assert e[m] == Fraction(-1, factorial)
