"""G_0 = Q H Q on all sites, row by row: the one coefficient that is not local to the detector.

Q acts only where the detector's vectors live, so a row whose site neither carries a vector nor touches one is H's
own row.  The others are multiplied out in balls, sparse:  Q H Q = H - D (HD)† - (HD) D† + D (D†HD) D†.
"""

from __future__ import annotations

from flint import acb

from derive.numerics.evaluate import Values, enclose
from derive.numerics.system import detector_vectors, finite_space
from derive.problem.setting import Row, Setting

Sparse = dict[int, acb]


class Start:
    """Q H Q at one point."""

    def __init__(self, setting: Setting, values: Values):
        self.rows = finite_space(setting).rows
        self.values = values
        vectors = [{x: enclose(f, values) for x, f in v} for v in detector_vectors(setting)]
        watched = {x for v in vectors for x in v}
        self.touched = watched | {y for x in watched for y, _ in self.rows[x]}
        self._changed = self._projected(vectors)

    def row(self, x: int) -> Sparse:
        """Row x of Q H Q, by column."""
        return self._changed[x] if x in self._changed else self._plain(x)

    def is_plain(self, x: int, row: Row) -> bool:
        """Whether `row` is, formula by formula, row x of H, and Q leaves that row alone."""
        return x not in self.touched and row == self.rows[x]

    def _plain(self, x: int) -> Sparse:
        return {y: enclose(f, self.values) for y, f in self.rows[x]}

    def _projected(self, vectors: list[Sparse]) -> dict[int, Sparse]:
        found = {x: self._plain(x) for x in sorted(self.touched)}
        images = [self._image(v) for v in vectors]
        for v, image in zip(vectors, images, strict=True):
            _subtract(found, v, image)
            _subtract(found, image, v)
            for w in vectors:
                overlap = sum((a.conjugate() * image[x] for x, a in w.items() if x in image), acb(0))
                _subtract(found, {x: -overlap * a for x, a in w.items()}, v)
        return found

    def _image(self, v: Sparse) -> Sparse:
        """H v, from the rows that v touches (both triangles of H are stored)."""
        reached = {y for x in v for y, _ in self.rows[x]} | set(v)
        return {
            y: sum((enclose(f, self.values) * v[c] for c, f in self.rows[y] if c in v), acb(0))
            for y in sorted(reached)
        }


def _subtract(found: dict[int, Sparse], left: Sparse, right: Sparse) -> None:
    """found -= |left><right|."""
    for x, a in left.items():
        row = found[x]
        for y, b in right.items():
            row[y] = row.get(y, acb(0)) - a * b.conjugate()
