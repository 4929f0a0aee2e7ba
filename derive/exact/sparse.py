"""Plain sparse matrices over an exact field: rows as dicts, zeros absent.  Trusted by both roads, so kept dull."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction

from derive.exact.field import Element

Vector = dict[int, Element]
Sparse = dict[int, Vector]


def added(a: Sparse, b: Sparse) -> Sparse:
    """a + b."""
    out = {x: dict(row) for x, row in a.items()}
    for x, row in b.items():
        accumulate(out.setdefault(x, {}), row)
    return {x: row for x, row in out.items() if row}


def accumulate(into: Vector, row: Vector) -> None:
    """into += row, zeros removed."""
    for y, value in row.items():
        have = into.get(y)
        total = value if have is None else have + value
        if total:
            into[y] = total
        else:
            into.pop(y, None)


def scaled(a: Sparse, q: Fraction) -> Sparse:
    """a times a rational."""
    if not q:
        return {}
    return {x: {y: v.scaled(q) for y, v in row.items()} for x, row in a.items()}


def multiplied(a: Sparse, b: Sparse) -> Sparse:
    """a b."""
    out: Sparse = {}
    for x, row in a.items():
        found: Vector = {}
        for y, value in row.items():
            below = b.get(y)
            if below:
                accumulate(found, {z: value * w for z, w in below.items()})
        if found:
            out[x] = found
    return out


def applied(a: Sparse, v: Vector) -> Vector:
    """a v."""
    out: Vector = {}
    for x, row in a.items():
        for y, value in row.items():
            if y in v:
                accumulate(out, {x: value * v[y]})
    return out


def from_entries(entries: Iterable[tuple[int, int, Element]]) -> Sparse:
    """Entries (x, y, value); a repeated place adds up."""
    out: Sparse = {}
    for x, y, value in entries:
        accumulate(out.setdefault(x, {}), {y: value})
    return {x: row for x, row in out.items() if row}
