"""The graph-free words, specialised: G_k in words against contour enclosures of fixed small systems.

A word is a product of A = QHQ, B_m = V C^m V†, V = QHP, C = PHP and moments mu_m = V† A^m V.  Two invented
Hermitian matrices with rational complex entries, one watched on a site and one on a plane of two vectors that are
no sites, turn every word into a matrix of balls; the measured side is the contour's, which knows H and P only.
A coefficient that is wrong shows, because in these cases the words of one degree are linearly independent up to
degree 5 (a test confirms it).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import reduce

from flint import acb, acb_mat, ctx, fmpq

from derive.checks.gauge import Gauge
from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula
from derive.numerics.contour import choose_circle, enclose_generators
from derive.numerics.evaluate import Values, enclose
from derive.numerics.system import System, assemble, dagger, dense, projector
from derive.problem.setting import Check
from derive.record.said import Claim, Finding

ROAD = "coefficient"
PREFIX = "generator.universal."
SPARE_DIGITS = 6


@dataclass(frozen=True, slots=True)
class Case:
    """A Hermitian matrix by its lower triangle, pairs (re, im) over 7; detector vectors, pairs over 5."""

    name: str
    lower: tuple[tuple[tuple[int, int], ...], ...]
    detector: tuple[tuple[tuple[int, tuple[int, int]], ...], ...]


ONE_SITE = Case(
    "five sites with one watched",
    (
        ((3, 0),),
        ((5, -2), (-4, 0)),
        ((-1, 6), (2, 3), (6, 0)),
        ((4, 1), (-3, -5), (1, 2), (-2, 0)),
        ((-6, 4), (5, 1), (-2, -1), (3, 4), (1, 0)),
    ),
    (((1, (5, 0)),),),
)
A_PLANE = Case(
    "six sites with a plane of two vectors watched",
    (
        ((2, 0),),
        ((-3, 5), (5, 0)),
        ((4, -1), (1, -6), (-3, 0)),
        ((2, 3), (-5, 2), (6, 1), (1, 0)),
        ((-1, -4), (3, 3), (-2, 5), (4, -2), (-6, 0)),
        ((5, 2), (-2, -3), (1, 4), (-4, 1), (3, -5), (4, 0)),
    ),
    (((0, (3, 0)), (4, (0, 4))), ((0, (0, 4)), (4, (3, 0)))),
)
CASES = (ONE_SITE, A_PLANE)


def check_words(claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim `generator.universal.k`, by id."""
    mine = [c for c in claims if c.id.startswith(PREFIX)]
    return {c.id: _check_one(c, effort.digits) for c in mine}


def _check_one(claim: Claim, digits: int) -> Finding:
    if not isinstance(claim.value, Formula):
        return Finding("untested", ROAD, evidence="only words written as one formula are specialised")
    order, worst = int(claim.id.removeprefix(PREFIX)), None
    try:
        for case in CASES:
            gauge = _beside(claim.value, order, case, digits)
            if gauge.misses:
                return Finding("refuted", ROAD, points=1, evidence=f"{case.name}: {gauge.first_miss()}")
            if gauge.wide:
                return Finding("undecided", ROAD, gauge.shared, evidence=gauge.wide)
            worst = min(d for d in (worst, gauge.shared) if d is not None)
    except NotCovered as reason:
        return Finding("untested", ROAD, evidence=str(reason))
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, evidence=str(reason))
    names = " and ".join(case.name for case in CASES)
    evidence = f"specialised to {names}, and compared with contour samples of log(Q U Q)"
    return Finding("agrees", ROAD, worst, len(CASES), evidence=evidence)


def _beside(value: Formula, order: int, case: Case, digits: int) -> Gauge:
    gauge = Gauge(digits)
    circle = choose_circle(order, digits + SPARE_DIGITS, len(case.lower))
    with ctx.workprec(circle.bits):
        s = case_system(case)
        measured = enclose_generators(s, order, circle)[order]
        claimed = word_matrix(value, Blocks(s))
        for x in range(s.size):
            for y in range(s.size):
                what = f"entry ({x}, {y}) of G_{order}"
                gauge.compare(what, claimed[x, y], measured[x, y], s.h ** (order + 1))
    return gauge


def case_system(case: Case) -> System:
    """The case in balls, at the working precision."""
    n = len(case.lower)
    full = [[_part(case.lower[max(x, y)][min(x, y)], 7, x < y) for y in range(n)] for x in range(n)]
    rows = tuple(tuple(enumerate(row)) for row in full)
    detector = tuple(tuple((x, _part(a, 5)) for x, a in v) for v in case.detector)
    return assemble(rows, detector, range(n))


def _part(pair: tuple[int, int], below: int, mirrored: bool = False) -> acb:
    re, im = pair
    return acb(fmpq(re, below), fmpq(-im if mirrored else im, below))


class Blocks:
    """A, V, C, B_m, mu_m of one system, each as an n x n matrix in the site basis."""

    def __init__(self, s: System):
        n = s.size
        self.one = acb_mat(n, n, [acb(int(x == y)) for x in range(n) for y in range(n)])
        H, Q = dense(s), projector(s)
        P = self.one - Q
        self.A, self.V, self.C = Q * H * Q, Q * H * P, P * H * P
        self.P = P

    def letter(self, name: str, sub: object) -> acb_mat:
        """The matrix of one operator letter."""
        if sub is None and name in ("A", "V", "C"):
            return {"A": self.A, "V": self.V, "C": self.C}[name]
        if isinstance(sub, int) and name == "B":
            return self.V * self._power(self.C, sub) * dagger(self.V)
        if isinstance(sub, int) and name == "mu":
            return dagger(self.V) * self._power(self.A, sub) * self.V
        raise NotCovered(f"the letter {name} has no matrix here")

    def _power(self, matrix: acb_mat, n: int) -> acb_mat:
        """matrix^n with matrix^0 = 1: V and V† stand around it."""
        return reduce(lambda product, _: product * matrix, range(n), self.one)


def word_matrix(f: Formula, blocks: Blocks) -> acb_mat:
    """The matrix of a combination of words, factors in the order they stand; a number alone times the identity."""
    if f.head == "operator":
        name, sub, dagged = f.args
        matrix = blocks.letter(name, sub)
        return dagger(matrix) if dagged else matrix
    if f.head == "plus":
        return _fold(f, blocks, lambda a, b: a + b)
    if f.head == "times":
        return _fold(f, blocks, lambda a, b: a * b)
    if f.head == "power" and _holds_operator(f):
        return _operator_power(f, blocks)
    return blocks.one * enclose(f, Values({}))


def _fold(f: Formula, blocks: Blocks, join: Callable[[acb_mat, acb_mat], acb_mat]) -> acb_mat:
    return reduce(join, (word_matrix(a, blocks) for a in f.args))


def _holds_operator(f: Formula) -> bool:
    return f.head == "operator" or any(_holds_operator(a) for a in f.args if isinstance(a, Formula))


def _operator_power(f: Formula, blocks: Blocks) -> acb_mat:
    base, exponent = f.args
    q = exponent.args[0] if exponent.head == "number" else None
    if q is None or q.denominator != 1 or not 0 < q <= 200:
        raise NotCovered("an operator to a power that is not a small whole number")
    return reduce(lambda a, b: a * b, [word_matrix(base, blocks)] * int(q))
