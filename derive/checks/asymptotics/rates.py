"""Road "trend" for the nearest pole and the tail's rate on finite graphs: read off the measured amplitudes alone.

Two poles would make phi_(n+2) = s phi_(n+1) - q phi_n exactly.  From four amplitudes at n = N the s and q are solved
for; the larger root of x^2 - s x + q tends to the nearest pole's inverse as N = 8, 16, 32, 64, ... grows, whether it
stands alone or in a conjugate pair.  Agrees where the distance to the claim falls to 0.8 of itself or less at each of
three doublings, or is below 10^-13, and ends below NEAR; refuted where the measured values have settled, each change of
them smaller than the one before, and the claim is farther off than SETTLED times the last.  Common practice, no source.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial

from flint import acb, arb

from derive.checks.asymptotics.finite import MOST_BITS, Amplitudes, measured_amplitudes
from derive.checks.asymptotics.poles import is_open, moduli_at, quantity_of
from derive.checks.seen import Seen
from derive.checks.summed import Bench
from derive.checks.trend import FALLS, ROAD
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.late_poles import Modulus
from derive.numerics.points import sample_points
from derive.numerics.precision import power_of_ten, retry
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Claim, Finding

FIRST, DOUBLINGS, RAISED = 8, 3, 7
DIGITS, SETTLED, FIRST_BITS = 15, 100, 256
NEAR = 1e-3


def check_late_rates(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about the nearest pole or the tail's rate that the first point decides."""
    found: dict[str, Finding] = {}
    if not isinstance(setting.space, Finite):
        return Seen()
    for claim in claims:
        if not _is_nearest(claim):
            continue
        try:
            for point in sample_points(setting, effort, claim.assume)[:1]:
                finding = _judged(setting, point, claim)
                found.update({} if finding is None else {claim.id: finding})
        except (NotCovered, OutsideValidity, NeedsPrecision):
            continue
    return Seen(found)


def _is_nearest(claim: Claim) -> bool:
    if claim.quantity is None or claim.kind.name != "exactly":
        return False
    name, j = claim.quantity.name, claim.quantity.key("pole")
    return name == "tail rate" or (name in ("pole modulus", "pole angle") and j == 1)


def _judged(setting: Setting, point: Point, claim: Claim) -> Finding | None:
    """None where the other poles have not faded in the asks that are measured."""
    for raised in range(RAISED):
        finding = _verdict(*retry(partial(_course, setting, point, claim, FIRST << raised), FIRST_BITS, MOST_BITS),
                           point, FIRST << raised)
        if finding is not None:
            return finding
    return None


def _course(setting: Setting, point: Point, claim: Claim, first: int, bits: int) -> tuple[arb, list[arb]]:
    return _claimed(setting, point, claim), _measured(setting, point, claim, first)


def _claimed(setting: Setting, point: Point, claim: Claim) -> arb:
    if is_open(claim):
        return retry(lambda bits: quantity_of(claim, moduli_at(setting, point, DIGITS, bits), DIGITS), 128, MOST_BITS)
    if not isinstance(claim.value, Formula):
        raise NotCovered("a pole is claimed as a number or a formula")
    return enclose_real(claim.value, Values.at(point.mapping()))


def _measured(setting: Setting, point: Point, claim: Claim, first: int) -> list[arb]:
    """What the amplitudes say at first, 2 first, 4 first, 8 first."""
    seen = measured_amplitudes(Bench(1, DIGITS).at(setting, point), (first << DOUBLINGS) + 4)
    found = [quantity_of(claim, [_nearest(seen, first << j)], DIGITS) for j in range(DOUBLINGS + 1)]
    if not all(x.rad() < power_of_ten(-DIGITS) for x in found):
        raise NeedsPrecision("four amplitudes are too close to those of one pole for the precision at hand")
    return found


def _nearest(seen: Amplitudes, n: int) -> Modulus:
    """The larger root of x^2 - s x + q, s and q from phi_n ... phi_(n+3)."""
    a, b, c, d = (seen.amplitude(n + k) for k in range(4))
    below = b * b - a * c
    if below.contains(0):
        raise NeedsPrecision("amplitudes that two poles do not tell apart")
    s, q = (b * c - a * d) / below, (c * c - b * d) / below
    apart = s * s - 4 * q
    root = (-apart).sqrt() * acb(0, 1) if apart.real < 0 else apart.sqrt()  # away from the cut
    plus, minus = (s + root) / 2, (s - root) / 2
    return Modulus((plus if abs(plus) > abs(minus) else minus,), ())


def _verdict(claimed: arb, measured: list[arb], point: Point, first: int) -> Finding | None:
    gaps = [abs(claimed - x) for x in measured]
    moved = [abs(b - a) for a, b in zip(measured, measured[1:], strict=False)]
    shown = ", ".join(rounded(g, 3) for g in gaps)
    said = f"distance to what four amplitudes from n = {first}, ..., {first << DOUBLINGS} on give: {shown}"
    small = power_of_ten(-DIGITS + 2)
    if not all(b < a * FALLS or b < small for a, b in zip(moved, moved[1:], strict=False)):
        return None
    if gaps[-1] < NEAR and all(b < a * FALLS or b < small for a, b in zip(gaps, gaps[1:], strict=False)):
        return Finding("agrees", ROAD, points=1, evidence=said)
    if gaps[-1] > small and gaps[-1] > SETTLED * moved[-1]:
        return Finding("refuted", ROAD, points=1, point=point.text(), evidence=said)
    return None
