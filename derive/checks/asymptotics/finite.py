"""Road "trend" for laws of late asks on finite graphs: the experiment, ask by ask, beside the claim.

    phi_n = sqrt(eta) <d|U K^(n-1)|psi>,     F_n = |phi_n|^2 averaged over the start's mixture

K, a contraction, is applied to midpoints; what rounding leaves is added up (`numerics/evolution.py`), so that n asks
cost n roundings and the precision is raised until the smallest amplitude in sight is known.  Amplitudes fall like
|lambda|^n here, and a law that leaves out all but the nearest poles is off by a share that falls like a power with
exponent n: three doublings decide (`trend.py`).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial

from flint import acb, acb_mat, arb

from derive.checks.asymptotics.poles import step_and_row
from derive.checks.asymptotics.road import in_n, is_late, over_points, real_part
from derive.checks.seen import Seen
from derive.checks.summed import Bench, Experiment
from derive.checks.trend import follow, last_ask, verdict_of
from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import centred, squared_norm
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, retry
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Claim, Finding

FIRST_SCALE, RAISED_BY, MOST_ASKS = 16, 4, 5_000
MOST_BITS = 8_192
LARGEST = 80


@dataclass(frozen=True)
class Amplitudes:
    """phi_1, phi_2, ... (at n - 1) for every state of the start, and the states' weights."""

    weights: list[arb]
    phi: list[list[acb]]

    def amplitude(self, n: int) -> acb:
        if len(self.phi) != 1:
            raise NotCovered("a mixture has no amplitude")
        return self.phi[0][n - 1]

    def probability(self, n: int) -> arb:
        total = arb(0)
        for w, phi in zip(self.weights, self.phi, strict=True):
            total += w * squared_norm([phi[n - 1]])
        return total


def check_late_finite(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each law "as n -> infinity" on a finite graph."""
    if not isinstance(setting.space, Finite):
        return Seen()

    def finding(claim: Claim) -> Finding:
        return over_points(lambda: sample_points(setting, effort, claim.assume),
                           lambda point: _at_point(setting, point, claim, effort.digits))

    return Seen({c.id: finding(c) for c in claims if is_late(c)})


def _at_point(setting: Setting, point: Point, claim: Claim, digits: int) -> tuple[str, str]:
    if not isinstance(claim.value, Formula) or claim.kind.smooth:
        raise NotCovered("on a finite graph a late-time law is claimed by a formula, whole")
    first, verdict, evidence = FIRST_SCALE, "undecided", ""
    while verdict == "undecided" and last_ask(first) <= MOST_ASKS:
        try:
            followed = partial(_followed, setting, point, claim, claim.value, first)
            verdict, evidence = retry(followed, bits_for(digits, 256), MOST_BITS)
        except NeedsPrecision as reason:
            evidence = str(reason)
        first *= RAISED_BY
    return verdict, evidence


def _followed(setting: Setting, point: Point, claim: Claim, value: Formula, first: int, bits: int) -> tuple[str, str]:
    seen = measured_amplitudes(Bench(1, 15).at(setting, point), last_ask(first))
    claimed = in_n(value, Values.at(point.mapping()))
    if claim.quantity is not None and claim.quantity.name == "detection probability":
        return verdict_of(follow(lambda n: real_part(claimed(n)), seen.probability, first), claim.kind)
    if claim.kind.phase:
        return verdict_of(follow(lambda n: abs(claimed(n)), lambda n: abs(seen.amplitude(n)), first), claim.kind)
    gap: Callable[[int], acb] = seen.amplitude
    return verdict_of(follow(claimed, gap, first), claim.kind)


def measured_amplitudes(e: Experiment, count: int) -> Amplitudes:
    """phi_1 ... phi_count at the working precision."""
    start = e.setting.start
    if start is None or not start.mixture:
        raise NotCovered("the law of detection depends on the start, and none is given")
    if e.step.size > LARGEST:
        raise NotCovered(f"late asks are followed in at most {LARGEST} dimensions, and there are {e.step.size}")
    if len(e.setting.detectors) != 1 or e.setting.detectors[0].rank != 1 or e.setting.interval.law != "fixed":
        raise NotCovered("late asks are followed for one detector with one state, asked at fixed intervals")
    k, row = step_and_row(e, e.step)
    weights = [enclose(w, e.values).real for w, _ in start.mixture]
    return Amplitudes(weights, [_asked(k, row, e.step.state(v, e.values), count) for _, v in start.mixture])


def _asked(k: acb_mat, row: acb_mat, psi: list[acb], count: int) -> list[acb]:
    """row K^(n-1) psi for n = 1 ... count; |row| <= 1 and K is a contraction."""
    size = len(psi)
    middle, r = centred(psi)
    found = []
    for _ in range(count):
        column = acb_mat(size, 1, middle)
        around = arb(0, r.upper())
        found.append((row * column)[0, 0] + acb(around, around))
        middle, rounding = centred((k * column).entries())
        r = arb((r + rounding).upper())
    return found
