"""The slow generator solved from its defining equation near the detector, by sparse matrices in an exact field.

    K (1; X) = (1; X) E,  X(0) = 0   (`absorber_slow.py`),      exp(sum_m tau^m M_m) = E,   G_k = i M_(k+1)

The exponential's coefficient of tau^m holds M_m once, linearly, beside products of lower ones.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import factorial

from derive.checks.absorber_slow import Near, measured_step, solved, times
from derive.exact.field import Field
from derive.exact.sparse import Sparse, added, multiplied, scaled
from derive.formula.tree import Formula
from derive.problem.setting import Setting


@dataclass(frozen=True)
class Region:
    """The field near the detector and the formulas it was declared with."""

    field: Field
    formulas: tuple[Formula, ...]


class SlowSolved:
    """M_1 ... M_(K+1), order by order."""

    def __init__(self, setting: Setting, order: int):
        near = Near(setting, order + 2)
        self.near = near
        self.region = Region(near.field, near.formulas)
        self.logs: list[Sparse] = []
        self._powers: dict[tuple[int, int], Sparse] = {}
        steps = solved(near, measured_step(near, order + 1), order + 1).y
        for m in range(1, order + 2):
            self._solve(m, steps[m])

    def _solve(self, m: int, wanted: Sparse) -> None:
        """M_m = E_m - sum_{p>=2} [tau^m] M^p/p!."""
        rest = wanted
        for p in range(2, m + 1):
            rest = added(rest, scaled(self._power(p, m), Fraction(-1, factorial(p))))
        self.logs.append(rest)
        self._powers[1, m] = rest

    def _power(self, p: int, m: int) -> Sparse:
        total: Sparse = {}
        for d in range(1, m - p + 2):
            total = added(total, multiplied(self.logs[d - 1], self._powers[p - 1, m - d]))
        self._powers[p, m] = total
        return total

    def generator(self, k: int) -> Sparse:
        """G_k = i M_(k+1), near the detector."""
        return times(self.logs[k], self.near.i)
