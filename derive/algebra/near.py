"""Sparse matrices as members of a graded algebra: what a truncated logarithm needs of them."""

from __future__ import annotations

from fractions import Fraction

from derive.exact.sparse import Sparse, added, multiplied, scaled


class Near:
    """A sparse matrix over an exact field."""

    __slots__ = ("rows",)

    def __init__(self, rows: Sparse):
        self.rows = rows

    def __add__(self, other: Near) -> Near:
        return Near(added(self.rows, other.rows))

    def __mul__(self, other: Near) -> Near:
        return Near(multiplied(self.rows, other.rows))

    def scaled(self, q: Fraction) -> Near:
        return Near(scaled(self.rows, q))
