"""The measured system at one point, in balls: H on some sites, the detector's vectors, and a bound on H.

H     rows of (column, ball), local numbers 0..n-1 for the chosen sites (energy units of the worksheet)
D     the detector's orthonormal vectors, sparse, spanning range(P); Q = 1 - D D†
E0    an exact number in the middle of Gershgorin's interval
h     an exact number with ||H - E0|| <= h, from the same interval
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import ONE
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Finite, Row, Setting, Vector

SparseRow = tuple[tuple[int, acb], ...]
State = list[acb]


@dataclass(frozen=True)
class System:
    """H and D at a point, on `sites` (ascending); everything else by local number."""

    sites: tuple[int, ...]
    rows: tuple[SparseRow, ...]
    detector: tuple[SparseRow, ...]
    E0: arb
    h: arb

    @property
    def size(self) -> int:
        return len(self.sites)

    @property
    def entries(self) -> int:
        """Non-zero entries of H."""
        return sum(len(row) for row in self.rows)

    def local(self) -> dict[int, int]:
        """Site -> local number."""
        return {site: n for n, site in enumerate(self.sites)}


def finite_space(setting: Setting) -> Finite:
    """The setting's explicit graph, or a statement of what is not served."""
    if not isinstance(setting.space, Finite):
        raise NotCovered("only a finite graph with numbers for its sizes is measured directly")
    return setting.space


def detector_vectors(setting: Setting) -> tuple[Vector, ...]:
    """All vectors of all detectors: any click ends the experiment.  Perfect detectors only."""
    if any(watcher.efficiency != ONE for watcher in setting.detectors):
        raise NotCovered("a detector of efficiency below 1 is not measured directly")
    return tuple(v for watcher in setting.detectors for v in watcher.vectors)


def watched_sites(setting: Setting) -> tuple[int, ...]:
    """Sites that some detector vector touches, ascending."""
    return tuple(sorted({x for v in detector_vectors(setting) for x, _ in v}))


def system(setting: Setting, values: Values, sites: Iterable[int] | None = None) -> System:
    """H and D at the values of the letters, on `sites` (None: all); bonds that leave them are dropped."""
    space = finite_space(setting)
    chosen = tuple(range(space.size)) if sites is None else tuple(sites)
    local = {site: n for n, site in enumerate(chosen)}
    rows = tuple(_row(space.rows[x], local, values) for x in chosen)
    detector = tuple(_row(v, local, values) for v in detector_vectors(setting))
    return assemble(rows, detector, chosen)


def assemble(rows: Sequence[SparseRow], detector: Sequence[SparseRow], sites: Sequence[int]) -> System:
    """A `System` from balls, with its bound."""
    E0, h = bound_norm(rows)
    return System(tuple(sites), tuple(rows), tuple(detector), E0, h)


def _row(row: Row | Vector, local: dict[int, int], values: Values) -> SparseRow:
    return tuple((local[y], enclose(f, values)) for y, f in row if y in local)


def bound_norm(rows: Sequence[SparseRow]) -> tuple[arb, arb]:
    """(E0, h), both exact, with ||H - E0|| <= h: every eigenvalue lies in a Gershgorin disc around some H_xx."""
    low, high = arb("inf"), arb("-inf")
    for x, row in enumerate(rows):
        middle, reach = arb(0), arb(0)
        for y, value in row:
            if x == y:
                middle = value.real
            else:
                reach += value.abs_upper()
        low, high = low.min((middle - reach).lower()), high.max((middle + reach).upper())
    E0 = ((low + high) / 2).mid()
    h = (high - E0).max(E0 - low).upper()
    if not h.is_finite():
        raise NeedsPrecision("the Hamiltonian is not bounded at this precision")
    return E0, h


def dense(s: System) -> acb_mat:
    """H as an n x n matrix of balls."""
    matrix = acb_mat(s.size, s.size)
    for x, row in enumerate(s.rows):
        for y, value in row:
            matrix[x, y] = value
    return matrix


def projector(s: System) -> acb_mat:
    """Q = 1 - D D†, n x n."""
    matrix = acb_mat(s.size, s.size)
    for x in range(s.size):
        matrix[x, x] = acb(1)
    for vector in s.detector:
        for x, a in vector:
            for y, b in vector:
                matrix[x, y] = matrix[x, y] - a * b.conjugate()
    return matrix


def dagger(matrix: acb_mat) -> acb_mat:
    return matrix.conjugate().transpose()
