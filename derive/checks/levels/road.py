"""Road "enclosure" for levels: claimed energies, rates, weights and multiplicities against certified eigenvalues.

At each sample point the undetected step's eigenvalues on the bright space, or the slow ones of an imperfect detector,
are enclosed on a circle of small tau (`numerics/spectrum.py`); their Taylor coefficients are what energies (Re) and
rates (-2 Im) must be, order by order below the claim's own O(tau^k).  A user's claim speaks of the n-th bright level by
energy at tau = 0, or of all of them by a formula in k.  A derived one is laid beside the level whose energy at tau = 0
it names, whatever its number.
Dark levels: the multiplicity of a root of det(E - A) on range(Q), less the bright one if there is any.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from flint import ctx

from derive.checks.krylov import reach_pattern
from derive.checks.levels.arms import arm_of, level_points
from derive.checks.levels.compare import OPEN_ORDERS, PARTS, Disjoint, Measured, closed, compare, orders
from derive.checks.missed import missed_at
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.evaluate import Values
from derive.numerics.nullstep import perfected
from derive.numerics.spectrum import (
    Levels,
    bits_for_levels,
    enclose_levels,
    enclose_reached,
)
from derive.numerics.system import finite_space, system
from derive.problem.points import Point
from derive.problem.setting import Check, Family, Finite, Relation, Setting
from derive.problem.sized import sized
from derive.record.said import Claim, Finding

ROAD = "enclosure"
ATTEMPTS = 5
LARGEST = 130
"""Sites up to which the space reached from the detector is built densely."""


@dataclass
class Tally:
    """What one claim has met so far."""

    claim: Claim
    points: int = 0
    digits: int | None = None
    wide: str = ""
    refuted: tuple[Point, str] | None = None
    stopped: str = ""
    notes: set[str] = field(default_factory=set)

    @property
    def open(self) -> bool:
        return self.refuted is None and not self.stopped


def check_levels(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding a claim, on finite graphs and families at sampled sizes; what is measured is shared."""
    if not isinstance(setting.space, (Finite, Family)):
        return Seen()
    groups: dict[tuple[Relation, ...], list[Tally]] = {}
    for claim in claims:
        if claim.quantity is not None and claim.quantity.name in PARTS:
            groups.setdefault(claim.assume, []).append(Tally(claim))
    findings: dict[str, Finding] = {}
    for assume, tallies in groups.items():
        findings.update(_check_group(setting, assume, tallies, claims, effort))
    return Seen({c.id: findings[c.id] for c in claims if c.id in findings})


def _check_group(
    setting: Setting, assume: tuple[Relation, ...], tallies: list[Tally], claims: Sequence[Claim], effort: Check
) -> dict[str, Finding]:
    order = max(1, *(orders(t.claim) for t in tallies))
    arm = next((a for t in tallies if (a := arm_of(t.claim)) is not None), None)
    try:
        for point in level_points(setting, effort, assume, arm):
            _meet(setting, point, order, [t for t in tallies if t.open], claims, effort.digits)
    except NotCovered as reason:
        return {t.claim.id: Finding("untested", ROAD, evidence=f"{reason}.") for t in tallies}
    return {t.claim.id: _finding(t) for t in tallies}


def _finding(tally: Tally) -> Finding:
    if tally.refuted is not None:
        point, said = tally.refuted
        return Finding("refuted", ROAD, points=tally.points, point=point.text(), evidence=said)
    if tally.stopped:
        return Finding("untested", ROAD, evidence=tally.stopped)
    if tally.wide:
        return Finding("undecided", ROAD, tally.digits, tally.points or None, evidence=tally.wide)
    if not tally.points:
        return Finding("untested", ROAD, evidence="No sampled point met the assumptions.")
    if not closed(tally.claim):
        said = f"The coefficients of tau^0 to tau^{OPEN_ORDERS - 1} agree; the claim is about all of them."
        return Finding("undecided", ROAD, tally.digits, tally.points, evidence=said)
    return Finding("agrees", ROAD, tally.digits, tally.points, evidence=" ".join(sorted(tally.notes)))


# -- one point


def _meet(
    setting: Setting, point: Point, order: int, tallies: list[Tally], claims: Sequence[Claim], digits: int
) -> None:
    still = point.without("tau")
    try:
        at = sized(setting, still.mapping())
    except OutsideValidity as reason:
        for tally in tallies:
            tally.notes.add(f"A point was left out: {reason}.")
        return
    if finite_space(at).size > LARGEST:
        if isinstance(setting.space, Family):
            for tally in tallies:
                tally.notes.add(f"A point was left out: levels are measured on up to {LARGEST} sites.")
            return
        raise NotCovered(f"levels are measured on up to {LARGEST} sites")
    pattern = reach_pattern(perfected(at))
    pending = tallies
    bits = bits_for_levels(order, digits, len(pattern))
    for attempt in range(ATTEMPTS):
        if not pending:
            return
        with ctx.workprec(bits << attempt):
            pending = _attempt(at, still, pattern, order, pending, claims, digits)
    for tally in pending:
        tally.wide = tally.wide or f"Balls stay too wide for {digits} digits, or levels coincide."


def _attempt(
    setting: Setting, point: Point, pattern: list[bool], order: int, tallies: list[Tally], claims: Sequence[Claim],
    digits: int,
) -> list[Tally]:
    try:
        values = Values.at(point.mapping())
        s, q = system(perfected(setting), values), missed_at(setting, values)
        reached = enclose_reached(s, pattern)
        levels = enclose_levels(reached, order, digits, q) if reached.bright else Levels((), ())
    except NeedsPrecision:
        return tallies
    measured = Measured(setting, values, s, reached, levels, order, digits, q)
    return [t for t in tallies if not _settled(t, measured, point, claims)]


def _settled(tally: Tally, measured: Measured, point: Point, claims: Sequence[Claim]) -> bool:
    """Whether the claim is settled at this point."""
    try:
        digits = compare(tally.claim, measured, claims)
    except Disjoint as gap:
        tally.points += 1
        tally.refuted = (point, str(gap))
        return True
    except NeedsPrecision:
        return False
    except NotCovered as reason:
        tally.stopped = f"{reason}."
        return True
    except OutsideValidity as reason:
        tally.notes.add(f"A point was left out: {reason}.")
        return True
    tally.points += 1
    found = [d for d in (tally.digits, digits) if d is not None]
    tally.digits = min(found) if found else None
    return True
