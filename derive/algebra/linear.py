"""Dense linear algebra over an exact field, by elimination: kernels, ranges, inverses.  Pivots are the first that
are not exactly zero, so ranks are those at generic values of the letters."""

from __future__ import annotations

from collections.abc import Sequence

from derive.exact.field import Element, Field

Dense = list[list[Element]]


def identity(field: Field, n: int) -> Dense:
    return [[field.one if i == j else field.zero for j in range(n)] for i in range(n)]


def times(a: Dense, b: Dense) -> Dense:
    """a b; a matrix without rows or columns gives one without entries."""
    columns = list(zip(*b, strict=True))
    return [[_dot(row, column) for column in columns] for row in a]


def _dot(row: Sequence[Element], column: Sequence[Element]) -> Element:
    total = row[0] * column[0]
    for x, y in zip(row[1:], column[1:], strict=True):
        if x and y:
            total = total + x * y
    return total


def minus(a: Dense, b: Dense) -> Dense:
    return [[x - y for x, y in zip(p, q, strict=True)] for p, q in zip(a, b, strict=True)]


def plus(a: Dense, b: Dense) -> Dense:
    return [[x + y for x, y in zip(p, q, strict=True)] for p, q in zip(a, b, strict=True)]


def shifted(a: Dense, value: Element) -> Dense:
    """a - value."""
    return [[x - value if i == j else x for j, x in enumerate(row)] for i, row in enumerate(a)]


def eliminated(a: Dense) -> tuple[Dense, list[int]]:
    """Reduced row echelon form and its pivot columns."""
    rows = [list(row) for row in a]
    pivots: list[int] = []
    for column in range(len(rows[0]) if rows else 0):
        lead = len(pivots)
        found = next((i for i in range(lead, len(rows)) if rows[i][column]), None)
        if found is None:
            continue
        rows[lead], rows[found] = rows[found], rows[lead]
        top = rows[lead][column]
        rows[lead] = [x / top if x else x for x in rows[lead]]
        for i, row in enumerate(rows):
            if i != lead and row[column]:
                c = row[column]
                rows[i] = [x - c * y if y else x for x, y in zip(row, rows[lead], strict=True)]
        pivots.append(column)
    return rows, pivots


def kernel(field: Field, a: Dense) -> list[list[Element]]:
    """A basis of the vectors v with a v = 0."""
    rows, pivots = eliminated(a)
    n = len(a[0])
    found = []
    for free in (j for j in range(n) if j not in pivots):
        v = [field.zero] * n
        v[free] = field.one
        for row, p in zip(rows, pivots, strict=False):
            v[p] = -row[free]
        found.append(v)
    return found


def span_of_columns(a: Dense) -> list[list[Element]]:
    """Columns of a that form a basis of its range."""
    _, pivots = eliminated(a)
    return [[row[p] for row in a] for p in pivots]


def inverse(field: Field, a: Dense) -> Dense:
    n = len(a)
    rows, pivots = eliminated([[*row, *unit] for row, unit in zip(a, identity(field, n), strict=True)])
    if pivots != list(range(n)):
        raise ZeroDivisionError("the matrix has no inverse")
    return [row[n:] for row in rows]
