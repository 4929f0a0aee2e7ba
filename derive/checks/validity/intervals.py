"""Promised intervals: solved for, tried out, and beside them the first that fails.

A derived interval is the root of state bound = tolerance, by bisection between signs that balls decide.  Any claimed
interval is tried out: the error e_n at the largest t/n that it allows, and at half of it, against the tolerance; a
claim that holds exactly has to share its digits with the root.
"""

from __future__ import annotations

from collections.abc import Sequence

from flint import acb, arb, ctx

from derive.checks.validity.place import (
    MEASURED_ROAD,
    RELATIVE,
    STATE,
    At,
    asks_for,
    measured_at,
    over_points,
)
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.precision import bits_for, power_of_ten, retry
from derive.numerics.promise import approx_first_failure
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Number, Value

MEASURED, RELATIVE_INTERVAL = "validity.interval.measured", "validity.interval.relative"
MOST_ASKS = 1_000_000
"""Asks from which on the first interval that fails is not searched for."""


def check_interval(
    setting: Setting,
    claim: Claim,
    claims: Sequence[Claim],
    law: object,
    effort: Check,
    numbers: dict[str, tuple[Number, ...]],
    values: dict[str, Value],
) -> Finding:
    """A derived interval is solved for first, at every point; a user's own is compared with that, and tried out."""
    derived = claim.origin == "derived"
    found: list[Number] = []

    def look(at: At, claim: Claim) -> tuple[str, str]:
        root = solved(at, law, effort.digits) if isinstance(law, Formula) else None
        if derived and root is None:
            raise NotCovered("no state bound to solve")
        if root is not None and derived:
            found.append(Number(*with_radius(root, effort.digits + 2), at.point.text()))
        tau = root if derived or not isinstance(claim.value, Formula) else at.claimed(claim.value, arb(1))
        equal = derived or root is None or claim.kind.name != "exactly"
        if root is not None and not equal and abs(tau - root) > root * power_of_ten(-effort.digits):
            return "refuted", f"the bound's interval is {rounded(root, 12)}, claimed is {rounded(tau, 12)}"
        return _tried(at, claim, tau)

    finding = over_points(setting, claim, claims, effort, look)
    if found:
        numbers[claim.id] = tuple(found)
        values[claim.id] = found[0]
    return finding


def solved(at: At, law: Formula, digits: int) -> arb:
    """The tau with law(tau) = tolerance, law increasing: bisection between signs that balls decide."""
    with ctx.workprec(bits_for(digits + 10)):
        low, high = arb(0), arb((3 / at.s.h).mid())
        goal = at.promise.tolerance_at(at.values)
        while high - low > high * power_of_ten(-digits - 3):
            middle = arb(((low + high) / 2).mid())
            if _exceeds(at, law, middle, goal):
                high = middle
            else:
                low = middle
        return (low + high) / 2 + arb(0, ((high - low) / 2).upper())


def _exceeds(at: At, law: Formula, tau: arb, goal: arb) -> bool:
    """Whether law(tau) > goal; where the law has no value any more, it counts as exceeded."""

    def decided(bits: int) -> bool:
        x = enclose_real(law, Values.at(at.point.mapping()).with_letter("tau", acb(tau)))
        if x > goal:
            return True
        if x < goal:
            return False
        raise NeedsPrecision("the bound and the tolerance are too close")

    try:
        return retry(decided, ctx.prec, 8 * ctx.prec)
    except OutsideValidity:
        return True


def _tried(at: At, claim: Claim, tau: arb) -> tuple[str, str]:
    """e_n at the largest t/n that the interval allows, and at half of it."""
    goal, worst = at.promise.tolerance_at(at.values), arb(0)
    name = RELATIVE if claim.id == RELATIVE_INTERVAL else STATE
    for part in (1, 2):
        here, low, high = measured_at(at, name, arb((tau / part).lower()))
        if low > goal:
            text = f"at tau = {rounded(here, 8)} the error is {rounded(low, 4)}, above the tolerance {rounded(goal, 4)}"
            return "refuted", text
        if not high <= goal:
            return "undecided", f"the error at tau = {rounded(here, 8)} is at most {rounded(high, 4)}"
        worst = worst.max(high)
    return "agrees", f"tried out: the error is {rounded(worst, 3)}, the tolerance {rounded(goal, 3)}"


def check_measured(
    setting: Setting,
    claim: Claim,
    claims: Sequence[Claim],
    effort: Check,
    numbers: dict[str, tuple[Number, ...]],
    values: dict[str, Value],
) -> Finding:
    """tau* = t/n, n the first to fail as tau grows from the promised interval, in doubles: measured, no bound."""
    law = next((c.value for c in claims if c.id == "validity.state"), None)
    found: list[Number] = []

    def look(at: At, claim: Claim) -> tuple[str, str]:
        if not isinstance(law, Formula):
            raise NotCovered("no state bound to begin from")
        tau, time, goal = solved(at, law, 6), at.time(), at.promise.tolerance_at(at.values)
        first = asks_for(time / tau)
        if first > MOST_ASKS:
            raise NotCovered(f"more than {MOST_ASKS} asks until the time wanted")
        n = approx_first_failure(at.s, at.measured().terms, float(time.mid()), float(goal.mid()), first)
        if n is None:
            return "agrees", "the error stays within the tolerance for every interval up to the whole time"
        between = (time / n + time / (n + 1)) / 2 if n < first else time / n
        half = (time / n - time / (n + 1)) / 2 if n < first else time / n / 1000
        found.append(Number(*with_radius(arb(between.mid()) + arb(0, half.upper()), 4), at.point.text(), MEASURED_ROAD))
        if n >= first:
            return "refuted", f"the promised interval fails: {n} asks"
        return "agrees", f"first beyond the tolerance at {n} asks; the promised interval takes {first}"

    finding = over_points(setting, claim, claims, effort, look, MEASURED_ROAD)
    if found:
        numbers[claim.id] = tuple(found)
        values[claim.id] = found[0]
    return finding
