"""Claims that cannot be the quantity, whatever is measured.  Right values: a path of three watched at its end has the
radius sqrt(2) arctan(2 sqrt 2)/g (a list of check values computed apart from this code); the rest by hand."""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.pipeline import answer
from derive.record.said import Judged
from derive.worksheet.reader import survey_bytes

HEAD = """title = "Three cavities, the last watched"
symbols.g = "positive"
graph = { family = "chain", sites = 3, hopping = "-g" }
detector.at = 2
start.at = 0
check.samples = 1
"""
RADIUS = "about = 'radius of convergence'"
RIGHT = "sqrt(2)*atan(2*sqrt(2))/g"


def judged(claim: str, more: str = "") -> Judged:
    return answer(survey_bytes(f"{HEAD}{more}claim.mine = {{ {claim} }}\n".encode(), "w", Path(".")).taken()).judged[-1]


@pytest.mark.parametrize(
    ("claim", "said"),
    [
        (f"{RADIUS}, formula = 'i*{RIGHT}'", "is real"),
        (f"{RADIUS}, formula = '{RIGHT} + tau'", "does not depend on tau"),
        ("about = 'remainder bound', which = 3, holds = 'as an upper bound', formula = 'i*g*tau'", "is real"),
        ("about = 'largest interval', which = 3, formula = 'i/g'", "is real"),
        ("about = 'largest interval', which = 3, formula = 'tau/100'", "does not depend on tau"),
        ("about = 'classical mean', formula = '7*tau/g'", "does not depend on tau"),
    ],
)
def test_what_cannot_be_is_refuted(claim: str, said: str) -> None:
    found = judged(claim)
    assert found.verdict == "refuted" and any(said in f.evidence for f in found.findings)


@pytest.mark.parametrize("formula", [RIGHT, f"{RIGHT}*tau/tau", f"Re({RIGHT})", f"abs(i*{RIGHT})"])
def test_what_only_looks_odd_is_accepted(formula: str) -> None:
    assert judged(f"{RADIUS}, formula = '{formula}'").verdict in ("agrees", *(["untested"] if "tau" in formula else []))


def test_a_factor_in_a_certified_number_is_named() -> None:
    more = 'derive.validity = {}\n'
    for assume in ("", ", assume = ['g = 3/2']"):
        put = "check.points = [{ g = '3/2', tau = '1/9' }]\n" if assume else ""
        found = judged(f"{RADIUS}, formula = '{RIGHT}/2'{assume}", put + more)
        assert found.verdict == "refuted" and "too small by 2" in found.diagnosis


@pytest.mark.parametrize(("factor", "verdict"), [("1", "agrees"), ("1001/1000", "refuted"), ("2", "refuted")])
def test_a_divergence_coefficient_is_extrapolated(factor: str, verdict: str) -> None:
    """Outside: two levels that merge, Var (tau - tau_c)^2 -> 2 (p_a + p_b)^3/(p_a p_b (E_a - E_b)^2), from a list
    of check values; a pair of cavities has p = 1/2 twice and E_a - E_b = 2 g, so 2/g^2."""
    sheet = """title = "Two cavities"
symbols.g = "positive"
graph = { family = "chain", sites = 2, hopping = "-g" }
detector.at = 0
check.samples = 1
"""
    claim = f"claim.mine = {{ about = 'divergence coefficient', which = 1, formula = '{factor}*2/g^2' }}\n"
    found = answer(survey_bytes(f"{sheet}{claim}".encode(), "w", Path(".")).taken()).judged[-1]
    assert found.verdict == verdict, found.findings
