"""Road `exact`: the generator's defining equation, re-exponentiated by plain sparse arithmetic.

With x = -i tau and L_d = i^(d-1) G_(d-1), the equation exp(sum_d x^d L_d) = sum_m x^m (H^m)_QQ/m! has one solution
as a formal series: its coefficient of x^m holds L_m once, linearly, beside products of lower ones.  Solving it
degree by degree gives every G_k from the setting alone, with no logarithm and no detector-local algebra; a claim is
compared with that, and an exact zero proves.  The graph is cut at K + 1 steps from the detector, beyond which no
G_k, 1 <= k <= K, can see; G_0 = QHQ is compared on the whole graph.

A residual that is not zero refutes only where a point that meets the assumptions makes it non-zero.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from math import factorial

from derive.checks import asked
from derive.checks.generator.exponent import Exponent
from derive.checks.generator.slow_solved import SlowSolved
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.exact.sparse import Sparse, Vector, accumulate, added, multiplied, scaled
from derive.formula.text import text
from derive.formula.tree import I_UNIT, ONE, ZERO, Formula
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.balls import ball
from derive.problem.setting import Check, Finite, Row, Setting
from derive.record.said import Claim, Finding


@dataclass(frozen=True)
class Residual:
    """Where claim and equation differ, and the difference as a formula."""

    order: int
    place: tuple[int, int]
    value: Formula


def check_exact(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about the generator that has a place in an exact field; the others get none."""
    if not isinstance(setting.space, Finite):
        return {}
    wanted = [c for c in claims if asked.is_generator(c)]
    solved = Once(setting, max((asked.highest_order(c) for c in wanted), default=0))
    found = {c.id: _judge(setting, c, effort, solved) for c in wanted}
    return {name: finding for name, finding in found.items() if finding is not None}


def _judge(setting: Setting, claim: Claim, effort: Check, solved: Once) -> Finding | None:
    try:
        residual = next(iter(_residuals(setting, claim, solved)), None)
    except (NotCovered, ZeroDivisionError):
        return None
    if residual is None:
        return Finding("proved", "exact", evidence="re-exponentiated, the residual is exactly zero")
    return _refuted(setting, claim, effort, residual)


def _refuted(setting: Setting, claim: Claim, effort: Check, residual: Residual) -> Finding:
    """Refuted with a point where the residual is surely not zero, else undecided."""
    x, y = (_finite(setting).name(s) for s in residual.place)
    where = f"entry ({x}, {y}) of G_{residual.order}"
    for point in sample_points(setting, effort, claim.assume):
        if is_surely_nonzero(residual.value, point):
            evidence = f"{where}: claimed minus solved from the defining equation is {text(residual.value)}"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{where}: the residual {text(residual.value)} vanishes where tried")


def _finite(setting: Setting) -> Finite:
    if not isinstance(setting.space, Finite):
        raise TypeError("a finite graph is needed here")
    return setting.space


def _residuals(setting: Setting, claim: Claim, solved: Once) -> Iterable[Residual]:
    """Claimed minus solved, entry by entry, non-zero ones only."""
    for order, entries, single in asked.claimed_orders(claim, setting.domains()):
        if order == 0:
            yield from _whole(setting, entries) if single is None else _one_of_start(setting, entries, single)
        else:
            yield from _local(setting, order, entries, single, solved.solution())


# -- G_0 on the whole graph


def _whole(setting: Setting, entries: asked.Entries) -> Iterable[Residual]:
    """Claimed minus QHQ; rows whose formulas agree to the letter, away from the detector, cost nothing."""
    space = _finite(setting)
    support = sorted({x for v in setting.detectors[0].vectors for x, _ in v})
    near = set(ball(space.rows, support, 1))
    claimed = asked.by_row(entries)
    far = [x for x in range(space.size) if x not in near and claimed.get(x, ()) != space.rows[x]]
    region = Region(setting, tuple(sorted(near)), [f for x in (*near, *far) for _, f in claimed.get(x, ())])
    cut = region.cut(region.rows(region.sites, whole=True))
    for x in region.sites:
        yield from _row_residuals(region.field, 0, x, claimed.get(x, ()), cut.get(x, {}))
    if far:
        yield from _far_rows(setting, claimed, far)


def _one_of_start(setting: Setting, entries: asked.Entries, place: tuple[int, int]) -> Iterable[Residual]:
    """One claimed entry minus that of QHQ, wherever on the graph it stands."""
    support = sorted({x for v in setting.detectors[0].vectors for x, _ in v})
    near = ball(_finite(setting).rows, [*support, *place], 1)
    claimed = {(x, y): f for x, y, f in entries}.get(place, ZERO)
    region = Region(setting, near, [claimed])
    truth = region.cut(region.rows(region.sites, whole=True)).get(place[0], {}).get(place[1])
    row = ((place[1], claimed),)
    yield from _row_residuals(region.field, 0, place[0], row, {} if truth is None else {place[1]: truth})


def _far_rows(setting: Setting, claimed: dict[int, Row], far: list[int]) -> Iterable[Residual]:
    formulas = [f for x in far for _, f in (*claimed.get(x, ()), *_finite(setting).rows[x])]
    field = Field.of(formulas, setting.domains())
    for x in far:
        truth = {y: field.element(f) for y, f in _finite(setting).rows[x]}
        yield from _row_residuals(field, 0, x, claimed.get(x, ()), truth)


def _row_residuals(field: Field, order: int, x: int, row: Row, truth: Vector) -> Iterable[Residual]:
    left = dict(truth)
    accumulate(left, {y: -field.element(f) for y, f in row})
    for y in sorted(left):
        if left[y]:
            yield Residual(order, (x, y), field.formula(-left[y]))


# -- G_k near the detector


def _local(
    setting: Setting, order: int, entries: asked.Entries, single: tuple[int, int] | None, known: Solved | SlowSolved
) -> Iterable[Residual]:
    """Claimed minus solved for one order; a claim about one entry is compared there only."""
    field = Field.of([*known.region.formulas, I_UNIT, *(f for _, _, f in entries)], setting.domains())
    truth = known.generator(order)
    if single is not None:
        places = {single}
    else:
        places = {(x, y) for x, row in truth.items() for y in row} | {(x, y) for x, y, _ in entries}
    claimed = {(x, y): f for x, y, f in entries}
    for x, y in sorted(places):
        have = known.region.field.formula(truth[x][y]) if y in truth.get(x, {}) else ZERO
        difference = field.element(claimed.get((x, y), ZERO)) - field.element(have)
        if difference:
            yield Residual(order, (x, y), field.formula(difference))


class Region:
    """The graph near the detector in an exact field, cut off at a given distance."""

    def __init__(self, setting: Setting, sites: tuple[int, ...], also: Iterable[Formula] = ()):
        self.space = _finite(setting)
        self.sites = sites
        self.vectors = setting.detectors[0].vectors
        seen: dict[Formula, None] = {I_UNIT: None}
        seen.update((f, None) for v in self.vectors for _, f in v)
        seen.update((f, None) for x in sites for _, f in self.space.rows[x])
        self.formulas = tuple(seen)
        self.field = Field.of([*self.formulas, *also], setting.domains())

    def rows(self, sites: Iterable[int], whole: bool = False) -> Sparse:
        """H on the sites; `whole` keeps columns that lie outside."""
        inside = set(sites)
        element = self.field.element
        return {x: {y: element(f) for y, f in self.space.rows[x] if whole or y in inside} for x in inside}

    def cut(self, a: Sparse) -> Sparse:
        """Q a Q, Q = 1 - D D†."""
        p = self.projector()
        left = added(a, scaled(multiplied(p, a), Fraction(-1)))
        return added(left, scaled(multiplied(left, p), Fraction(-1)))

    def projector(self) -> Sparse:
        out: Sparse = {}
        for vector in self.vectors:
            d = {x: self.field.element(f) for x, f in vector}
            for x, f in d.items():
                accumulate(out.setdefault(x, {}), {y: f * self.field.conjugate(g) for y, g in d.items()})
        return out


class Solved:
    """L_1 ... L_(K+1) near the detector, from the exponential's coefficients one after the other."""

    def __init__(self, setting: Setting, order: int):
        support = sorted({x for v in setting.detectors[0].vectors for x, _ in v})
        self.region = Region(setting, ball(_finite(setting).rows, support, order + 1))
        self.exponent = Exponent()
        h = self.region.rows(self.region.sites)
        step = h
        for m in range(1, order + 2):
            step = h if m == 1 else multiplied(step, h)
            self.exponent.solve(scaled(self.region.cut(step), Fraction(1, factorial(m))))

    def generator(self, k: int) -> Sparse:
        """G_k = (-i)^k L_(k+1)."""
        field = self.region.field
        unit = field.rational(1)
        for _ in range(k % 4):
            unit = -(unit * field.element(I_UNIT))
        return {x: {y: unit * f for y, f in row.items()} for x, row in self.exponent.logs[k].items()}


class Once:
    """The solved equation up to the highest order asked for, computed when first needed and shared by all claims."""

    def __init__(self, setting: Setting, order: int):
        self._setting, self._order = setting, order
        self._found: Solved | SlowSolved | None = None

    def solution(self) -> Solved | SlowSolved:
        if self._found is None:
            perfect = self._setting.detectors[0].efficiency == ONE
            self._found = (Solved if perfect else SlowSolved)(self._setting, self._order)
        return self._found
