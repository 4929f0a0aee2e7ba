"""The bright space, split off exactly: everything that a Hermitian A reaches from the columns of V.

    bright = span{A^m v : v a column of V, m >= 0},      dark = its orthogonal complement

is found by Lanczos' recursion in blocks, without square roots: the basis u_0, u_1, ... is orthogonal but not
normalised, <u_i|u_i> = n_i, so that every number stays in the field.  A new vector is dropped where it is exactly
zero; that decides the dimension.  A u_j = sum_i a_ij u_i with n_i a_ij = conj(n_j a_ji).

The same recursion from any other vector outside splits the dark space into cyclic pieces.  Divisions are by the n_i
only, squared lengths of vectors that are not identically zero; where letters take values that make one of them zero
the dimension drops.  Derived here (the recursion is textbook material).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate

Act = Callable[[Vector], Vector]
Inner = Callable[[Vector, Vector], Element]


@dataclass(frozen=True)
class Krylov:
    """An invariant space of A: orthogonal basis, squared lengths, A in that basis as {i: a_ij} for each j.

    `start[b]` holds the coordinates of the b-th vector it was grown from.
    """

    field: Field
    basis: tuple[Vector, ...]
    norms: tuple[Element, ...]
    columns: tuple[Vector, ...]
    start: tuple[Vector, ...]

    @property
    def size(self) -> int:
        return len(self.basis)


def reached(field: Field, act: Act, inner: Inner, vectors: Sequence[Vector]) -> Krylov:
    """The smallest space that holds `vectors` and is closed under A (`act`), which is Hermitian for `inner`."""
    basis: list[Vector] = []
    norms: list[Element] = []
    columns: list[Vector] = []

    def keep(rest: Vector, coordinates: Vector) -> Vector:
        """Append what is left of a vector, if anything is; its coordinates."""
        if rest:
            basis.append(rest)
            norms.append(inner(rest, rest))
            coordinates[len(basis) - 1] = field.one
        return coordinates

    start = []
    for v in vectors:
        coordinates = {i: inner(u, v) / n for i, (u, n) in enumerate(zip(basis, norms, strict=True)) if inner(u, v)}
        start.append(keep(_without(v, coordinates, basis), coordinates))
    j = 0
    while j < len(basis):
        image = act(basis[j])
        coordinates = {}
        for i in range(len(basis)):
            a = _known(field, columns, norms, i, j) if i < j else inner(basis[i], image) / norms[i]
            if a:
                coordinates[i] = a
        columns.append(keep(_without(image, coordinates, basis), coordinates))
        j += 1
    return Krylov(field, tuple(basis), tuple(norms), tuple(columns), tuple(start))


def _known(field: Field, columns: list[Vector], norms: list[Element], i: int, j: int) -> Element:
    """a_ij from a_ji, i < j."""
    mirror = columns[i].get(j)
    return field.zero if mirror is None else field.conjugate(mirror) * norms[j] / norms[i]


def _without(v: Vector, coordinates: Vector, basis: Sequence[Vector]) -> Vector:
    """v - sum_i c_i u_i."""
    rest = dict(v)
    for i, c in coordinates.items():
        accumulate(rest, {x: -(f * c) for x, f in basis[i].items()})
    return rest


def outside(v: Vector, space: Krylov, inner: Inner) -> Vector:
    """The part of v orthogonal to the space."""
    parts = {i: inner(u, v) / n for i, (u, n) in enumerate(zip(space.basis, space.norms, strict=True))}
    return _without(v, {i: c for i, c in parts.items() if c}, space.basis)


def dark_pieces(
    field: Field, act: Act, inner: Inner, spaces: Sequence[Krylov], candidates: Sequence[Vector], room: int
) -> list[Krylov]:
    """Cyclic spaces of A, orthogonal to `spaces` and to each other, until `room` dimensions are filled.

    `candidates` together with `spaces` must span everything; each is cut to what is still outside and grown.
    """
    found: list[Krylov] = []
    for v in candidates:
        if room <= 0:
            break
        for space in (*spaces, *found):
            v = outside(v, space, inner)
        if v:
            found.append(reached(field, act, inner, [v]))
            room -= found[-1].size
    return found
