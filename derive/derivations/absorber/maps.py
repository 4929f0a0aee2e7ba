"""From an absorber's states to the measured ones: the maps in words, and on the graph at hand.

Measured and absorbed evolution have slow subspaces (1; X), (1, Z) and generators G, S on range(Q).  With L local and
G L = L S through the order where their levels part,

    Q K^n Q = L [Q exp(-i H_abs t) Q] R,   R = N_a L^-1 N_m^-1,   N = 1 + Z X,   t = n tau,

for starts in range(Q); a start on the detector enters as R Z_m, and what a "no" leaves on an imperfect detector is
X_m L.  Derived here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from derive.algebra.local import Block, product, sum_of
from derive.algebra.paths import A, C, Paths, V, W, Word, in_order, loops
from derive.algebra.similar import Similarity, local_similarity
from derive.algebra.slow import Series, Slow, inverted, log_of, measured_slow, multiplied
from derive.derivations.absorber.kinds import slow_of
from derive.derivations.imperfect import COTH
from derive.derivations.watched import Watched, sandwiched
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.formula.tree import letter
from derive.problem.setting import POSITIVE, Row
from derive.record.said import Matrix

ORDERS = {"plain": 3, "dressed": 4, "ancilla": 5, "cascade": 7}  # of x in x G; one beyond what is needed is harmless


@dataclass(frozen=True)
class Maps:
    """For one absorber: similarity and its gap, left and right maps, from and to the detector, all as words.

    `left`, `right` are known below order `order` (of tau), `entering`, `staying` through it.
    """

    kind: str
    similar: Similarity
    left: Series
    right: Series
    entering: Series
    staying: Series

    @property
    def order(self) -> int:
        """The power of tau at which the levels part."""
        return len(self.left)


def word_field(perfect: bool) -> tuple[Field, Element]:
    """Coefficients of words: rational for a perfect detector, else rational functions of coth(kappa/2)."""
    if perfect:
        field = Field.of([], {})
        return field, field.one
    field = Field.of([letter(COTH)], {COTH: POSITIVE})
    return field, field.element(letter(COTH))


def maps_of(kind: str, perfect: bool) -> Maps:
    """The maps of one absorber, graph-free."""
    field, c = word_field(perfect)
    n = ORDERS[kind]
    measured, absorbed = measured_slow(field, c, n), slow_of(kind, field, c, n)
    tidy: Callable[[Paths], Paths] = in_order if kind == "cascade" else _as_it_is
    similar = local_similarity(log_of(measured), absorbed.y, tidy)
    return _completed(kind, similar, measured, absorbed, tidy)


def _as_it_is(paths: Paths) -> Paths:
    return paths


def _completed(
    kind: str, similar: Similarity, measured: Slow, absorbed: Slow, tidy: Callable[[Paths], Paths]
) -> Maps:
    left, p = similar.l, len(similar.l)
    ahead = multiplied(absorbed.overlap()[:p], inverted(left))
    right = [tidy(f) for f in multiplied(ahead, inverted(measured.overlap()[:p]))]
    z, x = [row[0] for row in measured.z[: p + 1]], [row[0] for row in measured.x[: p + 1]]
    nothing = [Paths(left[0].field)]  # Z and X begin at order 1, so one order more is known
    entering = [tidy(f) for f in multiplied(right + nothing, z)]
    staying = [tidy(f) for f in multiplied(x, left + nothing)]
    return Maps(kind, similar, left, right, entering, staying)


# -- on the graph


class Placed:
    """Words evaluated on a graph: the vectors A^i V, C, the moments, and coth(kappa/2) in the graph's field."""

    def __init__(self, watched: Watched, highest: int, c: Element):
        self.watched = watched
        self.krylov = watched.krylov(highest)
        self.moments = watched.moments(self.krylov, max(highest - 1, 0))
        self.c = c

    def matrix(self, paths: Paths, k: int) -> Matrix:
        """(-i)^k times the words, N x N; the identity word is the projector Q."""
        if any(not w for w in paths.terms):
            return self.outside()
        places: dict[tuple[int, int], Block] = {}
        left = right = self.krylov
        for w, coefficient in paths.terms.items():
            i, inner, j = _parted(w)
            block = self._block(inner, in_field(coefficient, self.c, self.watched.field))
            places[i, j] = sum_of(places[i, j], block) if (i, j) in places else block
            left = [self.watched.d] if w[0] in (W, C) else left
            right = [self.watched.d] if w[-1] in (V, C) else right
        return sandwiched(self.watched, left, places, right, k)

    def outside(self) -> Matrix:
        """Q = 1 - P."""
        watched, field = self.watched, self.watched.field
        rows: list[tuple[int, Row]] = []
        for x in range(watched.space.size):
            v: Vector = watched.outside({x: field.one}) if x in watched.support else {x: field.one}
            row = tuple((y, field.formula(field.conjugate(v[y]))) for y in sorted(v)) if v else ()
            if row:
                rows.append((x, row))
        return Matrix(watched.space.size, (), tuple(rows))

    def _block(self, inner: Word, factor: Element) -> Block:
        """factor * C^.. mu_.. C^.. as an r x r block."""
        total = self.moments.identity()
        for loop in loops(inner):
            total = product(total, self.moments.c if loop == (C,) else self.moments.mu[len(loop) - 2])
        return [[x * factor for x in line] for line in total]


def in_field(coefficient: Element, c: Element, field: Field) -> Element:
    """num(c)/den(c) for an element num/den of the words' field."""
    top = _polynomial(coefficient.num, c, field)
    return top if coefficient.den is None else top / _polynomial(coefficient.den, c, field)


def _polynomial(poly: Any, c: Element, field: Field) -> Element:
    total = field.zero
    for exponents, value in poly.terms():
        term = field.rational(Fraction(int(value.p), int(value.q)))
        for _ in range(sum(map(int, exponents))):
            term = term * c
        total = total + term
    return total


def _parted(w: Word) -> tuple[int, Word, int]:
    """(i, inner, j) of A^i V inner W A^j; on an end that lies on the detector i or j is 0."""
    i = w.index(V) if w[0] in (A, V) else 0
    j = w[::-1].index(W) if w[-1] in (A, W) else 0
    begin = i + 1 if w[0] in (A, V) else 0
    end = len(w) - j - 1 if w[-1] in (A, W) else len(w)
    return i, w[begin:end], j

