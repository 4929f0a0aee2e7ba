"""An exponential's defining equation solved for its exponent, degree by degree, by plain sparse arithmetic.

exp(sum_m x^m L_m) = 1 + sum_m x^m E_m.  The coefficient of x^m holds L_m once, linearly, beside products of lower
ones: L_m = E_m - sum_{p>=2} [x^m] L^p/p!.
"""

from __future__ import annotations

from fractions import Fraction
from math import factorial

from derive.exact.sparse import Sparse, added, multiplied, scaled


class Exponent:
    """L_1, L_2, ... as their E_m are given, in order."""

    def __init__(self) -> None:
        self.logs: list[Sparse] = []
        self._powers: dict[tuple[int, int], Sparse] = {}

    def solve(self, wanted: Sparse) -> None:
        """Append L_m, m the next degree, from E_m."""
        m = len(self.logs) + 1
        rest = wanted
        for p in range(2, m + 1):
            rest = added(rest, scaled(self._power(p, m), Fraction(-1, factorial(p))))
        self.logs.append(rest)
        self._powers[1, m] = rest

    def _power(self, p: int, m: int) -> Sparse:
        """[x^m] L^p; for p >= 2 only L_1 ... L_(m-1) enter."""
        total: Sparse = {}
        for d in range(1, m - p + 2):
            total = added(total, multiplied(self.logs[d - 1], self._powers[p - 1, m - d]))
        self._powers[p, m] = total
        return total
