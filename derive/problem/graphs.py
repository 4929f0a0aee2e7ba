"""Graphs as explicit matrices: both triangles of H from one, fluxes put on bonds, limits kept before anything grows.

H_yx is always the conjugate of H_xy.  Nothing here depends on the order in which edges are given.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.formula.tree import I_UNIT, ZERO, Formula, call, number, plus, times
from derive.problem.conjugate import Domains, conjugate
from derive.problem.families import FAMILIES, Sizes
from derive.problem.setting import Family, Finite, Row, Shape, Unitary

MOST_SITES = 200_000
MOST_EDGES = 2_000_000

Bond = tuple[int, int, Formula]
Loop = tuple[tuple[int, ...], Formula]


@dataclass
class FluxFault(Exception):
    """The loop number `loop` cannot carry its flux; `reason` says why."""

    loop: int
    reason: str

    def __str__(self) -> str:
        return self.reason


def family_size(name: str, sizes: Sizes) -> tuple[int, int]:
    """(sites, edges) that the family would have, found without building it; ValueError beyond the limits."""
    sites, edges = FAMILIES[name].count(sizes)
    if sites > MOST_SITES or edges > MOST_EDGES:
        raise ValueError(f"at most {MOST_SITES:,} sites and {MOST_EDGES:,} edges are built")
    return sites, edges


def family_edges(name: str, sizes: Sizes, hopping: Formula) -> tuple[int, list[Bond]]:
    """Number of sites, and every edge (x, y, hopping) in the direction that carries the hopping."""
    sites, _ = family_size(name, sizes)
    return sites, [(x, y, hopping) for x, y in FAMILIES[name].edges(sizes)]


def family_shape(name: str, sizes: Sizes) -> Shape:
    return Shape(name, tuple((k, _size_text(v)) for k, v in sorted(sizes.items())))


def _size_text(size: object) -> str:
    return ", ".join(str(n) for n in size) if isinstance(size, tuple) else str(size)


def with_bonds(edges: Sequence[Bond], bonds: Iterable[Bond]) -> list[Bond]:
    """`edges` with H_xy replaced where `bonds` says so; KeyError((x, y)) for a bond that is no edge."""
    place = {frozenset((x, y)): k for k, (x, y, _) in enumerate(edges)}
    out = list(edges)
    for x, y, value in bonds:
        pair = frozenset((x, y))
        if pair not in place:
            raise KeyError((x, y))
        out[place[pair]] = (x, y, value)
    return out


def assemble(
    size: int,
    edges: Iterable[Bond],
    energies: Mapping[int, Formula],
    shape: Shape,
    domains: Domains,
    names: tuple[str, ...] | None = None,
    loops: Sequence[Loop] = (),
) -> Finite:
    """H as a `Finite`: H_xy from `edges`, H_yx its conjugate, H_xx from `energies`, each loop's flux on one bond.

    Raises `FluxFault` where a loop does not close on edges or its flux follows from the others.
    """
    edges, gauge = put_fluxes(list(edges), loops) if loops else (edges, ())
    across: dict[Formula, Formula] = {}
    cells: list[dict[int, Formula]] = [{} for _ in range(size)]
    for x, y, value in edges:
        if value not in across:
            across[value] = conjugate(value, domains)
        cells[x][y] = value
        cells[y][x] = across[value]
    for x, value in energies.items():
        cells[x][x] = value
    return Finite(_rows(cells), shape, names, gauge)


def matrix_rows(matrix: Sequence[Sequence[Formula]]) -> tuple[Row, ...]:
    """A square matrix, entry by entry, as sparse rows."""
    return _rows([dict(enumerate(row)) for row in matrix])


def matrix_graph(matrix: Sequence[Sequence[Formula]]) -> Finite:
    """A Hamiltonian given whole; that it is Hermitian is the caller's to check."""
    return Finite(matrix_rows(matrix), Shape("hamiltonian", (("sites", str(len(matrix))),)))


def step_graph(matrix: Sequence[Sequence[Formula]]) -> Unitary:
    """A unitary given whole, in place of exp(-i H tau); that it is unitary is the caller's to check."""
    return Unitary(matrix_rows(matrix), Shape("step", (("sites", str(len(matrix))),)))


def _rows(cells: Sequence[Mapping[int, Formula]]) -> tuple[Row, ...]:
    return tuple(tuple((y, row[y]) for y in sorted(row) if row[y] != ZERO) for row in cells)


def put_fluxes(edges: list[Bond], loops: Sequence[Loop]) -> tuple[list[Bond], tuple[Bond, ...]]:
    """The edges with H_l0l1 H_l1l2 ... around each loop multiplied by exp(i*phase), and the bonds chosen.

    The phases solve one linear equation a loop (unknowns: one angle a bond, 0 on every bond not needed); each
    loop gives one bond up, its last where it can, so on a ring it is the closing edge.  Derived here.
    """
    place = {frozenset((x, y)): k for k, (x, y, _) in enumerate(edges)}
    lines = [_loop_line(edges, place, loop, n) for n, (loop, _) in enumerate(loops)]
    solved = _eliminate(lines, [loop for loop, _ in loops], place)
    gauge: list[Bond] = []
    for k, shares in sorted(solved.items()):
        x, y, value = edges[k]
        angle = plus(*(times(number(c), loops[n][1]) for n, c in sorted(shares.items()) if c))
        edges[k] = (x, y, times(value, call("exp", times(I_UNIT, angle))))
        gauge.append((x, y, angle))
    return edges, tuple(gauge)


def _loop_line(
    edges: Sequence[Bond], place: Mapping[frozenset[int], int], loop: tuple[int, ...], n: int
) -> dict[int, Fraction]:
    """How often the loop passes each bond, forwards minus backwards."""
    line: dict[int, Fraction] = {}
    for x, y in zip(loop, (*loop[1:], loop[0]), strict=True):
        k = place.get(frozenset((x, y)))
        if k is None:
            raise FluxFault(n, f"sites {x} and {y} are not joined")
        line[k] = line.get(k, Fraction(0)) + (1 if edges[k][0] == x else -1)
    return {k: c for k, c in line.items() if c}


def _eliminate(
    lines: list[dict[int, Fraction]], loops: Sequence[tuple[int, ...]], place: Mapping[frozenset[int], int]
) -> dict[int, dict[int, Fraction]]:
    """Gauss-Jordan on the loops' equations: bond -> its share of each loop's phase."""
    shares: list[dict[int, Fraction]] = [{n: Fraction(1)} for n in range(len(lines))]
    used = Counter(k for line in lines for k in line)
    pivots: list[int] = []
    for n, line in enumerate(lines):
        if not line:
            raise FluxFault(n, "its flux follows from the other loops")
        pivot = _choose_pivot(line, loops[n], place, used)
        pivots.append(pivot)
        front = line[pivot]
        lines[n] = {k: c / front for k, c in line.items()}
        shares[n] = {m: c / front for m, c in shares[n].items()}
        for m in range(len(lines)):
            factor = lines[m].get(pivot, Fraction(0))
            if m != n and factor:
                _subtract(lines[m], lines[n], factor)
                _subtract(shares[m], shares[n], factor)
    return dict(zip(pivots, shares, strict=True))


def _choose_pivot(
    line: Mapping[int, Fraction],
    loop: tuple[int, ...],
    place: Mapping[frozenset[int], int],
    used: Mapping[int, int],
) -> int:
    """The loop's last bond that no other loop uses, else its last one still in the equation, else the first."""
    along = [place[frozenset(pair)] for pair in zip(loop, (*loop[1:], loop[0]), strict=True)][::-1]
    left = [k for k in along if k in line]
    alone = [k for k in left if used[k] == 1]
    return alone[0] if alone else left[0] if left else min(line)


def _subtract(into: dict[int, Fraction], other: Mapping[int, Fraction], factor: Fraction) -> None:
    for k, c in other.items():
        left = into.get(k, Fraction(0)) - factor * c
        if left:
            into[k] = left
        else:
            into.pop(k, None)


def family_at(family: Family, sizes: Sizes, domains: Domains) -> Finite:
    """The family at numeric sizes.  Energies, bonds and flux are taken where their sites have become numbers."""
    size, edges = family_edges(family.name, sizes, family.hopping)
    sited = [(int(x.args[0]), int(y.args[0]), v) for x, y, v in family.bonds]
    energies = {int(x.args[0]): v for x, v in family.energies}
    loops = [(tuple(range(size)), family.flux)] if family.flux is not None else []
    shape = family_shape(family.name, sizes)
    return assemble(size, with_bonds(edges, sited), energies, shape, domains, None, loops)
