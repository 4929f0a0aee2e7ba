"""Claims about the radius of convergence, by two roads that share the small matrix H' and nothing else.

enclosure   the radius from certified lists of zeros and meetings (`numerics/radius.py`); the claim has to share
            `digits` digits with it.;
            beyond `CERTIFIED` bright dimensions only bounds: undecided inside, refuted outside
trend       the largest |G_k|^(1/k) of orders 79-81 times the claimed radius is nearer to 1 than that of orders 39-41,
            and within 6 % or closing in as log(k)/k does; refuted where it stays away and hardly moves

A derived claim states an equation: its number is what the first road certifies, and comes back in `Seen.values`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from flint import arb

from derive.checks.seen import Seen
from derive.checks.validity.sectors import CERTIFIED, Parted, enclose_sectors, parted
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, constant, letter, plus
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, power_of_ten, retry
from derive.numerics.radius import Radius, bits_for_radius, bound_radius, enclose_radius
from derive.numerics.radius_trend import EARLY, LATE, SPARE_BITS, enclose_growth
from derive.numerics.system import system
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Number, Value

RADIUS, KIND = "radius of convergence", "validity.radius_kind"
QUICK = 5
"""Bright dimensions up to which every point is certified; above it, up to `CERTIFIED`, the first one (minutes)."""

MOST_BITS = 4000
TREND_DIGITS = 10
WITHIN, CLOSING = "0.06", "0.7"
"""Distance from 1 of the late ratio; or its part of the early one's: log(k)/k falls to 0.59 from k = 40 to 80."""


@dataclass
class _Tally:
    """One claim and what its points said."""

    claim: Claim
    points: int = 0
    refuted: tuple[Point, str] | None = None
    open: str = ""
    said: list[str] = field(default_factory=list)

    def finding(self, road: str, digits: int | None) -> Finding:
        if self.refuted is not None:
            return Finding("refuted", road, points=self.points, point=self.refuted[0].text(), evidence=self.refuted[1])
        if self.open:
            return Finding("undecided", road, points=self.points or None, evidence=self.open)
        if not self.points:
            return Finding("untested", road, evidence="no sampled point met the assumptions")
        return Finding("agrees", road, digits, self.points, evidence="; ".join(dict.fromkeys(self.said)))


def about_radius(claims: Sequence[Claim]) -> list[Claim]:
    """The claims that the two roads here can see."""
    return [c for c in claims if c.id == KIND or (c.quantity is not None and c.quantity.name == RADIUS)]


def distinct_points(setting: Setting, effort: Check, claim: Claim) -> list[Point]:
    """Sample points without tau, each once."""
    points = [p.without("tau") for p in sample_points(setting, effort, claim.assume)]
    return list(dict.fromkeys(points))


def check_radius(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Road "enclosure"."""
    findings: dict[str, Finding] = {}
    numbers: dict[str, list[Number]] = {}
    values: dict[str, Value] = {}
    known: dict[Point, Radius | tuple[arb, arb] | None] = {}
    for claim in about_radius(claims):
        tally = _Tally(claim)
        try:
            for n, point in enumerate(distinct_points(setting, effort, claim)):
                if n and _is_slow(setting, point):
                    break
                if point not in known:
                    known[point] = _radius_at(setting, point, effort.digits)
                _compare(tally, point, known[point], effort.digits)
                number = _number(claim, point, known[point], effort.digits)
                if number is not None:
                    numbers.setdefault(claim.id, []).append(number)
                if n == 0 and claim.origin == "derived":
                    values.update(_value(claim, number, known[point]))
        except (NotCovered, OutsideValidity) as reason:
            findings[claim.id] = Finding("untested", "enclosure", evidence=str(reason))
            continue
        findings[claim.id] = tally.finding("enclosure", effort.digits)
    return Seen(findings, {k: tuple(v) for k, v in numbers.items()}, values=values)


def _is_slow(setting: Setting, point: Point) -> bool:
    try:
        return parted(setting, point).bright > QUICK
    except NotCovered:
        return True


def _radius_at(setting: Setting, point: Point, digits: int) -> Radius | tuple[arb, arb] | None:
    """Certified; or (low, high) where that is all that is offered; None: no singularity at all."""
    bits = bits_for_radius(digits)
    try:
        parts = parted(setting, point)
        return retry(lambda working: _certified(setting, point, parts, digits, bits), 2 * bits + 300, 4 * bits + 600)
    except (NotCovered, NeedsPrecision):
        return retry(lambda working: _bounded(setting, point), 400, MOST_BITS)


def _certified(setting: Setting, point: Point, parts: Parted, digits: int, bits: int) -> Radius | None:
    return enclose_radius(enclose_sectors(setting, point, parts), digits, bits)


def _bounded(setting: Setting, point: Point) -> tuple[arb, arb]:
    return bound_radius(system(setting, Values.at(point.mapping())), TREND_DIGITS, 200)


def _compare(tally: _Tally, point: Point, found: Radius | tuple[arb, arb] | None, digits: int) -> None:
    claim = tally.claim
    tally.points += 1
    if isinstance(found, tuple):
        _compare_bounds(tally, point, found)
    elif found is None:
        tally.said.append("the detector is coupled to nothing: the series ends with G_0")
        if claim.origin != "derived":
            tally.refuted = (point, "the series ends with G_0, and converges everywhere")
    else:
        tally.said.append(_told(found))
        if claim.origin != "derived" and claim.id != KIND:
            _compare_number(tally, point, found, digits)


def _told(found: Radius) -> str:
    if len(found.kinds) == 2:
        return "a zero of the return determinant and a meeting of eigenvalues at once"
    if found.kinds[0] == "zero":
        return "a zero of the return determinant, no meeting on different branches before it"
    return "a meeting of eigenvalues on different branches, nearer than any zero"


def _claimed(claim: Claim, point: Point) -> arb:
    if not isinstance(claim.value, Formula):
        raise NotCovered("a radius is claimed by a formula")
    return enclose_real(claim.value, Values.at(point.mapping()))


def _compare_number(tally: _Tally, point: Point, found: Radius, digits: int) -> None:
    x = retry(lambda bits: _claimed(tally.claim, point), bits_for(digits + 10), MOST_BITS)
    gap, kind = x - found.value, tally.claim.kind.name
    wrong = {"upper": gap < 0, "lower": gap > 0}.get(kind, abs(gap) > found.value * power_of_ten(-digits))
    if kind not in ("exactly", "upper", "lower"):
        raise NotCovered(f'"{tally.claim.kind.phrase}" is not decided for a radius')
    if wrong:
        what = f"the radius is {rounded(found.value, 12)}, by {_told(found)}; claimed is {rounded(x, 12)}"
        tally.refuted = tally.refuted or (point, what)


def _compare_bounds(tally: _Tally, point: Point, bounds: tuple[arb, arb]) -> None:
    low, high = bounds
    between = f"certified: at least {rounded(low, 8)}"
    if high.is_finite():
        between = f"certified: between {rounded(low, 8)} and {rounded(high, 8)}"
    if tally.claim.origin != "derived" and isinstance(tally.claim.value, Formula):
        x = _claimed(tally.claim, point)
        kind = tally.claim.kind.name
        if (x > high and kind != "upper") or (x < low and kind != "lower"):
            tally.refuted = tally.refuted or (point, f"{between}; claimed is {rounded(x, 8)}")
    tally.open = f"{between}; more than {CERTIFIED} bright dimensions, or a meeting that balls cannot judge"


def _number(claim: Claim, point: Point, found: Radius | tuple[arb, arb] | None, digits: int) -> Number | None:
    if found is None or claim.id == KIND:
        return None
    if isinstance(found, tuple):
        low, high = found
        if not high.is_finite():
            return None
        middle = (low + high) / 2
        value, radius = with_radius(middle.mid() + arb(0, ((high - low) / 2).upper()), 10)
    else:
        value, radius = with_radius(found.value, digits + 2)
    return Number(value, radius, point.text())


def _value(claim: Claim, number: Number | None, found: Radius | tuple[arb, arb] | None) -> dict[str, Value]:
    if claim.id == KIND:
        if isinstance(found, tuple):
            return {}
        return {claim.id: letter("none") if found is None else plus(*(letter(k) for k in found.kinds))}
    if number is None and isinstance(found, tuple):
        return {}
    return {claim.id: constant("infinity") if number is None else number}


def check_radius_trend(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Road "trend"."""
    findings: dict[str, Finding] = {}
    for claim in about_radius(claims):
        if claim.id == KIND or claim.kind.name != "exactly":
            continue
        try:
            points = distinct_points(setting, effort, claim)
            if points:
                findings[claim.id] = _trend_at(setting, claim, points[0])
        except (NotCovered, NeedsPrecision, OutsideValidity):
            continue
    return Seen(findings)


def _trend_at(setting: Setting, claim: Claim, point: Point) -> Finding:
    parts = parted(setting, point)
    if not parts.bright:
        raise NotCovered("no order beyond the first")
    growth = retry(lambda bits: enclose_growth(enclose_sectors(setting, point, parts)), SPARE_BITS + 80, MOST_BITS)
    if claim.origin == "derived":
        bits = bits_for_radius(TREND_DIGITS)
        found = retry(lambda working: _certified(setting, point, parts, TREND_DIGITS, bits), 2 * bits + 300, MOST_BITS)
        if found is None:
            raise NotCovered("no order beyond the first")
        x = found.value
    else:
        x = _claimed(claim, point)
    early, late = growth.early * x, growth.late * x
    text = (f"radius times the largest |G_k|^(1/k): {rounded(early, 5)} for k = {EARLY[0]}-{EARLY[-1]}, "
            f"{rounded(late, 5)} for k = {LATE[0]}-{LATE[-1]}")
    return Finding(_trend(early, late), "trend", points=1, point=point.text(), evidence=text)


def _trend(early: arb, late: arb) -> str:
    away, before = abs(late - 1), abs(early - 1)
    if away < before and (away < arb(WITHIN) or away < arb(CLOSING) * before):
        return "agrees"
    if away > arb(WITHIN) and abs(late - early) < away / 2:
        return "refuted"
    return "undecided"
