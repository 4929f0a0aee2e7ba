"""Total detection probability on an infinite lattice: added up ask by ask, and carried on to infinity.

    P = sum_n F_n,     S_N = F_1 + ... + F_N  <=  P

F_n comes from the lattice by division of series (`road.py`); no integral over the band is taken.  S_N
is a bound: a claim that is surely below it is refuted.  The tail is taken off by solving for the limit of S_n in the
powers of 1/n that a band with two edges leaves, at two scales; the claim agrees to the digits that both confirm.

A claim as j -> infinity, j the letter of the start's distance, is followed over j = 3, 6, 12, 24 (`trend.py`).
A claim up to O(tau^k) is followed as tau is halved: the gap must fall by 2^(k - 0.1) a halving, on average over three.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from math import log2

from flint import arb, ctx

from derive.checks.asymptotics.road import FIRST_SCALE, MOST_ASKS, experiment, late_points, real_part, whole_turns
from derive.checks.seen import Seen
from derive.checks.trend import DOUBLINGS, FLAT_BELOW, SHORT_OF, Course, verdict_of
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU, Formula, constant, number, times
from derive.numerics.acceleration import approx_limit
from derive.numerics.decimals import with_radius
from derive.numerics.evaluate import Values, enclose
from derive.numerics.lattice import waves
from derive.numerics.precision import bits_for, digits_of
from derive.problem.points import Point
from derive.problem.setting import Check, Lattice, Setting
from derive.record.said import Claim, Finding, Number

ROAD = "trend"
NAME = "total detection probability"
INFINITY = constant("infinity")
SPARE = 24
"""Digits beyond those asked for, which the equations for the limit eat."""
LEAST_DIGITS = 9
HALVINGS = 3
NEAREST = 3
"""The first of the distances, doubled again and again."""
SMALL = Fraction(1, 5)
"""a at the first of the smaller and smaller intervals, at most."""
RADIANS = 60
"""a n at the scale from which the sums are carried on."""
CLAIM_DIGITS = 17


def check_total(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Findings for the total probability on an infinite lattice; nothing elsewhere."""
    mine = [c for c in claims if c.quantity is not None and c.quantity.name == NAME]
    if not isinstance(setting.space, Lattice):
        return Seen()
    limits: dict[Point, tuple[arb, arb, arb]] = {}
    findings, numbers = {}, {}
    for claim in mine:
        findings[claim.id] = _finding(setting, claim, effort, limits)
        if claim.kind.name == "exactly" and limits:
            numbers[claim.id] = tuple(_number(point, fine, doubt) for point, (_, fine, doubt) in limits.items())
    return Seen(findings, numbers)


Limits = dict[Point, tuple[arb, arb, arb]]
"""point -> (S_N, limit, how far two limits differ)."""


def _finding(setting: Setting, claim: Claim, effort: Check, limits: Limits) -> Finding:
    if not isinstance(claim.value, Formula) or not _is_followed(setting, claim):
        return Finding("untested", ROAD, evidence="a total probability is claimed exactly or up to O(...)")
    worst: int | None = None
    seen, left_out = 0, ""
    try:
        for point in late_points(setting, effort, claim.assume):
            try:
                verdict, digits, evidence = _at_point(setting, claim, claim.value, point, limits)
            except OutsideValidity as reason:
                left_out = f"a point was left out: {reason}"
                continue
            seen += 1
            if verdict != "agrees":
                where = point.text() if verdict == "refuted" else ()
                return Finding(verdict, ROAD, digits, seen, where, evidence)
            worst = digits if worst is None else min(worst, digits)
            if claim.kind.name != "exactly":
                break
    except NotCovered as reason:
        return Finding("untested", ROAD, evidence=str(reason))
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, evidence=str(reason))
    if not seen:
        return Finding("untested", ROAD, evidence=left_out or "no sampled point met the assumptions")
    return Finding("agrees", ROAD, worst or None, seen, evidence=evidence)


def _at_point(setting: Setting, claim: Claim, value: Formula, point: Point, limits: Limits) -> tuple[str, int, str]:
    if claim.kind.name == "order":
        return _order_at(setting, value, claim.kind.order or 1, point)
    if claim.kind.name == "limit":
        return _far_at(setting, claim, value, point)
    if point not in limits:
        limits[point] = measured_total(setting, point)
    below, fine, doubt = limits[point]
    with ctx.workprec(bits_for(CLAIM_DIGITS)):
        claimed = real_part(enclose(value, Values.at(point.mapping())))
    miss = abs(claimed - fine)
    shared = digits_of(miss, arb(1)) or 0
    said = f"claimed {float(claimed.mid()):.12g}, added up and carried on {float(fine.mid()):.12g}"
    if claimed < below:
        return "refuted", shared, f"{said}; below what is detected in finitely many asks"
    if miss < 8 * doubt + arb(10) ** (-SPARE // 2) and doubt < arb(10) ** -LEAST_DIGITS:
        return "agrees", shared, said
    refuted = doubt < arb(10) ** -LEAST_DIGITS and miss > 1000 * doubt + arb(10) ** -LEAST_DIGITS
    return ("refuted" if refuted else "undecided"), shared, said


def _is_followed(setting: Setting, claim: Claim) -> bool:
    """Exact claims, expansions in tau, and limits in the distance of the start."""
    if claim.kind.name != "limit":
        return claim.kind.name in ("exactly", "order")
    far = setting.start.distance if setting.start is not None else None
    return far is not None and far.head == "letter" and claim.kind.toward == ((far.args[0], INFINITY),)


def _far_at(setting: Setting, claim: Claim, value: Formula, point: Point) -> tuple[str, int, str]:
    """The claim against what is measured from further and further away."""
    name = claim.kind.toward[0][0]
    gaps, sizes = [], []
    for j in range(DOUBLINGS + 1):
        there = _put(point, name, number(NEAREST << j))
        _, fine, doubt = measured_total(setting, there)
        with ctx.workprec(bits_for(CLAIM_DIGITS)):
            gap = abs(real_part(enclose(value, Values.at(there.mapping()))) - fine)
        if not gap > 100 * doubt:
            raise NeedsPrecision("the claim is closer than the measurement can tell")
        gaps.append(gap)
        sizes.append(fine)
    verdict, said = verdict_of(Course(NEAREST, tuple(gaps), tuple(sizes), name), claim.kind)
    return verdict, 0, said


def measured_total(setting: Setting, point: Point) -> tuple[arb, arb, arb]:
    """(S_N, the limit of S_n from n around N, how far it is from the limit found around N/2)."""
    with ctx.workprec(bits_for(SPARE)):
        w = waves(setting, Values.at(point.mapping()))
    N = FIRST_SCALE
    reach = max(k for _, ks in (*w.u, *w.v) for k in ks)
    while max(RADIANS, 2 * reach * reach) / float(w.a.mid()) > N:
        N *= 2
    if 2 * N > MOST_ASKS:
        raise OutsideValidity("the interval is so short that the sum takes more asks than are measured")
    run = experiment(setting, point, SPARE + 10)
    run.up_to(2 * N)
    with ctx.workprec(bits_for(2 * SPARE)):
        a = waves(setting, Values.at(point.mapping())).a
        sums, total = [arb(0)], arb(0)
        for c in run.clicks(2 * N)[1:]:
            total += c
            sums.append(total)
        turn = 2 * a / arb.pi()
        real_turn = (turn - round(float(turn.mid()))).contains(0) or whole_turns(w) is not None
        coarse, fine = (approx_limit(sums, a, scale, real_turn) for scale in (N // 2, N))
    return sums[-1], fine, abs(coarse - fine)


def _order_at(setting: Setting, value: Formula, order: int, point: Point) -> tuple[str, int, str]:
    """The gap between claim and measurement at smaller and smaller tau."""
    with ctx.workprec(bits_for(SPARE)):
        w = waves(setting, Values.at(point.mapping()))
        shrink = Fraction(1)
        while float(w.a.mid()) * shrink > SMALL:
            shrink /= 2
    gaps = []
    for j in range(HALVINGS + 1):
        there = _at_tau(point, shrink / 2**j)
        _, fine, doubt = measured_total(_free(setting), there)
        with ctx.workprec(bits_for(SPARE)):
            gap = abs(real_part(enclose(value, Values.at(there.mapping()))) - fine)
        if not gap > 100 * doubt:
            raise NeedsPrecision("the claim is closer than the measurement can tell")
        gaps.append(float(gap.mid()))
    slope = sum(log2(a / b) for a, b in zip(gaps, gaps[1:], strict=False)) / HALVINGS
    said = f"the difference falls like tau^{slope:.2f}, claimed tau^{order}"
    if slope >= order - SHORT_OF:
        return "agrees", 0, said
    return ("refuted" if slope <= order - FLAT_BELOW else "undecided"), 0, said


def _at_tau(point: Point, shrink: Fraction) -> Point:
    return _put(point, "tau", times(number(shrink), point.mapping()["tau"]))


def _put(point: Point, name: str, value: Formula) -> Point:
    return Point(tuple({**point.mapping(), name: value}.items()))


def _free(setting: Setting) -> Setting:
    """The setting with its interval a letter again: an order claim speaks of every small tau."""
    return replace(setting, interval=replace(setting.interval, length=TAU))


def _number(point: Point, value: arb, doubt: arb) -> Number:
    shown, radius = with_radius(arb(value.mid(), (8 * doubt).upper()), 20)
    return Number(shown, radius, point.text(), ROAD)
