"""Road "enclosure" for late asks on finite graphs: poles and rates from the undetected step itself, in balls.

At every sample point the step is built on what H reaches from the detector, and its eigenvalues are isolated
(`numerics/late_poles.py`); how many of them are dark is counted exactly (`observed.py`).

    pole modulus, pole angle    |1/lambda_j| and |arg lambda_j| of the j-th largest modulus
    tail rate                   -2 log |lambda_1|
    tail start                  where the other poles together are a hundredth of the nearest ones

A derived claim that states no formula takes the number found at the first point (`Seen.values`).  Others have to share
`digits` digits with it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import lru_cache

from flint import acb, acb_mat, arb, ctx

from derive.checks.observed import Observed
from derive.checks.seen import Seen
from derive.checks.summed import Bench, Experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import ONE, TAU, Formula
from derive.numerics.asks import Step, measured_step
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.frame import reached_frame
from derive.numerics.late_poles import Modulus, enclose_moduli, enclose_tail_start
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, digits_of, power_of_ten, retry
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Interval, Setting
from derive.record.said import Claim, Finding, Number, Value

ROAD = "enclosure"
SEEN = "eigenvalues of the undetected step, in balls"
QUANTITIES = ("pole modulus", "pole angle", "tail rate", "tail start")
LARGEST = 60
"""Dimension up to which all eigenvalues of the step are isolated."""
SPARE, MOST_BITS = 16, 4096


@dataclass
class _Tally:
    """One claim and what its points said."""

    claim: Claim
    points: int = 0
    digits: int | None = None
    refuted: tuple[Point, str] | None = None
    stopped: str = ""
    wide: str = ""
    numbers: list[Number] = field(default_factory=list)

    def finding(self) -> Finding:
        if self.refuted is not None:
            point, said = self.refuted
            return Finding("refuted", ROAD, points=self.points, point=point.text(), evidence=said)
        if self.wide:
            return Finding("undecided", ROAD, points=self.points or None, evidence=self.wide)
        if not self.points:
            return Finding("untested", ROAD, evidence=self.stopped or "no sampled point met the assumptions")
        return Finding("agrees", ROAD, self.digits, self.points, evidence=SEEN)


def check_late_poles(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about a pole, the tail's rate or its beginning on a finite graph."""
    if not isinstance(setting.space, Finite):
        return Seen()
    findings: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    values: dict[str, Value] = {}
    for claim in claims:
        if claim.quantity is None or claim.quantity.name not in QUANTITIES:
            continue
        tally = _Tally(claim)
        try:
            _meet(setting, tally, effort)
        except NotCovered as reason:
            tally.stopped = str(reason)
        findings[claim.id] = tally.finding()
        numbers[claim.id] = tuple(tally.numbers)
        if tally.numbers and is_open(claim):
            values[claim.id] = tally.numbers[0]
    return Seen(findings, numbers, values=values)


def is_open(claim: Claim) -> bool:
    """Whether the claim waits for its number."""
    return claim.origin == "derived" and isinstance(claim.value, Formula) and claim.value.head == "operator"


def _meet(setting: Setting, tally: _Tally, effort: Check) -> None:
    if tally.claim.kind.name != "exactly":
        raise NotCovered(f'"{tally.claim.kind.phrase}" is not decided for a pole')
    for point in sample_points(setting, effort, tally.claim.assume):
        if tally.refuted is not None:
            return
        try:
            _compare(setting, point, tally, effort.digits)
        except OutsideValidity as reason:
            tally.stopped = f"a point was left out: {reason}"
        except NeedsPrecision as reason:
            tally.wide = str(reason)


def _compare(setting: Setting, point: Point, tally: _Tally, digits: int) -> None:
    measured = retry(lambda bits: _measured(setting, point, tally.claim, digits), bits_for(digits, 128), MOST_BITS)
    with ctx.workprec(bits_for(2 * digits)):
        if not is_open(tally.claim):
            _against(measured, point, tally, digits)
        shown = arb(0) if measured.contains(0) else measured
        tally.numbers.append(Number(*with_radius(shown, digits + 2), point.text()))
    tally.points += 1


def _against(measured: arb, point: Point, tally: _Tally, digits: int) -> None:
    value = tally.claim.value
    if not isinstance(value, Formula):
        raise NotCovered("a pole is claimed as a number or a formula")
    claimed = enclose_real(value, Values.at(point.mapping()))
    scale = abs(measured).max(arb(1) / 1000)
    gap = abs(claimed - measured) / scale
    goal = power_of_ten(-digits)
    if gap > goal:
        name = tally.claim.quantity.name if tally.claim.quantity is not None else ""
        tally.refuted = (point, f"{name}: claimed {rounded(claimed, 12)}, measured {rounded(measured, 12)}")
    elif not gap < 2 * goal:
        raise NeedsPrecision(f"the balls stay too wide for {digits} digits")
    shared = digits_of(gap, arb(1))
    if shared is not None:
        tally.digits = shared if tally.digits is None else min(tally.digits, shared)


def _measured(setting: Setting, point: Point, claim: Claim, digits: int) -> arb:
    """The claimed quantity to `digits` digits and a few more."""
    found = quantity_of(claim, moduli_at(setting, point, digits, ctx.prec), digits)
    if not found.rad() < abs(found).max(arb(1) / 1000) * power_of_ten(-digits - 3):
        raise NeedsPrecision(f"the balls stay too wide for {digits} digits")
    return found


def quantity_of(claim: Claim, moduli: list[Modulus], digits: int) -> arb:
    """What the claim is about, from the poles."""
    name = claim.quantity.name if claim.quantity is not None else ""
    if name == "tail rate":
        return -2 * moduli[0].size.log()
    if name == "tail start":
        if not moduli[0].shares:
            raise NotCovered("where the tail begins is told for one start state")
        return enclose_tail_start(moduli, digits)
    j = claim.quantity.key("pole") if claim.quantity is not None else None
    if not isinstance(j, int) or not 1 <= j <= len(moduli):
        raise OutsideValidity(f"there are {len(moduli)} different moduli of poles here")
    return 1 / moduli[j - 1].size if name == "pole modulus" else moduli[j - 1].angle


@lru_cache(maxsize=64)
def moduli_at(setting: Setting, point: Point, digits: int, bits: int) -> list[Modulus]:
    """The poles at a point, nearest first, at `bits` working bits."""
    if len(setting.detectors) != 1 or setting.detectors[0].rank != 1 or setting.interval.law != "fixed":
        raise NotCovered("poles are measured for one detector with one state, asked at fixed intervals")
    e = Bench(1, digits).at(setting, point)
    reach = Observed(replace(e.setting, interval=Interval(TAU))).bright
    if reach > LARGEST:
        raise NotCovered(f"all poles are isolated in at most {LARGEST} dimensions, and there are {reach}")
    tau = enclose_real(e.tau, e.values)
    frame = reached_frame(e.setting, e.values, reach)
    step = measured_step(e.setting, e.values, tau, frame)
    k, row = step_and_row(e, step)
    start = e.setting.start.mixture if e.setting.start is not None else ()
    states = [acb_mat(step.size, 1, frame.state(v, e.values)) for _, v in start]
    perfect = e.setting.detectors[0].efficiency == ONE
    return enclose_moduli(k, row, states, perfect, reach - e.observed.bright)


def step_and_row(e: Experiment, step: Step) -> tuple[acb_mat, acb_mat]:
    """K and sqrt(eta) <d|U, with the phase exp(-i E0 tau) that the step leaves out."""
    watcher = e.setting.detectors[0]
    root = acb(enclose(watcher.efficiency, e.values).real.sqrt())
    bra = acb_mat(1, step.size, [x.conjugate() * root for x in step.state(watcher.vectors[0], e.values)])
    if step.frame is None:
        return step.k, bra * step.u
    phase = (acb(0, -1) * step.frame.system.E0 * enclose(e.tau, e.values)).exp()
    return step.k * phase, bra * step.u * phase
