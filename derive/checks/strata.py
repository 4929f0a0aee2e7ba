"""A claimed number as one formula a stratum: where letters take special values another piece may hold."""

from __future__ import annotations

from dataclasses import dataclass

from derive.errors import FormulaFault, NotCovered
from derive.formula.grammar import parse
from derive.formula.tree import Formula
from derive.numerics.points import decide
from derive.problem.points import Point, holds
from derive.problem.setting import Relation
from derive.record.said import Cases, Claim

OTHERWISE = "otherwise"


@dataclass(frozen=True)
class Stratum:
    """`value` holds at `at` (letter, value), away from the places of `besides`."""

    at: tuple[tuple[str, Formula], ...]
    value: Formula
    besides: tuple[Relation, ...] = ()

    def holds_at(self, point: Point) -> bool:
        """Whether no other piece claims this point."""
        return all(holds(r, point.mapping(), decide) is not True for r in self.besides)


def strata(claim: Claim) -> tuple[Stratum, ...]:
    """The pieces of a claim; a plain formula is one."""
    if isinstance(claim.value, Formula):
        return (Stratum((), claim.value),)
    if not isinstance(claim.value, Cases):
        raise NotCovered("a formula, or formulas by cases, is compared here")
    found: list[Stratum] = []
    for condition, value in claim.value.pieces:
        if condition == OTHERWISE:
            besides = tuple(Relation(Formula("letter", (n,)), "=", v) for s in found for n, v in s.at)
            found.append(Stratum((), value, besides))
        else:
            found.append(Stratum((_equation(condition),), value))
    return tuple(found)


def _equation(condition: str) -> tuple[str, Formula]:
    """name = value, read from words."""
    name, sign, value = condition.partition(" = ")
    try:
        return name, parse(value) if sign else parse("")
    except FormulaFault as fault:
        raise NotCovered(f'the condition "{condition}" is not understood') from fault
