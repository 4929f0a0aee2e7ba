"""Published numbers that were refuted: counted from another ask, of another quantity, or which of them are wrong."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from derive.checks.diagnose.search import Diagnosis
from derive.formula.grammar import parse
from derive.problem.quantities import Quantity
from derive.record.said import Claim, Table

Accepts = Callable[[Claim], bool]
MOST_ROWS = 40
"""Rows up to which each is judged by itself."""
NAMED = 5
OTHER = {"detection probability": "survival probability", "survival probability": "detection probability"}


def diagnose_table(claim: Claim, accepts: Accepts) -> Diagnosis | None:
    """The first explanation under which all numbers, or all but a few, are accepted."""
    if not isinstance(claim.value, Table) or claim.quantity is None:
        return None
    return _shifted(claim, claim.value, accepts) or _other(claim, accepts) or _rows(claim, claim.value, accepts)


def _shifted(claim: Claim, table: Table, accepts: Accepts) -> Diagnosis | None:
    """Numbers that belong to the ask before or after the one they are given for."""
    for step in (1, -1):
        rows = tuple((str(int(parse(n).args[0]) + step), q) for n, q in table.rows)
        mended = replace(claim, value=Table(rows))
        if all(int(n) >= 1 for n, _ in rows) and accepts(mended):
            words = "n + 1: the first ask is n = 1" if step == 1 else "n - 1"
            return Diagnosis(f"each number is that of {words}.", mended, "index")
    return None


def _other(claim: Claim, accepts: Accepts) -> Diagnosis | None:
    name = OTHER.get(claim.quantity.name if claim.quantity else "")
    if name is None:
        return None
    mended = replace(claim, quantity=Quantity(name))
    return Diagnosis(f"these are numbers of the {name}.", mended, "quantity") if accepts(mended) else None


def _rows(claim: Claim, table: Table, accepts: Accepts) -> Diagnosis | None:
    """Which rows are wrong, where most are right."""
    if not 1 < len(table.rows) <= MOST_ROWS:
        return None
    wrong = [row for row in table.rows if not accepts(replace(claim, value=Table((row,))))]
    if not wrong or 2 * len(wrong) > len(table.rows):
        return None
    mended = replace(claim, value=Table(tuple(r for r in table.rows if r not in wrong)))
    named = ", ".join(f"n = {n} ({q})" for n, q in wrong[:NAMED]) + (" and others" if len(wrong) > NAMED else "")
    return Diagnosis(f"all numbers are right but those at {named}.", mended, "case") if accepts(mended) else None
