"""The majorant of the logarithm of an undetected step, in exact coefficients.

    f(y) = -log(2 - e^y) = sum_{d>=1} c_d y^d,   c = 1, 1, 1, 13/12, 5/4, 541/360, ...,   y < log 2

The step is 1 + X with ||X|| majorised by e^y - 1 coefficient by coefficient (y = h tau, h a bound on ||H - E0||), and
log(1 + X) by -log(1 - (e^y - 1)).  Derived here.
"""

from __future__ import annotations

from fractions import Fraction
from math import factorial


def majorant_coefficients(n: int) -> list[Fraction]:
    """c_1 ... c_n, from f' (2 - e^y) = e^y, degree by degree.

    >>> majorant_coefficients(4)
    [Fraction(1, 1), Fraction(1, 1), Fraction(1, 1), Fraction(13, 12)]
    """
    slope: list[Fraction] = []  # Taylor coefficients of f'
    for m in range(n):
        total = Fraction(1, factorial(m))
        for j in range(m):
            total += slope[j] / factorial(m - j)
        slope.append(total)
    return [s / (m + 1) for m, s in enumerate(slope)]
