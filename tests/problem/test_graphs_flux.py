"""Fluxes: the product of H around each loop, taken from the finished matrix, carries exactly the phase asked for."""

from __future__ import annotations

import cmath

import networkx as nx
import numpy as np
import pytest

from derive.formula.grammar import parse
from derive.formula.tree import ONE, Formula
from derive.problem.graphs import FluxFault, assemble, family_edges, family_shape
from derive.problem.setting import Domain
from derive.worksheet.letters import approx_value

DOMAINS = {n: Domain("real", "real") for n in ("a", "b", "c", "phi")}
AT = {"a": 0.3, "b": 1.1, "c": -0.7, "phi": 0.9}


def fluxed(name, sizes, loops, hopping="1"):
    size, edges = family_edges(name, sizes, parse(hopping))
    shape = family_shape(name, sizes)
    return assemble(size, edges, {}, shape, DOMAINS, None, [(tuple(around), parse(f)) for around, f in loops])


def value(f: Formula) -> complex:
    found = approx_value(f, AT)
    assert found is not None
    return found


def around(space, loop) -> complex:
    rows = [dict(r) for r in space.rows]
    product = 1 + 0j
    for x, y in zip(loop, (*loop[1:], loop[0]), strict=True):
        product *= value(rows[x][y])
    return product


def dense(space) -> np.ndarray:
    out = np.zeros((space.size, space.size), complex)
    for x, row in enumerate(space.rows):
        for y, v in row:
            out[x, y] = value(v)
    return out


CASES = [
    ("ring", {"sites": 5}, [(range(5), "phi")]),
    ("ring", {"sites": 5}, [((0, 4, 3, 2, 1), "phi")]),
    ("grid", {"rows": 2, "columns": 3}, [((0, 1, 4, 3), "a"), ((1, 2, 5, 4), "b")]),
    (
        "grid",
        {"rows": 3, "columns": 3},
        [((0, 1, 4, 3), "a"), ((1, 2, 5, 4), "b"), ((3, 4, 7, 6), "c"), ((4, 5, 8, 7), "a+b")],
    ),
    ("grid", {"rows": 2, "columns": 3}, [((0, 1, 2, 5, 4, 3), "a"), ((0, 1, 4, 3), "b")]),
    ("complete", {"sites": 4}, [((0, 1, 2), "a"), ((0, 2, 3), "b"), ((0, 1, 3), "c")]),
    ("complete", {"sites": 4}, [((0, 1, 2, 3), "a"), ((0, 2, 1, 3), "b"), ((0, 1, 3, 2), "c")]),
    ("hypercube", {"dimension": 3}, [((0, 1, 3, 2), "a"), ((0, 2, 6, 4), "b"), ((0, 1, 5, 4), "c")]),
]


@pytest.mark.parametrize(("name", "sizes", "loops"), CASES)
def test_each_loop_has_its_flux(name, sizes, loops):
    """Checked on the matrix itself, a definition of flux; `bonds` and gauges play no part."""
    space = fluxed(name, sizes, loops)
    for loop, phase in loops:
        assert cmath.isclose(around(space, tuple(loop)), cmath.exp(1j * value(parse(phase))), abs_tol=1e-12)
    assert np.allclose(dense(space), dense(space).conj().T)
    assert len(space.gauge) <= len(loops)


def test_loops_that_are_not_named_in_a_tree_of_loops_keep_no_flux():
    space = fluxed("grid", {"rows": 2, "columns": 3}, [((0, 1, 4, 3), "a")])
    assert cmath.isclose(around(space, (1, 2, 5, 4)), 1, abs_tol=1e-12)


def test_the_spectrum_of_a_ring_with_flux():
    """2 cos((2 pi j + phi)/N): translation in a uniform gauge ("Spectra of Graphs", 2012, for phi = 0; the shift is
    derived here by H_x,x+1 -> exp(i phi/N))."""
    n = 6
    space = fluxed("ring", {"sites": n}, [(range(n), "phi")])
    levels = np.sort(np.linalg.eigvalsh(dense(space)))
    wanted = np.sort([2 * np.cos((2 * np.pi * j + AT["phi"]) / n) for j in range(n)])
    assert np.allclose(levels, wanted)


def test_the_gauge_is_written_down():
    space = fluxed("grid", {"rows": 2, "columns": 3}, [((0, 1, 4, 3), "a"), ((1, 2, 5, 4), "b")])
    plain = dense(fluxed("grid", {"rows": 2, "columns": 3}, []))
    for x, y, phase in space.gauge:
        plain[x, y] *= cmath.exp(1j * value(phase))
        plain[y, x] = plain[x, y].conjugate()
    assert np.allclose(plain, dense(space))


@pytest.mark.parametrize(
    ("loops", "number", "words"),
    [
        ([((0, 1, 2), "a")], 0, "sites 2 and 0 are not joined"),
        ([((0, 1, 4, 3), "a"), ((3, 0, 1, 4), "b")], 1, "follows from the other"),
        ([((0, 1, 4, 3), "a"), ((1, 2, 5, 4), "b"), ((0, 1, 2, 5, 4, 3), "c")], 2, "follows from the other"),
    ],
)
def test_loops_that_carry_no_flux(loops, number, words):
    with pytest.raises(FluxFault) as caught:
        fluxed("grid", {"rows": 2, "columns": 3}, loops)
    assert caught.value.loop == number
    assert words in caught.value.reason


@pytest.mark.parametrize("seed", range(5))
def test_a_cycle_basis_of_a_random_graph(seed):
    """networkx gives the basis; every loop of it gets a flux of its own."""
    graph = nx.gnm_random_graph(9, 14, seed=seed)
    loops = [tuple(c) for c in nx.cycle_basis(graph)]
    phases = [parse(["a", "b", "c", "phi"][k % 4]) for k in range(len(loops))]
    edges = [(x, y, ONE) for x, y in graph.edges]
    space = assemble(
        9, edges, {}, family_shape("chain", {"sites": 9}), DOMAINS, None, list(zip(loops, phases, strict=True))
    )
    for loop, phase in zip(loops, phases, strict=True):
        assert cmath.isclose(around(space, loop), cmath.exp(1j * value(phase)), abs_tol=1e-12)
