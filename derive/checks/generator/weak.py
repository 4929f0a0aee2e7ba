"""The roads of topic `generator` under weak measurement, eta -> 0 with tau: K = (1 - (1 - q) P) exp(-i H tau) on all
sites, G = (i/tau) log K.

    exact        exp(sum_m tau^m M_m) = K solved degree by degree, G_k = i M_(k+1); q = sqrt(1 - eta) by Taylor
    coefficient  log K sampled on a small circle of complex tau, q evaluated there, in balls
    trend        eigenvalues of K against those of the truncated generator, tau halved
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction
from functools import cached_property

from flint import acb, arb, ctx

from derive.checks import asked
from derive.checks.absorber.levels import finding_of, settle, with_precision
from derive.checks.absorber.runs import Run
from derive.checks.absorber.slopes import ROAD as TREND
from derive.checks.absorber.slopes import Slope
from derive.checks.absorber.slow import Near, times
from derive.checks.generator.exponent import Exponent
from derive.checks.generator.measured import Measured, lay_beside
from derive.checks.generator.slow import ATTEMPTS, MOST_SITES, SPARE_DIGITS, dense_term
from derive.checks.reading import Reading, read_claim
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.exact.field import Field
from derive.exact.sparse import Sparse, Vector, accumulate, added, multiplied, scaled
from derive.exact.taylor import taylor
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, free_letters, letter
from derive.numerics import nullstep
from derive.numerics.contour import choose_circle
from derive.numerics.evaluate import Values, enclose
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.numerics.series import enclose_series
from derive.numerics.system import finite_space, system
from derive.numerics.weak_contour import choose_weak_circle, enclose_weak_generators
from derive.problem.balls import ball
from derive.problem.efficiency import missed
from derive.problem.points import Point
from derive.problem.setting import Check, Row, Setting
from derive.record.said import Claim, Expansion, Finding

NAME = "tau"
ROAD = "coefficient"


class WeakSolved:
    """M_1 ... M_(K+1) near the detector."""

    def __init__(self, setting: Setting, order: int):
        eta = setting.detectors[0].efficiency
        others = [letter(n) for n in sorted(free_letters(eta) - {NAME})]
        bare = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
        self.near = Near(bare, order + 2, others)
        kept = taylor(missed(eta, setting.domains()), NAME, self.near.field, order + 2)
        self.exponent = Exponent()
        p = multiplied(self.near.d, self.near.d_dagger)
        turned = times(self.near.h, -self.near.i)
        walks: list[Sparse] = [{x: {x: self.near.field.one} for x in self.near.sites}]
        for m in range(1, order + 2):
            walks.append(scaled(multiplied(walks[-1], turned), Fraction(1, m)))
            wanted = walks[m]
            for a in range(1, m + 1):
                wanted = added(wanted, times(multiplied(p, walks[m - a]), kept[a]))
            self.exponent.solve(wanted)

    def generator(self, k: int) -> Sparse:
        return times(self.exponent.logs[k], self.near.i)


def check_weak_exact(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about the generator that has a place in an exact field."""
    wanted = [c for c in claims if asked.is_generator(c)]
    found: dict[str, Finding] = {}
    try:
        known = WeakSolved(setting, max((asked.highest_order(c) for c in wanted), default=0))
    except (NotCovered, ZeroDivisionError):
        return {}
    for claim in wanted:
        try:
            found[claim.id] = _judge(setting, claim, effort, known)
        except (NotCovered, ZeroDivisionError):
            continue
    return found


def _judge(setting: Setting, claim: Claim, effort: Check, known: WeakSolved) -> Finding:
    residual = next(_residuals(setting, claim, known), None)
    if residual is None:
        return Finding("proved", "exact", evidence="re-exponentiated, the residual is exactly zero")
    order, (x, y), value = residual
    name = finite_space(setting).name
    for point in sample_points(setting, effort, claim.assume):
        if is_surely_nonzero(value, point):
            evidence = f"entry ({name(x)}, {name(y)}) of G_{order}: claimed minus solved is {text(value)}"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{text(value)} vanishes where tried")


def _residuals(
    setting: Setting, claim: Claim, known: WeakSolved
) -> Iterator[tuple[int, tuple[int, int], Formula]]:
    """Claimed minus solved, entry by entry; far from the detector G_0 is H and the others are zero."""
    space, inner = finite_space(setting), set(ball(finite_space(setting).rows, known.near.support, 1))
    for order, entries, single in asked.claimed_orders(claim, setting.domains()):
        claimed = {(x, y): f for x, y, f in entries}
        truth = {(x, y): f for x, row in known.generator(order).items() for y, f in row.items()}
        far: dict[tuple[int, int], Formula] = {}
        if order == 0:
            truth = {p: f for p, f in truth.items() if p[0] in inner}
            far = {(x, y): f for x in range(space.size) if x not in inner for y, f in space.rows[x]}
        places = {single} if single is not None else {*truth, *claimed, *far}
        for place in sorted(places):
            if claimed.get(place) == far.get(place) and place in far:
                continue
            have = known.near.field.formula(truth[place]) if place in truth else far.get(place, ZERO)
            said = claimed.get(place, ZERO)
            field = Field.of([*known.near.formulas, have, said], setting.domains())
            difference: Vector = {0: field.element(said)}
            accumulate(difference, {0: -field.element(have)})
            if difference:
                yield order, place, field.formula(difference[0])


# -- balls


def check_weak_coefficient(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> Seen:
    found = {}
    for claim in claims:
        try:
            found[claim.id] = _compared(setting, read_claim(claim), effort)
        except (NotCovered, OutsideValidity) as reason:
            found[claim.id] = Finding("untested", ROAD, evidence=str(reason))
    return Seen(found)


def _compared(setting: Setting, reading: Reading, effort: Check) -> Finding:
    order = reading.orders[-1]
    support = sorted({x for w in setting.detectors for v in w.vectors for x, _ in v})
    sites = ball(finite_space(setting).rows, support, order + 2)
    if len(sites) > MOST_SITES:
        raise NotCovered(f"{len(sites)} sites lie within {order + 2} steps of the detector, too many for this road")
    digits = []
    points = sample_points(setting, effort, reading.claim.assume)
    for n, point in enumerate(points, start=1):
        outcome = _at_point(setting, point, sites, reading, effort.digits)
        if isinstance(outcome, str):
            return Finding("refuted", ROAD, points=n, point=point.without(NAME).text(), evidence=outcome)
        if outcome is None:
            return Finding("undecided", ROAD, points=n, evidence=f"the balls stay too wide for {effort.digits} digits")
        digits.append(outcome)
    if not points:
        return Finding("untested", ROAD, evidence="no sampled point met the assumptions")
    if not reading.closed:
        return Finding("undecided", ROAD, min(digits), len(points), evidence="the claim is about all orders")
    note = f"samples of log K on the {len(sites)} sites within {order + 2} steps of the detector"
    return Finding("agrees", ROAD, min(digits), len(points), evidence=note)


def _at_point(
    setting: Setting, point: Point, sites: tuple[int, ...], reading: Reading, digits: int
) -> str | int | None:
    order = reading.orders[-1]
    perfect = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
    root = missed(setting.detectors[0].efficiency, setting.domains())
    bare = point.without(NAME).mapping()
    for attempt in range(ATTEMPTS):
        wanted = digits + (SPARE_DIGITS << 2 * attempt)
        with ctx.workprec(256):
            circle = choose_weak_circle(root, Values.at(bare), system(perfect, Values.at(bare), sites), order, wanted)
        with ctx.workprec(circle.bits << attempt):
            try:
                values = Values.at(bare)
                s = system(perfect, values, sites)
                found = enclose_weak_generators(s, root, values, order, circle)
                matrices = [m.entries() for m in found]
                measured = Weak(perfect, values, s, order, choose_circle(order, digits, len(sites)), matrices)
                measured.root = root
                gauge = lay_beside(reading, measured, digits)
            except NeedsPrecision:
                continue
            if gauge.misses:
                return gauge.first_miss()
            if not gauge.wide:
                return digits if gauge.shared is None else gauge.shared
    return None


class WeakStart:
    """H - i gamma P on all sites, row by row: what stands in place of Q H Q."""

    def __init__(self, setting: Setting, values: Values, root: Formula):
        self.rows, self.values = finite_space(setting).rows, values
        rate = -enclose_series(root, values, 2)[1]
        self._lost: dict[int, dict[int, acb]] = {}
        for vector in setting.detectors[0].vectors:
            amplitudes = [(x, enclose(f, values)) for x, f in vector]
            for x, a in amplitudes:
                row = self._lost.setdefault(x, {})
                for y, b in amplitudes:
                    row[y] = row.get(y, acb(0)) - acb(0, 1) * rate * a * b.conjugate()

    def row(self, x: int) -> dict[int, acb]:
        found = {y: enclose(f, self.values) for y, f in self.rows[x]}
        for y, a in self._lost.get(x, {}).items():
            found[y] = found.get(y, acb(0)) + a
        return found

    def is_plain(self, x: int, row: Row) -> bool:
        return x not in self._lost and row == self.rows[x]


class Weak(Measured):
    """What is measured, G_0 being H - i gamma P."""

    root: Formula = ONE

    @cached_property
    def start(self) -> WeakStart:  # type: ignore[override]
        return WeakStart(self.setting, self.values, self.root)


# -- trend


def check_weak_order(setting: Setting, claim: Claim, effort: Check) -> Seen:
    """The finding for `generator.truncated`: all levels, as tau is halved."""
    if not isinstance(claim.value, Expansion):
        return Seen()
    try:
        results = [_levels(setting, claim, point, effort.digits) for point in _two(setting, claim, effort)]
    except (NotCovered, OutsideValidity) as reason:
        return Seen({claim.id: Finding("untested", TREND, evidence=str(reason))})
    except NeedsPrecision as reason:
        return Seen({claim.id: Finding("undecided", TREND, evidence=str(reason))})
    return Seen({claim.id: finding_of(results, f"O(tau^{claim.value.remainder}) is claimed")})


def _two(setting: Setting, claim: Claim, effort: Check) -> tuple[Point, ...]:
    return sample_points(setting, effort, claim.assume)[:2]


def _levels(setting: Setting, claim: Claim, point: Point, digits: int) -> tuple[Run, list[tuple[str, Slope]]]:
    held: list[Run] = []
    value = claim.value
    if not isinstance(value, Expansion):
        raise NotCovered("the truncated generator is an expansion")

    def compute() -> list[tuple[str, Slope]]:
        run = Run(setting, point)
        held[:] = [run]
        terms = [dense_term(run, term) for term in value.terms]

        def error(j: int) -> arb:
            total = run.m.q * (-run.shift) - nullstep.on_detector(run.m) * run.shift
            for k, term in zip(value.powers, terms, strict=True):
                total = total + term * acb(run.tau(j) ** k)
            ours = nullstep.absorber_levels(nullstep.dagger(run.basis) * total * run.basis, 0)
            energy, rate = nullstep.level_errors(run.levels(j), ours)
            return energy.max(rate)

        return [("levels", settle(error, value.remainder, run.m.h, digits))]

    slopes = with_precision(compute)
    return held[0], slopes
