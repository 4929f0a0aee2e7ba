"""Is a formula surely not zero at a point?"""

from __future__ import annotations

from derive.errors import NeedsPrecision, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.numerics.precision import retry
from derive.problem.points import Point

FIRST_BITS, MOST_BITS = 256, 4096


def is_surely_nonzero(f: Formula, point: Point) -> bool:
    """True where a ball of f excludes 0; False says only that none was found up to the precision's cap."""
    try:
        return retry(lambda bits: _excludes_zero(f, point), FIRST_BITS, MOST_BITS)
    except (NeedsPrecision, OutsideValidity):
        return False


def _excludes_zero(f: Formula, point: Point) -> bool:
    if enclose(f, Values.at(point.mapping())).contains(0):
        raise NeedsPrecision("the ball holds 0")
    return True
