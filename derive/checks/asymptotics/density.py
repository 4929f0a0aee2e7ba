"""Late-time laws of a local density of states, checked: every F_n up to n of some thousand, from the density itself.

phi = 1 - 1/u is divided out in balls from u_n (`numerics/density.py`), of the bands where there are bands.  A density
given by its singular points alone is completed in two ways, and a law that follows from the points must hold for
both: what holds for one alone is refuted by the other.  No singular expansion and no transfer is used.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from itertools import combinations

from flint import acb, arb, ctx

from derive.checks.asymptotics.plots import late_plots
from derive.checks.asymptotics.road import in_n, is_late, over_points, real_part, size_squared
from derive.checks.seen import Seen
from derive.checks.trend import ROAD, error_power, follow, last_ask, verdict_of
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU, Formula, number, times
from derive.numerics.decimals import with_radius
from derive.numerics.density import (
    SHARES,
    Returns,
    band_returns,
    completed,
    completed_returns,
    lattice_of,
    points_at,
)
from derive.numerics.density import (
    Point as SingularPoint,
)
from derive.numerics.evaluate import Values, enclose_real, rational
from derive.numerics.inversion import enclose_first_detection
from derive.numerics.points import decide, sample_points
from derive.numerics.precision import bits_for
from derive.problem.points import Point, holds
from derive.problem.setting import Check, Lattice, Relation, Setting
from derive.record.said import Claim, Finding, Number, Plot

FIRST_SCALE = 256
PERIODS = 40
"""Radians of the slowest phase that the first scale must hold."""
MOST_ASKS, MOST_OF_BANDS = 70_000, 9_000
RAISED = 2
"""How often the scales are doubled where they do not decide."""
SMALL = 8
"""x^-p, which the corrections to a law are made of, at the first scale, at least."""
WIDE = 0.5
"""The least phase from which drawn intervals are left as they are."""
CLAIM_BITS = 80
"""For claims: their constants may be integrals, and the trend needs three digits of a gap."""
SHOWN = (10, 100, 1000)


@dataclass
class Experiment:
    """phi_n of one density at one point, lengthened when more of it is asked for, to `most` where nothing decides."""

    returns: Returns
    digits: int
    most: int
    phi: list[acb] = field(default_factory=list)

    def up_to(self, count: int) -> list[acb]:
        """[0, phi_1, ..., phi_count]."""
        if len(self.phi) <= count:
            self.phi = enclose_first_detection(self._sequences, count, self.digits)
        return self.phi

    def _sequences(self, count: int) -> tuple[list[acb], list[acb]]:
        u = self.returns(count)
        return u, u


def is_density(setting: Setting) -> bool:
    return isinstance(setting.space, Lattice) and setting.space.name == "density"


def check_density(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Findings for late-time laws of a local density of states; nothing for other claims."""
    mine = [c for c in claims if is_late(c)]

    def finding(claim: Claim) -> Finding:
        return over_points(lambda: density_points(setting, effort, claim.assume),
                           lambda point: _at_point(setting, point, effort.digits, claim))

    findings = {c.id: finding(c) for c in mine}
    run = _own_run(setting, mine, effort)
    return Seen(findings) if run is None else Seen(findings, _numbers(mine, *run, effort), _plots(setting, mine, *run))


def density_points(setting: Setting, effort: Check, assume: tuple[Relation, ...]) -> tuple[Point, ...]:
    """The sample points; drawn ones at longer intervals where the assumptions allow it, so that laws set in early."""
    _check_watched(setting)
    relations = (*setting.assume, *assume)
    own = [dict(p) for p in effort.points]
    points = sample_points(setting, effort, assume)
    return tuple(
        p if any(given.items() <= p.mapping().items() for given in own) else _lengthened(setting, p, relations)
        for p in points
    )


def _check_watched(setting: Setting) -> None:
    watcher = setting.detectors[0]
    if len(setting.detectors) != 1 or watcher.efficiency != number(1) or setting.interval.law != "fixed":
        raise NotCovered("a local density of states is measured with one perfect detector at fixed intervals")
    if setting.start is None or setting.start.place is None or setting.start.place != watcher.place:
        raise NotCovered("a local density of states is measured for a start on the detector")


def _lengthened(setting: Setting, point: Point, relations: tuple[Relation, ...]) -> Point:
    """tau doubled as long as a phase stays below WIDE and every relation is surely kept."""
    if setting.interval.length != TAU:
        return point
    while _narrowest(setting, point) < WIDE:
        longer = Point(tuple({**point.mapping(), "tau": times(number(2), point.mapping()["tau"])}.items()))
        if not all(holds(r, longer.mapping(), decide) for r in relations):
            return point
        point = longer
    return point


def _narrowest(setting: Setting, point: Point) -> arb:
    with ctx.workprec(bits_for(15)):
        return min(_phases(setting, Values.at(point.mapping())), key=float)


# -- one point


def _at_point(setting: Setting, point: Point, digits: int, claim: Claim) -> tuple[str, str]:
    if not isinstance(claim.value, Formula) or claim.kind.smooth:
        raise NotCovered("for a local density of states a late-time law is a formula of the whole law")
    with ctx.workprec(bits_for(15)):
        first = first_scale(setting, Values.at(point.mapping()))
    said = [_decided(run, point, claim, claim.value, first) for run in experiments(setting, point, digits)]
    verdict, evidence = min(said, key=lambda s: ("refuted", "undecided", "agrees").index(s[0]))
    if len(said) > 1:
        evidence += f"; followed on {len(said)} densities that have these singular points"
    return verdict, evidence


def _decided(run: Experiment, point: Point, claim: Claim, value: Formula, first: int) -> tuple[str, str]:
    verdict, evidence = "undecided", ""
    for _ in range(RAISED + 1):
        try:
            verdict, evidence = _followed(run, point, claim, value, first)
        except NeedsPrecision as reason:
            verdict, evidence = "undecided", str(reason)
        if verdict != "undecided" or last_ask(2 * first) > run.most:
            break
        first *= 2
    return verdict, evidence


def _followed(run: Experiment, point: Point, claim: Claim, value: Formula, first: int) -> tuple[str, str]:
    phi = run.up_to(last_ask(first))
    with ctx.workprec(CLAIM_BITS):
        claimed = in_n(value, _known(point))
        if claim.quantity is not None and claim.quantity.name == "detection probability":
            course = follow(lambda n: real_part(claimed(n)), lambda n: size_squared(phi[n]), first)
        elif claim.kind.phase:
            course = follow(lambda n: abs(claimed(n)), lambda n: abs(phi[n]), first)
        else:
            course = follow(claimed, lambda n: phi[n], first)
        return verdict_of(course, claim.kind)


@lru_cache(maxsize=32)
def _known(point: Point) -> Values:
    """The letters at CLAIM_BITS; the integrals that claims share are kept with them."""
    return Values.at(point.mapping())


@lru_cache(maxsize=32)
def experiments(setting: Setting, point: Point, digits: int) -> tuple[Experiment, ...]:
    """The density's own experiment, or one a completed density; the last few are kept."""

    def values() -> Values:
        return Values.at(point.mapping())

    def tau() -> arb:
        return enclose_real(setting.interval.length, values())

    if lattice_of(setting).bands:
        return (Experiment(band_returns(setting, values, tau), digits, MOST_OF_BANDS),)

    def points() -> list[SingularPoint]:
        return points_at(setting, values())

    return tuple(Experiment(completed_returns(points, tau, share), digits, MOST_ASKS) for share in SHARES)


def own_amplitudes(setting: Setting, point: Point, last: int, digits: int) -> list[acb]:
    """[0, phi_1, ..., phi_last] where the density is known everywhere."""
    _check_watched(setting)
    if not lattice_of(setting).bands:
        raise NotCovered("a density known by its singular points alone has laws and no numbers of its own")
    return experiments(setting, point, digits)[0].up_to(last)


def first_scale(setting: Setting, values: Values) -> int:
    """Where the law should have set in: many radians of every phase."""
    slowest = min(_phases(setting, values), key=float)
    p = min(abs(point.power) for point in points_at(setting, values))
    if not p:
        raise NotCovered("a density that is logarithmic or has a step is not followed")
    scale = FIRST_SCALE
    while scale < max(PERIODS / float(slowest.mid()), SMALL ** float(1 / p)) and scale < MOST_ASKS:
        scale *= 2
    if last_ask(scale) > MOST_ASKS:
        raise OutsideValidity("the law sets in later than is measured: a power is small, or two singular energies "
                              "nearly fall on one point of the circle")
    return scale


def _phases(setting: Setting, values: Values) -> list[arb]:
    """tau times what the density varies over, and the angles between singular points that do not coincide."""
    tau, points = enclose_real(setting.interval.length, values), points_at(setting, values)
    found = [tau * _spread(setting, points, values)]
    for p, q in combinations(points, 2):
        turns = (p.energy - q.energy) * tau / (2 * arb.pi())
        gap = abs(turns - round(float(turns.mid()))) * 2 * arb.pi()
        if gap > 0:
            found.append(gap)
    return found


def _spread(setting: Setting, points: list[SingularPoint], values: Values) -> arb:
    bands = lattice_of(setting).bands
    if not bands:
        return rational(completed(points, max(SHARES)).spread).real
    return min((enclose_real(b.high, values) - enclose_real(b.low, values) for b in bands), key=float)


# -- numbers beside the law


def _own_run(setting: Setting, claims: Sequence[Claim], effort: Check) -> tuple[list[acb], Point] | None:
    """What was measured at the first point; nothing where the density is known by its points alone."""
    if not claims or not lattice_of(setting).bands:
        return None
    try:
        point = next(iter(density_points(setting, effort, claims[0].assume)), None)
    except NotCovered:
        return None
    phi = experiments(setting, point, effort.digits)[0].phi if point is not None else []
    return (phi, point) if point is not None and phi else None


def _numbers(
    claims: Sequence[Claim], phi: list[acb], point: Point, effort: Check
) -> dict[str, tuple[Number, ...]]:
    """Measured F_n at a few n."""
    asked = [c for c in claims if c.quantity is not None and c.quantity.name == "detection probability"]
    return {c.id: tuple(_number(phi[n], n, point, effort.digits) for n in SHOWN if n < len(phi)) for c in asked}


def _number(amplitude: acb, n: int, point: Point, digits: int) -> Number:
    with ctx.workprec(bits_for(digits)):
        value, radius = with_radius(size_squared(amplitude), digits)
    return Number(value, radius, (*point.text(), ("n", str(n))), ROAD)


def _plots(setting: Setting, claims: Sequence[Claim], phi: list[acb], point: Point) -> tuple[Plot, ...]:
    """Figures of the derived law."""
    law = next((c for c in claims if c.id == "asymptotics.F" and isinstance(c.value, Formula)), None)
    if law is None or law.kind.error is None or not isinstance(law.value, Formula):
        return ()
    with ctx.workprec(CLAIM_BITS):
        decay = 2 + 2 * min(abs(p.power) for p in points_at(setting, _known(point)))
        faster = error_power(law.kind.error) - decay
        expected = f"{2 ** int(faster)}x" if faster.denominator == 1 else f"2^({faster})"
        return late_plots(in_n(law.value, _known(point)), [abs(x) for x in phi], point, expected, decay)
