"""Published laws of the first click on graphs whose spectra are known, and fifty digits of one closed function."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest
from flint import ctx

from derive.derivations.moments.topic import derive_moments
from derive.derivations.sight import Sight
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import TAU, Formula
from derive.numerics.evaluate import Values, enclose
from derive.pipeline import answer
from derive.problem.setting import Check, Interval, Question, Setting, Watcher, Wish
from tests.graphs import cube, on_graph
from tests.strategies import site


def tree(height: int) -> nx.Graph:
    return nx.convert_node_labels_to_integers(nx.balanced_tree(2, height))


GRAPHS = [
    (nx.star_graph(5), 0, 2),
    (nx.star_graph(5), 1, 3),
    (tree(2), 0, 3),
    (tree(3), 0, 4),
    (cube(3), 0, 4),
    (nx.complete_graph(6), 0, 2),
    (nx.path_graph(5), 0, 5),
    (nx.complete_bipartite_graph(2, 3), 0, 3),
]
NAMES = ["star, centre", "star, leaf", "tree of 2", "tree of 3", "cube", "complete", "path", "bipartite"]


@pytest.mark.parametrize(("graph", "watched", "w"), GRAPHS, ids=NAMES)
@pytest.mark.parametrize("law", ["fixed", "exponential"])
def test_mean_return_is_the_number_of_different_energies_seen(graph: nx.Graph, watched: int, w: int, law: str) -> None:
    """Sources: Commun. Math. Phys. 320, 543 (2013); random intervals Phys. Rev. A 103, 022222 (2021).

    Spectra: star +-sqrt(m), 0; tree 2 sqrt(2) cos(pi j/(h+2)) from its root; cube d - 2i; K_N N-1, -1; path of N all
    different; K_mn +-sqrt(mn), 0 (textbook "Spectra of Graphs", 2012, ch. 1).
    """
    setting = replace(on_graph(graph, watched, watched), interval=Interval(TAU, law))
    assert text(_value(setting, "mean")) == str(w)


def _value(setting: Setting, name: str) -> Formula:
    found = {c.id.removeprefix("moments."): c.value for c in derive_moments(setting, Wish("moments")).claims}
    value = found[name]
    assert isinstance(value, Formula)
    return value


@pytest.mark.parametrize("height", [1, 2, 3])
def test_energies_seen_from_the_root_of_a_tree(height: int) -> None:
    """2 sqrt(2) cos(pi j/(h+2)), j = 1 ... h+1: a path's spectrum stretched; textbook "Spectra of Graphs", ch. 1."""
    there = Values.at({"g": parse("1")})
    found: list[float] = []
    for f, _ in Sight(on_graph(tree(height), 0, 0)).factors:
        coefficients = [float(enclose(c.field.formula(c), there).real.mid()) for c in f]
        found += np.roots(coefficients[::-1]).tolist()
    wanted = 2 * np.sqrt(2) * np.cos(np.pi * np.arange(1, height + 2) / (height + 2))
    assert np.allclose(sorted(found), sorted(wanted))


@pytest.mark.parametrize("graph", [nx.cycle_graph(4), nx.path_graph(3), nx.path_graph(4)], ids=["square", "3", "4"])
def test_return_variance_at_short_intervals(graph: nx.Graph) -> None:
    """tau^2 Var -> 2 sum_j 1/|<eps_j|H|d>|^2 over the coupled eigenstates of QHQ, by numpy's eigh; square: 4."""
    h = -nx.to_numpy_array(graph)
    inner = np.linalg.eigh(h[1:, 1:])[1]
    couplings = inner.T @ h[1:, 0]
    wanted = 2 * sum(1 / c**2 for c in couplings if abs(c) > 1e-9)
    variance = _value(on_graph(graph, 0, 0), "variance")
    with ctx.workprec(400):
        measured = enclose(variance, Values.at({"g": parse("1"), "tau": parse("10^-6")})).real * 10**-12
    assert abs(float(measured) / wanted - 1) < 1e-9
    assert graph.number_of_nodes() != 4 or graph.degree(0) != 2 or abs(wanted - 4) < 1e-12


@pytest.mark.parametrize("efficiency", ["1/2", "3/4"])
def test_imperfect_returns_take_w_over_eta(efficiency: str) -> None:
    """By hand from the renewal equation; a tree's root, w = 4."""
    setting = replace(on_graph(tree(3), 0, 0), detectors=(Watcher((site(0),), parse(efficiency)),))
    assert text(_value(setting, "mean")) == {"1/2": "8", "3/4": "16/3"}[efficiency]


def test_fifty_digits_of_the_hexagon() -> None:
    """The opposite site's mean at random intervals: derived and measured share fifty digits, and it is proved."""
    setting = on_graph(nx.cycle_graph(6), 0, 3)
    report = answer(Question(setting, (Wish("moments"),), check=Check(digits=50, samples=3)))
    mean = next(j for j in report.judged if j.claim.id == "moments.mean")
    assert mean.verdict == "proved"
    assert all(f.digits is not None and f.digits >= 50 for f in mean.findings if f.road == "enclosure")
    assert {n.at for n in mean.numbers} and len(mean.numbers) == 3


def test_at_and_next_to_an_exceptional_interval() -> None:
    """Hexagon, pi/2 and 10^-6 from it: 5/18 and what the generic function gives there, with a warning."""
    ring = nx.cycle_graph(6)
    at = on_graph(ring, 0, 1, length=parse("pi/(2*g)"))
    near = on_graph(ring, 0, 1, length=parse("(pi/2 + 1/1000000)/g"))
    for setting, is_warned in ((at, False), (near, True)):
        report = answer(Question(setting, (Wish("moments"),), check=Check(samples=1)))
        found = {j.claim.id: j for j in report.judged}
        assert {j.verdict for j in report.judged} <= {"proved", "agrees"}
        assert any("away from" in str(n[0]) for d in report.derivations for n in d.notes) == is_warned
        if not is_warned:
            assert found["moments.mean"].claim.value == parse("5/18")
