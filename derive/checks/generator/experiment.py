"""Road "trend" for the truncated generator: the experiment repeated at smaller and smaller intervals.

The truncation leaves O(tau^(k+1)) at fixed t = n tau, so each halving of tau divides the state error e_k by 2^(k+1)
or more in the end (`trend_run.py` has the errors, all in balls).  Six intervals tau_0, tau_0/2, ..., tau_0/32 with
h tau_0 <= 1/4; t = max(4, d/2) tau_0, d the steps from the start to the detector; one point; every order k = 0..K;
slopes s = log2(e(tau)/e(tau/2)); errors known to one part in 1000:

    agrees      the last two slopes are surely >= k + 1 - 0.1
    refuted     the last three slopes are surely <= k + 1 - 0.4
    undecided   anything else

An error that no precision tells from 0 (below 10^-digits at every tau) counts as fallen.  Where that is so for every
order the start sees nothing of the detector: a neighbour of the detector is taken instead, and the evidence says so.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from flint import arb, ctx, fmpq

from derive.checks.generator.order_plots import order_plots
from derive.checks.generator.trend_run import Plan, Run, plan_run, run
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.points import sample_points
from derive.numerics.precision import power_of_ten
from derive.numerics.system import detector_vectors, finite_space
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Number, Prose

ROAD = "trend"
LARGEST = 200
"""Sites of the experiment; a larger one is left out, and a note says so."""
ATTEMPTS = 3
NARROW = Fraction(1, 1000)
SHORT_OF, FLAT_BELOW = Fraction(1, 10), Fraction(2, 5)


@dataclass(frozen=True)
class Slopes:
    """Of one order: log2 of the error's fall at each halving; none where the error is not told from 0."""

    order: int
    falls: tuple[arb, ...]

    def verdict(self) -> str:
        if not self.falls:
            return "agrees"
        wanted = self.order + 1
        if all(s > _ball(wanted - SHORT_OF) for s in self.falls[-2:]):
            return "agrees"
        if all(s < _ball(wanted - FLAT_BELOW) for s in self.falls[-3:]):
            return "refuted"
        return "undecided"


def check_order(setting: Setting, claim: Claim, effort: Check) -> Seen:
    """Finding, numbers and two figures for `generator.truncated`; a note alone where the graph is too large."""
    try:
        size = finite_space(setting).size
        detector_vectors(setting)
        if size > LARGEST:
            return Seen(notes=(_left_out(size),))
        points = sample_points(setting, effort, claim.assume)
        if not points:
            return _untested(claim, "no sampled point met the assumptions")
        return _checked(setting, claim, points[0], effort.digits)
    except NeedsPrecision as reason:
        return Seen({claim.id: Finding("undecided", ROAD, evidence=str(reason))})
    except (NotCovered, OutsideValidity) as reason:
        return _untested(claim, str(reason))


def _left_out(size: int) -> Prose:
    return (
        f"The experiment was not repeated beside the truncated generator: the graph has {size} sites, and states of "
        f"at most {LARGEST} are followed.",
    )


def _untested(claim: Claim, reason: str) -> Seen:
    return Seen({claim.id: Finding("untested", ROAD, evidence=reason)})


def _checked(setting: Setting, claim: Claim, point: Point, digits: int) -> Seen:
    """The setting's own start; a neighbour of the detector where there is none, or where it sees nothing."""
    shown = point.without("tau")
    own = setting.start is not None and bool(setting.start.mixture)
    plan = plan_run(setting, point, own)
    found = _narrow_run(setting, claim, point, plan, digits)
    said = ""
    if own and _sees_nothing(found, digits):
        said = "; the start of the worksheet never meets the detector"
        plan = plan_run(setting, point, False)
        found = _narrow_run(setting, claim, point, plan, digits)
    slopes = [Slopes(k, _falls(errors, digits)) for k, errors in enumerate(found.errors)]
    finding = _finding(slopes, plan, shown, _place(setting, plan) + said)
    numbers = tuple(_numbers(slopes, found, plan, shown))
    return Seen({claim.id: finding}, {claim.id: numbers}, order_plots(slopes_text(slopes), found, plan, shown))


def _place(setting: Setting, plan: Plan) -> str:
    if not plan.start:
        return ""
    return f"; from site {finite_space(setting).name(plan.start[0])}"


def _narrow_run(setting: Setting, claim: Claim, point: Point, plan: Plan, digits: int) -> Run:
    """A run whose errors are all known to one part in 1000 or are, as far as that shows, zero."""
    orders = claim.kind.order or 1
    bits = 112 + 12 * orders
    for attempt in range(ATTEMPTS):
        with ctx.workprec(bits << attempt):
            found = run(setting, claim, point, plan)
            if all(_is_narrow(e) for errors in found.errors for e in errors):
                return found
    if not all(_is_narrow(e) or _is_zero(e, digits) for errors in found.errors for e in errors):
        raise NeedsPrecision("the state errors are not known well enough to compare them")
    return found


def _is_narrow(e: arb) -> bool:
    return bool(e > 0) and bool(e.rad() < e.mid() * _ball(NARROW))


def _is_zero(e: arb, digits: int) -> bool:
    return e.contains(0) and bool(e < power_of_ten(-digits))


def _sees_nothing(found: Run, digits: int) -> bool:
    return all(_is_zero(e, digits) for errors in found.errors for e in errors)


def _falls(errors: tuple[arb, ...], digits: int) -> tuple[arb, ...]:
    """log2(e(tau)/e(tau/2)) at each halving."""
    if all(_is_zero(e, digits) for e in errors):
        return ()
    if not all(_is_narrow(e) for e in errors):
        raise NeedsPrecision("some state errors vanish and others do not")
    return tuple((a / b).log() / arb.const_log2() for a, b in zip(errors, errors[1:], strict=False))


def _ball(q: Fraction | int) -> arb:
    q = Fraction(q)
    return arb(fmpq(q.numerator, q.denominator))


def slopes_text(slopes: list[Slopes]) -> list[str]:
    """The last slope of each order as a factor a halving, for labels: 8x per halving."""
    return [f"{rounded(arb(2) ** s.falls[-1], 2)}x per halving" if s.falls else "no error left" for s in slopes]


def _finding(slopes: list[Slopes], plan: Plan, point: Point, place: str) -> Finding:
    verdicts = [s.verdict() for s in slopes]
    span = f"state error at t = {plan.time}, tau from {plan.taus[0]} to {plan.taus[-1]}"
    for worst in ("refuted", "undecided"):
        if worst in verdicts:
            s = slopes[verdicts.index(worst)]
            text = f"{span}: at order {s.order} it falls by 2^{_shown(s)} a halving, not by 2^{s.order + 1}{place}"
            return Finding(worst, ROAD, points=1, point=point.text() if worst == "refuted" else (), evidence=text)
    falls = ", ".join(_shown(s) for s in slopes)
    text = f"{span}: it falls by 2 to the power {falls} a halving at orders 0 to {len(slopes) - 1}{place}"
    return Finding("agrees", ROAD, points=1, evidence=text)


def _shown(s: Slopes) -> str:
    return rounded(s.falls[-1], 3) if s.falls else "(nothing left to fall)"


def _numbers(slopes: list[Slopes], found: Run, plan: Plan, point: Point) -> list[Number]:
    """State errors by order and interval, then the last slope of every order."""
    at, numbers = point.text(), []
    for k, errors in enumerate(found.errors):
        for tau, e in zip(plan.taus, errors, strict=True):
            value, radius = with_radius(e, 8)
            where = (*at, ("order", str(k)), ("t", str(plan.time)), ("tau", str(tau)))
            numbers.append(Number(value, radius, where, ROAD))
    for s in slopes:
        if s.falls:
            value, radius = with_radius(s.falls[-1], 8)
            where = (*at, ("order", str(s.order)), ("slope", f"tau from {plan.taus[-2]} to {plan.taus[-1]}"))
            numbers.append(Number(value, radius, where, ROAD))
    return numbers
