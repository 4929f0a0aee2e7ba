"""Gamma intervals of any shape: scipy's power of the averaged step, two levels by hand, neighbouring laws."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest
from flint import ctx
from scipy.linalg import fractional_matrix_power

from derive.checks.summed import check_summed
from derive.derivations.moments.topic import derive_moments
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import TAU, Formula
from derive.numerics.evaluate import Values, enclose
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Interval, Letter, Question, Setting, Watcher, Wish
from derive.record.said import Claim
from tests.graphs import on_graph
from tests.strategies import POSITIVE, site

QUICK = Check(samples=1, digits=20)


def gamma(setting: Setting, shape: str) -> Setting:
    setting = replace(setting, interval=Interval(TAU, "gamma", parse(shape)))
    return replace(setting, letters=(*setting.letters, Letter("s", POSITIVE))) if shape == "s" else setting


def values(setting: Setting) -> dict[str, Formula]:
    found = {c.id.removeprefix("moments."): c.value for c in derive_moments(setting, Wish("moments")).claims}
    return {k: v for k, v in found.items() if isinstance(v, Formula) and v.head != "operator"}


def at(f: Formula, **point: str) -> float:
    with ctx.workprec(120):
        ball = enclose(f, Values.at({n: parse(v) for n, v in point.items()}))
        assert ball.imag.contains(0)
        return float(ball.real.mid())


def clicks(graph: nx.Graph, start: int, tau: float, shape: float, eta: float, asks: int) -> np.ndarray:
    """F_1 ... from density matrices, E[U rho U†] = (1 + i theta L)^(-s) rho by scipy's fractional power."""
    h, one = -nx.to_numpy_array(graph), np.eye(len(graph))
    liouville = np.kron(h, one) - np.kron(one, h.T)
    average = fractional_matrix_power(np.eye(len(h) ** 2) + 1j * tau / shape * liouville, -shape)
    no = np.diag([np.sqrt(1 - eta)] + [1.0] * (len(h) - 1))
    rho = np.zeros((len(h), len(h)), complex)
    rho[start, start] = 1
    found = []
    for _ in range(asks):
        rho = (average @ rho.ravel()).reshape(rho.shape)
        found.append(eta * rho[0, 0].real)
        rho = no @ rho @ no
    return np.array(found)


@pytest.mark.parametrize(
    ("graph", "start", "shape", "eta"),
    [
        (nx.path_graph(2), 1, "1/2", "1"),
        (nx.cycle_graph(4), 2, "3/2", "1"),
        (nx.path_graph(3), 2, "5/3", "3/4"),
        (nx.complete_graph(3), 1, "9", "1"),
    ],
)
def test_mean_against_scipy(graph: nx.Graph, start: int, shape: str, eta: str) -> None:
    """g tau = 3/4; scipy's fractional_matrix_power and 3,000 asks."""
    setting = gamma(replace(on_graph(graph, 0, start), detectors=(Watcher((site(0),), parse(eta)),)), shape)
    s, efficiency = (float(parse(f).args[0]) for f in (shape, eta))
    wanted = clicks(graph, start, 0.75, s, efficiency, 3000)
    found = values(setting)
    assert abs(at(found["mean"], g="1", tau="3/4") - wanted @ np.arange(1, 3001)) < 1e-7
    if "variance" in found:
        total, n = wanted.sum(), np.arange(1, 3001)
        spread = wanted @ n**2 / total - (wanted @ n / total) ** 2
        assert abs(at(found["variance"], g="1", tau="3/4") - spread) < 1e-5


def test_two_levels_at_any_shape() -> None:
    """F_n is geometric, p = (1 - Re x)/2, x the average of exp(2 i g t): mean 1/p, variance (1 - p)/p^2; by hand."""
    found = values(gamma(on_graph(nx.path_graph(2), 0, 1), "s"))
    x = (1 - 2j * 0.7 / 1.3) ** -1.3
    p = (1 - x.real) / 2
    assert abs(at(found["mean"], g="1", tau="7/10", s="13/10") - 1 / p) < 1e-12
    assert abs(at(found["variance"], g="1", tau="7/10", s="13/10") - (1 - p) / p**2) < 1e-11


def test_returns_count_the_energies() -> None:
    """w/eta at every law of intervals; source: Phys. Rev. A 103, 022222 (2021), Commun. Math. Phys. 320, 543 (2013)."""
    domains = {"g": POSITIVE, "tau": POSITIVE, "s": POSITIVE}
    assert vanishes(values(gamma(on_graph(nx.cycle_graph(4), 0, 0), "s"))["mean"] - parse("3"), domains) is True
    weak = replace(on_graph(nx.cycle_graph(6), 0, 0), detectors=(Watcher((site(0),), parse("1/2")),))
    assert values(gamma(weak, "3/2"))["mean"] == parse("8")


def test_whole_shapes_are_the_same_by_both_forms() -> None:
    """Shape 2 multiplied out against the form with powers, s = 2 put in."""
    setting = on_graph(nx.path_graph(3), 0, 1)
    powers, expanded = values(gamma(setting, "s"))["mean"], values(gamma(setting, "2"))["mean"]
    assert abs(at(powers, g="1", tau="3/4", s="2") - at(expanded, g="1", tau="3/4")) < 1e-12


@pytest.mark.parametrize("shape", ["3/2", "s", "20"])
def test_entries_agree_with_the_averaged_experiment(shape: str) -> None:
    setting = gamma(on_graph(nx.cycle_graph(4), 0, 2), shape)
    report = answer(Question(setting, (Wish("detection"), Wish("moments")), check=QUICK))
    found = {j.claim.id: j.verdict for j in report.judged}
    assert set(found.values()) <= {"agrees", "proved"} and found["detection.total"] == "proved"
    assert found["moments.mean"] == "agrees"


def test_two_watched_sites_with_an_energy_reached_twice() -> None:
    setting = gamma(on_graph(nx.cycle_graph(6), (0, 1), 3), "3/2")
    report = answer(Question(setting, (Wish("detection"),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"}


def test_another_shape_is_refuted() -> None:
    right = values(gamma(on_graph(nx.path_graph(2), 0, 1), "3/2"))["mean"]
    claim = Claim("claim.mine", "moments", Quantity("mean"), right)
    verdicts = [
        check_summed(gamma(on_graph(nx.path_graph(2), 0, 1), shape), (claim,), QUICK).findings["claim.mine"].verdict
        for shape in ("3/2", "5/2")
    ]
    assert verdicts == ["agrees", "refuted"]


def test_too_many_gaps_are_left_to_the_equation() -> None:
    found = derive_moments(gamma(on_graph(nx.cycle_graph(6), 0, 1), "3/2"), Wish("moments"))
    assert "3 different gaps" in str(found.notes[0][0])
    assert {c.value.head for c in found.claims if isinstance(c.value, Formula)} == {"operator"}
