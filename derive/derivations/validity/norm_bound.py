"""A bound h on ||H - E0|| as a formula, row by row.

Every eigenvalue of H lies within r_x of H_xx for some x, r_x = sum_{y != x} |H_xy| v_y/v_x, for any weights v > 0
(Gershgorin's discs of v^-1 H v).  Absolute values are collected by their letters: with coefficients c_x,m >= 0,

    |H_xx - E0| + r_x <= sum_m c_x,m |m| <= h = sum_m (max_x c_x,m) |m|.

Weights other than 1 are tried on small graphs and kept where they lower h by a twentieth or more.  A small H that is
one monomial times a rational symmetric matrix gets a nearly tight bound instead (`tight_bound.py`).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import isqrt

from derive.derivations.validity.tight_bound import LARGEST, bound_tightly
from derive.formula.tree import ONE, ZERO, Formula, call, number, plus, power, times
from derive.problem.conjugate import Domains, surely_nonnegative, surely_real
from derive.problem.setting import Row

Parts = dict[Formula, Fraction]
LARGEST_WEIGHTED = 300
ROUNDS, DENOMINATOR = 24, 24
WORTH_IT = Fraction(19, 20)


@dataclass(frozen=True)
class NormBound:
    """||H - E0|| <= h."""

    E0: Formula
    h: Formula


def bound_norm(rows: Sequence[Row], domains: Domains) -> NormBound:
    """E0 and h for the sites of `rows` (columns that are no site of theirs are the caller's to drop)."""
    tight = _tight(rows, domains)
    if tight is not None:
        return tight
    table = [{y: _parts(f, domains) for y, f in row if y != x} for x, row in enumerate(rows)]
    diagonal = [dict(row).get(x, ZERO) for x, row in enumerate(rows)]
    plain = [Fraction(1)] * len(rows)
    found = _with_weights(table, diagonal, plain, domains)
    weights = _choose_weights(table)
    if weights is None:
        return found[0]
    other = _with_weights(table, diagonal, weights, domains)
    return other[0] if other[1] < WORTH_IT * found[1] else found[0]


def _tight(rows: Sequence[Row], domains: Domains) -> NormBound | None:
    """The bound of M where H = m M, m >= 0 a monomial, M rational and symmetric."""
    if len(rows) > LARGEST:
        return None
    table: list[dict[int, Fraction]] = []
    unit: Formula | None = None
    for row in rows:
        numbers = {}
        for y, f in row:
            q, m = _split(f)
            unit = m if unit is None else unit
            if m != unit or not surely_nonnegative(m, domains):
                return None
            numbers[y] = q
        table.append(numbers)
    if any(table[y].get(x) != q for x, row in enumerate(table) for y, q in row.items()):
        return None
    found = bound_tightly(table)
    if found is None or unit is None:
        return None
    return NormBound(times(number(found[0]), unit) if found[0] else ZERO, times(number(found[1]), unit))


def _split(f: Formula) -> tuple[Fraction, Formula]:
    """The rational in front of a product, and the rest."""
    if f.head == "number":
        return Fraction(f.args[0]), ONE
    if f.head == "times" and f.args[0].head == "number":
        return Fraction(f.args[0].args[0]), times(*f.args[1:])
    return Fraction(1), f


def on_sites(rows: Sequence[Row], sites: Sequence[int]) -> list[Row]:
    """H on some sites, renumbered; bonds that leave them are dropped."""
    local = {x: n for n, x in enumerate(sites)}
    return [tuple((local[y], f) for y, f in rows[x] if y in local) for x in sites]


def _with_weights(
    table: Sequence[dict[int, Parts]], diagonal: Sequence[Formula], v: Sequence[Fraction], domains: Domains
) -> tuple[NormBound, Fraction]:
    """The bound, and the sum of its coefficients, by which two bounds are compared."""
    reach = [_sum((p, v[y] / v[x]) for y, p in row.items()) for x, row in enumerate(table)]
    numbers = [f.args[0] for f in diagonal if f.head == "number"]
    if all(f == diagonal[0] for f in diagonal):
        return _bound(diagonal[0], reach)
    if len(numbers) == len(diagonal) and all(set(r) <= {ONE} for r in reach):
        low = min(d - r.get(ONE, Fraction(0)) for d, r in zip(numbers, reach, strict=True))
        high = max(d + r.get(ONE, Fraction(0)) for d, r in zip(numbers, reach, strict=True))
        return _bound(number((low + high) / 2), [{ONE: (high - low) / 2}])
    return _bound(ZERO, [_sum(((r, Fraction(1)), (_parts(f, domains), Fraction(1))))
                         for r, f in zip(reach, diagonal, strict=True)])


def _bound(E0: Formula, rows: Iterable[Parts]) -> tuple[NormBound, Fraction]:
    most: Parts = {}
    for row in rows:
        for m, c in row.items():
            most[m] = max(most.get(m, Fraction(0)), c)
    h = plus(*(times(number(c), m) for m, c in most.items() if c))
    return NormBound(E0, h), sum(most.values(), Fraction(0))


def _sum(parts: Iterable[tuple[Parts, Fraction]]) -> Parts:
    total: Parts = {}
    for p, weight in parts:
        for m, c in p.items():
            total[m] = total.get(m, Fraction(0)) + c * weight
    return total


def _parts(f: Formula, domains: Domains) -> Parts:
    """|f| <= sum_m c_m m, by the triangle inequality; each m a product of absolute values."""
    total: Parts = {}
    for term in f.args if f.head == "plus" else (f,):
        coefficient, rest = Fraction(1), []
        for factor in term.args if term.head == "times" else (term,):
            q = _size(factor, domains)
            if q is not None:
                coefficient *= q
            else:
                rest.append(_absolute(factor, domains))
        m = times(*rest)
        total[m] = total.get(m, Fraction(0)) + coefficient
    return {m: c for m, c in total.items() if c}


def _size(f: Formula, domains: Domains) -> Fraction | None:
    """A rational that |f| does not exceed, where f is a number, a root of one, a phase, a sine or a cosine."""
    if f.head == "number":
        return abs(Fraction(f.args[0]))
    if f.head == "constant" and f.args[0] == "i":
        return Fraction(1)
    if f.head == "call" and f.args[0] == "sqrt" and f.args[1].head == "number":
        return _root_above(abs(Fraction(f.args[1].args[0])))
    if f.head == "power" and f.args[0].head == "call" and f.args[1] == number(-1):
        inner = f.args[0]
        if inner.args[0] == "sqrt" and inner.args[1].head == "number" and inner.args[1].args[0] > 0:
            return _root_above(1 / Fraction(inner.args[1].args[0]))
    if f.head == "call" and f.args[0] in ("sin", "cos") and surely_real(f.args[1], domains):
        return Fraction(1)
    if f.head == "call" and f.args[0] == "exp" and _is_imaginary(f.args[1], domains):
        return Fraction(1)
    return None


def _is_imaginary(f: Formula, domains: Domains) -> bool:
    from derive.formula.tree import I_UNIT

    return f.head == "times" and list(f.args).count(I_UNIT) == 1 and surely_real(
        times(*(a for a in f.args if a != I_UNIT)), domains
    )


def _root_above(q: Fraction) -> Fraction:
    """At least sqrt(q), and at most a 1000th above."""
    scale = 1000 * q.denominator
    root = isqrt(q.numerator * q.denominator * 10**6)
    exact = root * root == q.numerator * q.denominator * 10**6
    return Fraction(root if exact else root + 1, scale)


def _absolute(f: Formula, domains: Domains) -> Formula:
    if surely_nonnegative(f, domains):
        return f
    if f.head == "power" and f.args[1].head == "number" and f.args[1].args[0].denominator == 1:
        return power(_absolute(f.args[0], domains), f.args[1])
    return call("abs", f)


def _choose_weights(table: Sequence[dict[int, Parts]]) -> list[Fraction] | None:
    """About the vector that the matrix of absolute values stretches most, in simple fractions."""
    n = len(table)
    if n > LARGEST_WEIGHTED:
        return None
    rows = [{y: float(sum(p.values())) for y, p in row.items()} for row in table]
    if not any(rows):
        return None
    v = [1.0] * n
    for _ in range(ROUNDS):
        w = [v[x] + sum(c * v[y] for y, c in rows[x].items()) for x in range(n)]
        largest = max(w)
        v = [c / largest for c in w]
    return [Fraction(max(1, round(c * DENOMINATOR)), DENOMINATOR) for c in v]
