"""The plain absorber on an infinite line, checked: the line itself is evolved, trap included (`numerics/trap.py`).

enclosure   an amplitude claimed for every t, at a few times, in balls (Taylor's series of the evolution)
trend       amplitudes as t -> infinity and absorbed fractions, in double precision on a line so long that nothing
            returns: laws are followed over three doublings (`trend.py`), a fraction is 1 less what is left, carried on
            to infinity in the powers of 1/t that a band with two edges leaves, at two scales; the return factor is
            sum F_n over sum 2 Gamma tau |f(n tau)|^2, carried on in 1/n, F_n from the lattice

Gamma = 2/tau throughout.  No transform is used.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache, partial
from math import ceil

from flint import acb, arb, ctx

from derive.checks import trend
from derive.checks.asked import formula_of, name_of
from derive.checks.asymptotics.road import aligned, experiment, late_points, over_points, real_part
from derive.checks.gauge import Gauge
from derive.checks.seen import Seen
from derive.checks.trend import DOUBLINGS, total, verdict_of
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import constant
from derive.numerics.acceleration import approx_limit
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.lattice import waves
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, digits_of
from derive.numerics.trap import LARGEST, Course, approx_trapped, enclose_trapped
from derive.problem.points import Point
from derive.problem.setting import Check, Lattice, Setting
from derive.record.said import Claim, Finding

AMPLITUDE, FRACTION, FACTOR = "absorber amplitude", "absorbed fraction", "return factor"
TIMES = (Fraction(1, 2), Fraction(1), Fraction(3))
"""In units of 1/g."""
MARGIN = 24
FIRST, RAISED = 32, 1
SCALE = 240
"""Steps, of 1/(2 g), at which a fraction is carried on, and twice that."""
SURE, SETTLED, CLEARLY = 1e-6, 8, 1000
NEAR, CLOSE, FAR = 0.01, 4, 20


@dataclass(frozen=True)
class Trap:
    """|h| and tau in balls, the sites between start and trap, and the phase w^k of the amplitude."""

    g: arb
    tau: arb
    k: int
    factor: acb


def check_line_enclosed(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Amplitudes claimed exactly."""
    mine = [c for c in claims if name_of(c) == AMPLITUDE and c.kind.name == "exactly"]
    return Seen({c.id: _enclosed(setting, c, effort) for c in mine} if isinstance(setting.space, Lattice) else {})


def _enclosed(setting: Setting, claim: Claim, effort: Check) -> Finding:
    shared: int | None = None
    points = 0
    try:
        for point in sample_points(setting, effort, claim.assume):
            with ctx.workprec(_bits(setting, point, effort.digits)):
                gauge = _compared(setting, point, claim, effort.digits)
            if gauge.misses:
                said = gauge.first_miss()
                return Finding("refuted", "enclosure", points=points + 1, point=point.text(), evidence=said)
            if gauge.wide:
                return Finding("undecided", "enclosure", points=points, evidence=gauge.wide)
            points += 1
            if gauge.shared is not None:
                shared = gauge.shared if shared is None else min(shared, gauge.shared)
    except (NotCovered, OutsideValidity) as reason:
        return Finding("untested", "enclosure", evidence=str(reason))
    except NeedsPrecision as reason:
        return Finding("undecided", "enclosure", evidence=str(reason))
    if not points:
        return Finding("untested", "enclosure", evidence="no sampled point met the assumptions")
    return Finding("agrees", "enclosure", shared, points, evidence="the line evolved, in balls")


def _bits(setting: Setting, point: Point, digits: int) -> int:
    """The Taylor series alternates: of its terms up to exp((2 g + Gamma) t) that many bits cancel, twice."""
    with ctx.workprec(bits_for(MARGIN)):
        trap = _trap(setting, Values.at(point.mapping()))
        largest = float(((2 * trap.g + 2 / trap.tau) * float(max(TIMES)) / trap.g).upper())
    return bits_for(digits + MARGIN) + ceil(3 * min(largest, LARGEST))


def _compared(setting: Setting, point: Point, claim: Claim, digits: int) -> Gauge:
    values, gauge = Values.at(point.mapping()), Gauge(digits)
    trap = _trap(setting, values)
    times = [arb(t.numerator) / t.denominator / trap.g for t in TIMES]
    seen = enclose_trapped(trap.g, 2 / trap.tau, trap.k, times, bits_for(digits + MARGIN))
    for t, f in zip(times, seen, strict=True):
        claimed = enclose(formula_of(claim), values.with_letter("t", acb(t)))
        gauge.compare(f"f at t = {rounded(t, 4)}", claimed, trap.factor * f, arb(1))
    return gauge


def _trap(setting: Setting, values: Values) -> Trap:
    space = setting.space
    if not isinstance(space, Lattice) or space.name != "line":
        raise NotCovered("the absorber's own laws are checked on the line")
    w = waves(setting, values)
    tau = enclose_real(setting.interval.length, values)
    return Trap(w.a / (2 * tau), tau, w.v[0][1][0], w.factor)


# -- late, and in the end


def check_line_trend(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Late amplitudes, absorbed fractions, and the return's factor."""
    if not isinstance(setting.space, Lattice):
        return Seen()
    found = {}
    for claim in claims:
        judge = _road(claim)
        if judge is not None:
            points = partial(late_points, setting, effort, claim.assume)
            found[claim.id] = over_points(points, partial(_at, judge, setting, claim))
    return Seen(found)


Judge = Callable[[Setting, Point, Claim], tuple[str, str]]


def _road(claim: Claim) -> Judge | None:
    name, late = name_of(claim), claim.kind.toward == (("t", constant("infinity")),)
    if name == AMPLITUDE and claim.kind.name == "limit" and late and not claim.kind.smooth:
        return _tail
    if claim.kind.name == "exactly":
        return {FRACTION: _fraction, FACTOR: _factor}.get(name)
    return None


def _at(judge: Judge, setting: Setting, claim: Claim, point: Point) -> tuple[str, str]:
    with ctx.workprec(bits_for(MARGIN)):
        return judge(setting, point, claim)


def _tail(setting: Setting, point: Point, claim: Claim) -> tuple[str, str]:
    """The claim at t = n/(2 g) beside the evolved line."""
    value, values = formula_of(claim), Values.at(point.mapping())
    trap = _trap(setting, values)
    step, verdict, evidence = 1 / (2 * trap.g), "undecided", ""
    for raised in range(RAISED + 1):
        first = FIRST << raised
        seen = _course(trap, first << (DOUBLINGS + 1))

        def claimed(n: int) -> arb:
            return aligned(enclose(value, values.with_letter("t", acb(step * n))), trap.factor)

        gaps, sizes = [], []
        for j in range(DOUBLINGS + 1):
            pairs = [(claimed(n), _measured(seen, n)) for n in _steps_at(first << j)]
            gaps.append(total(abs(c - f) for c, f in pairs))
            sizes.append(total(abs(f) for _, f in pairs))
        verdict, evidence = verdict_of(trend.Course(first, tuple(gaps), tuple(sizes), "x"), claim.kind)
        if verdict != "undecided":
            break
    return verdict, f"{evidence}; x = 2*g*t"


def _steps_at(scale: int) -> range:
    """Steps from `scale` to twice that, the same number at every scale."""
    return range(scale, 2 * scale, scale // FIRST)


def _measured(seen: Course, n: int) -> arb:
    return arb(float(seen.amplitude[n]))


def _course(trap: Trap, steps: int) -> Course:
    """The line after steps of 1/(2 g)."""
    return _evolved(0.5, float((1 / (trap.g * trap.tau)).mid()), trap.k, steps)


@lru_cache(maxsize=16)
def _evolved(g: float, gamma: float, k: int, steps: int) -> Course:
    return approx_trapped(g, gamma, k, steps)


def _fraction(setting: Setting, point: Point, claim: Claim) -> tuple[str, str]:
    """1 - what is left, carried on."""
    values = Values.at(point.mapping())
    seen = _course(_trap(setting, values), 2 * SCALE)
    taken = [1 - arb(float(x)) for x in seen.left]
    coarse, fine = (approx_limit(taken, arb(1), N, False) for N in (SCALE // 2, SCALE))
    doubt = float(abs(coarse - fine).mid())
    claimed = real_part(enclose(formula_of(claim), values))
    miss = float(abs(claimed - fine).mid())
    said = f"claimed {rounded(claimed, 10)}, evolved and carried on {rounded(fine, 10)}"
    if miss < SETTLED * doubt + SURE / CLEARLY and doubt < SURE:
        return "agrees", f"{said}; {digits_of(arb(miss), arb(1)) or 0} digits shared"
    return ("refuted" if miss > CLEARLY * doubt + SURE else "undecided"), said


def _factor(setting: Setting, point: Point, claim: Claim) -> tuple[str, str]:
    """Clicks of the detector over what the absorber takes in the same intervals, late; the error falls like 1/n."""
    values = Values.at(point.mapping())
    trap = _trap(setting, values)
    if trap.k:
        raise NotCovered("the return factor is that of a start on the detector")
    claimed, verdict, said = float(enclose_real(formula_of(claim), values).mid()), "undecided", ""
    for raised in range(RAISED + 1):
        ratios = _ratios(setting, point, trap, FIRST << raised)
        carried = [2 * b - a for a, b in zip(ratios, ratios[1:], strict=False)]
        doubt, miss = abs(carried[-1] - carried[-2]), abs(claimed - carried[-1])
        said = f"claimed {claimed:.6g}, measured and carried on {carried[-1]:.6g}, give or take {doubt:.1e}"
        if doubt < NEAR:
            verdict = "agrees" if miss < CLOSE * doubt else "refuted" if miss > FAR * doubt else "undecided"
            break
    return verdict, said


def _ratios(setting: Setting, point: Point, trap: Trap, first: int) -> list[float]:
    """sum F_n/sum 2 Gamma tau |f(n tau)|^2 over n from N to 2N, N = first, 2 first, ..."""
    last = first << (DOUBLINGS + 1)
    phi = experiment(setting, point, MARGIN).up_to(last)
    seen = _evolved(float((trap.g * trap.tau).mid()), 2.0, 0, last)
    found = []
    for j in range(DOUBLINGS + 1):
        asks = range(first << j, first << (j + 1))
        clicks = total(abs(phi[n]) * abs(phi[n]) for n in asks)
        taken = total(4 * _measured(seen, n) * _measured(seen, n) for n in asks)
        found.append(float((clicks / taken).mid()))
    return found
