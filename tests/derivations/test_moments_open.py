"""Moments left to an equation: certified digits against mpmath, numpy's eigenvalues and a published double sum."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import networkx as nx
import numpy as np
import pytest
from scipy.linalg import expm

from derive.checks.moments.solved import Solved
from derive.checks.summed import check_summed
from derive.derivations.moments.topic import derive_moments
from derive.formula.grammar import parse
from derive.formula.tree import TAU, Formula
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Interval, Question, Setting, Watcher, Wish
from derive.record.said import Claim, Number
from tests.derivations.test_moments import summed
from tests.graphs import UNIT, karate_club, on_graph
from tests.strategies import site

THERE = Check(samples=0, digits=20, points=((("g", parse("1")), ("tau", parse("3/4"))),))


def digits(setting: Setting, highest: int = 2) -> dict[str, mpmath.mpf]:
    """Certified numbers of the open entries at g = 1, tau = 3/4."""
    claims = derive_moments(setting, Wish("moments", (("highest", highest),))).claims
    seen = check_summed(setting, claims, THERE)
    assert {f.verdict for f in seen.findings.values()} == {"agrees"}, seen.findings
    found = {name.removeprefix("moments."): x for name, x in seen.values.items() if isinstance(x, Number)}
    return {name: mpmath.mpf(x.value) for name, x in found.items()}


def test_eleven_sites_against_the_experiment_in_mpmath() -> None:
    """Source: direct summation over asks with mpmath's matrix exponential."""
    setting = on_graph(nx.path_graph(11), 0, 3)
    found = digits(replace(setting, detectors=(Watcher((site(0),), parse("3/4")),)), 3)
    total, mean, square = summed(nx.path_graph(11), 3, "0.75", "0.75", 4500)
    assert abs(found["mean"] - mean) < mpmath.mpf("1e-9") and abs(found["conditional_mean"] - mean / total) < 1e-9
    assert abs(found["variance"] - (square / total - (mean / total) ** 2)) < mpmath.mpf("1e-5")
    assert found["3"] > square


def test_return_variance_of_34_vertices() -> None:
    """2 sum z_i z_j*/(1 - z_i z_j*) over numpy's eigenvalues of QU; source: Phys. Rev. Research 1, 033086 (2019)."""
    found = digits(on_graph(karate_club(), 33, 33, UNIT))
    assert list(found) == ["variance"]
    u = expm(-0.75j * nx.to_numpy_array(karate_club(), nodelist=range(34), weight=None))
    u[33, :] = 0
    z = np.array([x for x in np.linalg.eigvals(u) if 1e-7 < abs(x) < 1 - 1e-9])
    pairs = np.conj(z)[:, None] * z[None, :]
    wanted = float((2 * pairs / (1 - pairs)).sum().real)
    assert abs(float(found["variance"]) / wanted - 1) < 1e-6


@pytest.mark.parametrize(("law", "shape"), [("exponential", 1.0), ("gamma", 1.5)])
def test_two_watched_sites_at_random_intervals(law: str, shape: float) -> None:
    """Hexagon, sites 0 and 1, from the far side: density matrices averaged over numpy's energies, 3,000 asks."""
    given = parse("3/2") if law == "gamma" else None
    setting = replace(on_graph(nx.cycle_graph(6), (0, 1), 3), interval=Interval(TAU, law, given))
    energies, states = np.linalg.eigh(-nx.to_numpy_array(nx.cycle_graph(6)))
    factor = (1 + 1j * (energies[:, None] - energies[None, :]) * 0.75 / shape) ** -shape
    rho, mean = np.zeros((6, 6)), 0.0
    rho[3, 3] = 1
    no = np.diag([0.0, 0, 1, 1, 1, 1])
    for n in range(1, 3001):
        rho = states @ (factor * (states.T @ rho @ states)) @ states.T
        mean += n * float((rho[0, 0] + rho[1, 1]).real)
        rho = no @ rho @ no
    assert abs(float(digits(setting)["mean"]) - mean) < 1e-8


def test_an_equation_wrongly_solved_is_refuted(monkeypatch: pytest.MonkeyPatch) -> None:
    """The same claims, were the equation's solution twice as large."""
    right = Solved.moment
    monkeypatch.setattr(Solved, "moment", lambda self, p: 2 * right(self, p))
    setting = on_graph(nx.path_graph(13), 0, 3)
    seen = check_summed(setting, derive_moments(setting, Wish("moments")).claims, THERE)
    assert {f.verdict for f in seen.findings.values()} == {"refuted"}


@pytest.mark.parametrize(("changed", "verdict"), [("", "agrees"), ("7", "refuted")])
def test_a_long_decimal_stands_for_what_rounds_to_it(changed: str, verdict: str) -> None:
    """The certified digits said again; and with another digit in the tenth place."""
    setting = on_graph(nx.path_graph(13), 0, 3)
    value = check_summed(setting, derive_moments(setting, Wish("moments")).claims, THERE).values["moments.mean"]
    assert isinstance(value, Number)
    shown = value.value
    place = shown.index(".") + 8
    said = shown[:place] + ("3" if shown[place] != "3" else "4") + shown[place + 1 :] if changed else shown
    claim = Claim("claim.mine", "moments", Quantity("mean"), parse(said), origin="user")
    assert check_summed(setting, (claim,), THERE).findings["claim.mine"].verdict == verdict


def test_a_short_decimal_is_exact() -> None:
    """Two levels at tau = pi/4 give the mean 2; 2.0000001 is another number, however few digits it has."""
    setting = on_graph(nx.path_graph(2), 0, 1, length=parse("pi/(4*g)"))
    for said, verdict in (("2", "agrees"), ("2.0000001", "refuted")):
        claim = Claim("claim.mine", "moments", Quantity("mean"), parse(said), origin="user")
        assert check_summed(setting, (claim,), Check(samples=1)).findings["claim.mine"].verdict == verdict


def test_the_report_holds_numbers_and_where_they_hold() -> None:
    report = answer(Question(on_graph(nx.path_graph(13), 0, 3), (Wish("moments"),), check=Check(samples=1)))
    found = {j.claim.id: j for j in report.judged}
    assert set(found) == {"moments.mean", "moments.conditional_mean", "moments.variance"}
    for j in found.values():
        assert isinstance(j.claim.value, Number) and j.verdict == "agrees"
        assert {r.left.args[0] for r in j.claim.assume} == {"g", "tau"}
    assert isinstance(report.derivations[0].steps[-1].lines[0].right, Formula)


def test_points_where_phases_merge_are_left_out() -> None:
    """At tau = pi/g the chain's levels +-g have one phase."""
    setting = on_graph(nx.path_graph(11), 0, 3)
    effort = Check(samples=0, points=((("g", parse("1")), ("tau", parse("pi"))),))
    found = check_summed(setting, derive_moments(setting, Wish("moments")).claims, effort).findings
    assert found["moments.mean"].verdict == "untested"


def test_eight_levels_are_left_to_the_equation_and_six_are_written() -> None:
    """Sums over roots of roots stand for at most six levels; the curve of their figure is the measured one."""
    six, eight = (derive_moments(on_graph(nx.path_graph(n), 0, 2), Wish("moments")).claims[0].value for n in (6, 8))
    assert isinstance(six, Formula) and isinstance(eight, Formula)
    assert six.head != "operator" and eight.head == "operator"
    report = answer(Question(on_graph(nx.path_graph(6), 0, 2), (Wish("moments"),), check=Check(samples=1)))
    assert {c.role for p in report.plots for c in p.curves} == {"measured"}
    assert digits(on_graph(nx.path_graph(8), 0, 2))["mean"] > 8


def test_several_phases_in_five_dimensions_are_left_to_the_equation() -> None:
    """Path of five watched at three sites: sqrt(3) g and g as energies; the mean against numpy's sum over 400 asks."""
    setting = on_graph(nx.path_graph(5), (0, 1, 2), 4)
    u = expm(0.75j * nx.to_numpy_array(nx.path_graph(5)))
    psi, mean = np.eye(5)[4].astype(complex), 0.0
    for n in range(1, 401):
        psi = u @ psi
        mean += n * float((abs(psi[:3]) ** 2).sum())
        psi[:3] = 0
    assert abs(float(digits(setting)["mean"]) - mean) < 1e-9
