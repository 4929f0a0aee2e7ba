"""The slow generator solved from its defining equation near the detector, by sparse matrices in an exact field.

    K (1; X) = (1; X) E,  X(0) = 0   (`absorber_slow.py`),      exp(sum_m tau^m M_m) = E,   G_k = i M_(k+1)

The exponential's coefficient of tau^m holds M_m once, linearly, beside products of lower ones.
"""

from __future__ import annotations

from dataclasses import dataclass

from derive.checks.absorber.slow import Near, measured_step, solved, times
from derive.checks.generator.exponent import Exponent
from derive.exact.field import Field
from derive.exact.sparse import Sparse
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
        self.exponent = Exponent()
        steps = solved(near, measured_step(near, order + 1), order + 1).y
        for m in range(1, order + 2):
            self.exponent.solve(steps[m])

    def generator(self, k: int) -> Sparse:
        """G_k = i M_(k+1), near the detector."""
        return times(self.exponent.logs[k], self.near.i)
