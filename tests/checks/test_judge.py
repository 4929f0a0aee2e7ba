"""How findings make a verdict (the rules stand in DEVELOPERS.md)."""

from __future__ import annotations

import pytest

from derive.checks.judge import InternalError, diagnosis, verdict_of
from derive.record.said import Finding

TABLE = [
    ({"exact": "proved", "coefficient": "agrees"}, "proved"),
    ({"exact": "proved"}, "untested"),
    ({"exact": "proved", "coefficient": "undecided"}, "undecided"),
    ({"exact": "proved", "coefficient": "agrees", "trend": "undecided"}, "undecided"),
    ({"coefficient": "agrees"}, "agrees"),
    ({"exact": "undecided", "coefficient": "agrees"}, "agrees"),
    ({"exact": "undecided"}, "undecided"),
    ({"exact": "refuted", "coefficient": "agrees"}, "refuted"),
    ({"coefficient": "refuted"}, "refuted"),
    ({"coefficient": "untested"}, "untested"),
    ({}, "untested"),
]


@pytest.mark.parametrize(("roads", "verdict"), TABLE)
def test_verdicts(roads: dict[str, str], verdict: str) -> None:
    assert verdict_of("x", tuple(Finding(v, r) for r, v in roads.items())) == verdict


def test_an_exact_zero_against_disjoint_balls_is_our_own_defect() -> None:
    with pytest.raises(InternalError):
        verdict_of("x", (Finding("proved", "exact"), Finding("refuted", "coefficient")))


def test_the_diagnosis_is_the_refuting_roads_sentence() -> None:
    findings = (Finding("agrees", "trend", evidence="a"), Finding("refuted", "coefficient", evidence="b"))
    assert diagnosis(findings) == "b"
