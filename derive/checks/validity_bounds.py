"""Claims about how far the truncated generator can be off, and the interval that a promise allows.

At each point, with tau at several fractions of log 2/h:

enclosure     what is claimed as a bound against what is measured: || tau (G - G^(K)) || or e_n = || K^n - Khat^n || in
              balls at tau = t/n (relative: over the surviving norm at its least, |K^n v| >= 1/||K^-n||).  Measured
              above claimed refutes, below agrees.  A claimed interval is tried out: e_n at the largest t/n that it
              allows, and at half of it, against the tolerance.
coefficient   Taylor coefficients of a claimed remainder against the majorant c_d h_d^d, h_d half the width of the
              spectrum that order d - 1 sees, c_d from the ball series of -log(2 - e^y): none below agrees.  And of a
              claimed interval: the rigorous bound recomputed with that h stays below the tolerance.

Order, tolerance and time are those in the claim's keys, else those of the entry derived beside it, else the defaults.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from flint import acb, acb_series, arb, ctx, fmpq

from derive.checks.seen import Seen
from derive.checks.validity_plot import ASKS, error_plot
from derive.checks.validity_radius import distinct_points
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, formula
from derive.numerics.bright import scaled_sector
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.precision import bits_for, power_of_ten, retry
from derive.numerics.promise import LARGEST, Experiment, approx_first_failure
from derive.numerics.series import enclose_series
from derive.numerics.system import System, bound_norm, dense, finite_space, system, watched_sites
from derive.problem.balls import ball
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Number, Plot, Value

REMAINDER, STATE, RELATIVE, INTERVAL = (
    "remainder bound", "state error bound", "relative state error bound", "largest interval",
)
MEASURED, RELATIVE_INTERVAL = "validity.interval.measured", "validity.interval.relative"
FRACTIONS = (Fraction(1, 20), Fraction(1, 5), Fraction(1, 2))
"""h tau at which bounds are tried."""

SERIES = 16
"""Orders of the majorant that are compared one by one."""

WORKING, MOST_BITS = 160, 2000
DEFAULT_ORDER, DEFAULT_TOLERANCE, DEFAULT_SPAN = 3, Fraction(1, 100), 10
MOST_ASKS = 1_000_000
"""Asks from which on the first interval that fails is not searched for."""


@dataclass(frozen=True)
class Promise:
    """Order of the truncation, tolerance, time (None: 10/h)."""

    order: int
    tolerance: Formula | None
    time: Formula | None

    def tolerance_at(self, values: Values) -> arb:
        if self.tolerance is None:
            return arb(fmpq(DEFAULT_TOLERANCE.numerator, DEFAULT_TOLERANCE.denominator))
        return enclose_real(self.tolerance, values)

    def time_at(self, values: Values, s: System) -> arb:
        return DEFAULT_SPAN / s.h if self.time is None else enclose_real(self.time, values)


def promised(claim: Claim, claims: Sequence[Claim]) -> Promise:
    """What a claim is about; what it leaves open is taken from the derived interval."""
    keys: dict[str, object] = {}
    for c in (*(c for c in claims if c.id == "validity.interval"), claim):
        keys.update(dict(c.quantity.keys) if c.quantity else {})
    order, tolerance, time = keys.get("order"), keys.get("tolerance"), keys.get("time")
    return Promise(
        order if isinstance(order, int) else DEFAULT_ORDER,
        formula(tolerance) if isinstance(tolerance, (Formula, int, Fraction)) else None,
        formula(time) if isinstance(time, (Formula, int, Fraction)) else None,
    )


class _At:
    """One point: its values, its system, and the experiment, made when first asked for."""

    def __init__(self, setting: Setting, point: Point, promise: Promise):
        self.setting, self.point, self.promise = setting, point, promise
        self.values = Values.at(point.mapping())
        self.s = system(setting, self.values)
        self.experiment = Experiment(self.s, promise.order) if self.s.size <= LARGEST else None

    def measured(self) -> Experiment:
        if self.experiment is None:
            raise NotCovered(f"the experiment is repeated on at most {LARGEST} sites, and there are {self.s.size}")
        return self.experiment

    def claimed(self, f: Formula, tau: arb) -> arb:
        """f at this point and tau, well above rounding."""
        return retry(lambda bits: self._narrow(f, tau), WORKING, MOST_BITS)

    def _narrow(self, f: Formula, tau: arb) -> arb:
        x = enclose_real(f, Values.at(self.point.mapping()).with_letter("tau", acb(tau)))
        if not x.rad() <= abs(x).lower() * arb(2) ** -40:
            raise NeedsPrecision("a bound is not known well enough")
        return x

    def time(self) -> arb:
        return self.promise.time_at(self.values, self.s)


Look = Callable[[_At, Claim], tuple[str, str]]
"""One point -> (verdict, what was seen)."""


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
            findings[claim.id] = _over_points(setting, claim, claims, effort, _bound_at)
        elif name in (INTERVAL, RELATIVE_INTERVAL):
            findings[claim.id] = _interval(setting, claim, claims, law, effort, numbers, values)
        elif name == MEASURED:
            findings[claim.id] = _first_failure(setting, claim, claims, effort, numbers, values)
    return Seen(findings, numbers, values=values)


def bound_figure(setting: Setting, claims: Sequence[Claim], effort: Check, radius: Number | None) -> tuple[Plot, ...]:
    """Error, bound and radius at the first point; none where the experiment is not repeated."""
    state = next((c for c in claims if c.id == "validity.state"), None)
    points = distinct_points(setting, effort, state) if state else []
    if state is None or not isinstance(state.value, Formula) or not points:
        return ()
    try:
        with ctx.workprec(WORKING):
            at = _At(setting, points[0], promised(state, claims))
            time, goal = at.time(), at.promise.tolerance_at(at.values)
            bound = _bound_curve(at, state.value, time)
            limit = None if radius is None else arb(radius.value)
            return (error_plot(at.measured(), time, bound, limit, goal, points[0]),)
    except (NotCovered, NeedsPrecision, OutsideValidity):
        return ()


def _bound_curve(at: _At, law: Formula, time: arb) -> list[tuple[arb, arb]]:
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


def _over_points(setting: Setting, claim: Claim, claims: Sequence[Claim], effort: Check, look: Look) -> Finding:
    """One finding from every point; the first that refutes ends it."""
    met, said = 0, ""
    try:
        for point in distinct_points(setting, effort, claim):
            with ctx.workprec(WORKING):
                verdict, text = look(_At(setting, point, promised(claim, claims)), claim)
            if verdict != "agrees":
                return Finding(verdict, "enclosure", points=met + 1, point=point.text(), evidence=text)
            met, said = met + 1, said or text
    except NeedsPrecision as reason:
        return Finding("undecided", "enclosure", evidence=str(reason))
    except (NotCovered, OutsideValidity) as reason:
        return Finding("untested", "enclosure", evidence=str(reason))
    if not met:
        return Finding("untested", "enclosure", evidence="no sampled point met the assumptions")
    return Finding("agrees", "enclosure", points=met, evidence=said)


def _bound_at(at: _At, claim: Claim) -> tuple[str, str]:
    """A claimed bound at several tau."""
    if not isinstance(claim.value, Formula):
        raise NotCovered("a bound is claimed by a formula")
    if claim.kind.name not in ("upper", "exactly"):
        raise NotCovered(f'"{claim.kind.phrase}" is not decided for a bound')
    name, least = claim.quantity.name if claim.quantity else "", None
    for y in FRACTIONS:
        tau = arb(fmpq(y.numerator, y.denominator)) / arb(at.s.h.upper())
        try:
            tau, low, high = _measured_at(at, name, arb(tau.mid()))
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


def _measured_at(at: _At, name: str, tau: arb) -> tuple[arb, arb, arb]:
    """(tau, low, high): the measured remainder, or e_n at tau = t/n not above the given one."""
    experiment = at.measured()
    if name == REMAINDER:
        found = experiment.remainder(tau)
        return tau, found.low, found.high
    n = _asks(at.time() / tau)
    tau = arb((at.time() / n).mid())
    error = experiment.error(tau, n)
    if name == STATE:
        return tau, error.low, error.high
    return tau, error.low, error.high / experiment.least_survival(tau, n).low


def _asks(ratio: arb) -> int:
    """The least n with t/n <= tau."""
    return max(1, ceil(float(ratio.upper())))


# -- intervals


def _interval(
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

    def look(at: _At, claim: Claim) -> tuple[str, str]:
        root = _solved(at, law, effort.digits) if isinstance(law, Formula) else None
        if derived and root is None:
            raise NotCovered("no state bound to solve")
        if root is not None and derived:
            found.append(Number(*with_radius(root, effort.digits + 2), at.point.text()))
        tau = root if derived or not isinstance(claim.value, Formula) else at.claimed(claim.value, arb(1))
        equal = derived or root is None or claim.kind.name != "exactly"
        if root is not None and not equal and abs(tau - root) > root * power_of_ten(-effort.digits):
            return "refuted", f"the bound's interval is {rounded(root, 12)}, claimed is {rounded(tau, 12)}"
        return _tried(at, claim, tau)

    finding = _over_points(setting, claim, claims, effort, look)
    if found:
        numbers[claim.id] = tuple(found)
        values[claim.id] = found[0]
    return finding


def _solved(at: _At, law: Formula, digits: int) -> arb:
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


def _exceeds(at: _At, law: Formula, tau: arb, goal: arb) -> bool:
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


def _tried(at: _At, claim: Claim, tau: arb) -> tuple[str, str]:
    """e_n at the largest t/n that the interval allows, and at half of it."""
    goal, worst = at.promise.tolerance_at(at.values), arb(0)
    name = RELATIVE if claim.id == RELATIVE_INTERVAL else STATE
    for part in (1, 2):
        here, low, high = _measured_at(at, name, arb((tau / part).lower()))
        if low > goal:
            text = f"at tau = {rounded(here, 8)} the error is {rounded(low, 4)}, above the tolerance {rounded(goal, 4)}"
            return "refuted", text
        if not high <= goal:
            return "undecided", f"the error at tau = {rounded(here, 8)} is at most {rounded(high, 4)}"
        worst = worst.max(high)
    return "agrees", f"tried out: the error is {rounded(worst, 3)}, the tolerance {rounded(goal, 3)}"


def _first_failure(
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

    def look(at: _At, claim: Claim) -> tuple[str, str]:
        if not isinstance(law, Formula):
            raise NotCovered("no state bound to begin from")
        tau, time, goal = _solved(at, law, 6), at.time(), at.promise.tolerance_at(at.values)
        first = _asks(time / tau)
        if first > MOST_ASKS:
            raise NotCovered(f"more than {MOST_ASKS} asks until the time wanted")
        n = approx_first_failure(at.s, at.measured().terms, float(time.mid()), float(goal.mid()), first)
        if n is None:
            return "agrees", "the error stays within the tolerance for every interval up to the whole time"
        between = (time / n + time / (n + 1)) / 2 if n < first else time / n
        half = (time / n - time / (n + 1)) / 2 if n < first else time / n / 1000
        found.append(Number(*with_radius(arb(between.mid()) + arb(0, half.upper()), 4), at.point.text(), "trend"))
        if n >= first:
            return "refuted", f"the promised interval fails: {n} asks"
        return "agrees", f"first beyond the tolerance at {n} asks; the promised interval takes {first}"

    finding = _over_points(setting, claim, claims, effort, look)
    if found:
        numbers[claim.id] = tuple(found)
        values[claim.id] = found[0]
    return finding


# -- the majorant, recomputed


def check_majorant(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Road "coefficient"; a claim that this road cannot support gets no finding from it."""
    findings: dict[str, Finding] = {}
    for claim in claims:
        name = claim.quantity.name if claim.quantity else claim.id
        if name == REMAINDER and claim.kind.name == "upper" and isinstance(claim.value, Formula):
            finding = _majorised(setting, claim, claims, effort)
            if finding is not None:
                findings[claim.id] = finding
    return Seen(findings)


def _majorised(setting: Setting, claim: Claim, claims: Sequence[Claim], effort: Check) -> Finding | None:
    points = distinct_points(setting, effort, claim)
    order = promised(claim, claims).order
    try:
        for point in points:
            with ctx.workprec(WORKING):
                if not _covers(setting, claim, point, order):
                    return None
    except (NotCovered, NeedsPrecision, OutsideValidity):
        return None
    if not points:
        return None
    text = f"coefficients of tau^{order + 2} to tau^{SERIES}: none below the majorant's"
    return Finding("agrees", "coefficient", points=len(points), evidence=text)


def _covers(setting: Setting, claim: Claim, point: Point, order: int) -> bool:
    """Whether every coefficient of the claimed remainder is at least c_d h_d^d."""
    if not isinstance(claim.value, Formula):
        return False
    values = Values.at(point.mapping())
    claimed = enclose_series(claim.value, values, SERIES + 1)
    majorant = majorant_balls(SERIES)
    for d in range(order + 2, SERIES + 1):
        h = half_width(setting, values, d - 1)
        if not claimed[d].real >= (majorant[d] * h**d).lower() - arb(2) ** (-WORKING // 2):
            return False
    return True


def majorant_balls(n: int) -> list[arb]:
    """Coefficients 0 ... n of -log(2 - e^y), by the logarithm of a ball series."""
    old, ctx.cap = ctx.cap, n + 1
    try:
        inner = 2 - acb_series([0, 1], prec=n + 1).exp()
        return [acb(c).real for c in (-inner.log()).coeffs()]
    finally:
        ctx.cap = old


def half_width(setting: Setting, values: Values, steps: int) -> arb:
    """Half the width of H's spectrum on the sites within `steps` of the detector (all: the whole graph)."""
    rows = finite_space(setting).rows
    s = system(setting, values, ball(rows, watched_sites(setting), steps))
    if s.size > LARGEST:
        return bound_norm(s.rows)[1]
    return scaled_sector(dense(s), 0).h

