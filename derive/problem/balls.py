"""Steps along a graph: neighbours, distances, the ball around some sites, the centre and the end.

Only the pattern of non-zero entries counts.  `rows` is `Finite.rows`: for each site its (column, H_xy), columns
ascending, both triangles present; the diagonal is no step.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from derive.problem.setting import Row

CENTRE_WORK = 30_000_000
"""Edges looked at before the search for a centre gives up (about ten seconds; measured on a 10^5-site ring)."""


def neighbours(rows: Sequence[Row], site: int) -> tuple[int, ...]:
    """The sites one step from `site`, ascending."""
    return tuple(y for y, _ in rows[site] if y != site)


def distances(rows: Sequence[Row], sites: Iterable[int], radius: int | None = None) -> dict[int, int]:
    """Steps from the nearest of `sites`, for every site reached within `radius` steps (None: however far)."""
    away = dict.fromkeys(sorted(set(sites)), 0)
    shell, steps = list(away), 0
    while shell and (radius is None or steps < radius):
        steps += 1
        reached: list[int] = []
        for x in shell:
            for y, _ in rows[x]:
                if y not in away:
                    away[y] = steps
                    reached.append(y)
        shell = reached
    return away


def ball(rows: Sequence[Row], sites: Iterable[int], radius: int) -> tuple[int, ...]:
    """All sites within `radius` steps of `sites` (themselves included), ascending."""
    return tuple(sorted(distances(rows, sites, radius)))


def end(rows: Sequence[Row]) -> int | None:
    """The lowest-numbered site with a single neighbour; None where there is none."""
    return next((x for x in range(len(rows)) if len(neighbours(rows, x)) == 1), None)


def centre(rows: Sequence[Row]) -> int | None:
    """The unique site of least eccentricity; None where several share it, the graph is in pieces, or
    `CENTRE_WORK` did not suffice.

    Each breadth-first walk from u bounds every eccentricity: max(d, e(u) - d) <= e(v), d = d(u, v).  Sites whose
    lower bound exceeds the best eccentricity found are out; what is left is walked from, least bound first.
    """
    size = len(rows)
    least, known = [0] * size, {}
    best, spent = size + 1, 0
    edges = sum(len(row) for row in rows) + size
    while True:
        open_sites = [v for v in range(size) if v not in known and least[v] <= best]
        if not open_sites:
            break
        spent += edges
        if spent > CENTRE_WORK:
            return None
        u = min(open_sites, key=lambda v: (least[v], v))
        away = distances(rows, (u,))
        if len(away) < size:
            return None
        known[u] = e = max(away.values())
        best = min(best, e)
        for v, d in away.items():
            least[v] = max(least[v], d, e - d)
    shared = [v for v, e in known.items() if e == best]
    return shared[0] if len(shared) == 1 else None
