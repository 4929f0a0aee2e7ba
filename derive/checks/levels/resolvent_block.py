"""The secular determinant of a detector of any rank, rebuilt from the setting by elimination.

With D the detector's r vectors, T_k = D† H^k D (r x r) and tau = i x, a level E of the undetected step makes

    F(E, x) = det[ D† (E - H)^(-1) D + Y(E, x) ] h(E),
    Y = (c/2) x - sum_n B_2n/(2n)! x^(2n) D† (H - E)^(2n-1) D,      c = coth(kappa/2), 1 for a perfect detector

vanish; h = det(E - H) on all that is reached.  F is a polynomial in E at every power of x.

h    the determinant of the r x r polynomial relations among d_a, H d_a, H^2 d_a, ..., found by elimination

Polynomials are lists of coefficients, constant term first.  No Krylov orthogonalisation, no generator is used.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb, factorial

from derive.checks.levels.resolvent import bernoulli
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.formula.tree import I_UNIT, TAU, Formula
from derive.problem.efficiency import half_coth, missed
from derive.problem.setting import Finite, Setting

LARGEST_NUMERIC, LARGEST_SYMBOLIC, LARGEST_RANK = 30, 14, 4
"""Dimensions reached up to which the elimination is done, with one letter at most and with more; and the rank."""

Polynomial = list[Element]
Block = list[list[Polynomial]]


@dataclass(frozen=True)
class Power:
    """H^k d_a."""

    a: int
    k: int
    vector: Vector


class ResolventBlock:
    """h, T_k and F over the field of the setting, with tau and i in it."""

    def __init__(self, setting: Setting):
        self.setting = setting
        if not isinstance(setting.space, Finite):
            raise NotCovered("a finite graph is needed here")
        self.rows = setting.space.rows
        self.detector = setting.detectors[0]
        self.coth = half_coth(missed(self.detector.efficiency, setting.domains()))
        self.formulas = tuple(dict.fromkeys(self._formulas()))
        self.field = Field.of(self.formulas, setting.domains())
        self.d = [{x: self.field.element(f) for x, f in v} for v in self.detector.vectors]
        if len(self.d) > LARGEST_RANK:
            raise NotCovered(f"the secular determinant is rebuilt for detectors of rank {LARGEST_RANK} at most")
        self.h = determinant(self.field, self._relations())
        self.returns = [self.d]
        self._terms: dict[int, Polynomial] = {}

    @property
    def rank(self) -> int:
        return len(self.d)

    def _formulas(self) -> Iterable[Formula]:
        yield TAU
        yield I_UNIT
        yield self.coth
        yield from (f for v in self.detector.vectors for _, f in v)
        yield from (f for row in self.rows for _, f in row)

    def hamiltonian(self, v: Vector) -> Vector:
        out: Vector = {}
        for y, a in v.items():
            accumulate(out, {x: self.field.conjugate(self.field.element(f)) * a for x, f in self.rows[y]})
        return out

    def inner(self, a: Vector, b: Vector) -> Element:
        total = self.field.zero
        for x, f in a.items():
            if x in b:
                total = total + self.field.conjugate(f) * b[x]
        return total

    # -- h

    def _relations(self) -> Block:
        """Row a: the polynomials p_b with sum_b p_b(H) d_b = 0 that the first dependent H^k d_a brings."""
        letters = [n for n in self.field.gen if n.startswith(("letter:", "unit", "growth")) and n != "letter:tau"]
        most = LARGEST_SYMBOLIC if len(letters) > 1 else LARGEST_NUMERIC
        echelon: dict[int, tuple[Vector, dict[tuple[int, int], Element]]] = {}
        queue = [Power(a, 0, v) for a, v in enumerate(self.d)]
        found: dict[int, dict[tuple[int, int], Element]] = {}
        for one in queue:
            rest, made_of = dict(one.vector), {(one.a, one.k): self.field.one}
            _eliminate(rest, made_of, echelon)
            if not rest:
                found[one.a] = made_of
                continue
            if len(echelon) == most:
                raise NotCovered("the space reached from the detector is too large for elimination")
            top = self.field.one / rest[min(rest)]
            row = {x: top * f for x, f in rest.items()}
            echelon[min(rest)] = (row, {w: top * c for w, c in made_of.items()})
            queue.append(Power(one.a, one.k + 1, self.hamiltonian(one.vector)))
        return [[self._polynomial(found[a], b) for b in range(len(self.d))] for a in range(len(self.d))]

    def _polynomial(self, made_of: dict[tuple[int, int], Element], b: int) -> Polynomial:
        degree = max((k for (a, k) in made_of if a == b), default=-1)
        return [made_of.get((b, k), self.field.zero) for k in range(degree + 1)]

    # -- F

    def moment(self, k: int) -> list[list[Element]]:
        """T_k."""
        while len(self.returns) <= k:
            self.returns.append([self.hamiltonian(v) for v in self.returns[-1]])
        return [[self.inner(u, v) for v in self.returns[k]] for u in self.d]

    def terms(self, count: int) -> list[Polynomial]:
        """Coefficients of x^0 ... x^(count-1) in F, polynomials in E."""
        if count > len(self._terms):
            series = [self._at(m) for m in range(count)]
            whole = series_determinant(self.field, series)
            for m, p in enumerate(whole):
                for _ in range(self.rank - 1):
                    p = divided_exactly(p, self.h)
                self._terms[m] = p
        return [self._terms[m] for m in range(count)]

    def _at(self, m: int) -> Block:
        """The coefficient of x^m in h [D† (E - H)^(-1) D + Y]."""
        if m == 0:
            return self._resolvent()
        if m == 1:
            half = self.field.element(self.coth).scaled(Fraction(1, 2))
            return [[[half * c for c in self.h] if a == b else [] for b in range(self.rank)] for a in range(self.rank)]
        if m % 2:
            return [[[] for _ in self.d] for _ in self.d]
        front = -bernoulli(m) / factorial(m)
        powers = [self.moment(k) for k in range(m)]
        return [
            [product(self.field, self.h, [powers[m - 1 - k][a][b].scaled(front * (-1) ** k * comb(m - 1, k))
                                          for k in range(m)]) for b in range(self.rank)]
            for a in range(self.rank)
        ]

    def _resolvent(self) -> Block:
        """The polynomial part of h(E) sum_k T_k E^(-k-1)."""
        n = len(self.h) - 1
        powers = [self.moment(k) for k in range(n)]
        out: Block = [[[] for _ in self.d] for _ in self.d]
        for a in range(self.rank):
            for b in range(self.rank):
                for j in range(n):
                    total = self.field.zero
                    for k in range(n - j):
                        total = total + self.h[j + k + 1] * powers[k][a][b]
                    out[a][b].append(total)
        return out


def _eliminate(
    rest: Vector, made_of: dict[tuple[int, int], Element],
    echelon: dict[int, tuple[Vector, dict[tuple[int, int], Element]]],
) -> None:
    """Subtract known rows from the front on, in both."""
    while rest and min(rest) in echelon:
        row, its = echelon[min(rest)]
        front = -rest[min(rest)]
        accumulate(rest, {x: front * f for x, f in row.items()})
        for w, c in its.items():
            made_of[w] = made_of[w] + front * c if w in made_of else front * c


# -- polynomials


def product(field: Field, a: Sequence[Element], b: Sequence[Element]) -> Polynomial:
    out = [field.zero] * (len(a) + len(b) - 1) if a and b else []
    for i, x in enumerate(a):
        if x:
            for j, y in enumerate(b):
                out[i + j] = out[i + j] + x * y
    return out


def total(field: Field, a: Sequence[Element], b: Sequence[Element], sign: int = 1) -> Polynomial:
    """a + b, or a - b."""
    length = max(len(a), len(b))
    left = [*a, *[field.zero] * (length - len(a))]
    right = [*b, *[field.zero] * (length - len(b))]
    return [x + y if sign > 0 else x - y for x, y in zip(left, right, strict=True)]


def divided_exactly(a: Sequence[Element], monic: Sequence[Element]) -> Polynomial:
    """a/monic, which leaves nothing."""
    rest, size = list(a), len(monic)
    out: Polynomial = []
    for k in range(len(a) - size, -1, -1):
        c = rest[k + size - 1]
        out.append(c)
        if c:
            for j, y in enumerate(monic):
                rest[k + j] = rest[k + j] - c * y
    if any(rest):
        raise ArithmeticError("a secular determinant that is no polynomial: a defect of this check")
    return out[::-1]


def determinant(field: Field, matrix: Block) -> Polynomial:
    """Of polynomials in E, made monic; by minors of the first row."""
    (found,) = series_determinant(field, [matrix])
    while found and not found[-1]:
        found.pop()
    return [c / found[-1] for c in found]


def series_determinant(field: Field, series: Sequence[Block]) -> list[Polynomial]:
    """det sum_m x^m M_m to x^(len(series)-1), each coefficient a polynomial in E."""
    rows = [[[m[a][b] for m in series] for b in range(len(series[0]))] for a in range(len(series[0]))]
    return _minor(field, rows, tuple(range(len(rows))), 0)


def _minor(field: Field, rows: list[list[list[Polynomial]]], columns: tuple[int, ...], top: int) -> list[Polynomial]:
    if len(columns) == 1:
        return rows[top][columns[0]]
    out: list[Polynomial] = [[] for _ in rows[0][0]]
    for place, b in enumerate(columns):
        below = _minor(field, rows, columns[:place] + columns[place + 1 :], top + 1)
        for m, x in enumerate(rows[top][b]):
            for n, y in enumerate(below[: len(out) - m]):
                if x and y:
                    out[m + n] = total(field, out[m + n], product(field, x, y), (-1) ** place)
    return out
