"""A word of warning where the worksheet's own interval lies beyond what the generator's series is known to reach.

The series converges at least for h tau < log 2, h half the width of H's spectrum (bounded here by a norm); beyond that
it may or may not.  Nothing is judged: the coefficients are right whatever the interval.
"""

from __future__ import annotations

from flint import arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.points import sample_points
from derive.numerics.system import system
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Prose

BITS = 64


def note_interval(setting: Setting, effort: Check) -> tuple[Prose, ...]:
    """One note, or none: only an interval given as a formula can be compared."""
    length = setting.interval.length
    points = sample_points(setting, effort) if isinstance(setting.space, Finite) and length != TAU else ()
    if not points:
        return ()
    try:
        with ctx.workprec(BITS):
            values = Values.at(points[0].mapping())
            reach = enclose_real(length, values) * system(setting, values).h
            if reach < arb(2).log():
                return ()
            shown = rounded(reach, 3)
    except (NeedsPrecision, NotCovered, OutsideValidity):
        return ()
    return (
        ("The interval asked for, ", length, f", has h*tau up to {shown}; the series of the generator is known to "
         "converge for h*tau below log 2, about 0.69. The coefficients hold all the same; topic validity finds the "
         "radius."),
    )
