"""Claims by cases, at every root of a polynomial, and under assumptions that fix a letter.

Outside sources: a start beside or opposite a symmetric detector is seen with probability 1/2 and a phase around the
ring makes it 1 (phys-rev-research-2-043107); phases that merge at a multiple of 2 pi leave fewer of them (the ring's
mean return, commun-math-phys-320-543); two coupled levels click first at ask n with probability c, then s^2 c^(n-2)
(solved by hand: c = cos^2 g tau, s = sin^2 g tau); a path's levels are 2 g cos(pi j/(N + 1)) (Spectra of Graphs, 2012).
"""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.checks.pieces import condition_of, in_pieces, pieces
from derive.checks.roads import ROADS
from derive.errors import NotCovered
from derive.formula.text import text
from derive.pipeline import answer
from derive.problem.setting import Check
from derive.record.own import own_claim
from derive.record.said import Judged
from derive.worksheet.reader import survey_bytes

RING = """title = "Ring of six with a phase"
symbols = { g = "positive", phi = "real" }
graph = { family = "ring", sites = 6, hopping = "-g", flux = "phi" }
detector.at = 0
start.at = 2
check.samples = 2
"""
PAIR = """title = "Two resonators"
symbols = { g = "positive" }
graph = { family = "chain", sites = 2, hopping = "-g" }
detector.at = 0
start.at = 0
check.samples = 2
"""
PATH = """title = "Seven cavities, the middle one watched"
symbols = { g = "positive" }
graph = { family = "chain", sites = 7, hopping = "-g" }
detector.at = 3
start.at = 1
check.samples = 2
"""
TOTAL = "about = 'total detection probability'"
RATE = "about = 'decay rate', holds = 'up to O(tau^3)'"


def judged(head: str, claim: str) -> Judged:
    return answer(survey_bytes(f"{head}claim.mine = {{ {claim} }}\n".encode(), "w", Path(".")).taken()).judged[-1]


def case(*pairs: tuple[str, str]) -> str:
    return "cases = [" + ", ".join(f"{{ if = '{c}', formula = '{f}' }}" for c, f in pairs) + "]"


@pytest.mark.parametrize(
    ("head", "about", "pairs", "verdict", "said"),
    [
        (RING, TOTAL, [("phi = 0", "1/2"), ("phi = pi", "1/2"), ("otherwise", "1")], "proved", ""),
        (RING, TOTAL, [("phi = 0", "1/2"), ("otherwise", "1/2")], "refuted", "otherwise"),
        (RING, TOTAL, [("phi = 0", "1"), ("otherwise", "1")], "refuted", "where phi = 0"),
        (RING, TOTAL, [("0 < phi < 1", "1"), ("otherwise", "1")], "proved", ""),
        (RING, TOTAL, [("phi < 1", "1"), ("otherwise", "1/2")], "refuted", "otherwise"),
        (RING, TOTAL, [("g < 0", "1/3")], "untested", ""),
        (PAIR, "about = 'detection probability'",
         [("n = 1", "cos(g*tau)^2"), ("otherwise", "sin(g*tau)^4*cos(g*tau)^(2*n - 4)")], "agrees", ""),
        (PAIR, "about = 'detection probability'",
         [("n = 1", "cos(g*tau)^2"), ("n > 1", "sin(g*tau)^4*cos(g*tau)^(2*n - 2)")], "refuted", "n > 1"),
        (PAIR, "about = 'detection probability'", [("n = 1", "sin(g*tau)^2")], "refuted", "where n = 1"),
    ],
)
def test_every_case_is_judged_where_it_holds(
    head: str, about: str, pairs: list[tuple[str, str]], verdict: str, said: str
) -> None:
    found = judged(head, f"{about}, {case(*pairs)}")
    assert found.verdict in ({"proved", "agrees"} if verdict == "agrees" else {verdict}), found.findings
    assert any(said in f.evidence for f in found.findings)


@pytest.mark.parametrize(
    ("about", "assume", "right", "generic"),
    [
        ("total detection probability", "phi = 0", "1/2", "1"),
        ("total detection probability", "2*phi = 2*pi", "1/2", "1"),
        ("number of phases", "phi = 0", "4", "6"),
        ("number of phases", "phi = 0', 'g*tau = 2*pi/3", "2", "4"),
        ("dark dimension", "phi = 0", "2", "0"),
    ],
)
def test_an_assumption_that_fixes_a_letter_reaches_the_exact_road(
    about: str, assume: str, right: str, generic: str
) -> None:
    """The generic value, proved for letters that may be anything, is refuted there."""
    told = f"about = '{about}', assume = ['{assume}']"
    assert judged(RING, f"{told}, formula = '{right}'").verdict == "proved"
    assert judged(RING, f"{told}, formula = '{generic}'").verdict == "refuted"


@pytest.mark.parametrize(
    ("about", "polynomial", "formula", "verdict"),
    [
        (RATE, "E^3 - 2*g^2*E", "g^2*tau*(4 - E^2/g^2)/4", "proved"),  # (2 g^2 tau/M) sin^2(theta) twice, E = 2 g cos
        (RATE, "E^3 - 2*g^2*E", "g^2*tau*(4 - E^2/g^2)/8", "refuted"),
        (RATE, "E^2 - 2*g^2", "g^2*tau/2", "proved"),
        (RATE, "E^2 - 3*g^2", "g^2*tau/2", "refuted"),
        ("about = 'level energy', holds = 'up to O(tau^2)'", "E^3 - 2*g^2*E", "E", "proved"),
        ("about = 'level energy', holds = 'up to O(tau^2)'", "E^3 - 2*g^2*E", "-E", "refuted"),
        ("about = 'level weight'", "E^3 - 2*g^2*E", "E^2*(4 - E^2/g^2)/(16*g^2)", "proved"),
        ("about = 'dark level energy'", "E^3 - 2*g^2*E", "E", "agrees"),
        ("about = 'dark level multiplicity'", "E^3 - 2*g^2*E", "2", "refuted"),
        ("about = 'dark level energy'", "E^2 - g^2", "E", "refuted"),
    ],
)
def test_one_formula_at_every_root(about: str, polynomial: str, formula: str, verdict: str) -> None:
    said = f"per_root = {{ polynomial = '{polynomial}', letter = 'E', formula = '{formula}' }}"
    assert judged(PATH, f"{about}, {said}").verdict == verdict


def test_a_case_that_the_worksheet_excludes_says_nothing() -> None:
    """With phi > 0 assumed what is said of phi = 0 is never met; the rest is judged as if it stood alone."""
    head = RING.replace("symbols", 'assume = ["0 < phi < 3"]\nsymbols')
    for first, rest, verdict in (("1/3", "1", "proved"), ("1/2", "1/2", "refuted")):
        assert judged(head, f"{TOTAL}, {case(('phi = 0', first), ('otherwise', rest))}").verdict == verdict
    assert judged(head, f"{TOTAL}, {case(('phi = 0', '1/2'))}").verdict == "untested"


def test_otherwise_takes_every_way_in_which_the_others_fail() -> None:
    said = case(("0 < phi < 1", "1"), ("phi = 3", "1"), ("otherwise", "1"))
    question = survey_bytes(f"{RING}claim.mine = {{ {TOTAL}, {said} }}\n".encode(), "w", Path(".")).taken()
    claim = own_claim(question.claims[0], question.setting)
    ways = [p.claim.assume for p in pieces(question.setting, claim) if p.where == "otherwise"]
    told = [[f"{text(r.left)} {r.op} {text(r.right)}" for r in way] for way in ways]
    assert told == [["0 >= phi", "phi != 3"], ["phi >= 1", "phi != 3"]]


def test_a_condition_that_is_none_is_not_covered() -> None:
    with pytest.raises(NotCovered, match="not understood"):
        condition_of("sometimes")


def test_a_road_that_is_silent_about_a_piece_is_silent_about_the_claim() -> None:
    """Planted: a road that sees the first piece only earns nothing for the whole."""
    question = survey_bytes(
        f"{RING}claim.mine = {{ {TOTAL}, {case(('phi = 0', '1/2'), ('otherwise', '1'))} }}\n".encode(), "w", Path(".")
    ).taken()
    claim, effort = own_claim(question.claims[0], question.setting), Check(samples=2)
    road = ROADS["detection"]["enclosure"]
    calls = iter((True, False))

    def half(setting, claims, effort):  # type: ignore[no-untyped-def]
        return road(setting, claims if next(calls) else (), effort)

    assert in_pieces("enclosure", road, question.setting, (claim,), effort).findings[claim.id].verdict == "agrees"
    assert in_pieces("enclosure", half, question.setting, (claim,), effort).findings[claim.id].verdict == "untested"


def test_a_value_that_the_worksheet_assumes_reaches_the_derivation() -> None:
    """The hexagon without its phase: 1/2, four bright directions, four phases (a table of check values)."""
    head = RING.replace("symbols", 'assume = ["phi = 0"]\nsymbols') + "derive.detection = {}\n"
    asked = survey_bytes(f"{head}claim.mine = {{ {TOTAL}, formula = '1/2' }}\n".encode(), "w", Path(".")).taken()
    found = answer(asked)
    values = {j.claim.id: (text(j.claim.value), j.verdict) for j in found.judged}  # type: ignore[arg-type]
    assert values == {
        "detection.total": ("1/2", "proved"), "detection.bright_dimension": ("4", "proved"),
        "detection.dark_dimension": ("2", "proved"), "detection.phases": ("4", "proved"),
        "claim.mine": ("1/2", "proved"),
    }
    assert all([f"{text(r.left)} {r.op} {text(r.right)}" for r in j.claim.assume] == ["phi = 0"]
               for j in found.judged if j.claim.origin == "derived")
