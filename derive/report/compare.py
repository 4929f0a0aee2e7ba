"""Two formulas on one relation sign: which terms or factors of one the other does not have."""

from __future__ import annotations

from derive.formula.tree import Formula, number
from derive.report.arrange import arrange
from derive.report.factors import take_apart


def differing(yours: Formula, ours: Formula) -> tuple[frozenset[Formula], frozenset[Formula]]:
    """Terms (of sums) or factors (of products) that stand in one formula only, arranged as they are printed."""
    left, right = arrange(yours), arrange(ours)
    if "plus" in (left.head, right.head):
        mine, other = set(_terms(left)), set(_terms(right))
        return frozenset(mine - other), frozenset(other - mine)
    return _factors(left) - _factors(right, shown=left), _factors(right) - _factors(left, shown=right)


def _terms(f: Formula) -> tuple[Formula, ...]:
    return f.args if f.head == "plus" else (f,)


def _factors(f: Formula, shown: Formula | None = None) -> frozenset[Formula]:
    """What is printed above and below the bar.  With `shown`, only what stands on the same side there too."""
    above, below = _sides(f)
    if shown is None:
        return frozenset(above | below)
    their_above, their_below = _sides(shown)
    return frozenset((above & their_above) | (below & their_below))


def _sides(f: Formula) -> tuple[set[Formula], set[Formula]]:
    parts = take_apart(f)
    above = {*parts.above, *parts.trailing, number(parts.front.numerator)}
    return above, {*parts.below, number(parts.front.denominator)}
