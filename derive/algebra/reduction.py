"""Eigenvalues of a matrix family, degenerate or not, to any order: the reduction process.

    T(x) = T_0 + x T_1 + ... + x^K T_K + O(x^(K+1))         Hermitian or not, over an exact field

For each eigenvalue lambda of T_0 (multiplicity m) the m eigenvalues that start there live on the invariant space that
starts as ker (T_0 - lambda)^m.  Written as a graph (1; X(x)), X(0) = 0, over that space and the complementary range,

    T_21 + T_22 X = X T_11 + X T_12 X    (order by order, one linear equation),       M(x) = T_11 + T_12 X   (m x m).

If T_0 acts there as lambda alone, (M - lambda)/x is a family again, of one order less, and is reduced in its turn: what
is left degenerate splits at the order that can split it.  If not, the eigenvalues move with fractional powers of x or
with integer ones as Newton's polygon of det(mu - M(x) + lambda) says: that is reported, not expanded.

Every coefficient is exact; a branch's remainder is O(x^(K+1)).  An eigenvalue outside the field is adjoined, one
formula for all roots of its polynomial.  After "perturbation theory for linear operators" (textbook), chapter II.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.factor import factored
from derive.algebra.linear import (
    Dense,
    identity,
    inverse,
    kernel,
    minus,
    plus,
    shifted,
    span_of_columns,
    times,
)
from derive.algebra.polynomial import Polynomial, added, faddeev, integral, multiplied, trimmed
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field


@dataclass(frozen=True)
class Fractional:
    """mu = y x^exponent (1 + ...), y the roots of `polynomial` (constant term first): one side of Newton's polygon.

    `exponent` counts from the order at which the branch stopped; None: mu is zero to the order kept.
    """

    exponent: Fraction | None
    polynomial: tuple[Element, ...]


@dataclass(frozen=True)
class Branch:
    """a_0 + a_1 x + ... for `multiplicity` eigenvalues that are not told apart to this order.

    `adjoined` holds (letter, monic polynomial without its top) for every root adjoined on the way: the branch stands
    for all of them.  Where `fractional` is given the coefficients end at the order it takes over from.
    """

    field: Field
    coefficients: tuple[Element, ...]
    multiplicity: int
    adjoined: tuple[tuple[str, tuple[Element, ...]], ...] = ()
    fractional: tuple[Fractional, ...] = ()


def truncated_eigenvalues(field: Field, family: Sequence[Dense], letter: str = "E") -> list[Branch]:
    """All eigenvalues of T(x) to x^K, K = len(family) - 1, grouped as they split; `letter` names adjoined roots."""
    branches: list[Branch] = []
    for factor, multiplicity in factored(field, faddeev(field, family[0])):
        at, lifted, value, adjoined = _rooted(field, family, factor, letter)
        for branch in truncated_branches(at, lifted, value, multiplicity, letter):
            branches.append(
                Branch(branch.field, branch.coefficients, branch.multiplicity, adjoined + branch.adjoined,
                       branch.fractional)
            )
    return branches


def truncated_branches(
    field: Field, family: Sequence[Dense], value: Element, multiplicity: int, letter: str = "E"
) -> list[Branch]:
    """The eigenvalues that start at `value`, an eigenvalue of T_0 of this multiplicity, to x^K."""
    return _continued(field, _reduced(field, list(family), value, multiplicity), value, letter)


def _rooted(
    field: Field, family: Sequence[Dense], factor: Polynomial, letter: str
) -> tuple[Field, list[Dense], Element, tuple[tuple[str, tuple[Element, ...]], ...]]:
    """The field in which the factor has a root, the family in it, and the root.

    A factor with denominators is scaled: the root adjoined is then a multiple of the factor's own.
    """
    if len(factor) == 2:
        return field, list(family), -factor[0], ()
    whole, scale = integral(factor)
    if scale != field.one and sum(name.startswith(("letter:", "unit", "growth")) for name in field.gen) > 1:
        raise NotCovered("a level that splits with a root of its own, in more letters than one, is not derived here")
    wider = WithRoot(field, letter, whole[:-1])
    lifted = [[[wider.lift(x) for x in row] for row in t] for t in family]
    return wider, lifted, wider.root / wider.lift(scale), ((letter, tuple(whole[:-1])),)


def _reduced(field: Field, family: list[Dense], value: Element, multiplicity: int) -> list[Dense]:
    """M_0 ... M_K, m x m."""
    n, m = len(family[0]), multiplicity
    if m == n:
        return family
    low = shifted(family[0], value)
    raised = low
    while len(kernel(field, raised)) < m:
        raised = times(raised, low)
    frame = [list(row) for row in zip(*kernel(field, raised), *span_of_columns(raised), strict=True)]
    back = inverse(field, frame)
    turned = [times(times(back, t), frame) for t in family]
    return _on_the_graph(field, turned, value, m)


def _on_the_graph(field: Field, family: list[Dense], value: Element, m: int) -> list[Dense]:
    """M = T_11 + T_12 X with X from T_21 + T_22 X = X T_11 + X T_12 X."""
    t11, t12 = [[r[:m] for r in t[:m]] for t in family], [[r[m:] for r in t[:m]] for t in family]
    t21, t22 = [[r[:m] for r in t[m:]] for t in family], [[r[m:] for r in t[m:]] for t in family]
    solve = inverse(field, shifted(t22[0], value))
    nilpotent = shifted(t11[0], value)
    x: list[Dense | None] = [None]
    moved = [t11[0]]
    for k in range(1, len(family)):
        rest = t21[k]
        for j in range(1, k):
            rest = plus(rest, minus(times(t22[k - j], _given(x[j])), times(_given(x[j]), moved[k - j])))
        x.append(_sylvester(solve, nilpotent, rest))
        total = t11[k]
        for j in range(1, k + 1):
            total = plus(total, times(t12[k - j], _given(x[j])))
        moved.append(total)
    return moved


def _given(x: Dense | None) -> Dense:
    if x is None:
        raise TypeError("the graph starts at order one")
    return x


def _sylvester(solve: Dense, nilpotent: Dense, rest: Dense) -> Dense:
    """X with (T_22 - lambda) X - X N = -rest: X = -sum_j (T_22 - lambda)^(-j-1) rest N^j."""
    term = times(solve, rest)
    total = term
    while any(map(any, nilpotent)) and any(map(any, term)):
        term = times(times(solve, term), nilpotent)
        total = plus(total, term)
    return [[-v for v in row] for row in total]


def _continued(field: Field, family: list[Dense], value: Element, letter: str) -> list[Branch]:
    """The branches of a family whose T_0 has the one eigenvalue `value`."""
    m = len(family[0])
    if m == 1:
        return [Branch(field, tuple(t[0][0] for t in family), 1)]
    first = minus(family[0], [[value * x for x in row] for row in identity(field, m)])
    if any(map(any, first)):
        return [Branch(field, (value,), m, (), tuple(_newton_sides(field, [first, *family[1:]])))]
    if len(family) == 1:
        return [Branch(field, (value,), m)]
    inner = truncated_eigenvalues(field, family[1:], letter + "1")
    return [
        Branch(b.field, (_lifted(b.field, field, value), *b.coefficients), b.multiplicity, b.adjoined, b.fractional)
        for b in inner
    ]


def _lifted(into: Field, below: Field, x: Element) -> Element:
    """x in a field that was made from its own by adjoining roots."""
    if into is below or not isinstance(into, WithRoot):
        return x
    return into.lift(_lifted(into.below, below, x))


# -- Newton's polygon


def _newton_sides(field: Field, family: Sequence[Dense]) -> list[Fractional]:
    """The sides of the polygon of det(mu - M(x)), steepest last."""
    c = _characteristic_series(field, family)
    points = {j: v for j, series in enumerate(c) if (v := _valuation(series)) is not None}
    sides = []
    at = min(points)
    if at > 0:
        sides.append(Fractional(None, ()))
    top = len(c) - 1
    while at < top:
        slope = max(Fraction(points[at] - points[j], j - at) for j in points if j > at)
        end = max(j for j in points if j > at and Fraction(points[at] - points[j], j - at) == slope)
        edge = [field.zero] * (end - at + 1)
        for j in range(at, end + 1):
            if points.get(j) == points[at] - slope * (j - at):
                edge[j - at] = c[j][points[j]]
        sides.append(Fractional(slope, tuple(edge)))
        at = end
    return sides


def _valuation(series: Polynomial) -> int | None:
    return next((k for k, x in enumerate(series) if x), None)


def _characteristic_series(field: Field, family: Sequence[Dense]) -> list[Polynomial]:
    """Coefficients of det(mu - M(x)), each a truncated series in x, by the Faddeev-LeVerrier recurrence."""
    n, order = len(family[0]), len(family)
    a = [[trimmed([t[i][j] for t in family]) for j in range(n)] for i in range(n)]
    m = [[[field.one] if i == j else [] for j in range(n)] for i in range(n)]
    out: list[Polynomial] = [[field.one]]
    for k in range(1, n + 1):
        product = [[_row_times(a[i], [row[j] for row in m], order) for j in range(n)] for i in range(n)]
        trace: Polynomial = []
        for i in range(n):
            trace = added(trace, product[i][i])
        c = [x.scaled(Fraction(-1, k)) for x in trace]
        out.append(c)
        m = [[added(x, c) if i == j else x for j, x in enumerate(row)] for i, row in enumerate(product)]
    return out[::-1]


def _row_times(row: Sequence[Polynomial], column: Sequence[Polynomial], order: int) -> Polynomial:
    total: Polynomial = []
    for x, y in zip(row, column, strict=True):
        total = added(total, trimmed(multiplied(x, y)[:order]))
    return total
