"""Exponentially distributed intervals: published integers and rational values, and a stochastic average in numpy."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest

from derive.checks.summed import check_summed
from derive.derivations.detection.topic import derive_detection
from derive.derivations.moments.topic import derive_moments
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import TAU, Formula, number
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Interval, Question, Setting, Wish
from derive.record.said import Claim
from tests.graphs import on_graph
from tests.strategies import POSITIVE

DOMAINS = {"g": POSITIVE, "tau": POSITIVE}


def random(graph: nx.Graph, start: int) -> Setting:
    return replace(on_graph(graph, 0, start), interval=Interval(TAU, "exponential"))


def mean(setting: Setting) -> Formula:
    value = derive_moments(setting, Wish("moments")).claims[0].value
    assert isinstance(value, Formula)
    return value


@pytest.mark.parametrize(
    ("sites", "start", "value"), [(3, 1, "5/4"), (4, 1, "2"), (4, 2, "7/2"), (3, 0, "2"), (4, 0, "3"), (6, 0, "4")]
)
def test_rings_at_mean_one_over_g(sites: int, start: int, value: str) -> None:
    """sum n F_n with exponential intervals of mean 1/g; source: Phys. Rev. A 103, 022222 (2021)."""
    found = mean(random(nx.cycle_graph(sites), start))
    at = found if found.head == "number" else _at(found)
    assert vanishes(at - parse(value), DOMAINS) is True


def _at(f: Formula) -> Formula:
    from derive.formula.tree import replace as put

    return put(f, {"tau": parse("1/g")})


def test_two_levels() -> None:
    """2 + 1/(2 (g <tau>)^2) for the transition; source: Phys. Rev. A 103, 022222 (2021)."""
    assert vanishes(mean(random(nx.path_graph(2), 1)) - parse("2 + 1/(2*g^2*tau^2)"), DOMAINS) is True


def test_against_a_linear_system_in_numpy() -> None:
    """Path of three at mean 0.7/g: sum over asks of averaged density matrices, as one solve of N^2 equations."""
    h = -nx.to_numpy_array(nx.path_graph(3))
    one = np.eye(3)
    liouville = np.kron(h, one) - np.kron(one, h.T)
    average = np.linalg.inv(np.eye(9) + 0.7j * liouville)
    q = np.diag([0.0, 1.0, 1.0])
    rho = np.zeros((3, 3))
    rho[2, 2] = 1
    step = np.kron(q, q) @ average
    occupied, total = rho.reshape(9).astype(complex), 0.0
    for n in range(1, 4000):
        moved = average @ occupied
        total += n * moved.reshape(3, 3)[0, 0].real
        occupied = step @ occupied
    found = mean(random(nx.path_graph(3), 2))
    from flint import ctx

    from derive.numerics.evaluate import Values, enclose

    with ctx.workprec(80):
        value = enclose(found, Values.at({"g": number(1), "tau": parse("7/10")}))
    assert abs(float(value.real.mid()) - total) < 1e-9


def test_both_topics_agree_with_the_averaged_experiment() -> None:
    setting = random(nx.cycle_graph(4), 2)
    report = answer(Question(setting, (Wish("moments"), Wish("detection")), check=Check(samples=1)))
    found = {j.claim.id: j.verdict for j in report.judged}
    assert set(found.values()) <= {"agrees", "proved"} and found["detection.total"] == "proved"


def test_the_fixed_interval_formula_is_refuted() -> None:
    fixed = derive_moments(on_graph(nx.cycle_graph(4), 0, 2), Wish("moments")).claims[0].value
    claim = Claim("claim.mine", "moments", Quantity("mean"), fixed, origin="user")
    found = check_summed(random(nx.cycle_graph(4), 2), (claim,), Check(samples=1)).findings
    assert found["claim.mine"].verdict == "refuted"


def test_nothing_is_exceptional_at_random_intervals() -> None:
    """2 pi/(3 g) as a mean: all energies stay apart, w = 4."""
    setting = replace(on_graph(nx.cycle_graph(6), 0, 1), interval=Interval(parse("2*pi/(3*g)"), "exponential"))
    found = {c.id: c.value for c in derive_detection(setting, Wish("detection")).claims}
    assert found["detection.phases"] == number(4)
    assert all("interval" not in c.valid_for for c in derive_detection(setting, Wish("detection")).claims)
