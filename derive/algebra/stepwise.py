"""Undetected steps in the bright space, as matrices over an exact field, and sums over all of them by elimination.

The basis u_0, u_1, ... is orthogonal, <u_i|u_i> = n_i.  A step's matrix holds coordinates, K u_j = sum_i k_ij u_i; an
observable is a form, y_ij = <u_i|Y|u_j>.  Then

    Y = sum_m (K†)^m X K^m     solves     y - k† y k = x,

a linear system of m^2 equations for a bright space of dimension m, with one solution: on that space every eigenvalue
of K lies inside the unit circle.  Textbook algebra (Stein's equation).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from derive.algebra.bright import Krylov
from derive.algebra.linear import Dense
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate

Act = Callable[[Vector], Vector]
Inner = Callable[[Vector, Vector], Element]


def spanned(field: Field, act: Act, inner: Inner, vectors: Sequence[Vector]) -> Krylov:
    """The smallest space that holds `vectors` and is closed under any linear `act`; its matrix is not kept."""
    basis: list[Vector] = []
    norms: list[Element] = []
    waiting = list(vectors)
    while waiting:
        following = []
        for v in waiting:
            rest = dict(v)
            for u, n in zip(basis, norms, strict=True):
                c = inner(u, v)
                if c:
                    accumulate(rest, {x: -(f * c / n) for x, f in u.items()})
            if rest:
                basis.append(rest)
                norms.append(inner(rest, rest))
                following.append(act(rest))
        waiting = following
    return Krylov(field, tuple(basis), tuple(norms), (), ())


def coordinates(space: Krylov, inner: Inner, v: Vector) -> list[Element]:
    """The coordinates of the part of v in the space."""
    return [inner(u, v) / n for u, n in zip(space.basis, space.norms, strict=True)]


def matrix_of(space: Krylov, inner: Inner, act: Act) -> Dense:
    """Coordinates of act(u_j), column by column, as rows of a matrix."""
    columns = [coordinates(space, inner, act(u)) for u in space.basis]
    return [list(row) for row in zip(*columns, strict=True)]


def summed_form(field: Field, k: Dense, x: Dense) -> Dense:
    """y with y - k† y k = x."""
    m = len(k)
    bar = [[field.conjugate(f) for f in row] for row in k]
    rows: list[dict[int, Element]] = []
    for i in range(m):
        for j in range(m):
            row = {i * m + j: field.one}
            for a in range(m):
                for b in range(m):
                    c = bar[a][i] * k[b][j] if bar[a][i] and k[b][j] else None
                    if c:
                        accumulate(row, {a * m + b: -c})
            if x[i][j]:
                row[m * m] = x[i][j]
            rows.append(row)
    solution = _solved(field, rows, m * m)
    return [[solution[i * m + j] for j in range(m)] for i in range(m)]


def _solved(field: Field, rows: list[dict[int, Element]], size: int) -> list[Element]:
    """Sparse elimination; column `size` holds the right side."""
    held: dict[int, dict[int, Element]] = {}
    for row in rows:
        rest = dict(row)
        for pivot in sorted(held):
            c = rest.get(pivot)
            if c:
                accumulate(rest, {y: -(c * v) for y, v in held[pivot].items()})
        pivot = min(rest)
        top = rest[pivot]
        held[pivot] = {y: v / top for y, v in rest.items()}
    out = [field.zero] * size
    for pivot in sorted(held, reverse=True):
        total = held[pivot].get(size, field.zero)
        for y, v in held[pivot].items():
            if pivot < y < size:
                total = total - v * out[y]
        out[pivot] = total
    return out


def form_value(field: Field, y: Dense, c: Sequence[Element]) -> Element:
    """c† y c."""
    total = field.zero
    for i, a in enumerate(c):
        for j, b in enumerate(c):
            if a and b and y[i][j]:
                total = total + field.conjugate(a) * y[i][j] * b
    return total
