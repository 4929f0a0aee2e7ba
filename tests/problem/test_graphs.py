"""Families as matrices: against networkx's generators, and spectra against published closed forms.

Sources: networkx generators (node counts, edges, isomorphism); "Spectra of Graphs", 2012, chapter 1: path
2cos(pi j/(N+1)), cycle 2cos(2 pi j/N), K_N: N-1 and -1, K_mn: +-sqrt(mn) and 0, hypercube d - 2i with multiplicity
binomial(d, i).  Binary tree of height h, root-symmetric part 2 sqrt2 cos(pi j/(h+2)): derived and confirmed
numerically by a reduction to a chain of h+1 sites with couplings sqrt2.
"""

from __future__ import annotations

from math import comb, cos, pi, sqrt

import networkx as nx
import numpy as np
import pytest

from derive.formula.grammar import parse
from derive.formula.tree import MINUS_ONE, ONE
from derive.problem.balls import ball, centre, distances, end, neighbours
from derive.problem.families import FAMILIES
from derive.problem.graphs import (
    MOST_SITES,
    assemble,
    family_at,
    family_edges,
    family_shape,
    family_size,
    matrix_graph,
    with_bonds,
)
from derive.problem.setting import Family


def build(name, sizes, hopping=ONE):
    size, edges = family_edges(name, sizes, hopping)
    return assemble(size, edges, {}, family_shape(name, sizes), {})


def as_networkx(space) -> nx.Graph:
    graph = nx.Graph()
    graph.add_nodes_from(range(space.size))
    graph.add_edges_from((x, y) for x, row in enumerate(space.rows) for y, _ in row)
    return graph


def spectrum(space) -> np.ndarray:
    dense = np.zeros((space.size, space.size))
    for x, row in enumerate(space.rows):
        for y, v in row:
            dense[x, y] = float(v.args[0])
    return np.sort(np.linalg.eigvalsh(dense))


def spider(lengths) -> nx.Graph:
    graph, first = nx.Graph(), 1
    for length in lengths:
        nx.add_path(graph, [0, *range(first, first + length)])
        first += length
    return graph


SAME_NUMBERING = [
    ("chain", {"sites": 7}, nx.path_graph(7)),
    ("ring", {"sites": 7}, nx.cycle_graph(7)),
    ("complete", {"sites": 5}, nx.complete_graph(5)),
    ("star", {"arms": 4, "length": 1}, nx.star_graph(4)),
    ("star", {"arms": 3, "length": 2}, spider([2, 2, 2])),
    ("star", {"lengths": (1, 3, 2)}, spider([1, 3, 2])),
    ("tree", {"branching": 2, "depth": 3}, nx.balanced_tree(2, 3)),
    ("tree", {"branching": 3, "depth": 2}, nx.balanced_tree(3, 2)),
    ("tree", {"branching": 1, "depth": 4}, nx.path_graph(5)),
    ("complete bipartite", {"left": 2, "right": 3}, nx.complete_bipartite_graph(2, 3)),
    ("grid", {"rows": 3, "columns": 4}, nx.convert_node_labels_to_integers(nx.grid_2d_graph(3, 4), ordering="sorted")),
    ("grid", {"rows": 1, "columns": 5}, nx.path_graph(5)),
    ("ladder", {"rungs": 4}, nx.convert_node_labels_to_integers(nx.grid_2d_graph(4, 2), ordering="sorted")),
    ("hypercube", {"dimension": 4}, nx.relabel_nodes(nx.hypercube_graph(4), lambda n: int("".join(map(str, n)), 2))),
]


@pytest.mark.parametrize(("name", "sizes", "other"), SAME_NUMBERING, ids=lambda v: str(v)[:30])
def test_edges_and_numbering(name, sizes, other):
    """The same nodes and the same edges as networkx, in the numbering that the docstring states."""
    ours = as_networkx(build(name, sizes))
    assert set(ours.nodes) == set(other.nodes)
    assert {frozenset(e) for e in ours.edges} == {frozenset(e) for e in other.edges}


@pytest.mark.parametrize(("name", "sizes", "other"), SAME_NUMBERING, ids=lambda v: str(v)[:30])
def test_counts_are_known_without_building(name, sizes, other):
    assert family_size(name, sizes) == (other.number_of_nodes(), other.number_of_edges())


def test_every_family_is_tried():
    assert {name for name, _, _ in SAME_NUMBERING} == set(FAMILIES)


def test_both_triangles_and_sorted_rows():
    for name, sizes, _ in SAME_NUMBERING:
        rows = build(name, sizes).rows
        for x, row in enumerate(rows):
            assert [y for y, _ in row] == sorted({y for y, _ in row})
            assert all(x in dict(rows[y]) for y, _ in row)


SPECTRA = [
    ("chain", {"sites": 9}, [2 * cos(pi * j / 10) for j in range(1, 10)]),
    ("ring", {"sites": 7}, [2 * cos(2 * pi * j / 7) for j in range(7)]),
    ("complete", {"sites": 6}, [5] + [-1] * 5),
    ("complete bipartite", {"left": 3, "right": 4}, [sqrt(12), -sqrt(12)] + [0] * 5),
    ("hypercube", {"dimension": 4}, [4 - 2 * i for i in range(5) for _ in range(comb(4, i))]),
    (
        "grid",
        {"rows": 3, "columns": 4},
        [2 * cos(pi * a / 4) + 2 * cos(pi * b / 5) for a in range(1, 4) for b in range(1, 5)],
    ),
    ("ladder", {"rungs": 5}, [2 * cos(pi * a / 6) + s for a in range(1, 6) for s in (1, -1)]),
]


@pytest.mark.parametrize(("name", "sizes", "levels"), SPECTRA, ids=lambda v: str(v)[:30])
def test_spectra(name, sizes, levels):
    """Closed forms of the textbook named above (grid and ladder: sums of two path spectra)."""
    assert np.allclose(spectrum(build(name, sizes)), np.sort(levels), atol=1e-12)


def test_binary_tree_root_symmetric_part():
    height = 3
    space = build("tree", {"branching": 2, "depth": height})
    levels = spectrum(space)
    for j in range(1, height + 2):
        assert np.min(np.abs(levels - 2 * sqrt(2) * cos(pi * j / (height + 2)))) < 1e-12


def test_closing_edge_and_hopping_direction():
    """H_xy of a family edge has x < y; a ring's closing edge is (N-1, 0)."""
    space = build("ring", {"sites": 4}, parse("exp(i*phi)"))
    plain = assemble(4, family_edges("ring", {"sites": 4}, parse("i"))[1], {}, space.shape, {})
    rows = [dict(r) for r in plain.rows]
    assert rows[3][0] == parse("i") and rows[0][3] == parse("-i")
    assert rows[0][1] == parse("i") and rows[1][0] == parse("-i")


@pytest.mark.parametrize(
    ("name", "sizes"),
    [
        ("chain", {"sites": 10**9}),
        ("complete", {"sites": 10**5}),
        ("hypercube", {"dimension": 60}),
        ("hypercube", {"dimension": 10**9}),
        ("tree", {"branching": 10, "depth": 10**9}),
        ("grid", {"rows": 10**6, "columns": 10**6}),
        ("star", {"arms": 10**6, "length": 10**6}),
    ],
)
def test_huge_sizes_are_refused_before_anything_is_built(name, sizes):
    with pytest.raises(ValueError, match="at most"):
        family_size(name, sizes)


def test_the_largest_chain_is_built():
    size, edges = family_edges("chain", {"sites": MOST_SITES}, MINUS_ONE)
    assert assemble(size, edges, {}, family_shape("chain", {"sites": size}), {}).size == MOST_SITES


def test_nothing_depends_on_the_order_of_edges():
    _, edges = family_edges("grid", {"rows": 3, "columns": 3}, parse("-g"))
    shape = family_shape("grid", {"rows": 3, "columns": 3})
    one = assemble(9, edges, {1: ONE, 0: ONE}, shape, {})
    other = assemble(9, edges[::-1], {0: ONE, 1: ONE}, shape, {})
    assert one == other


def test_bonds_replace_and_only_replace():
    _, edges = family_edges("chain", {"sites": 3}, ONE)
    assert with_bonds(edges, [(1, 0, parse("i"))])[0] == (1, 0, parse("i"))
    with pytest.raises(KeyError):
        with_bonds(edges, [(0, 2, ONE)])


def test_matrix_graph_drops_zeros():
    space = matrix_graph([[parse("0"), parse("g")], [parse("g"), parse("d")]])
    assert space.rows == (((1, parse("g")),), ((0, parse("g")), (1, parse("d"))))


def test_a_family_at_numeric_sizes():
    family = Family("ring", (("sites", parse("L")),), parse("-g"), ((parse("1"), parse("d")),), (), parse("phi"))
    space = family_at(family, {"sites": 5}, {})
    assert dict(space.rows[1])[1] == parse("d")
    assert space.gauge == ((4, 0, parse("phi")),)


# balls, centres, ends -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(6))
def test_balls_and_centres_against_networkx(seed):
    """Balls are single-source shortest paths cut off at the radius; the centre is networkx's where it is unique."""
    graph = nx.gnm_random_graph(14, 20, seed=seed)
    space = assemble(14, [(x, y, ONE) for x, y in graph.edges], {}, family_shape("chain", {"sites": 14}), {})
    for source in range(14):
        for radius in (0, 1, 2, 5):
            wanted = sorted(nx.single_source_shortest_path_length(graph, source, cutoff=radius))
            assert list(ball(space.rows, (source,), radius)) == wanted
        assert distances(space.rows, (source,)) == dict(nx.single_source_shortest_path_length(graph, source))
        assert list(neighbours(space.rows, source)) == sorted(graph[source])
    if nx.is_connected(graph):
        wanted = nx.center(graph)
        assert centre(space.rows) == (wanted[0] if len(wanted) == 1 else None)
    else:
        assert centre(space.rows) is None


@pytest.mark.parametrize("seed", range(8))
def test_centres_of_random_trees(seed):
    graph = nx.random_labeled_tree(25, seed=seed)
    rows = assemble(25, [(x, y, ONE) for x, y in graph.edges], {}, family_shape("chain", {"sites": 25}), {}).rows
    wanted = nx.center(graph)
    assert centre(rows) == (wanted[0] if len(wanted) == 1 else None)
    assert end(rows) == min(n for n, d in graph.degree if d == 1)


def test_a_ball_around_several_sites():
    rows = build("chain", {"sites": 10}).rows
    assert ball(rows, (8, 1), 1) == (0, 1, 2, 7, 8, 9)
    assert ball(rows, (), 3) == ()


def test_the_diagonal_is_no_step():
    rows = assemble(
        3, [(0, 1, ONE), (1, 2, ONE)], {0: ONE, 1: ONE, 2: ONE}, family_shape("chain", {"sites": 3}), {}
    ).rows
    assert neighbours(rows, 0) == (1,)
    assert end(rows) == 0
    assert centre(rows) == 1
