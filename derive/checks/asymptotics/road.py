"""Late-time laws on infinite lattices, checked: every F_n up to n of some 10^4, from the lattice itself.

phi = v/u is divided out in balls (`numerics/inversion.py`) from amplitudes between asks (`numerics/lattice.py`); no
singular point, no image and no transfer is used.  Claims about the detection amplitude and probability "as n ->
infinity" go the trend road; the tail's start is recomputed by solving for the first two constants of the law.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import lru_cache
from typing import Any

from flint import acb, arb, ctx

from derive.checks.asymptotics.plots import DECAY, late_plots
from derive.checks.seen import Seen
from derive.checks.trend import DOUBLINGS, ROAD, Course, error_power, follow, follow_smooth, last_ask, verdict_of
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU, Formula, constant, number, times
from derive.numerics.acceleration import approx_constants, approx_edges, approx_exponent
from derive.numerics.decimals import with_radius
from derive.numerics.evaluate import Values, enclose
from derive.numerics.inversion import enclose_first_detection
from derive.numerics.lattice import Waves, enclose_returns, waves
from derive.numerics.moving import in_letter
from derive.numerics.points import decide, sample_points
from derive.numerics.precision import bits_for
from derive.problem.points import Point, holds
from derive.problem.setting import Check, Lattice, Relation, Setting
from derive.record.said import Claim, Finding, Number, Plot

Balls = list[arb] | list[acb]
FIRST_SCALE = 256
PERIODS = 40
"""Radians of the slowest oscillation that the first scale must hold."""
MOST_ASKS = 60_000
WIDE = 0.5
"""Half the band's width in phase from which drawn intervals are left as they are."""
SETTLED = 0.05
"""How far the exponents of two doublings may differ once a power law has set in."""
RAISED = 2
"""How often the scales are doubled where they do not decide."""
SMOOTH_BITS = 80
"""For smooth parts: their claims are integrals, and windows leave no more than some ten digits anyway."""
TAIL = 100
SHOWN = (10, 100, 1000)
POWER = Fraction(3, 2)
"""phi_n falls like n^-POWER at the two edges of a band."""
LAWS = ("detection amplitude", "detection probability")
INFINITY = constant("infinity")


@dataclass
class Experiment:
    """phi_n at one point, lengthened when more of it is asked for."""

    setting: Setting
    point: Point
    digits: int
    waves: Waves
    phi: Balls = field(default_factory=list)

    def up_to(self, count: int) -> Balls:
        """[0, phi_1, ..., phi_count], the factor w^d left out: real, or complex beside an impurity."""
        if len(self.phi) <= count:
            self.phi = enclose_first_detection(self._sequences, count, self.digits)
        return self.phi

    def clicks(self, count: int) -> list[arb]:
        """[0, F_1, ..., F_count]."""
        return [size_squared(x) for x in self.up_to(count)[: count + 1]]

    def _sequences(self, count: int) -> tuple[Any, Any]:
        return enclose_returns(waves(self.setting, Values.at(self.point.mapping())), count)


def is_late(claim: Claim) -> bool:
    """A law for n -> infinity of what the detector sees."""
    if claim.quantity is None or claim.quantity.name not in LAWS or claim.kind.name != "limit":
        return False
    return claim.kind.toward == (("n", INFINITY),)


def check_late(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Findings for late-time laws and tail starts on an infinite lattice; nothing for other claims."""
    mine = [c for c in claims if is_late(c) or (c.quantity is not None and c.quantity.name == "tail start")]
    if not isinstance(setting.space, Lattice):
        return Seen()
    made: dict[Point, Experiment] = {}

    def finding(claim: Claim) -> Finding:
        return over_points(lambda: late_points(setting, effort, claim.assume),
                           lambda point: _at_point(_experiment(setting, point, effort, made), claim))

    findings = {c.id: finding(c) for c in mine}
    return Seen(findings, _numbers(mine, made), _plots(mine, made))


def over_points(points: Callable[[], Sequence[Point]], judged: Callable[[Point], tuple[str, str]]) -> Finding:
    """The worst that the points say; the first refuting one ends it."""
    said: list[tuple[str, str]] = []
    left_out = ""
    try:
        for point in points():
            try:
                verdict, evidence = judged(point)
            except OutsideValidity as reason:
                left_out = f"a point was left out: {reason}"
                continue
            if verdict == "refuted":
                return Finding(verdict, ROAD, points=len(said) + 1, point=point.text(), evidence=evidence)
            said.append((verdict, evidence))
    except NotCovered as reason:
        return Finding("untested", ROAD, evidence=str(reason))
    if not said:
        return Finding("untested", ROAD, evidence=left_out or "no sampled point met the assumptions")
    verdict, evidence = next((s for s in said if s[0] == "undecided"), said[0])
    return Finding(verdict, ROAD, points=len(said), evidence=evidence)


def _experiment(setting: Setting, point: Point, effort: Check, made: dict[Point, Experiment]) -> Experiment:
    if point not in made:
        made[point] = experiment(setting, point, effort.digits)
    return made[point]


@lru_cache(maxsize=32)
def experiment(setting: Setting, point: Point, digits: int) -> Experiment:
    """The experiment at a point; the last few are kept, since derived laws and claims ask for the same ones."""
    with ctx.workprec(bits_for(digits)):
        return Experiment(setting, point, digits, waves(setting, Values.at(point.mapping())))


def late_points(setting: Setting, effort: Check, assume: tuple[Relation, ...]) -> tuple[Point, ...]:
    """The sample points; drawn ones at longer intervals where the assumptions allow it, so that laws set in early."""
    return tuple(
        point if _is_own(point, effort) else _lengthened(setting, point, (*setting.assume, *assume))
        for point in sample_points(setting, effort, assume)
    )


def _is_own(point: Point, effort: Check) -> bool:
    values = point.mapping()
    return any(all(values.get(name) == value for name, value in own) for own in effort.points)


def _lengthened(setting: Setting, point: Point, relations: tuple[Relation, ...]) -> Point:
    """tau doubled as long as a < WIDE and every relation is surely kept."""
    if setting.interval.length != TAU:
        return point
    while True:
        values = point.mapping()
        if not _width(setting, point) < WIDE:
            return point
        values["tau"] = times(number(2), values["tau"])
        if not all(holds(r, values, decide) for r in relations):
            return point
        point = Point(tuple(values.items()))


def _width(setting: Setting, point: Point) -> arb:
    with ctx.workprec(bits_for(15)):
        return waves(setting, Values.at(point.mapping())).a


def _at_point(run: Experiment, claim: Claim) -> tuple[str, str]:
    if not isinstance(claim.value, Formula):
        raise NotCovered("a late-time law is claimed by a formula")
    if claim.quantity is not None and claim.quantity.name == "tail start":
        return _start_at(run, claim.value)
    first = first_scale(run.waves) if claim.kind.smooth else settled_scale(run)
    verdict, evidence = "undecided", ""
    for _ in range(RAISED + 1):
        try:
            verdict, evidence = _followed(run, claim, claim.value, first)
        except NeedsPrecision as reason:
            verdict, evidence = "undecided", str(reason)
        if verdict != "undecided" or last_ask(2 * first) > MOST_ASKS:
            break
        first *= 2
    return verdict, evidence


def first_scale(w: Waves) -> int:
    """Where the law should have set in: many radians of every oscillation, far beyond the start's time of flight."""
    turns = whole_turns(w)
    slow = [w.a] if turns is not None else [w.a, abs(w.a - arb.pi() * nearest_turn(w))]
    needed = max(float(PERIODS / x.mid()) for x in slow) if all(x > 0 for x in slow) else MOST_ASKS
    reach = max((k for _, ks in (*w.u, *w.v) for k in ks), default=0)
    scale = FIRST_SCALE
    while scale < max(needed, float(reach * reach * 4 / w.a.mid())):
        scale *= 2
    if last_ask(scale) > MOST_ASKS:
        raise OutsideValidity("the law sets in later than is measured; the edges of the band nearly meet, or a is tiny")
    return scale


def settled_scale(run: Experiment) -> int:
    """The first scale from which sum |phi| falls by one and the same power: slow exponentials have gone by then."""
    first = first_scale(run.waves)
    while last_ask(first) <= MOST_ASKS:
        phi = run.up_to(last_ask(first))
        exponents = [approx_exponent(phi, first << j) for j in range(DOUBLINGS - 1)]
        if max(exponents) - min(exponents) < SETTLED:
            return first
        first *= 2
    raise OutsideValidity("no power law has set in where it is measured: something else still decays slowly")


def nearest_turn(w: Waves) -> int:
    return max(1, round(float((w.a / arb.pi()).mid())))


def whole_turns(w: Waves) -> int | None:
    """a/pi where no precision tells it from a whole number."""
    k = nearest_turn(w)
    return k if (w.a - arb.pi() * k).contains(0) else None


def _followed(run: Experiment, claim: Claim, value: Formula, first: int) -> tuple[str, str]:
    phi = run.up_to(last_ask(first))
    with ctx.workprec(SMOOTH_BITS if claim.kind.smooth else bits_for(run.digits)):
        claimed = in_n(value, Values.at(run.point.mapping()))
        if claim.kind.smooth:
            return verdict_of(_smooth(run, claim, claimed, phi, first), claim.kind)
        if claim.quantity is not None and claim.quantity.name == "detection probability":
            course = follow(lambda n: real_part(claimed(n)), lambda n: size_squared(phi[n]), first)
        elif claim.kind.phase:
            course = follow(lambda n: abs(claimed(n)), lambda n: abs(phi[n]), first)
        elif run.waves.scattered is not None:
            course = follow(lambda n: claimed(n) * run.waves.factor.conjugate(), lambda n: phi[n], first)
        else:
            course = follow(lambda n: aligned(claimed(n), run.waves.factor), lambda n: phi[n], first)
        return verdict_of(course, claim.kind)


def _smooth(run: Experiment, claim: Claim, claimed: Callable[[int], acb], phi: Balls, first: int) -> Course:
    if claim.quantity is not None and claim.quantity.name == "detection probability":
        return follow_smooth(lambda n: real_part(claimed(n)), lambda n: size_squared(phi[n]), first)
    return follow_smooth(lambda n: aligned(claimed(n), run.waves.factor), lambda n: phi[n], first)


def real_part(x: acb) -> arb:
    """A probability's ball; one that is surely not real cannot be meant."""
    if not x.imag.contains(0):
        raise OutsideValidity("a probability is claimed that is not real here")
    return x.real


def size_squared(x: arb | acb) -> arb:
    """|x|^2."""
    return x.real * x.real + x.imag * x.imag if isinstance(x, acb) else x * x


def aligned(x: acb, factor: acb) -> arb:
    """x/factor, |factor| = 1, where it is real; a wrong phase counts in full."""
    turned = x * factor.conjugate()
    return turned.real if turned.imag.contains(0) else -abs(turned)


def in_n(f: Formula, values: Values) -> Callable[[int], acb]:
    """f as a function of n; what does not depend on n is enclosed once."""
    moving = in_letter(f, "n", values)
    return lambda n: moving(acb(n), Fraction(n))


# -- where the tail begins


def _start_at(run: Experiment, value: Formula) -> tuple[str, str]:
    """TAIL |C_2/C_1|, solved for at two scales, against the claim."""
    first = settled_scale(run)
    run.up_to(last_ask(first))
    N = first << (DOUBLINGS - 1)
    with ctx.workprec(bits_for(2 * run.digits)):
        turns = whole_turns(run.waves)
        a = waves(run.setting, Values.at(run.point.mapping())).a
        coarse, fine = (_share(run, a, turns, scale) for scale in (N // 2, N))
        claimed = real_part(enclose(value, Values.at(run.point.mapping())))
    miss, doubt = abs(claimed - fine) / fine, abs(coarse - fine) / fine
    evidence = f"solved for at n = {N} to {2 * N}: {float(fine.mid()):.8g}, claimed {float(claimed.mid()):.8g}"
    if miss < arb(10) ** -6 or miss < 4 * doubt and doubt < arb(10) ** -3:
        return "agrees", evidence
    return ("refuted" if miss > 100 * doubt and miss > arb(10) ** -4 else "undecided"), evidence


def _share(run: Experiment, a: arb, turns: int | None, scale: int) -> arb:
    """TAIL times what the second term's envelope is of the first's, from n between `scale` and twice that."""
    if run.waves.scattered is None:
        c = approx_constants(run.phi, a, POWER, scale, turns)
        return TAIL * abs(c[1]) / abs(c[0])
    upper, lower = approx_edges(run.phi, a, POWER, scale)
    return TAIL * (abs(upper[1]) + abs(lower[1])) / (abs(upper[0]) + abs(lower[0]))


# -- numbers beside the law


def _numbers(claims: Sequence[Claim], made: dict[Point, Experiment]) -> dict[str, tuple[Number, ...]]:
    """Measured values at a few n, at the first point."""
    run = next(iter(made.values()), None)
    if run is None or not run.phi:
        return {}
    out = {}
    for claim in claims:
        if claim.quantity is not None and claim.quantity.name == "detection probability":
            out[claim.id] = tuple(_number(run, n) for n in SHOWN if n < len(run.phi))
    return out


def _plots(claims: Sequence[Claim], made: dict[Point, Experiment]) -> tuple[Plot, ...]:
    """Figures of the derived law, at the first point; none where the law is no power of n at all yet."""
    law = next((c for c in claims if c.id == "asymptotics.F" and isinstance(c.value, Formula)), None)
    run = next(iter(made.values()), None)
    if law is None or run is None or len(run.phi) <= SHOWN[-1] or law.kind.error is None:
        return ()
    power = error_power(law.kind.error) - DECAY
    expected = f"{2 ** int(power)}x" if power.denominator == 1 else f"2^({power})"
    with ctx.workprec(bits_for(run.digits)):
        value = in_n(law.value, Values.at(run.point.mapping())) if isinstance(law.value, Formula) else None
        sizes = [abs(x) for x in run.phi]
        return late_plots(value, sizes, run.point, expected) if value is not None else ()


def _number(run: Experiment, n: int) -> Number:
    with ctx.workprec(bits_for(run.digits)):
        value, radius = with_radius(size_squared(run.phi[n]), run.digits)
    return Number(value, radius, (*run.point.text(), ("n", str(n))), ROAD)
