"""Which of the vectors H u_0, H u_1, ... are new: the rank of what the detector reaches, decided exactly at a point.

u_0 ... u_(r-1) are the detector's vectors; each vector that is independent of the ones before becomes the next u.
Plain elimination over an exact field; it shares nothing with how the derivation finds the bright space.
"""

from __future__ import annotations

from derive.exact.field import Field
from derive.exact.sparse import Vector, accumulate
from derive.numerics.system import detector_vectors, finite_space
from derive.problem.setting import Setting


def reach_pattern(setting: Setting) -> list[bool]:
    """True for each H u_j that is independent of the vectors before it; `NotCovered` where no exact field holds H."""
    rows, vectors = finite_space(setting).rows, detector_vectors(setting)
    formulas = {f: None for v in vectors for _, f in v} | {f: None for row in rows for _, f in row}
    field = Field.of(formulas, setting.domains())
    queue: list[Vector] = []
    echelon: dict[int, Vector] = {}
    for v in vectors:
        _independent({x: field.element(f) for x, f in v}, echelon, queue)
    pattern = []
    j = 0
    while j < len(queue):
        image: Vector = {}
        for y, a in queue[j].items():
            accumulate(image, {x: field.conjugate(field.element(f)) * a for x, f in rows[y]})
        pattern.append(_independent(image, echelon, queue))
        j += 1
    return pattern


def _independent(v: Vector, echelon: dict[int, Vector], queue: list[Vector]) -> bool:
    """Whether v adds a dimension; then what is left of it joins the echelon form and the queue."""
    rest = dict(v)
    while rest:
        lead = min(rest)
        pivot = echelon.get(lead)
        if pivot is None:
            break
        front = rest[lead]
        accumulate(rest, {x: -(front * f) for x, f in pivot.items()})
    if not rest:
        return False
    top = rest[min(rest)]
    row = {x: f / top for x, f in rest.items()}
    echelon[min(rest)] = row
    queue.append(row)
    return True
