"""Road "enclosure" for bounds: what is claimed against what is measured, at several tau.

|| tau (G - G^(K)) || for a remainder; e_n = || K^n - Khat^n || at tau = t/n for a state bound; e_n over the surviving
norm at its least, |K^n v| >= 1/||K^-n||, for a relative one.  Measured above claimed refutes; below, at every tau and
point, agrees.  Order, tolerance and time are those in the claim's keys, else those of the entry derived beside it, else
the defaults.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import arb, ctx, fmpq

from derive.checks.seen import Seen
from derive.checks.validity.intervals import MEASURED, RELATIVE_INTERVAL, check_interval, check_measured
from derive.checks.validity.place import (
    INTERVAL,
    RELATIVE,
    REMAINDER,
    STATE,
    WORKING,
    At,
    measured_at,
    over_points,
    promised,
)
from derive.checks.validity.plot import ASKS, error_plot
from derive.checks.validity.radius import distinct_points
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.decimals import rounded
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Number, Plot, Value

FRACTIONS = (Fraction(1, 20), Fraction(1, 5), Fraction(1, 2))
"""h tau at which bounds are tried."""


def check_bounds(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Road "enclosure" for bounds and intervals."""
    findings: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    values: dict[str, Value] = {}
    state = next((c.value for c in claims if c.id == "validity.state"), None)
    relative = next((c.value for c in claims if c.id == "validity.state.relative"), None)
    for claim in claims:
        name = claim.quantity.name if claim.quantity else claim.id
        law = relative if name == RELATIVE_INTERVAL else state
        if name in (REMAINDER, STATE, RELATIVE):
            findings[claim.id] = over_points(setting, claim, claims, effort, _bound_at)
        elif name in (INTERVAL, RELATIVE_INTERVAL):
            findings[claim.id] = check_interval(setting, claim, claims, law, effort, numbers, values)
        elif name == MEASURED:
            findings[claim.id] = check_measured(setting, claim, claims, effort, numbers, values)
    return Seen(findings, numbers, values=values)


def _bound_at(at: At, claim: Claim) -> tuple[str, str]:
    """A claimed bound at several tau."""
    if not isinstance(claim.value, Formula):
        raise NotCovered("a bound is claimed by a formula")
    if claim.kind.name not in ("upper", "exactly"):
        raise NotCovered(f'"{claim.kind.phrase}" is not decided for a bound')
    name, least = claim.quantity.name if claim.quantity else "", None
    for y in FRACTIONS:
        tau = arb(fmpq(y.numerator, y.denominator)) / arb(at.s.h.upper())
        try:
            tau, low, high = measured_at(at, name, arb(tau.mid()))
            bound = at.claimed(claim.value, tau)
        except OutsideValidity:
            continue
        if low > bound:
            return "refuted", f"at tau = {rounded(tau, 6)} measured {rounded(low, 6)}, claimed {rounded(bound, 6)}"
        if not high <= bound:
            return "undecided", f"at tau = {rounded(tau, 6)} measured {rounded(high, 6)}, claimed {rounded(bound, 6)}"
        ratio = bound / high
        least = ratio if least is None else least.min(ratio)
    if least is None:
        raise NotCovered("the bound has no value at the intervals tried")
    return "agrees", f"the bound is at least {rounded(least, 3)} times what is measured"


def bound_figure(setting: Setting, claims: Sequence[Claim], effort: Check, radius: Number | None) -> tuple[Plot, ...]:
    """Error, bound and radius at the first point; none where the experiment is not repeated."""
    state = next((c for c in claims if c.id == "validity.state"), None)
    points = distinct_points(setting, effort, state) if state else []
    if state is None or not isinstance(state.value, Formula) or not points:
        return ()
    try:
        with ctx.workprec(WORKING):
            at = At(setting, points[0], promised(state, claims))
            time, goal = at.time(), at.promise.tolerance_at(at.values)
            bound = _bound_curve(at, state.value, time)
            limit = None if radius is None else arb(radius.value)
            return (error_plot(at.measured(), time, bound, limit, goal, points[0]),)
    except (NotCovered, NeedsPrecision, OutsideValidity):
        return ()


def _bound_curve(at: At, law: Formula, time: arb) -> list[tuple[arb, arb]]:
    """(tau, s(tau)) at the figure's intervals where s has a value and is no more than 10."""
    found = []
    for n in ASKS:
        tau = arb((time / n).mid())
        try:
            value = at.claimed(law, tau)
        except (OutsideValidity, NeedsPrecision):
            continue
        if value < 10:
            found.append((tau, value))
    return found
