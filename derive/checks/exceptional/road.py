"""Roads for exceptional intervals.

exact       at the claimed interval the phases of the seen energies, found anew (`energies.py`), are as many fewer as is
            claimed, and some are: an identity between roots of unity, so an exact zero
enclosure   all 2 pi m/(E_j - E_k) with the seen energies in balls, ascending: the claimed
            one must be in its place; how many energies share a phase there is counted
trend       (tau - tau_c)^2 Var n by the experiment summed over all asks, at distances that halve: the ratio to the
            claimed divergence coefficient must go to 1, |ratio - 1| falling by 0.8 or less a halving, three times
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

from flint import acb, arb, ctx

from derive.checks.asked import formula_of, name_of
from derive.checks.detection.road import refuted
from derive.checks.energies import Seen as SeenEnergies
from derive.checks.energies import seen_energies
from derive.checks.gauge import Gauge
from derive.checks.seen import Seen
from derive.checks.summed import ATTEMPTS, SPARE_DIGITS, Experiment, Tally
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.exact.field import Element, Field
from derive.formula.tree import PI, TAU, Formula, number
from derive.numerics.decimals import spoken, with_radius
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, power_of_ten
from derive.problem.points import Point
from derive.problem.setting import Check, Interval, Setting, Start
from derive.problem.specialise import at_values
from derive.record.said import Claim, Finding, Number

COUNTED = ("merging levels", "drop of phases")
INTERVAL, DIVERGENCE = "exceptional interval", "divergence coefficient"
HALVINGS = 4
FIRST_DISTANCE = Fraction(1, 64)
FALLS = Fraction(8, 10)


def _mine(claims: Sequence[Claim], names: Sequence[str]) -> list[Claim]:
    known = [c for c in claims if c.quantity is not None and c.quantity.name in names]
    return [c for c in known if isinstance(c.value, Formula) and c.kind.name == "exactly"]


def _which(claim: Claim) -> int | None:
    n = claim.quantity.key("interval") if claim.quantity else None
    return n if isinstance(n, int) else None


def _intervals(claims: Sequence[Claim]) -> dict[int, Formula]:
    """Claimed exceptional intervals by their number."""
    mine = sorted(_mine(claims, (INTERVAL,)), key=lambda c: c.origin == "derived")  # a derived one has the last word
    found = [(_which(c), c.value) for c in mine]
    return {n: f for n, f in found if n is not None and isinstance(f, Formula)}


def _freed(setting: Setting) -> Setting:
    """The setting with a free interval, started on the detector's state, which every seen energy is part of."""
    start = Start(((number(1), setting.detectors[0].vectors[0]),))
    return replace(setting, interval=Interval(TAU), start=start)


# -- exact


def check_exceptional_exact(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Intervals, and the counts at claimed intervals."""
    known, found = _intervals(claims), {}
    for claim in _mine(claims, (INTERVAL, *COUNTED)):
        try:
            interval = claim.value if name_of(claim) == INTERVAL else known.get(_which(claim) or 0)
            if isinstance(interval, Formula):
                found[claim.id] = _exactly(setting, claim, interval, effort)
        except (NotCovered, ZeroDivisionError):
            continue
    return Seen(found)


def _exactly(setting: Setting, claim: Claim, interval: Formula, effort: Check) -> Finding:
    free = _freed(setting)
    apart = seen_energies(free)
    groups = groups_at(free, apart, interval)
    lost = sum(len(g) for g in groups if len(g) > 1)
    if name_of(claim) == INTERVAL:
        if lost and claim.origin != "derived":
            raise NotCovered("that phases merge there does not say which interval it is")
        if lost:
            return Finding("proved", "exact", evidence=f"{lost} seen energies lose their own phase there, exactly")
        return Finding("refuted", "exact", evidence="the phases of all seen energies are different there, exactly")
    truth = number(lost if name_of(claim) == "merging levels" else len(apart.p) - len(groups))
    claimed = formula_of(claim)
    field = Field.of([claimed, truth], setting.domains())
    residual = field.element(claimed) - field.element(truth)
    if not residual:
        return Finding("proved", "exact", evidence="counted by exact equality of phases")
    return refuted(setting, claim, effort, name_of(claim), field.formula(residual))


def groups_at(free: Setting, seen: SeenEnergies, interval: Formula) -> list[list[int]]:
    """Energies, by place, whose (E - E') tau/(2 pi) is a whole number."""
    field = Field.of([*seen.energies, interval, PI], free.domains())
    share = field.element(interval) / field.element(PI)
    turns = [(field.element(e) * share).scaled(Fraction(1, 2)) for e in seen.energies]
    groups: list[list[int]] = []
    for n, x in enumerate(turns):
        home = next((g for g in groups if _is_whole(x - turns[g[0]])), None)
        if home is None:
            groups.append([n])
        else:
            home.append(n)
    return groups


def _is_whole(x: Element) -> bool:
    if not x:
        return True
    if x.den is not None or not x.num.is_constant():
        return False
    return int(x.num.leading_coefficient().q) == 1


# -- enclosure


def check_exceptional(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """The claimed interval in its place, and counts, at the sample points."""
    found: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    for claim in _mine(claims, (INTERVAL, *COUNTED)):
        tally = Tally(claim)
        try:
            for point in sample_points(_freed(setting), effort, claim.assume):
                if tally.refuted is None:
                    _place(_freed(setting), claim, point, tally, effort.digits)
        except NotCovered as reason:
            tally.stopped = str(reason)
        evidence = "all meetings of phases enclosed, in order"
        finding = tally.finding()
        found[claim.id] = replace(finding, evidence=evidence) if finding.verdict == "agrees" else finding
        numbers[claim.id] = tuple(tally.numbers)
    return Seen(found, numbers)


def _place(free: Setting, claim: Claim, point: Point, tally: Tally, digits: int) -> None:
    energies = seen_energies(free).energies
    for attempt in range(ATTEMPTS):
        with ctx.workprec(bits_for(digits + SPARE_DIGITS, 128) << attempt):
            values = Values.at(point.mapping())
            gauge = Gauge(digits)
            try:
                levels = [enclose_real(e, values) for e in energies]
                measured = _measured(claim, levels)
                claimed = enclose(formula_of(claim), values)
            except NeedsPrecision:
                continue
            except OutsideValidity as reason:
                tally.stopped = f"a point was left out: {reason}"
                return
            gauge.compare(name_of(claim), claimed, acb(measured), arb(1).max(arb(abs(measured).upper())))
            if gauge.misses:
                tally.refuted = (point.without("tau"), gauge.first_miss())
            elif gauge.wide:
                continue
            tally.points += 1
            if gauge.shared is not None:
                tally.digits = gauge.shared if tally.digits is None else min(tally.digits, gauge.shared)
            tally.numbers.append(Number(*with_radius(measured, digits), point.without("tau").text(), "enclosure"))
            return
    tally.wide = f"the balls stay too wide for {digits} digits"


def _located(claim: Claim, levels: list[arb]) -> arb:
    """The interval that the claim speaks of, by its place."""
    n = _which(claim)
    if n is None:
        raise NotCovered("which exceptional interval is not said")
    return _nth(levels, n)


def _measured(claim: Claim, levels: list[arb]) -> arb:
    place = _located(claim, levels)
    if name_of(claim) == INTERVAL:
        return place
    groups: list[list[arb]] = []
    for e in levels:
        home = next((g for g in groups if ((e - g[0]) * place / (2 * arb.pi())).contains_integer()), None)
        if home is None:
            groups.append([e])
        else:
            home.append(e)
    if name_of(claim) == "merging levels":
        return arb(sum(len(g) for g in groups if len(g) > 1))
    return arb(len(levels) - len(groups))


def _nth(levels: list[arb], n: int) -> arb:
    """The n-th different 2 pi m/|E_j - E_k|, m = 1, 2, ..., ascending; overlapping balls count as one."""
    gaps = [abs(a - b) for k, a in enumerate(levels) for b in levels[k + 1 :]]
    if not gaps or any(g.contains(0) for g in gaps):
        raise NeedsPrecision("two seen energies are not told apart")
    found: list[arb] = []
    for g in gaps:
        found += [2 * arb.pi() * m / g for m in range(1, n + 1)]
    found.sort(key=lambda x: Fraction(*_ratio(x)))
    different: list[arb] = []
    for x in found:
        if not different or not x.overlaps(different[-1]):
            different.append(x)
    return different[n - 1]


def _ratio(x: arb) -> tuple[int, int]:
    mantissa, exponent = x.mid().man_exp()
    m, e = int(mantissa), int(exponent)
    return (m * 2**e, 1) if e >= 0 else (m, 2**-e)


# -- trend


def check_divergence(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """The claimed coefficient against the experiment, closer and closer to the interval."""
    found: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    for claim in _mine(claims, (DIVERGENCE,)):
        try:
            found[claim.id], numbers[claim.id] = _approach(setting, claim, effort)
        except (NotCovered, NeedsPrecision) as reason:
            found[claim.id] = Finding("untested", "trend", evidence=str(reason))
    return Seen(found, numbers)


def _approach(setting: Setting, claim: Claim, effort: Check) -> tuple[Finding, tuple[Number, ...]]:
    free = _freed(setting)
    points = sample_points(free, replace(effort, samples=1), claim.assume)
    if not points:
        return Finding("untested", "trend", evidence="no sampled point met the assumptions"), ()
    point = points[0].without("tau")
    with ctx.workprec(bits_for(60, 128)):
        values = Values.at(point.mapping())
        value = enclose(formula_of(claim), values)
        if not value.imag.contains(0):
            return Finding("refuted", "trend", points=1, point=point.text(), evidence="a variance is real"), ()
        claimed = value.real
        place = _located(claim, [enclose_real(e, values) for e in seen_energies(free).energies])
        misses = [_distance(free, point, place, FIRST_DISTANCE / 2**k) for k in range(HALVINGS)]
        if not claimed > 0:
            return Finding("refuted", "trend", points=1, point=point.text(), evidence="a variance diverges upwards"), ()
        ratios = [m / claimed for m in misses]
        gaps = [abs(r - 1) for r in ratios]
        shown = ", ".join(spoken(acb(r), 8) for r in ratios)
        evidence = f"(tau - tau_c)^2 Var n over the coefficient, each distance half the last: {shown}"
        falls = [b / a for a, b in zip(gaps, gaps[1:], strict=False)]
        number_ = Number(*with_radius(misses[-1], 12), point.text(), "trend")
        limit, doubt = _extrapolated(ratios)
        if abs(limit - 1) > 100 * doubt + arb(10) ** -6:
            evidence = f"{evidence}; extrapolated to {spoken(acb(limit), 8)}"
            return Finding("refuted", "trend", points=1, point=point.text(), evidence=evidence), (number_,)
        if all(f <= arb(FALLS.numerator) / FALLS.denominator for f in falls):
            return Finding("agrees", "trend", points=1, evidence=evidence), (number_,)
        if gaps[-1] > arb(1) / 100 and falls[-1] > arb(9) / 10:
            return Finding("refuted", "trend", points=1, point=point.text(), evidence=evidence), (number_,)
        return Finding("undecided", "trend", points=1, evidence=evidence), (number_,)


def _extrapolated(values: Sequence[arb]) -> tuple[arb, arb]:
    """Values at d, d/2, d/4, ... as a power series in d taken to d = 0, and by how much the last step moved it."""
    row, before = list(values), values[-1]
    for j in range(1, len(values)):
        before = row[-1]
        row = [(b * 2**j - a) / (2**j - 1) for a, b in zip(row, row[1:], strict=False)]
    return row[-1], abs(row[-1] - before)


def _distance(free: Setting, point: Point, place: arb, share: Fraction) -> arb:
    """(tau - tau_c)^2 Var n of the return at a rational tau near tau_c (1 + share): it keeps all phases apart."""
    near = Fraction(*_ratio(place)) * (1 + share)
    tau = number(near.limit_denominator(10**12))
    setting = replace(at_values(free, point.mapping()), interval=Interval(tau))
    e = Experiment(setting, tau, 2, power_of_ten(-40))
    mean = e.moment(1)
    away = enclose_real(tau, Values({})) - place
    return (e.moment(2) - mean * mean) * away * away
