"""Exceptional intervals, drops and divergences against hand calculation, published laws and numpy."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest

from derive.checks.exceptional.road import check_divergence, check_exceptional, check_exceptional_exact
from derive.derivations.detection.topic import derive_detection
from derive.derivations.exceptional.topic import derive_exceptional
from derive.derivations.moments.topic import derive_moments
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Question, Setting, Watcher, Wish
from derive.record.said import Claim
from tests.graphs import UNIT, karate_club, on_graph
from tests.strategies import POSITIVE, site

QUICK = Check(samples=1)
ONE_TURN = (("window", (number(0), parse("2*pi/g"))),)


def entries(setting: Setting, options: tuple[tuple[str, object], ...] = ()) -> dict[str, str]:
    out = {}
    for c in derive_exceptional(setting, Wish("exceptional", options)).claims:
        assert isinstance(c.value, Formula)
        out[c.id.removeprefix("exceptional.")] = text(c.value)
    return out


def test_hexagon_over_one_turn() -> None:
    """Energies +-2g, +-g: intervals 2 pi m/gap for the gaps g, 2g, 3g, 4g, and the w left there; by hand."""
    found = entries(on_graph(nx.cycle_graph(6), 0, 1), ONE_TURN)
    intervals = [found[f"{n}.interval"] for n in range(1, 7)]
    assert intervals == ["pi/(2*g)", "2*pi/(3*g)", "pi/g", "4*pi/(3*g)", "3*pi/(2*g)", "2*pi/g"]
    assert [found[f"{n}.drop"] for n in range(1, 7)] == ["1", "2", "2", "2", "1", "3"]


def test_default_window_ends_at_a_turn_of_the_widest_gap() -> None:
    assert [k for k in entries(on_graph(nx.cycle_graph(6), 0)) if k.endswith("interval")] == ["1.interval"]


def test_numbers_count_from_zero_whatever_the_window() -> None:
    late = entries(on_graph(nx.cycle_graph(6), 0), (("window", (parse("3/g"), parse("5/g"))),))
    assert late["3.interval"] == "pi/g" and "1.interval" not in late and "5.interval" in late


@pytest.mark.parametrize("sites", [3, 4, 5])
def test_divergence_of_two_phases(sites: int) -> None:
    """2 (p_a + p_b)^3/(p_a p_b Delta^2); source: Phys. Rev. Research 1, 033086 (2019), as recalled.

    Complete graph of N: p = 1/N and (N-1)/N, Delta = N g.
    """
    found = entries(on_graph(nx.complete_graph(sites), 0))["1.divergence"]
    wanted = parse(f"2/((1/{sites})*({sites - 1}/{sites})*({sites}*g)^2)")
    assert vanishes(parse(found) - wanted, {"g": POSITIVE}) is True


@pytest.mark.parametrize(("start", "tau_c"), [(2, 2 * np.pi / 3), (6, 2 * np.pi)])
def test_divergence_of_several_phases_against_eigenvalues(start: int, tau_c: float) -> None:
    """(tau - tau_c)^2 times 2 sum a* a/(1 - a* a) over numpy's eigenvalues of Q U, just beside tau_c, g = 1."""
    from scipy.linalg import expm

    found = parse(entries(on_graph(nx.cycle_graph(6), 0, 1), ONE_TURN)[f"{start}.divergence"].replace("g", "1"))
    h = -nx.to_numpy_array(nx.cycle_graph(6))
    distance = 1e-3
    k = expm(-1j * h * (tau_c + distance))
    k[0, :] = 0
    inside = [a for a in np.linalg.eigvals(k) if 1e-9 < abs(a) < 1 - 1e-12]
    seen = np.array(inside)
    pairs = np.conj(seen)[:, None] * seen[None, :]
    variance = float((2 * pairs / (1 - pairs)).sum().real)
    exact = float(found.args[0]) if found.head == "number" else _number(found)
    assert abs(variance * distance**2 / exact - 1) < 2e-2


def _number(f: Formula) -> float:
    from derive.derivations.turning import approx_number

    return approx_number(f)


def test_total_probability_jumps() -> None:
    """Hexagon from the neighbour: 1/2 generic, 1/6 at pi/(2g), 0 at 2 pi/(3g); Phys. Rev. E 95, 032141 (2017)."""
    notes = derive_exceptional(on_graph(nx.cycle_graph(6), 0, 1), Wish("exceptional", ONE_TURN)).notes
    shown = ["".join(x if isinstance(x, str) else text(x) for x in n) for n in notes]
    assert shown[0] == "At tau = pi/(2*g) the total detection probability is 1/6; next to it 1/2."
    assert "2*pi/(3*g) the total detection probability is 0;" in shown[1]


@pytest.mark.parametrize("graph", [nx.cycle_graph(6), nx.path_graph(4), nx.star_graph(3)], ids=["ring", "path", "star"])
def test_entries_pass(graph: nx.Graph) -> None:
    report = answer(Question(on_graph(graph, 0, 1), (Wish("exceptional"),), check=QUICK))
    verdicts = {j.claim.id.rsplit(".", 1)[1]: j.verdict for j in report.judged}
    assert verdicts == {"interval": "proved", "merged": "proved", "drop": "proved", "divergence": "agrees"}


@pytest.mark.parametrize(
    ("about", "value", "roads"),
    [
        ("exceptional interval", "pi/(3*g)", ("exact", "enclosure")),
        ("exceptional interval", "2*pi/(3*g)", ("enclosure",)),  # exceptional, but the second one
        ("drop of phases", "2", ("enclosure",)),
        ("merging levels", "3", ("enclosure",)),
        ("divergence coefficient", "1/(5*g^2)", ("trend",)),
    ],
)
def test_wrong_claims_are_refuted(about: str, value: str, roads: tuple[str, ...]) -> None:
    setting = on_graph(nx.cycle_graph(6), 0, 1)
    claim = Claim("claim.mine", "exceptional", Quantity(about, (("interval", 1),)), parse(value), origin="user")
    all_roads = {"exact": check_exceptional_exact, "enclosure": check_exceptional, "trend": check_divergence}
    for road in roads:
        assert all_roads[road](setting, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


def test_next_to_an_exceptional_interval_there_is_a_warning() -> None:
    """10^-6 away: generic answers, and a sentence; 1/10 away: no sentence; at the point: what merges."""
    ring = nx.cycle_graph(6)
    near = on_graph(ring, 0, 1, length=parse("(pi/2 + 1/1000000)/g"))
    at = on_graph(ring, 0, 1, length=parse("pi/(2*g)"))
    far = on_graph(ring, 0, 1, length=parse("(pi/2 + 1/10)/g"))

    def said(setting: Setting) -> str:
        notes = derive_detection(setting, Wish("detection")).notes
        return " ".join("".join(x if isinstance(x, str) else text(x) for x in n) for n in notes)

    assert "away from pi/(2*g)" in said(near) and "away from" not in said(far)
    assert "seen as one" in said(at) and "seen as one" not in said(near)
    assert any("away from" in str(n[0]) for n in derive_moments(near, Wish("moments")).notes)
    for setting, total in ((near, "1/2"), (at, "1/6")):
        report = answer(Question(setting, (Wish("detection"),), check=QUICK))
        found = {j.claim.id: j for j in report.judged}
        assert text(found["detection.total"].claim.value) == total  # type: ignore[arg-type]
        assert found["detection.total"].verdict == "proved"


def test_what_is_not_covered_is_said_in_one_sentence() -> None:
    weak = replace(on_graph(nx.cycle_graph(6), 0), detectors=(Watcher((site(0),), parse("1/2")),))
    for setting in (weak, on_graph(karate_club(), 33, None, UNIT), on_graph(nx.cycle_graph(6), (0, 1))):
        with pytest.raises(NotCovered):
            derive_exceptional(setting, Wish("exceptional"))
