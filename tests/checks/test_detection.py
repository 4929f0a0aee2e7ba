"""Both roads of the topic detection: right entries pass, planted ones are refuted by each road alone."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import pytest

from derive.checks.detection.road import check_detection
from derive.checks.pieces import in_pieces
from derive.checks.powers import stirling
from derive.checks.roads import ROADS
from derive.checks.summed import check_summed
from derive.derivations.detection.topic import derive_detection
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ONE, number
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Question, Setting, Start, Wish
from derive.record.said import Cases, Claim, Kind, Matrix
from tests.graphs import UNIT, karate_club, on_graph
from tests.strategies import chain, random_hermitian, random_pair, setting_of, site

QUICK = Check(samples=2, digits=20)
SETTINGS = {
    "hexagon": on_graph(nx.cycle_graph(6), 0, 1),
    "hexagon, merged": on_graph(nx.cycle_graph(6), 0, 1, length=parse("pi/(2*g)")),
    "detuned chain": replace(chain(5, 2, detuning=True), start=Start(((ONE, site(1)),))),
    "rank two": replace(setting_of(random_hermitian(6, 3), random_pair(6, 3)), start=Start(((ONE, site(2)),))),
    "two sites of a square": on_graph(nx.cycle_graph(4), (0, 1), 2),
}


def verdicts(setting: Setting, wish: Wish) -> dict[str, str]:
    return {j.claim.id: j.verdict for j in answer(Question(setting, (wish,), check=QUICK)).judged}


@pytest.mark.parametrize("name", SETTINGS)
def test_derived_entries_are_proved(name: str) -> None:
    """Roads: elimination, and the experiment summed over all asks with a rigorous tail."""
    found = verdicts(SETTINGS[name], Wish("detection", (("dark_basis", True),)))
    assert set(found.values()) == {"proved"}


def own(about: str, value: str) -> Claim:
    return Claim("claim.mine", "detection", Quantity(about), parse(value), origin="user")


@pytest.mark.parametrize("name", SETTINGS)
@pytest.mark.parametrize(
    ("about", "value"),
    [("total detection probability", "1/3"), ("bright dimension", "7"), ("dark dimension", "5"),
     ("number of phases", "7")],
)
def test_wrong_numbers_are_refuted_by_each_road(name: str, about: str, value: str) -> None:
    claim = own(about, value)
    assert check_detection(SETTINGS[name], (claim,), QUICK)["claim.mine"].verdict == "refuted"
    measured = check_summed(SETTINGS[name], (claim,), QUICK).findings["claim.mine"]
    assert measured.verdict == "refuted" and "measured" in measured.evidence


def test_a_generic_value_claimed_for_a_merged_interval_is_refuted() -> None:
    setting = SETTINGS["hexagon, merged"]
    for value, verdict in (("1/2", "refuted"), ("1/6", "proved")):
        claim = own("total detection probability", value)
        assert check_detection(setting, (claim,), QUICK)["claim.mine"].verdict == verdict


def test_a_wrong_piece_is_refuted_where_it_holds() -> None:
    setting = replace(chain(5, 2), start=Start(((ONE, site(1)),)))
    detuned = SETTINGS["detuned chain"]
    rows = [dict(r) for r in setting.space.rows]  # type: ignore[union-attr]
    rows[0][0] = parse("Delta")
    lopsided = replace(setting_of(rows, (site(2),), **detuned.domains()), start=setting.start)
    right = Cases((("Delta = 0", parse("1/2")), ("otherwise", number(1))))
    wrong = Cases((("Delta = 0", parse("1/3")), ("otherwise", number(1))))
    for value, verdict in ((right, "proved"), (wrong, "refuted")):
        claim = replace(own("total detection probability", "1"), value=value)
        roads = ROADS["detection"]
        exact, measured = (in_pieces(n, roads[n], lopsided, (claim,), QUICK) for n in ("exact", "enclosure"))
        assert exact.findings["claim.mine"].verdict == verdict
        assert measured.findings["claim.mine"].verdict == ("agrees" if verdict == "proved" else "refuted")


def test_a_state_that_is_seen_is_no_dark_state() -> None:
    seen = Matrix(6, (), ((1, ((0, number(1)),)), (5, ((0, number(1)),))))
    claim = Claim("claim.mine", "detection", Quantity("dark state", (("state", 1),)), seen, origin="user")
    setting = SETTINGS["hexagon"]
    assert check_detection(setting, (claim,), QUICK)["claim.mine"].verdict == "refuted"
    assert check_summed(setting, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


@pytest.mark.parametrize(
    ("name", "value", "verdict"),
    [("upper", "1/2", "agrees"), ("upper", "2/3", "agrees"), ("upper", "1/3", "refuted"), ("lower", "1/3", "agrees"),
     ("lower", "2/3", "refuted")],
)
def test_bounds(name: str, value: str, verdict: str) -> None:
    """Two equivalent starts on the six-ring: P <= 1/2; source: Phys. Rev. Research 2, 023392 (2020)."""
    claim = replace(own("total detection probability", value), kind=Kind(name, f"as an {name} bound"))
    assert check_summed(SETTINGS["hexagon"], (claim,), QUICK).findings["claim.mine"].verdict == verdict


@pytest.mark.parametrize(
    ("graph", "watched", "start", "length", "total"),
    [
        (nx.path_graph(3), 0, 2, "pi/(sqrt(2)*g)", "1"),
        (nx.path_graph(5), 0, 1, "pi*sqrt(3)/(3*g)", "1/2"),
        (nx.path_graph(4), 0, 1, "pi*(sqrt(5) - 1)/(2*g)", "(-sqrt(5) + 5)/10"),
        (nx.path_graph(5), 0, 1, "pi*sqrt(3)/(3*g) + pi/(1000000*g)", "1"),
    ],
    ids=["gap sqrt 2", "gap 2 sqrt 3", "golden gap", "beside it"],
)
def test_exceptional_intervals_with_roots(
    graph: nx.Graph, watched: int, start: int, length: str, total: str
) -> None:
    """Gaps that are no rational multiples of each other: elimination over Q(u), and the summed experiment."""
    setting = on_graph(graph, watched, start, length=parse(length))
    report = answer(Question(setting, (Wish("detection"),), check=QUICK))
    found = {j.claim.id: j for j in report.judged}
    assert {j.verdict for j in report.judged} == {"proved"}
    assert text(found["detection.total"].claim.value) == total  # type: ignore[arg-type]


def test_a_users_point_where_phases_merge_does_not_refute_a_generic_entry() -> None:
    """g tau = pi/2 merges two phases of the six-ring: the point is left out for derived entries, not for claims."""
    point = (("g", number(1)), ("tau", parse("pi/2")))
    check = Check(samples=1, points=(point,))
    setting = SETTINGS["hexagon"]
    report = answer(Question(setting, (Wish("detection"),), check=check))
    assert {j.verdict for j in report.judged} == {"proved"}
    claim = own("total detection probability", "1/2")
    assert check_summed(setting, (claim,), check).findings["claim.mine"].verdict == "refuted"


def test_a_graph_of_34_vertices() -> None:
    """The karate club of networkx watched at vertex 33: derived, found again, and measured."""
    setting = on_graph(karate_club(), 33, 24, UNIT)
    found = verdicts(setting, Wish("detection"))
    assert set(found.values()) == {"proved"}


def test_efficiency_changes_no_total() -> None:
    """What is seen at all is seen sooner or later; here at efficiency 1/3, measured."""
    setting = SETTINGS["hexagon"]
    watcher = replace(setting.detectors[0], efficiency=parse("1/3"))
    weak = replace(setting, detectors=(watcher,))
    claims = derive_detection(weak, Wish("detection")).claims
    assert {f.verdict for f in check_summed(weak, claims, QUICK).findings.values()} == {"agrees"}


def test_stirling_numbers_against_powers() -> None:
    """n^p = sum_i c_i binomial(n+i-1, i), by direct evaluation with math.comb."""
    from math import comb

    for p in range(1, 7):
        for n in range(1, 9):
            assert sum(c * comb(n + i - 1, i) for i, c in enumerate(stirling(p))) == n**p
