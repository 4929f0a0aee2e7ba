"""The classical walk, measured: matrices of rates or of steps in balls, exponentiated, raised to powers, solved.

    continuous   S(t) = 1^T exp(-L t) p_0,  density 1^T L exp(-L t) p_0,  mean 1^T L^-1 p_0,   rates |H_xy|
    discrete     S_n = 1^T W^n p_0,  density S_(n-1) - S_n,  mean 1^T (1 - W)^-1 p_0,           W_xy = 1/deg y

Claims that hold exactly (road "enclosure") at a few times and points.  A late law (road "trend") at doubled times:
agrees where |law/S - 1| falls to 0.8 or less at each of the last three doublings or below 10^-digits; refuted where it
does not fall and stays above 1/1000.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import acb, acb_mat, arb, ctx, fmpq

from derive.checks.classical.plot import classical_plot, plot_times
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, constant, free_letters, number
from derive.numerics.decimals import rounded, spoken
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import digits_of, power_of_ten, upper
from derive.problem.points import Point
from derive.problem.setting import Check, Family, Finite, Setting
from derive.problem.sized import sized
from derive.record.said import Claim, Finding, Plot

QUANTITIES = ("classical survival", "classical density", "classical mean", "classical mean of steps")
LARGEST = 120
TIMES = (Fraction(1, 3), Fraction(1), Fraction(5, 2), Fraction(12))
STEPS = (1, 2, 3, 4, 9, 30)
DOUBLINGS = 14


@dataclass
class Walk:
    """L or W off the detector, p_0, and the largest rate of leaving a site."""

    matrix: acb_mat
    start: acb_mat
    discrete: bool
    point: Point
    speed: Fraction

    def survival(self, clock: Fraction | arb) -> arb:
        return _total(self._moved(clock))

    def density(self, clock: Fraction | arb) -> arb:
        if self.discrete:
            return self.survival(clock - 1) - self.survival(clock)
        return _total(self.matrix * self._moved(clock))

    def mean(self) -> arb:
        n = int(self.matrix.nrows())
        left = self.matrix
        if self.discrete:
            left = acb_mat(n, n, [acb(1 if i == j else 0) for i in range(n) for j in range(n)]) - left
        try:
            return _total(left.solve(self.start))
        except ZeroDivisionError as fault:
            raise NeedsPrecision("a walk that may never be caught") from fault

    def _moved(self, clock: Fraction | arb) -> acb_mat:
        """p at a time, or after so many steps."""
        if not isinstance(clock, Fraction):
            return (self.matrix * acb(-clock)).exp() * self.start
        if self.discrete:
            return (self.matrix ** int(clock)) * self.start
        return (self.matrix * acb(-_ball(clock))).exp() * self.start


def check_classical(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Claims that hold exactly."""
    return _each(setting, claims, effort, "exactly", "enclosure")


def check_classical_late(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Claims that hold at late times."""
    seen = _each(setting, claims, effort, "limit", "trend")
    drawn = any(c.id == "classical.law" and not is_discrete(c) for c in claims)
    return Seen(seen.findings, plots=_figure(setting, effort) if drawn else ())


def _figure(setting: Setting, effort: Check) -> tuple[Plot, ...]:
    """Both walks at the first sampled point."""
    for point in sample_points(setting, effort):
        with ctx.workprec(400):
            try:
                walk = walk_at(setting, point.without("tau"), False)
            except OutsideValidity:
                continue
            values = {t: walk.survival(t) for t in plot_times(walk.speed)}
        return classical_plot(setting, point, values, effort.digits)
    return ()


def _each(setting: Setting, claims: Sequence[Claim], effort: Check, kind: str, road: str) -> Seen:
    found: dict[str, Finding] = {}
    if not isinstance(setting.space, (Finite, Family)):
        return Seen()
    for claim in claims:
        if claim.quantity is not None and claim.quantity.name in QUANTITIES and claim.kind.name == kind:
            try:
                found[claim.id] = _judged(setting, claim, effort, road)
            except (NotCovered, OutsideValidity) as reason:
                found[claim.id] = Finding("untested", road, evidence=f"{reason}.")
            except NeedsPrecision as reason:
                found[claim.id] = Finding("undecided", road, evidence=f"{reason}.")
    return Seen(found)


def _judged(setting: Setting, claim: Claim, effort: Check, road: str) -> Finding:
    if not isinstance(claim.value, Formula):
        raise NotCovered("a classical walk is claimed by formulas")
    found: list[Finding] = []
    points = sample_points(setting, effort, claim.assume)
    for point in points if road == "enclosure" else points[:2]:
        with ctx.workprec(400 + 8 * effort.digits):
            try:
                walk = walk_at(setting, point.without("tau"), is_discrete(claim))
            except OutsideValidity:
                continue
            judge = _exactly if road == "enclosure" else _late
            one = judge(claim, claim.value, walk, effort.digits)
        if one.verdict != "agrees":
            return one
        found.append(one)
    if not found:
        return Finding("untested", road, evidence="No sampled point met the assumptions.")
    digits = [f.digits for f in found if f.digits is not None]
    return Finding("agrees", road, min(digits, default=None), len(found), evidence=found[0].evidence)


def is_discrete(claim: Claim) -> bool:
    """By the quantity, or by the letter that a law is written in."""
    if claim.quantity is not None and claim.quantity.name.startswith("classical mean"):
        return claim.quantity.name != "classical mean"
    return isinstance(claim.value, Formula) and "n" in free_letters(claim.value)


def walk_at(setting: Setting, point: Point, discrete: bool) -> Walk:
    """The walk at a point without tau, at the working precision."""
    at = sized(setting, point.mapping())
    space = at.space
    if not isinstance(space, Finite) or space.size > LARGEST:
        raise NotCovered(f"a classical walk is measured on up to {LARGEST} sites")
    values = Values.at(point.mapping())
    watched = {x for w in at.detectors for v in w.vectors for x, _ in v}
    rest = [x for x in range(space.size) if x not in watched]
    place = {x: n for n, x in enumerate(rest)}
    matrix = acb_mat(len(rest), len(rest))
    speed = arb(1)
    for y in range(space.size):
        out = [(x, acb(abs(enclose(f, values)))) for x, f in space.rows[y] if x != y]
        total = sum((rate.real for _, rate in out), arb(0))
        speed = speed.max(total)
        if y in place and not discrete:
            matrix[place[y], place[y]] = acb(total)
        for x, rate in out:
            if y in place and x in place:
                matrix[place[x], place[y]] = acb(arb(1) / len(out)) if discrete else -rate
    start = acb_mat(len(rest), 1)
    for weight, v in at.start.mixture if at.start else ():
        if len(v) != 1:
            raise NotCovered("a classical walk starts on sites, not in superpositions")
        if v[0][0] in place:
            start[place[v[0][0]], 0] = start[place[v[0][0]], 0] + enclose(weight, values)
    return Walk(matrix, start, discrete, point, Fraction(int(float(upper(speed))) + 1))


def _total(v: acb_mat) -> arb:
    total = arb(0)
    for x in range(int(v.nrows())):
        total += v[x, 0].real
    return total


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))


def _said(f: Formula, walk: Walk, clock: Fraction) -> acb:
    put = walk.point.mapping() | {"n" if walk.discrete else "t": number(clock)}
    return enclose(f, Values.at(put))


def _exactly(claim: Claim, value: Formula, walk: Walk, digits: int) -> Finding:
    name = claim.quantity.name if claim.quantity else ""
    clocks = [Fraction(n) for n in STEPS] if walk.discrete else [t / walk.speed for t in TIMES]
    shared: list[int] = []
    for clock in [Fraction(0)] if name.startswith("classical mean") else clocks:
        seen = {"classical survival": walk.survival, "classical density": walk.density}.get(name)
        measured = walk.mean() if seen is None else seen(clock)
        gap = _said(value, walk, clock) - measured
        if not gap.contains(0):
            what = "the mean" if seen is None else f"{name} at {'n' if walk.discrete else 't'} = {clock}"
            evidence = f"{what}: claimed {spoken(gap + measured)}, measured {spoken(acb(measured))}"
            return Finding("refuted", "enclosure", points=1, point=walk.point.text(), evidence=evidence)
        width = upper(acb(gap.real.rad())) + upper(acb(gap.imag.rad()))
        if not width <= power_of_ten(-digits) * (1 + abs(measured)):
            raise NeedsPrecision("balls stay too wide")
        shared += [d for d in (digits_of(width, 1 + abs(measured)),) if d is not None]
    return Finding("agrees", "enclosure", min(shared, default=None), 1)


def _late(claim: Claim, value: Formula, walk: Walk, digits: int) -> Finding:
    clock = "n" if walk.discrete else "t"
    if claim.kind.toward != ((clock, constant("infinity")),):
        raise NotCovered(f"a classical law is compared as {clock} -> infinity")
    errors: list[arb] = []
    for k in range(DOUBLINGS):
        at = Fraction(2**k) if walk.discrete else Fraction(2**k) / walk.speed
        seen = walk.survival(at)
        if not seen > 0 or seen < power_of_ten(-90):
            break
        errors.append(abs(_said(value, walk, at).real / seen - 1))
        if errors[-1] < power_of_ten(-digits):
            break
    said = f"|law/S - 1| at doubled times: {', '.join(rounded(e, 3) for e in errors)}"
    if len(errors) < 4 and not (errors and errors[-1] < power_of_ten(-digits)):
        return Finding("undecided", "trend", points=1, evidence=said)
    if errors[-1] < power_of_ten(-digits) or all(
        b / a < arb(4) / 5 for a, b in zip(errors[-4:], errors[-3:], strict=False)
    ):
        return Finding("agrees", "trend", points=1, evidence=said)
    if errors[-1] > arb(1) / 1000 and errors[-1] > errors[-2] * arb(19) / 20:
        return Finding("refuted", "trend", points=1, point=walk.point.text(), evidence=said)
    return Finding("undecided", "trend", points=1, evidence=said)
