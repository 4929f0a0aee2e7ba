"""One point at which bounds are tried: what is promised there, and the experiment beside it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from flint import acb, arb, ctx, fmpq

from derive.checks.validity.radius import distinct_points
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, formula
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.precision import retry
from derive.numerics.promise import LARGEST, Experiment
from derive.numerics.system import System, system
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

REMAINDER, STATE, RELATIVE, INTERVAL = (
    "remainder bound", "state error bound", "relative state error bound", "largest interval",
)
ROAD, MEASURED_ROAD = "enclosure", "trend"
"""Balls; and what is found in doubles."""

WORKING, MOST_BITS = 160, 2000
DEFAULT_ORDER, DEFAULT_TOLERANCE, DEFAULT_SPAN = 3, Fraction(1, 100), 10


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


class At:
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


Look = Callable[[At, Claim], tuple[str, str]]
"""One point -> (verdict, what was seen)."""


def over_points(
    setting: Setting, claim: Claim, claims: Sequence[Claim], effort: Check, look: Look, road: str = ROAD
) -> Finding:
    """One finding from every point; the first that refutes ends it."""
    met, said = 0, ""
    try:
        for point in distinct_points(setting, effort, claim):
            with ctx.workprec(WORKING):
                verdict, text = look(At(setting, point, promised(claim, claims)), claim)
            if verdict != "agrees":
                return Finding(verdict, road, points=met + 1, point=point.text(), evidence=text)
            met, said = met + 1, said or text
    except NeedsPrecision as reason:
        return Finding("undecided", road, evidence=str(reason))
    except (NotCovered, OutsideValidity) as reason:
        return Finding("untested", road, evidence=str(reason))
    if not met:
        return Finding("untested", road, evidence="no sampled point met the assumptions")
    return Finding("agrees", road, points=met, evidence=said)


def measured_at(at: At, name: str, tau: arb) -> tuple[arb, arb, arb]:
    """(tau, low, high): the measured remainder, or e_n at tau = t/n not above the given one."""
    experiment = at.measured()
    if name == REMAINDER:
        found = experiment.remainder(tau)
        return tau, found.low, found.high
    n = asks_for(at.time() / tau)
    tau = arb((at.time() / n).mid())
    error = experiment.error(tau, n)
    if name == STATE:
        return tau, error.low, error.high
    return tau, error.low, error.high / experiment.least_survival(tau, n).low


def asks_for(ratio: arb) -> int:
    """The least n with t/n <= tau."""
    return max(1, ceil(float(ratio.upper())))
