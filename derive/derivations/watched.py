"""The watched system in an exact field, seen from the detector: only the sites that are reached are ever read.

D (N x r) holds the detector's orthonormal vectors, P = D D†, Q = 1 - P.
A = QHQ, V = QHD, C = D†HD, mu_m = V† A^m V.  Columns are sparse vectors, dicts from site to element.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction

from derive.algebra.local import Block, Moments
from derive.exact.arguments import is_positive
from derive.exact.field import Element, Field
from derive.exact.sparse import Sparse, Vector, accumulate
from derive.formula.text import text
from derive.formula.tree import I_UNIT, ZERO, Formula, times
from derive.problem.balls import ball
from derive.problem.setting import Domain, Finite, Row, Setting
from derive.record.said import Matrix


class Watched:
    """A finite setting with one detector, within `reach` steps of it.

    `also` are formulas that must have a place in the field too; `letters` are letters that no worksheet declared.
    """

    def __init__(
        self,
        setting: Setting,
        reach: int,
        also: Iterable[Formula] = (),
        letters: Mapping[str, Domain] | None = None,
    ):
        space = setting.space
        if not isinstance(space, Finite) or len(setting.detectors) != 1:
            raise TypeError("a finite graph with one detector is needed here")
        self.space = space
        self.detector = setting.detectors[0]
        self.support = sorted({x for v in self.detector.vectors for x, _ in v})
        self.sites = ball(space.rows, self.support, max(reach, 1))
        self.field = Field.of([*self._formulas(), *also], {**setting.domains(), **(letters or {})})
        self.d = [{x: self.field.element(f) for x, f in v} for v in self.detector.vectors]

    def _formulas(self) -> list[Formula]:
        """Everything that must have a place in the field, each formula once, in a fixed order."""
        found: dict[Formula, None] = {}
        for vector in self.detector.vectors:
            found.update((f, None) for _, f in vector)
        for x in self.sites:
            found.update((f, None) for _, f in self.space.rows[x])
        return list(found)

    def where(self) -> str:
        """What was divided by and may vanish, for a claim's range of validity."""
        domains = self.field.domains
        open_ = [text(f) for f in self.field.excluded if not is_positive(f, domains)]
        return "".join(f"; where {f} is not 0" for f in open_)

    def hamiltonian(self, v: Vector) -> Vector:
        """H v, column by column: H_zy is the conjugate of H_yz."""
        out: Vector = {}
        for y, amplitude in v.items():
            column = {z: self.field.conjugate(self.field.element(f)) * amplitude for z, f in self.space.rows[y]}
            accumulate(out, column)
        return out

    def outside(self, v: Vector) -> Vector:
        """Q v."""
        out = dict(v)
        for d in self.d:
            overlap = self.inner(d, v)
            if overlap:
                accumulate(out, {x: -(f * overlap) for x, f in d.items()})
        return out

    def inner(self, a: Vector, b: Vector) -> Element:
        """<a|b>."""
        total = self.field.zero
        for x, f in a.items():
            if x in b:
                total = total + self.field.conjugate(f) * b[x]
        return total

    def krylov(self, count: int) -> list[list[Vector]]:
        """A^i V for i = 0 ... count - 1, each as its r columns."""
        columns = [self.outside(self.hamiltonian(d)) for d in self.d]
        found = []
        for i in range(count):
            if i:
                columns = [self.outside(self.hamiltonian(v)) for v in columns]
            found.append(columns)
        return found

    def moments(self, krylov: list[list[Vector]], highest: int) -> Moments:
        """C and mu_0 ... mu_highest; mu_(i+j) = (A^i V)† (A^j V)."""
        c = self.overlaps(self.d, [self.hamiltonian(d) for d in self.d])
        mu = [self.overlaps(krylov[m // 2], krylov[m - m // 2]) for m in range(highest + 1)]
        return Moments(self.field, c, mu)

    def overlaps(self, left: list[Vector], right: list[Vector]) -> Block:
        return [[self.inner(a, b) for b in right] for a in left]


def sandwiched(
    watched: Watched,
    left: Sequence[Sequence[Vector]],
    blocks: Mapping[tuple[int, int], Block],
    right: Sequence[Sequence[Vector]],
    k: int,
) -> Matrix:
    """(-i)^k sum_ij left_i block_ij right_j† as a sparse N x N matrix; left_i, right_j hold r columns each."""
    rows: dict[int, list[Vector]] = {}
    for (i, j), block in blocks.items():
        ends = rows.setdefault(i, [{} for _ in left[i]])
        for a, line in enumerate(block):
            for b, g in enumerate(line):
                accumulate(ends[a], {y: g * watched.field.conjugate(f) for y, f in right[j][b].items()})
    out: Sparse = {}
    for i, ends in rows.items():
        for a, vector in enumerate(left[i]):
            for x, f in vector.items():
                accumulate(out.setdefault(x, {}), {y: f * g for y, g in ends[a].items()})
    return Matrix(watched.space.size, (), tuple((x, rotated_row(out[x], k)) for x in sorted(out) if out[x]))


def rotated_row(row: Vector, k: int) -> Row:
    return tuple((y, rotated(row[y], k)) for y in sorted(row))


def rotated(x: Element, k: int) -> Formula:
    """(-i)^k x as a formula; i is taken into the field only where H brings it along."""
    field = x.field
    if k % 2 and ("i" in field.gen or "turn" in field.gen):
        return field.formula(field.element(I_UNIT) * x.scaled(Fraction((-1) ** (k // 2 + 1))))
    inner = field.formula(x.scaled(Fraction((-1) ** ((k + 1) // 2))))
    return _with_unit(inner) if k % 2 else inner


def _with_unit(f: Formula) -> Formula:
    """i f, the i behind the rational."""
    if f == ZERO:
        return ZERO
    if f.head == "times" and f.args[0].head == "number":
        return times(f.args[0], I_UNIT, *f.args[1:])
    return times(f, I_UNIT) if f.head == "number" else times(I_UNIT, f)
