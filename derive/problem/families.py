"""The named graphs: which edges, in which numbering.

A family is one small function from its sizes to its edges (x, y): for x < y, except a ring's closing edge
(N-1, 0).  The hopping is the matrix element H_xy in that direction.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from math import comb

Size = int | tuple[int, ...]
Sizes = Mapping[str, Size]
Edges = Iterator[tuple[int, int]]


def _int(sizes: Sizes, key: str) -> int:
    value = sizes[key]
    if not isinstance(value, int):
        raise TypeError(f"{key} is one size, not a list")
    return value


def chain(sizes: Sizes) -> Edges:
    """Sites 0 to N-1 along the chain."""
    return ((x, x + 1) for x in range(_int(sizes, "sites") - 1))


def ring(sizes: Sizes) -> Edges:
    """Sites 0 to N-1 around the ring; the closing edge is (N-1, 0)."""
    n = _int(sizes, "sites")
    return ((x, (x + 1) % n) for x in range(n))


def complete(sizes: Sizes) -> Edges:
    """Sites 0 to N-1, each joined to every other."""
    n = _int(sizes, "sites")
    return ((x, y) for x in range(n) for y in range(x + 1, n))


def arms(sizes: Sizes) -> tuple[int, ...]:
    """The lengths of a star's arms, in order."""
    lengths = sizes.get("lengths")
    if isinstance(lengths, tuple):
        return lengths
    return (_int(sizes, "length"),) * _int(sizes, "arms")


def star(sizes: Sizes) -> Edges:
    """0 is the centre; then arm by arm, each from the centre outward."""
    first = 1
    for length in arms(sizes):
        for step in range(length):
            yield (first + step - 1 if step else 0), first + step
        first += length


def tree(sizes: Sizes) -> Edges:
    """0 is the root; then level by level, the branches of one site next to each other."""
    b, depth = _int(sizes, "branching"), _int(sizes, "depth")
    inner = sum(b**level for level in range(depth))
    return ((x, b * x + k) for x in range(inner) for k in range(1, b + 1))


def grid(sizes: Sizes) -> Edges:
    """Row by row: the site in row r, column c is r * columns + c."""
    rows, columns = _int(sizes, "rows"), _int(sizes, "columns")
    for x in range(rows * columns):
        if x % columns < columns - 1:
            yield x, x + 1
        if x < (rows - 1) * columns:
            yield x, x + columns


def ladder(sizes: Sizes) -> Edges:
    """A grid of two columns whose rows are the rungs: rung r joins sites 2r and 2r+1."""
    return grid({"rows": _int(sizes, "rungs"), "columns": 2})


def complete_bipartite(sizes: Sizes) -> Edges:
    """The left sites first, then the right ones; every left site is joined to every right one."""
    left, right = _int(sizes, "left"), _int(sizes, "right")
    return ((x, left + y) for x in range(left) for y in range(right))


def hypercube(sizes: Sizes) -> Edges:
    """The binary digits of a site's number are its coordinates; edges change one digit."""
    d = _int(sizes, "dimension")
    return ((x, x | 1 << k) for x in range(2**d) for k in range(d) if not x >> k & 1)


def _count_tree(s: Sizes) -> tuple[int, int]:
    b, depth = _int(s, "branching"), _int(s, "depth")
    n = depth + 1 if b == 1 else _geometric(b, depth)
    return n, n - 1


_FAR = 10**12


def _geometric(b: int, depth: int) -> int:
    """1 + b + ... + b^depth, or a number too large to build; never a tower of digits."""
    total, level = 1, 1
    for _ in range(depth):
        level *= b
        total += level
        if total > _FAR:
            return _FAR
    return total


def _count_cube(s: Sizes) -> tuple[int, int]:
    d = min(_int(s, "dimension"), 40)
    return 2**d, d * 2 ** (d - 1) if d else 0


def _count_grid(rows: int, columns: int) -> tuple[int, int]:
    return rows * columns, rows * (columns - 1) + columns * (rows - 1)


@dataclass(frozen=True, slots=True)
class Plan:
    """A family: its sizes with the least value of each, how many sites and edges they make, and the edges.

    `says` tells the numbering in a few words.  `instead` names sizes that may stand in place of `sizes`.
    """

    sizes: tuple[tuple[str, int], ...]
    count: Callable[[Sizes], tuple[int, int]]
    edges: Callable[[Sizes], Edges]
    says: str
    instead: tuple[str, ...] = ()


FAMILIES: dict[str, Plan] = {
    "chain": Plan(
        (("sites", 1),), lambda s: (_int(s, "sites"), _int(s, "sites") - 1), chain, "numbered along the chain"
    ),
    "ring": Plan((("sites", 3),), lambda s: (_int(s, "sites"), _int(s, "sites")), ring, "numbered around the ring"),
    "complete": Plan(
        (("sites", 2),),
        lambda s: (_int(s, "sites"), comb(_int(s, "sites"), 2)),
        complete,
        "every site joined to every other",
    ),
    "star": Plan(
        (("arms", 1), ("length", 1)),
        lambda s: (1 + sum(arms(s)), sum(arms(s))),
        star,
        "0 the centre, then arm by arm outward",
        ("lengths",),
    ),
    "tree": Plan((("branching", 1), ("depth", 1)), _count_tree, tree, "0 the root, then level by level"),
    "ladder": Plan(
        (("rungs", 1),), lambda s: _count_grid(_int(s, "rungs"), 2), ladder, "rung by rung, rung r joins 2r and 2r+1"
    ),
    "grid": Plan(
        (("rows", 1), ("columns", 1)),
        lambda s: _count_grid(_int(s, "rows"), _int(s, "columns")),
        grid,
        "row by row",
    ),
    "complete bipartite": Plan(
        (("left", 1), ("right", 1)),
        lambda s: (_int(s, "left") + _int(s, "right"), _int(s, "left") * _int(s, "right")),
        complete_bipartite,
        "the left sites first",
    ),
    "hypercube": Plan((("dimension", 1),), _count_cube, hypercube, "the binary digits are the coordinates"),
}

NOUNS = {"complete": "complete graph", "complete bipartite": "complete bipartite graph"}


def noun(family: str) -> str:
    """What a graph of the family is called in a sentence."""
    return NOUNS.get(family, family)


INFINITE: dict[str, str] = {
    "line": "site 0 the origin, sites to both sides",
    "half line": "site 0 the end, sites 0, 1, 2, ...",
    "square lattice": 'sites "x,y"',
    "density": "a local density of states, by its singular points",
}
