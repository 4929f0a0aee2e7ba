"""The roads of topic `generator` for an imperfect detector.

    coefficient   claimed entries of G_k against samples of the slow step on a small circle (`slow_contour.py`)
    trend         slow levels of K = (1 - (1 - q) P) exp(-i H tau) against the eigenvalues of the truncated generator,
                  tau halved: the difference falls like tau^(K+1) or faster

The exact road is the perfect detector's with another solver (`slow_solved.py`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from flint import acb, acb_mat, arb, ctx

from derive.checks.absorber.levels import finding_of, settle, with_precision
from derive.checks.absorber.runs import Run
from derive.checks.absorber.slopes import ROAD as TREND
from derive.checks.absorber.slopes import Slope
from derive.checks.generator.measured import Measured, lay_beside
from derive.checks.reading import Reading, read_claim
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import ONE
from derive.numerics import nullstep
from derive.numerics.contour import choose_circle
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for
from derive.numerics.slow_contour import choose_slow_circle, enclose_slow_generators
from derive.numerics.system import finite_space, system
from derive.problem.balls import ball
from derive.problem.efficiency import missed
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Expansion, Finding, Matrix

ROAD = "coefficient"
SPARE_DIGITS = 6
MOST_SITES = 80  # dense matrices of balls near the detector
ATTEMPTS = 3


def check_slow_coefficient(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about the quantity "generator"."""
    found = {}
    for claim in claims:
        try:
            found[claim.id] = _compared(setting, read_claim(claim), effort)
        except NotCovered as reason:
            found[claim.id] = Finding("untested", ROAD, evidence=str(reason))
    return Seen(found)


def _compared(setting: Setting, reading: Reading, effort: Check) -> Finding:
    perfect = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
    support = sorted({x for w in setting.detectors for v in w.vectors for x, _ in v})
    order = reading.orders[-1]
    sites = ball(finite_space(setting).rows, support, order + 1)
    if len(sites) > MOST_SITES:
        raise NotCovered(f"{len(sites)} sites lie within {order + 1} steps of the detector, too many for this road")
    digits: list[int] = []
    points = sample_points(setting, effort, reading.claim.assume)
    for n, point in enumerate(points, start=1):
        outcome = _at_point(setting, perfect, point, sites, reading, effort.digits)
        if isinstance(outcome, str):
            return Finding("refuted", ROAD, points=n, point=point.without("tau").text(), evidence=outcome)
        if outcome is None:
            return Finding("undecided", ROAD, points=n, evidence=f"the balls stay too wide for {effort.digits} digits")
        digits.append(outcome)
    if not points:
        return Finding("untested", ROAD, evidence="no sampled point met the assumptions")
    if not reading.closed:
        return Finding("undecided", ROAD, min(digits), len(points), evidence="the claim is about all orders")
    note = f"samples of the slow step on the {len(sites)} sites within {order + 1} steps of the detector"
    return Finding("agrees", ROAD, min(digits), len(points), evidence=note)


def _at_point(
    setting: Setting, perfect: Setting, point: Point, sites: tuple[int, ...], reading: Reading, digits: int
) -> str | int | None:
    """A miss in words, the digits shared, or None where no precision decides."""
    order, root = reading.orders[-1], missed(setting.detectors[0].efficiency, setting.domains())
    for attempt in range(ATTEMPTS):
        wanted = digits + (SPARE_DIGITS << 2 * attempt)
        with ctx.workprec(bits_for(wanted)):
            q = enclose(root, Values.at(point.mapping())).real
            circle = choose_slow_circle(q, order, wanted, len(sites))
        with ctx.workprec(circle.bits << attempt):
            try:
                values = Values.at(point.mapping())
                s = system(perfect, values, sites)
                near = nullstep.measured_of(s)
                found = enclose_slow_generators(near, s.E0, acb(enclose(root, values).real), order, circle)
                matrices = [m.entries() for m in found]
                measured = Measured(perfect, values, s, order, choose_circle(order, digits, len(sites)), matrices)
                gauge = lay_beside(reading, measured, digits)
            except NeedsPrecision:
                continue
            if gauge.misses:
                return gauge.first_miss()
            if not gauge.wide:
                return digits if gauge.shared is None else gauge.shared
    return None


# -- levels of the truncated generator


def check_slow_order(setting: Setting, claim: Claim, effort: Check) -> Seen:
    """The finding for `generator.truncated`."""
    if not isinstance(claim.value, Expansion):
        return Seen()
    try:
        results = []
        for point in sample_points(setting, effort, claim.assume)[:2]:
            results.append(_levels(setting, claim, point, effort.digits))
    except (NotCovered, OutsideValidity) as reason:
        return Seen({claim.id: Finding("untested", TREND, evidence=str(reason))})
    except NeedsPrecision as reason:
        return Seen({claim.id: Finding("undecided", TREND, evidence=str(reason))})
    return Seen({claim.id: finding_of(results, f"O(tau^{claim.value.remainder}) is claimed")})


def _levels(setting: Setting, claim: Claim, point: Point, digits: int) -> tuple[Run, list[tuple[str, Slope]]]:
    held: list[Run] = []

    def compute() -> list[tuple[str, Slope]]:
        run = Run(setting, point)
        held[:] = [run]
        value = claim.value
        if not isinstance(value, Expansion):
            raise NotCovered("the truncated generator is an expansion")
        terms = [dense_term(run, term) for term in value.terms]

        def error(j: int) -> arb:
            return _level_error(run, terms, value.powers, j)

        return [("levels", settle(error, value.remainder, run.m.h, digits))]

    slopes = with_precision(compute)
    return held[0], slopes


def dense_term(run: Run, term: object) -> acb_mat:
    out = acb_mat(run.m.size, run.m.size)
    if isinstance(term, Matrix):
        for x, y, f in term.entries():
            out[x, y] = enclose(f, run.values)
    return out


def _level_error(run: Run, terms: list[acb_mat], powers: tuple[int, ...], j: int) -> arb:
    """The larger of the energy and rate errors over bright levels at the j-th halving."""
    tau, depths = run.tau(j), acb_mat(run.m.rank, run.m.rank)
    for a in range(run.m.rank):  # the detector's own vectors are pushed far below, each to a place of its own
        depths[a, a] = acb(0, -8 * (a + 1) * (1 + run.m.h))
    total = run.m.d * depths * nullstep.dagger(run.m.d) - run.m.q * run.shift
    for k, term in zip(powers, terms, strict=True):
        total = total + term * acb(tau**k)
    ours = nullstep.absorber_levels(nullstep.dagger(run.basis) * total * run.basis, run.m.rank)
    energy, rate = nullstep.level_errors(run.levels(j), ours)
    return energy.max(rate)
