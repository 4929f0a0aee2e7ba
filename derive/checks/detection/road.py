"""Road `exact` for detection: the same quantities by elimination, from the setting (`observed.py`).

A total probability is 1 minus the squared length of the start's part in the largest space that is closed under the
evolution and orthogonal to the detector; dimensions and phases are ranks.  The claim minus that must be exactly zero.
A difference that is not zero refutes only at a point that meets the assumptions and makes it surely non-zero.
"""

from __future__ import annotations

from collections.abc import Sequence

from derive.checks.asked import entries_of, formula_of
from derive.checks.observed import Observed
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Matrix

COUNTED = ("bright dimension", "dark dimension", "number of phases")
QUANTITIES = ("total detection probability", *COUNTED)


def check_detection(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about detection that has a place in an exact field; the others get none."""
    found: dict[str, Finding] = {}
    held: dict[Setting, Observed] = {}
    for claim in claims:
        if claim.quantity is not None:
            finding = _judge(setting, claim, effort, held)
            if finding is not None:
                found[claim.id] = finding
    return found


def _judge(setting: Setting, claim: Claim, effort: Check, held: dict[Setting, Observed]) -> Finding | None:
    name = claim.quantity.name if claim.quantity else ""
    try:
        if name == "dark state" and isinstance(claim.value, Matrix):
            return _dark_state(setting, claim)
        if name in QUANTITIES and claim.kind.name == "exactly":
            return _number(setting, claim, name, effort, held)
    except (NotCovered, ZeroDivisionError):
        return None
    return None


def _number(setting: Setting, claim: Claim, name: str, effort: Check, held: dict[Setting, Observed]) -> Finding:
    observed = held.get(setting) or held.setdefault(setting, Observed(setting))
    residual = difference(formula_of(claim), _truth(observed, name), setting)
    if residual is not None:
        return refuted(setting, claim, effort, name, residual)
    return Finding("proved", "exact", evidence="found again by elimination, the difference is exactly zero")


def _truth(observed: Observed, name: str) -> Formula:
    if name in COUNTED:
        counts = dict(zip(COUNTED, (observed.bright, observed.dark, observed.phases), strict=True))
        return number(counts[name])
    if not observed.mixture:
        raise NotCovered("no start is given")
    return observed.field.formula(observed.seen_share())


def difference(claimed: Formula, truth: Formula, setting: Setting) -> Formula | None:
    """claimed - truth where it is not exactly zero."""
    field = Field.of([claimed, truth], setting.domains())
    residual = field.element(claimed) - field.element(truth)
    return field.formula(residual) if residual else None


def refuted(setting: Setting, claim: Claim, effort: Check, what: str, residual: Formula) -> Finding:
    """Refuted with a point where the residual is surely not zero; undecided, or untested where there is no point."""
    points = sample_points(setting, effort, claim.assume)
    if not points:
        return Finding("untested", "exact", evidence="no sampled point met the assumptions")
    for point in points:
        if is_surely_nonzero(residual, point):
            evidence = f"{what}: claimed minus found by elimination is {text(residual)}"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{what}: the difference {text(residual)} vanishes where tried")


def _dark_state(setting: Setting, claim: Claim) -> Finding:
    """Every observed row annihilates the state, and it is not zero."""
    entries = entries_of(claim)
    if not entries or any(y for _, y, _ in entries):
        raise NotCovered("a dark state is one column")
    observed = Observed(setting)
    field = Field.of([*observed.formulas, *(f for _, _, f in entries)], setting.domains())
    state = {x: field.element(f) for x, _, f in entries}
    for row in observed.rows.held.values():
        total = field.zero
        for x, c in row.items():
            if x in state:
                total = total + field.element(observed.field.formula(c)) * state[x]
        if total:
            left = text(field.formula(total))
            return Finding("refuted", "exact", evidence=f"an observed row leaves {left} of the state, not 0")
    if not any(state.values()):
        return Finding("refuted", "exact", evidence="the state is zero")
    return Finding("proved", "exact", evidence="every observed row annihilates the state exactly")
