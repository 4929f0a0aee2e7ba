"""Values that a derivation leaves to an equation: a symbol stands in the claim until a road has certified digits."""

from __future__ import annotations

from derive.derivations.sight import Sight
from derive.formula.tree import Formula

MOST_LEVELS = 200  # levels, for one detector state at fixed intervals
MOST_SOLVED = 12  # bright dimensions of Stein's equation as a linear system
MOST_AVERAGED = 10  # the same at random intervals


def is_open(value: Formula) -> bool:
    """Whether the value is such a symbol."""
    return value.head == "operator"


def has_equation(sight: Sight) -> bool:
    """Whether the solution of Stein's equation is certified for this setting."""
    return _may_be_solved(sight, MOST_LEVELS if len(sight.explored.d) == 1 else MOST_SOLVED)


def has_linear_system(sight: Sight) -> bool:
    """The same where a single detector's clicks stand on the right side."""
    return _may_be_solved(sight, MOST_SOLVED)


def _may_be_solved(sight: Sight, largest: int) -> bool:
    if sight.is_step or not sight.generic:
        return False
    return sight.bright <= (largest if sight.setting.interval.law == "fixed" else MOST_AVERAGED)
