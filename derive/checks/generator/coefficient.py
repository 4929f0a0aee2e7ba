"""Road "coefficient" for the generator: claimed entries against the contour's enclosures, one by one.

The measurement knows the setting and nothing else.  At each sample point

    G_0, ..., G_K   are enclosed from samples of log(Q U(tau) Q) on the ball of sites of radius K + 1 around the
                    detector (G_k, k >= 1, vanishes further than k steps away: an entry claimed there is compared
                    with 0), G_0 also as Q H Q on all sites;
    scale           h^(k+1) for G_k, h a bound on ||H - E0|| on that ball: what "narrow" refers to.

Disjoint balls refute, with the point, the entry and both numbers.  Balls that overlap and differ by less than
10^-digits of the scale agree; the precision is raised until they do, `ATTEMPTS` times, then it is undecided.
A ball of more sites than dense matrices can serve is probed: G_k v for fixed vectors v; beyond that, untested.
A claim about all of G(tau) that no coefficient refutes is compared at sampled tau (`closed.py`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from flint import ctx

from derive.checks.generator.closed import check_closed
from derive.checks.generator.measured import Measured, lay_beside, measure, suitable_circle
from derive.checks.reading import Reading, read_claim
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.contour import Circle
from derive.numerics.evaluate import Values
from derive.numerics.points import sample_points
from derive.numerics.system import finite_space, watched_sites
from derive.problem.balls import ball
from derive.problem.points import Point
from derive.problem.setting import Check, Relation, Setting
from derive.record.said import Claim, Finding

ROAD = "coefficient"
ATTEMPTS = 3
SPARE_DIGITS = 4


@dataclass
class Tally:
    """What one claim has met so far, over all points."""

    reading: Reading
    points: int = 0
    digits: int | None = None
    wide: str = ""
    stopped: str = ""
    refuted: tuple[Point, str] | None = None
    notes: dict[str, None] = field(default_factory=dict)

    @property
    def open(self) -> bool:
        return self.refuted is None and not self.stopped

    def afresh(self) -> Tally:
        return Tally(self.reading)

    def lower(self, digits: int | None) -> None:
        """The worst agreement counts."""
        if digits is not None:
            self.digits = digits if self.digits is None else min(digits, self.digits)


def check_coefficient(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about the quantity "generator", by claim id.

    Claims with the same assumptions share their points and what is measured there.
    """
    mine = [c for c in claims if c.quantity is not None and c.quantity.name == "generator"]
    findings: dict[str, Finding] = {}
    groups: dict[tuple[Relation, ...], list[Tally]] = {}
    for claim in mine:
        try:
            tally = Tally(read_claim(claim))
        except NotCovered as reason:
            findings[claim.id] = _untested(str(reason))
        else:
            groups.setdefault(claim.assume, []).append(tally)
    for assume, tallies in groups.items():
        findings.update(_check_group(setting, assume, tallies, effort))
    return {claim.id: findings[claim.id] for claim in mine}


def _untested(reason: str) -> Finding:
    return Finding("untested", ROAD, evidence=reason)


def _check_group(
    setting: Setting, assume: tuple[Relation, ...], tallies: list[Tally], effort: Check
) -> dict[str, Finding]:
    """Claims that share their points.  If the highest order cannot be measured, the others still are."""
    order = max(t.reading.orders[-1] for t in tallies)
    try:
        sites = ball(finite_space(setting).rows, watched_sites(setting), order + 1)
        for point in sample_points(setting, effort, assume):
            _meet(setting, point, sites, order, effort.digits, [t for t in tallies if t.open])
    except NotCovered as reason:
        highest = {t.reading.claim.id: _untested(str(reason)) for t in tallies if t.reading.orders[-1] == order}
        lower = [t.afresh() for t in tallies if t.reading.orders[-1] < order]
        return highest | (_check_group(setting, assume, lower, effort) if lower else {})
    found = {t.reading.claim.id: _finding(t) for t in tallies}
    for tally in tallies:
        if not tally.reading.closed and found[tally.reading.claim.id].verdict == "undecided" and not tally.wide:
            found[tally.reading.claim.id] = check_closed(setting, tally.reading.claim, effort)
    return found


def _meet(
    setting: Setting, point: Point, sites: tuple[int, ...], order: int, digits: int, tallies: list[Tally]
) -> None:
    """All claims at one point, at higher precision for those whose balls stay too wide."""
    pending = tallies
    for attempt in range(ATTEMPTS):
        if not pending:
            return
        circle = suitable_circle(order, digits + (SPARE_DIGITS << 3 * attempt), len(sites))
        with ctx.workprec(circle.bits << attempt):
            pending = _attempt(setting, point, sites, order, circle, digits, pending)
    for tally in pending:
        tally.wide = tally.wide or f"the balls stay too wide for {digits} digits"


def _attempt(
    setting: Setting,
    point: Point,
    sites: tuple[int, ...],
    order: int,
    circle: Circle,
    digits: int,
    tallies: list[Tally],
) -> list[Tally]:
    """The claims that this precision did not settle."""
    try:
        measured = measure(setting, Values.at(point.mapping()), sites, order, circle)
    except NeedsPrecision:
        return tallies
    except OutsideValidity as reason:
        for tally in tallies:
            tally.notes[f"a point was left out: {reason}"] = None
        return []
    return [t for t in tallies if not _settled(t, point, measured, digits)]


def _settled(tally: Tally, point: Point, measured: Measured, digits: int) -> bool:
    """Whether the claim is decided at this point; what was found goes into the tally."""
    try:
        gauge = lay_beside(tally.reading, measured, digits)
    except NeedsPrecision:
        return False
    except OutsideValidity as reason:
        tally.notes[f"a point was left out: {reason}"] = None
        return True
    except NotCovered as reason:
        tally.stopped = str(reason)
        return True
    if gauge.misses:
        tally.refuted = (point.without("tau"), gauge.first_miss())
    elif gauge.wide:
        return False
    tally.points += 1
    tally.lower(gauge.shared)
    tally.notes[measured.note] = None
    return True


def _finding(tally: Tally) -> Finding:
    """The tally as a record."""
    if tally.refuted is not None:
        point, text = tally.refuted
        return Finding("refuted", ROAD, points=tally.points, point=point.text(), evidence=text)
    if tally.stopped:
        return _untested(tally.stopped)
    if tally.wide:
        return Finding("undecided", ROAD, tally.digits, tally.points, evidence=tally.wide)
    if not tally.points:
        why = next(iter(tally.notes), "no sampled point met the assumptions")
        return Finding("untested", ROAD, evidence=why)
    if not tally.reading.closed:
        last = tally.reading.orders[-1]
        text = f"the coefficients of tau^0 to tau^{last} agree; the claim is about all of them"
        return Finding("undecided", ROAD, tally.digits, tally.points, evidence=text)
    return Finding("agrees", ROAD, tally.digits, tally.points, evidence="; ".join(tally.notes))
