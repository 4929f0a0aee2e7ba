"""Where the sites of a graph stand in its picture: coordinates by family, no force layout, same graph same picture.

A chain is a line, a ring a circle, a star has rays, a grid is a grid; what has no family stands in columns by its
distance from the detector.  Beyond `MOST` sites only the region around the detector is drawn.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import cos, pi, sin

from derive.problem.balls import distances, neighbours
from derive.problem.setting import Finite, Row, Setting, Unitary

MOST = 200  # sites drawn in full
REGION = 60  # sites drawn around the detector where there are more
Point = tuple[float, float]
Places = dict[int, Point]


@dataclass(frozen=True, slots=True)
class Picture:
    """Sites with their places, edges between them, stubs where the graph goes on, and the direction of labels."""

    places: Places
    edges: tuple[tuple[int, int], ...]
    stubs: tuple[int, ...]
    detector: frozenset[int]
    start: frozenset[int]
    labels: str  # below, outward, sides or free


def picture(setting: Setting) -> Picture | None:
    """The picture of a finite graph; None where there is none to draw."""
    space = setting.space
    if not isinstance(space, (Finite, Unitary)) or not space.size:
        return None
    detector = frozenset(s for w in setting.detectors for v in w.vectors for s, _ in v)
    start = _started(setting)
    shown = _region(space.rows, detector)
    places, labels = _placed(space, shown, detector)
    edges = tuple((x, y) for x in shown for y in neighbours(space.rows, x) if x < y and y in places)
    stubs = tuple(x for x in shown if any(y not in places for y in neighbours(space.rows, x)))
    return Picture(places, edges, stubs, detector & set(shown), start & set(shown), labels)


def _started(setting: Setting) -> frozenset[int]:
    if setting.start is None:
        return frozenset()
    return frozenset(s for _, vector in setting.start.mixture for s, _ in vector)


def _region(rows: Sequence[Row], detector: frozenset[int]) -> list[int]:
    """All sites, or the largest ball around the detector that has at most `REGION` of them."""
    if len(rows) <= MOST:
        return list(range(len(rows)))
    best = sorted(detector)[:REGION] or [0]
    for radius in range(1, REGION):
        reached = sorted(distances(rows, best if radius == 1 else detector or best, radius))
        if len(reached) > REGION:
            break
        best = reached
    return best


def _placed(space: Finite | Unitary, shown: list[int], detector: frozenset[int]) -> tuple[Places, str]:
    family = space.shape.family
    if family == "chain":
        return {x: (float(n), 0.0) for n, x in enumerate(shown)}, "below"
    whole = len(shown) == space.size
    if whole and family in _BY_FAMILY:
        return _BY_FAMILY[family](space), _LABELS.get(family, "free")
    return layered(space.rows, shown, detector or frozenset(shown[:1])), "free"


def _circle(space: Finite | Unitary) -> Places:
    """Site 0 at the top, clockwise, neighbours about one unit apart."""
    n = space.size
    radius = max(1.0, n / (2 * pi))
    return {x: (radius * sin(2 * pi * x / n), radius * cos(2 * pi * x / n)) for x in range(n)}


def _star(space: Finite | Unitary) -> Places:
    """The centre in the middle, one ray an arm, the first to the right."""
    arms = neighbours(space.rows, 0)
    places: Places = {0: (0.0, 0.0)}
    for k, first in enumerate(arms):
        angle = 2 * pi * k / len(arms)
        site, before, step = first, 0, 1
        while True:
            places[site] = (step * cos(angle), step * sin(angle))
            onward = [y for y in neighbours(space.rows, site) if y != before]
            if not onward:
                break
            before, site, step = site, onward[0], step + 1
    return places


def _size(space: Finite | Unitary, key: str) -> int:
    return int(dict(space.shape.sizes)[key])


def _grid(space: Finite | Unitary) -> Places:
    columns = _size(space, "columns")
    return {x: (float(x % columns), -float(x // columns)) for x in range(space.size)}


def _ladder(space: Finite | Unitary) -> Places:
    """Lying on its side: the rungs stand upright."""
    return {x: (float(x // 2), -float(x % 2)) for x in range(space.size)}


def _bipartite(space: Finite | Unitary) -> Places:
    left = _size(space, "left")
    tall = max(left, space.size - left)
    width = max(2.0, tall / 2)
    return {
        x: (0.0, _spread(x, left, tall)) if x < left else (width, _spread(x - left, space.size - left, tall))
        for x in range(space.size)
    }


def _spread(n: int, count: int, tall: int) -> float:
    return (tall - 1) / 2 if count == 1 else (count - 1 - n) * (tall - 1) / (count - 1)


def _cube(space: Finite | Unitary) -> Places:
    """Each binary digit moves a site along its own direction."""
    d = _size(space, "dimension")
    turns = [(1.5**k * cos(a), 1.5**k * sin(a)) for k, a in ((k, 0.12 + pi * k / (2 * max(d - 1, 1)))
             for k in range(d))]
    return {
        x: (sum(t[0] for k, t in enumerate(turns) if x >> k & 1), sum(t[1] for k, t in enumerate(turns) if x >> k & 1))
        for x in range(space.size)
    }


def _tree(space: Finite | Unitary) -> Places:
    """The root on top, a row a level, each site above the middle of its branches."""
    depth = distances(space.rows, [0])
    branches = {x: [y for y in neighbours(space.rows, x) if depth[y] > depth[x]] for x in range(space.size)}
    across: dict[int, float] = {}
    leaves = 0
    for x in sorted(range(space.size), key=lambda s: (-depth[s], s)):
        if branches[x]:
            across[x] = sum(across[y] for y in branches[x]) / len(branches[x])
        else:
            across[x] = float(leaves)
            leaves += 1
    return {x: (across[x], -1.3 * depth[x]) for x in range(space.size)}


_BY_FAMILY: dict[str, Callable[[Finite | Unitary], Places]] = {
    "ring": _circle, "complete": _circle, "star": _star, "grid": _grid, "ladder": _ladder,
    "complete bipartite": _bipartite, "hypercube": _cube, "tree": _tree,
}


_LABELS = {
    "ring": "outward", "complete": "outward", "hypercube": "outward", "complete bipartite": "sides",
}


def layered(rows: Sequence[Row], shown: Sequence[int], detector: frozenset[int]) -> Places:
    """Columns by distance from the detector; inside a column in the order of the neighbours before it."""
    inside = set(shown)
    away = {x: d for x, d in distances(rows, detector).items() if x in inside}
    far = max(away.values(), default=0) + 1
    columns: dict[int, list[int]] = {}
    for x in shown:
        columns.setdefault(away.get(x, far), []).append(x)
    height: dict[int, float] = {}
    for k in sorted(columns):
        ordered = sorted(columns[k], key=lambda x: (_before(rows, x, height), x))
        for n, x in enumerate(ordered):
            height[x] = (n - (len(ordered) - 1) / 2) * 1.0
    # neighbours in one column would hide behind each other: every second one is moved aside
    return {x: (1.4 * k + 0.25 * _aside(rows, x, columns[k]), -height[x]) for k in columns for x in columns[k]}


def _before(rows: Sequence[Row], x: int, height: dict[int, float]) -> float:
    known = [height[y] for y in neighbours(rows, x) if y in height]
    return sum(known) / len(known) if known else 0.0


def _aside(rows: Sequence[Row], x: int, column: list[int]) -> int:
    same = [y for y in neighbours(rows, x) if y in column]
    return sorted(column).index(x) % 2 if same else 0


def extent(places: Places) -> tuple[float, float, float, float]:
    """left, right, bottom, top."""
    xs, ys = [p[0] for p in places.values()], [p[1] for p in places.values()]
    return min(xs), max(xs), min(ys), max(ys)


def closest(places: Places) -> float:
    """The least distance between neighbours on paper, at most 1: sets the size of a site."""
    points = sorted(places.values())
    gaps = [((a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2) ** 0.5 for a, b in pairwise(points)]
    return min([1.0, *(g for g in gaps if g > 1e-9)])
