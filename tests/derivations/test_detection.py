"""Total detection probability, dark states and phases, against published and textbook values, all exact."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import comb

import networkx as nx
import numpy as np
import pytest
from flint import ctx

from derive.derivations.detection.topic import derive_detection
from derive.derivations.sight import Sight
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import I_UNIT, ONE, Formula, call, letter, number
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Setting, Start, Wish
from derive.record.said import Cases, Claim, Matrix
from tests.graphs import UNIT, cube, karate_club, on_graph
from tests.settings_of_graphs import cluster
from tests.strategies import POSITIVE, REAL, random_hermitian, random_pair, setting_of, site


def claims(setting: Setting, **options: object) -> dict[str, Claim]:
    return {c.id: c for c in derive_detection(setting, Wish("detection", tuple(options.items()))).claims}


def total(setting: Setting) -> str:
    value = claims(setting)["detection.total"].value
    assert isinstance(value, Formula)
    return text(value)


def phases(setting: Setting) -> int:
    value = claims(setting)["detection.phases"].value
    assert isinstance(value, Formula)
    return int(value.args[0])


@pytest.mark.parametrize("start", range(4))
@pytest.mark.parametrize(
    ("length", "expected"),
    [
        ("tau", ["1", "1/2", "1/2", "1"]),
        ("pi/(2*g)", ["1", "1/6", "1/2", "2/3"]),
        ("2*pi/(3*g)", ["1", "0", "0", "1"]),
    ],
)
def test_hexagon(length: str, expected: list[str], start: int) -> None:
    """Total probabilities of the hexagon; source: Phys. Rev. E 95, 032141 (2017), numbers recomputed for this test."""
    assert total(on_graph(nx.cycle_graph(6), 0, start, length=parse(length))) == expected[start]


@pytest.mark.parametrize(("length", "w"), [("tau", 4), ("pi/(2*g)", 3), ("2*pi/(3*g)", 2), ("7/10", 4)])
def test_phases_of_the_hexagon(length: str, w: int) -> None:
    """Distinct phases; source: Phys. Rev. E 95, 032141 (2017); 7/10 keeps them apart, pi being transcendental."""
    assert phases(on_graph(nx.cycle_graph(6), 0, 0, length=parse(length))) == w


@pytest.mark.parametrize("distance", [1, 2, 3, 4])
def test_hypercube(distance: int) -> None:
    """1/binomial(d, k), w = d + 1; source: Phys. Rev. A 74, 042334 (2006), from memory."""
    setting = on_graph(cube(4), 0, 2**distance - 1)
    assert total(setting) == text(number(Fraction(1, comb(4, distance))))
    assert phases(setting) == 5


def test_complete_graph_star_tree_and_path() -> None:
    """1/(N-1); leaf to centre 1/m, leaf to leaf 1/(m-1); 2^-depth; 1/2.

    Source: the symmetry bound of Phys. Rev. Research 2, 023392 (2020), which these graphs saturate.
    """
    assert total(on_graph(nx.complete_graph(7), 0, 3)) == "1/6"
    assert total(on_graph(nx.star_graph(5), 0, 2)) == "1/5"
    assert total(on_graph(nx.star_graph(5), 1, 2)) == "1/4"
    tree = nx.convert_node_labels_to_integers(nx.balanced_tree(2, 3))
    assert [total(on_graph(tree, 0, x)) for x in (1, 3, 7)] == ["1/2", "1/4", "1/8"]
    assert [total(on_graph(nx.path_graph(5), 2, x)) for x in (0, 1)] == ["1/2", "1/2"]


@pytest.mark.parametrize(
    ("graph", "w"),
    [(nx.cycle_graph(n), n // 2 + 1) for n in range(3, 10)]
    + [(nx.complete_graph(6), 2), (nx.path_graph(7), 7), (cube(3), 4), (nx.star_graph(4), 2)],
)
def test_phases_are_the_published_mean_return(graph: nx.Graph, w: int) -> None:
    """w of rings, complete graphs, paths from the end, cubes, stars; source: Commun. Math. Phys. 320, 543 (2013)."""
    assert phases(on_graph(graph, 0, 0)) == w


def test_karate_club_against_a_numerical_spectrum() -> None:
    """Every vertex, exactly rational; source of the comparison: numpy's eigensolver in doubles."""
    graph = karate_club()
    energies, states = np.linalg.eigh(nx.to_numpy_array(graph, nodelist=range(34)))
    groups: list[list[int]] = []
    for k, e in enumerate(energies):
        if groups and abs(e - energies[groups[-1][0]]) < 1e-9:
            groups[-1].append(k)
        else:
            groups.append([k])
    seen = [(g, float((states[33, g] ** 2).sum())) for g in groups]
    seen = [(g, p) for g, p in seen if p > 1e-12]
    assert phases(on_graph(graph, 33, 0, UNIT)) == len(seen) == 23
    for x in range(34):
        expected = sum(float(states[33, g] @ states[x, g]) ** 2 / p for g, p in seen)
        exact = total(on_graph(graph, 33, x, UNIT))
        assert abs(float(Fraction(exact)) - expected) < 1e-10


@pytest.mark.parametrize("seed", range(6))
def test_commutator_bound_on_random_graphs(seed: int) -> None:
    """(P - |<psi|d>|^2) Var(H)_d >= |<d|[H, D]|psi>|^2; source: Phys. Rev. Research 2, 023392 (2020)."""
    rows = random_hermitian(6, seed)
    h = np.array([[_value(rows[x].get(y, number(0))) for y in range(6)] for x in range(6)])
    setting = replace(setting_of(rows, (site(0),)), start=Start(((ONE, site(4)),)))
    variance = (h @ h)[0, 0].real - h[0, 0].real ** 2
    commutator = abs(h[0, 4]) ** 2  # <d|HD - DH|psi> with <d|psi> = 0
    assert float(Fraction(total(setting))) * variance >= commutator - 1e-12


def _value(f: Formula) -> complex:
    """A Gaussian integer as a complex number."""
    with ctx.workprec(64):
        ball = enclose(f, Values({}))
    return complex(float(ball.real.mid()), float(ball.imag.mid()))


def test_equivalent_starts_bound() -> None:
    """nu equivalent starts: P <= 1/nu; source: Phys. Rev. Research 2, 023392 (2020)."""
    setting = on_graph(nx.complete_bipartite_graph(2, 5), 0, 3)
    assert Fraction(total(setting)) <= Fraction(1, 5)


def _flux_ring() -> Setting:
    g, phi = letter("g"), letter("phi")
    rows: list[dict[int, Formula]] = [{} for _ in range(6)]
    for x in range(5):
        rows[x][x + 1] = rows[x + 1][x] = -g
    rows[5][0], rows[0][5] = -g * call("exp", I_UNIT * phi), -g * call("exp", -(I_UNIT * phi))
    setting = setting_of(rows, (site(0),), g=POSITIVE, phi=REAL)
    return replace(setting, start=Start(((ONE, site(1)),)))


def test_a_phase_around_the_ring_lights_everything_up_but_at_its_mirrors() -> None:
    """Ring: 1/2 without flux, 1 at a generic one; source: the level weights |1 - (-1)^k e^(i phi)|^2, by hand."""
    value = claims(_flux_ring())["detection.total"].value
    assert isinstance(value, Cases)
    assert {when: text(f) for when, f in value.pieces} == {"phi = 0": "1/2", "phi = pi": "1/2", "otherwise": "1"}


def test_detuned_end_breaks_the_mirror() -> None:
    """A path watched in the middle, one end detuned by Delta: 1/2 at Delta = 0 only; by symmetry, by hand."""
    g = letter("g")
    rows: list[dict[int, Formula]] = [{} for _ in range(5)]
    for x in range(4):
        rows[x][x + 1] = rows[x + 1][x] = -g
    rows[0][0] = letter("Delta")
    setting = replace(setting_of(rows, (site(2),), g=POSITIVE, Delta=REAL), start=Start(((ONE, site(1)),)))
    claim = claims(setting)["detection.total"]
    assert isinstance(claim.value, Cases)
    assert {when: text(f) for when, f in claim.value.pieces} == {"Delta = 0": "1/2", "otherwise": "1"}
    assert "Delta != 0" in claim.valid_for


def test_dark_states_are_orthogonal_eigenspaces_of_what_is_not_seen() -> None:
    """Six-ring: two dark states, both odd under the mirror through the detector, by hand."""
    setting = on_graph(nx.cycle_graph(6), 0, 1)
    found = claims(setting, dark_basis=True)
    for name in ("detection.dark.1", "detection.dark.2"):
        value = found[name].value
        assert isinstance(value, Matrix)
        state = {x: f for x, _, f in value.entries()}
        assert 0 not in state and 3 not in state
        for x in (1, 2):
            assert vanishes(state.get(x, number(0)) + state.get(6 - x, number(0)), setting.domains()) is True


def test_mixture_and_rank_two() -> None:
    """A mixture is the weighted mean; a detector of two generic states sees all of a generic graph."""
    mixed = replace(on_graph(nx.cycle_graph(6), 0), start=Start(((number(Fraction(1, 3)), site(3)),
                                                                (number(Fraction(2, 3)), site(1)))))
    assert total(mixed) == "2/3"
    both = replace(setting_of(random_hermitian(7, 5), random_pair(7, 5)), start=Start(((ONE, site(3)),)))
    assert total(both) == "1"


def test_a_loop_with_a_phase_and_a_detuning_keeps_its_numbers_short() -> None:
    """Fractions in exp(i phi) are in lowest terms, so that the bright space stays cheap; energies as numpy has them."""
    plain = [(x, y, "-g") for x, y in ((0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (5, 6))]
    edges = [*plain, (4, 1, "-g*exp(i*phi)")]
    setting = cluster(edges, 0, ("g", "phi", "Delta"), [(2, "Delta")], 6)
    sight = Sight(setting)
    lengths = [len(n.num) + (0 if n.den is None else len(n.den)) for n in sight.space.norms]
    assert max(lengths) < 60, lengths
    there = Values.at({"g": parse("1"), "phi": parse("1/3"), "Delta": parse("7/10")})
    h = np.zeros((7, 7), complex)
    for x, row in enumerate(setting.space.rows):  # type: ignore[union-attr]
        for y, f in row:
            h[x, y] = complex(enclose(f, there))
    found: list[complex] = []
    for f, _ in sight.factors:
        found += np.roots([complex(enclose(c.field.formula(c), there)) for c in f][::-1]).tolist()
    assert np.allclose(sorted(x.real for x in found), np.linalg.eigvalsh(h), atol=1e-9)
