"""Sample points whose relations are decided in balls where exact arithmetic does not reach."""

from __future__ import annotations

from collections.abc import Iterable

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.precision import retry
from derive.problem.points import Point, draw_points
from derive.problem.setting import Check, Relation, Setting

FIRST_BITS, MOST_BITS = 128, 2048


def sample_points(
    setting: Setting, effort: Check, extra_assume: Iterable[Relation] = ()
) -> tuple[Point, ...]:
    """Points of the user's and `effort.samples` drawn ones that surely meet domains and relations; maybe none."""
    return draw_points(setting, effort, decide, tuple(extra_assume))


def decide(relation: Relation) -> bool | None:
    """Whether a relation between real numbers (no letters) holds; None where balls cannot tell.

    Balls never prove an equation, so `=` is answered False or None, `!=` True or None.
    """
    try:
        return retry(lambda bits: _decided(relation), FIRST_BITS, MOST_BITS)
    except (NeedsPrecision, OutsideValidity, NotCovered):
        return None


def _decided(relation: Relation) -> bool:
    nothing = Values({})
    gap = enclose_real(relation.left, nothing) - enclose_real(relation.right, nothing)
    if gap.is_zero():
        return relation.op in ("=", "<=", ">=")
    if gap > 0:
        return relation.op in (">", ">=", "!=")
    if gap < 0:
        return relation.op in ("<", "<=", "!=")
    raise NeedsPrecision("both sides overlap")
