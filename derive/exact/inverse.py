"""The inverse of a small matrix over an exact field, by elimination.  Trusted by both roads, so kept dull."""

from __future__ import annotations

from derive.exact.field import Element


def inverted(matrix: list[list[Element]]) -> list[list[Element]]:
    """matrix^-1, r x r; a matrix without an inverse raises `ZeroDivisionError`."""
    size, field = len(matrix), matrix[0][0].field
    rows = [[*line, *(field.one if a == b else field.zero for b in range(size))] for a, line in enumerate(matrix)]
    for k in range(size):
        pivot = next((a for a in range(k, size) if rows[a][k]), None)
        if pivot is None:
            raise ZeroDivisionError("this matrix has no inverse")
        rows[k], rows[pivot] = rows[pivot], rows[k]
        lead = rows[k][k]
        rows[k] = [x / lead for x in rows[k]]
        for a in range(size):
            factor = rows[a][k]
            if a != k and factor:
                rows[a] = [x - factor * y for x, y in zip(rows[a], rows[k], strict=True)]
    return [line[size:] for line in rows]
