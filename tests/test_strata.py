"""Where an accepted claim does not hold: special intervals and values of letters, measured, and said.

Outside: the hexagon watched at one site (check values of a table computed apart from this code): 1/2 beside the
detector at generic intervals, 1/6 at g tau = pi/2; 4 phases, 3 there; a phase around the ring makes it 1
(phys-rev-research-2-043107), but 1/2 at 0 and pi, where the mirror is whole again.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.judging import strata
from derive.pipeline import answer
from derive.record.said import Judged
from derive.worksheet.reader import survey_bytes

HEXAGON = """title = "Hexagon"
symbols = { g = "positive", phi = "real" }
graph = { family = "ring", sites = 6, hopping = "-g", flux = "phi" }
detector.at = 0
start.at = 1
check.samples = 2
"""
TOTAL = "about = 'total detection probability'"


def judged(claim: str, head: str = HEXAGON) -> Judged:
    return answer(survey_bytes(f"{head}claim.mine = {{ {claim} }}\n".encode(), "w", Path(".")).taken()).judged[-1]


@pytest.mark.parametrize(
    ("claim", "places"),
    [
        (f"{TOTAL}, formula = '1'", ["phi = pi", "phi = 0"]),
        ("about = 'number of phases', formula = '6'", ["phi = pi", "phi = 0"]),
        (f"{TOTAL}, formula = '1/2', assume = ['phi = 0']", ["tau = pi/(2*g)"]),
        ("about = 'number of phases', formula = '4', assume = ['phi = 0']", ["tau = pi/(2*g)"]),
        (f"{TOTAL}, formula = '1/6', assume = ['phi = 0', 'tau = pi/(2*g)']", []),
        (f"{TOTAL}, cases = [{{ if = 'phi = 0', formula = '1/2' }}, {{ if = 'otherwise', formula = '1' }}]", []),
    ],
)
def test_special_places_are_named(claim: str, places: list[str]) -> None:
    found = judged(claim)
    assert found.verdict == "proved"
    assert found.claim.valid_for == (f"not where {' or '.join(places)}" if places else "")


def test_an_assumption_that_excludes_the_place_is_heard() -> None:
    head = HEXAGON.replace("symbols", 'assume = ["0 < phi < 3"]\nsymbols')
    assert judged(f"{TOTAL}, formula = '1'", head).claim.valid_for == ""


def test_a_refuted_claim_is_refuted_everywhere() -> None:
    assert judged(f"{TOTAL}, formula = '1/3'").claim.valid_for == ""


def test_what_is_measured_decides(monkeypatch: pytest.MonkeyPatch) -> None:
    """Planted: a place at which nothing changes is not named."""
    from derive.checks.pieces import condition_of

    monkeypatch.setattr(strata, "_special", lambda *a: iter(condition_of("phi = 1")))
    assert judged(f"{TOTAL}, formula = '1'").claim.valid_for == ""
