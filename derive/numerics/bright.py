"""The part of the system that the detector sees, as a small Hermitian matrix in balls.

The block Krylov space of the detector's vectors under H is span(D) plus the bright space; on it, in an orthonormal
basis that begins with D,

    H = E0 + h H',   ||H'|| <= 1,      K(z) = (exp(-i z H'))_QQ,   f(z) = det (exp(i z H'))_PP,   z = h tau

K is the undetected step up to the phase exp(-i E0 tau).  E0 and h are exact numbers, from certified eigenvalues.
A sector is a set of detector vectors that no power of H connects with the others: K falls into one block a sector.

Balls decide that a vector is not in the span of earlier ones; that it is, only an exact count of dimensions tells.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision
from derive.numerics.evolution import apply_rows, norm
from derive.numerics.system import State, System, dagger


@dataclass(frozen=True)
class Sector:
    """H' (detector's `rank` rows first), and H = E0 + h H'."""

    matrix: acb_mat
    rank: int
    E0: arb
    h: arb

    @property
    def bright(self) -> int:
        """Dimension of the bright space in this sector."""
        return int(self.matrix.nrows()) - self.rank


def undetected(s: Sector, z: acb) -> acb_mat:
    """K(z), bright x bright."""
    return _block((s.matrix * (z * acb(0, -1))).exp(), range(s.rank, s.matrix.nrows()))


def return_determinant(s: Sector, z: acb) -> acb:
    """f(z): zero exactly where K(z) has no inverse (complementary minors of a unitary)."""
    return _block((s.matrix * (z * acb(0, 1))).exp(), range(s.rank)).det()


def _block(m: acb_mat, places: range) -> acb_mat:
    return acb_mat(len(places), len(places), [m[x, y] for x in places for y in places])


def detector_states(s: System) -> list[State]:
    """The detector's vectors, written out."""
    found = []
    for vector in s.detector:
        state = [acb(0)] * s.size
        for x, a in vector:
            state[x] = a
        found.append(state)
    return found


def enclose_sector(s: System, detector: Sequence[State], most: int) -> Sector:
    """H on what grows from some detector vectors, at most `most` bright dimensions (`NeedsPrecision` beyond).

    Vectors that may be dependent are left out; the caller compares the number of the rest with an exact count.
    """
    basis, images = list(detector), [apply_rows(s.rows, v) for v in detector]
    n = 0
    while n < len(basis):
        for v in _independent(basis, images[n]):
            basis.append(v)
            images.append(apply_rows(s.rows, v))
        if len(basis) - len(detector) > most:
            raise NeedsPrecision("more bright dimensions than there are")
        n += 1
    size = len(basis)
    entries = [_inner(a, b) for a in basis for b in images]
    return scaled_sector(acb_mat(size, size, entries), len(detector))


def _independent(basis: Sequence[State], v: State) -> Iterator[State]:
    """v made orthonormal to the basis, if it surely has a part outside."""
    for _ in range(2):  # the second pass removes what rounding left
        for b in basis:
            overlap = _inner(b, v)
            v = [x - overlap * y for x, y in zip(v, b, strict=True)]
    length = norm(v)
    if length > 0:
        yield [x / length for x in v]


def _inner(a: State, b: State) -> acb:
    total = acb(0)
    for x, y in zip(a, b, strict=True):
        total += x.conjugate() * y
    return total


def scaled_sector(matrix: acb_mat, rank: int) -> Sector:
    """A Hermitian matrix of balls as a sector."""
    low, high = _spectrum(matrix)
    E0 = ((low + high) / 2).mid()
    h = arb((high - E0).max(E0 - low).upper())
    if not h > 0:
        h = arb(1)
    size = matrix.nrows()
    hermitian = (matrix + dagger(matrix)) * acb(arb(1) / 2)
    shifted = [hermitian[x, y] - (E0 if x == y else 0) for x in range(size) for y in range(size)]
    return Sector(acb_mat(size, size, shifted) * acb(1 / h), rank, E0, h)


def _spectrum(matrix: acb_mat) -> tuple[arb, arb]:
    """Numbers below and above every eigenvalue: certified levels, or Gershgorin's where those cannot be told apart."""
    try:
        levels = [x.real for x in matrix.eig(multiple=True)]
    except ValueError:
        size = range(matrix.nrows())
        around = [sum((matrix[x, y].abs_upper() for y in size if y != x), arb(0)) for x in size]
        levels = [matrix[x, x].real + arb(0, arb(r).upper()) for x, r in zip(size, around, strict=True)]
    low, high = levels[0].lower(), levels[0].upper()
    for x in levels[1:]:
        low, high = low.min(x.lower()), high.max(x.upper())
    if not (low.is_finite() and high.is_finite()):
        raise NeedsPrecision("the spectrum is not known at this precision")
    return low, high


def midpoints(m: acb_mat) -> Any:
    """A matrix of balls as doubles, without their radii."""
    import numpy as np

    entries = [complex(float(x.real.mid()), float(x.imag.mid())) for x in m.entries()]
    return np.array(entries).reshape(m.nrows(), m.ncols())


def split_states(states: Sequence[State], mixing: acb_mat) -> list[State]:
    """The detector's vectors turned into eigenvectors of a Hermitian r x r matrix with simple eigenvalues."""
    try:
        vectors = mixing.eig(right=True)[1]
    except ValueError as fault:
        raise NeedsPrecision("sectors of the detector could not be told apart") from fault
    found = []
    for a in range(mixing.nrows()):
        state = [acb(0)] * len(states[0])
        for b, v in enumerate(states):
            state = [x + vectors[b, a] * y for x, y in zip(state, v, strict=True)]
        length = norm(state)
        found.append([x / length for x in state])
    return found
