"""Both roads of the topic moments: derived entries are proved, planted ones refuted by each road alone."""

from __future__ import annotations

import networkx as nx
import pytest

from derive.algebra import stein
from derive.checks.moments.road import Residues, check_moments
from derive.checks.summed import check_summed
from derive.formula.grammar import parse
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Question, Setting, Wish
from derive.record.said import Claim
from tests.graphs import on_graph

QUICK = Check(samples=1, digits=50)
HEXAGON = on_graph(nx.cycle_graph(6), 0, 3)


def verdicts(setting: Setting, without: tuple[str, ...] = ()) -> dict[str, str]:
    question = Question(setting, (Wish("moments", (("highest", 3),)),), check=QUICK)
    return {j.claim.id: j.verdict for j in answer(question, without=without).judged}


@pytest.mark.parametrize("start", range(4))
def test_hexagon_is_proved(start: int) -> None:
    """Residues of the renewal equation, and the experiment summed in balls to 50 digits."""
    assert set(verdicts(on_graph(nx.cycle_graph(6), 0, start)).values()) == {"proved"}


OTHERS = {"path": nx.path_graph(4), "complete": nx.complete_graph(5), "star": nx.star_graph(3)}


@pytest.mark.parametrize("name", OTHERS)
def test_other_graphs_are_proved(name: str) -> None:
    assert set(verdicts(on_graph(OTHERS[name], 0, 2)).values()) == {"proved"}


@pytest.mark.parametrize("about", ["mean", "conditional mean", "variance"])
@pytest.mark.parametrize("value", ["4", "1/sin(g*tau)^2"])
def test_wrong_claims_are_refuted_by_each_road(about: str, value: str) -> None:
    claim = Claim("claim.mine", "moments", Quantity(about), parse(value), origin="user")
    assert check_moments(HEXAGON, (claim,), QUICK)["claim.mine"].verdict == "refuted"
    assert check_summed(HEXAGON, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


@pytest.mark.parametrize("without", [("exact",), ("enclosure",)])
def test_a_plant_in_the_closed_solution_is_refuted(without: tuple[str, ...], monkeypatch: pytest.MonkeyPatch) -> None:
    """The imaginary parts dropped."""
    monkeypatch.setattr(stein, "_imaginary", lambda bench, rho, j: bench.field.zero)
    assert verdicts(HEXAGON, without)["moments.mean"] == "refuted"


def test_figures_hold_derived_and_measured_values() -> None:
    """Each measured point of the figure lies on the derived curve's formula, to the digits drawn."""
    question = Question(HEXAGON, (Wish("moments"), Wish("renewal")), check=QUICK)
    plots = {p.id: p for p in answer(question).plots}
    curves = {c.label: c for c in plots["moments.interval"].curves}
    assert set(curves) == {"mean", "mean, measured", "variance given a click", "variance given a click, measured"}
    assert len(curves["mean"].x) == 160 and len(curves["mean, measured"].x) == 16
    assert {c.label for c in plots["renewal.poles"].curves} == {"unit circle", "inverse poles"}
    inside = plots["renewal.poles"].curves[1]
    assert all(float(x) ** 2 + float(y) ** 2 < 1 for x, y in zip(inside.x, inside.y, strict=True))


def test_near_an_exceptional_interval() -> None:
    """10^-6 away from pi/(2 g): 30 digits of a mean of about 10^10, and the total stays 1."""
    check = Check(samples=0, points=((("g", parse("1")), ("tau", parse("pi/2 + 1/1000000"))),))
    question = Question(HEXAGON, (Wish("moments"), Wish("detection")), check=check)
    judged = {j.claim.id: j for j in answer(question).judged}
    assert {j.verdict for j in judged.values()} == {"proved"}
    assert float(judged["moments.mean"].numbers[0].value) > 1e10


def test_total_of_the_renewal_equation_is_one() -> None:
    """A road's own consistency: residues give P = 1 for the return."""
    residues = Residues(on_graph(nx.cycle_graph(6), 0, 0))
    assert residues.moment(0) == residues.field.one
