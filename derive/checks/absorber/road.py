"""The roads of topic `absorber`: exact (secular equation, slow subspaces) and trend (the experiment repeated)."""

from __future__ import annotations

from dataclasses import dataclass, field

from flint import ctx

from derive.checks.absorber.levels import finding_of, is_about_levels, judge_levels, with_precision
from derive.checks.absorber.maps import check_maps, is_map
from derive.checks.absorber.plots import level_plots
from derive.checks.absorber.random import check_random_exact, check_random_trend, is_random
from derive.checks.absorber.runs import MOST_SITES, Run
from derive.checks.absorber.secular import check_secular
from derive.checks.absorber.slopes import ROAD, Slope
from derive.checks.absorber.states import judge_factor, judge_map
from derive.checks.krylov import reach_pattern
from derive.checks.neighbourhood import Cut, cut_near, measured_near
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.averaged import MOST_STATES
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Relation, Setting
from derive.record.said import Claim, Finding

LARGE = 24  # sites beyond which one point is run instead of all; of a neighbourhood that is cut out, at most
LEAST_STEPS = 4  # what an absorber's parameters and maps know of the graph lies nearer to the detector
LEAST_STEPS_AVERAGED = 2  # the averaged equation knows A, V and their products


def check_absorber_exact(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> Seen:
    """Proved or refuted where the claim has a place in an exact field."""
    if is_random(setting):
        return Seen(check_random_exact(setting, claims, effort))
    found = {**check_secular(setting, claims, effort), **check_maps(setting, claims, effort)}
    return Seen({**found, **_negative_factors(setting, claims, effort)})


def _negative_factors(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """A coupling of the other sign gives the same levels; the factor is taken positive, so that it is one number."""
    found = {}
    for claim in claims:
        name = claim.quantity.name if claim.quantity is not None else ""
        if name != "absorber coupling" or not isinstance(claim.value, Formula):
            continue
        for point in sample_points(setting, effort, claim.assume):
            if _is_negative(claim.value, point):
                said = "a coupling is taken positive; with the other sign the levels are the same"
                found[claim.id] = Finding("refuted", "exact", points=1, point=point.text(), evidence=said)
                break
    return found


def _is_negative(f: Formula, point: Point) -> bool:
    try:
        with ctx.workprec(128):
            return bool(enclose(f, Values.at(point.mapping())).real < 0)
    except (NeedsPrecision, OutsideValidity, NotCovered):
        return False


def check_absorber_trend(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> Seen:
    """How errors fall as tau is halved, at every sample point; on a large graph near the detector alone."""
    walk = check_random_trend if is_random(setting) else _follow
    cut = _cut(setting)
    return walk(setting, claims, effort) if cut is None else measured_near(walk, cut, claims, effort)


def _cut(setting: Setting) -> Cut | None:
    """A neighbourhood where the whole graph, or what the detector reaches of it, is too large."""
    if not isinstance(setting.space, Finite):
        return None
    if not is_random(setting):
        return cut_near(setting, LARGE, LEAST_STEPS) if setting.space.size > MOST_SITES else None
    try:
        large = sum(reach_pattern(setting)) + setting.detectors[0].rank > MOST_STATES
    except NotCovered:
        return None
    return cut_near(setting, MOST_STATES, LEAST_STEPS_AVERAGED) if large else None


def _follow(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> Seen:
    runs = _Runs(setting, effort)
    found = {claim.id: _finding(claim, claims, runs) for claim in claims if claim.quantity is not None}
    bits, run = max(((b, run) for (_, b), run in runs.known.items()), key=lambda pair: pair[0], default=(0, None))
    derived = any(claim.origin == "derived" for claim in claims)
    return Seen(found, plots=level_plots(run, bits) if derived and run is not None else ())


@dataclass
class _Runs:
    """Sample points by assumptions, each point measured once for all claims."""

    setting: Setting
    effort: Check
    points: dict[tuple[Relation, ...], tuple[Point, ...]] = field(default_factory=dict)
    known: dict[tuple[Point, int], Run] = field(default_factory=dict)

    def at(self, assume: tuple[Relation, ...]) -> tuple[Point, ...]:
        if assume not in self.points:
            found: list[Point] = []
            for point in sample_points(self.setting, self.effort, assume):
                if point.without("tau") not in found:
                    found.append(point.without("tau"))
            large = isinstance(self.setting.space, Finite) and self.setting.space.size > LARGE
            self.points[assume] = tuple(found[:1] if large else found)
        return self.points[assume]

    def run(self, point: Point, bits: int) -> Run:
        if (point, bits) not in self.known:
            self.known[point, bits] = Run(self.setting, point)
        return self.known[point, bits]


def _finding(claim: Claim, claims: tuple[Claim, ...], runs: _Runs) -> Finding:
    try:
        results = []
        for point in runs.at(claim.assume):
            run, slopes = _at(claim, claims, runs, point)
            results.append((run, slopes))
            if any(s.verdict == "refuted" for _, s in slopes):
                break
    except NotCovered as reason:
        return Finding("untested", ROAD, evidence=f"{reason}.")
    except OutsideValidity as reason:
        return Finding("untested", ROAD, evidence=f"{reason}.")
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, evidence=f"{reason}.")
    return finding_of(results, "the claim asks for more")


def _at(
    claim: Claim, claims: tuple[Claim, ...], runs: _Runs, point: Point
) -> tuple[Run, list[tuple[str, Slope]]]:
    held: list[Run] = []

    def compute() -> list[tuple[str, Slope]]:
        run = runs.run(point, ctx.prec)
        held[:] = [run]
        return _slopes(claim, claims, run, runs.effort.digits)

    slopes = with_precision(compute)
    return held[0], slopes


def _slopes(claim: Claim, claims: tuple[Claim, ...], run: Run, digits: int) -> list[tuple[str, Slope]]:
    if is_map(claim):
        return judge_map(claim, claims, run, digits)
    if is_about_levels(claim):
        return judge_levels(claim, claims, run, digits)
    if claim.quantity is not None and claim.quantity.name == "return factor":
        return judge_factor(claim, run, digits)
    raise NotCovered("no measured road for this quantity")
