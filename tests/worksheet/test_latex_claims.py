"""Claims in LaTeX: the same record as by formula, the same verdict, and faults with their column."""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.formula.grammar import parse
from derive.pipeline import answer
from derive.worksheet.reader import survey_bytes

HEAD = r"""title = "Five cavities"
symbols = { g = "positive", phi = { domain = "real", latex = '\varphi' } }
graph = { family = "chain", sites = 5, hopping = "-g" }
detector.at = 0
start.at = 1
"""

PAIRS = [
    (r"about = 'decay rate', which = 'k', holds = 'up to O(tau^3)'",
     "2*g^2*tau*sin(pi*k/5)^2/5", r"\tfrac25 g^2 \tau \sin^2\left(\frac{k\pi}{5}\right)"),
    ("about = 'generator', which = 1, entry = [1, 1]", "-i*g^2/2", r"-\frac{i}{2} g^2"),
    ("about = 'level energy', which = 1, holds = 'up to O(tau)'", "-2*g*cos(pi/5)", r"-2 g \cos\frac{\pi}{5}"),
    ("about = 'rate error', which = 'plain'", "O(tau^3)", r"O\left(\tau^3\right)"),
    ("about = 'absorber strength', which = 'plain'", "2/tau", r"\frac{2}{\tau}"),
    ("about = 'total detection probability'", "1", "1"),
]


def sheet(*claims: str):
    return survey_bytes((HEAD + "\n".join(claims)).encode(), "w", Path("."))


@pytest.mark.parametrize(("about", "formula", "latex"), PAIRS)
def test_latex_and_formula_are_one_claim(about: str, formula: str, latex: str) -> None:
    found = sheet(f"claim.a = {{ {about}, formula = '{formula}' }}", f"claim.b = {{ {about}, latex = '{latex}' }}")
    assert not found.faults and not found.unserved
    verdicts = {j.claim.id: j.verdict for j in answer(found.taken()).judged}
    assert verdicts["claim.a"] == verdicts["claim.b"] and verdicts["claim.b"] in ("agrees", "proved")


FAULTS = [
    (r"latex = 'g \sin x y'", 59, "can be read as"),
    (r"latex = 'g + \beta'", 61, "the letter beta is not declared"),
    (r'latex = "g + \\beta"', 61, "the letter beta is not declared"),
    (r"latex = 'g + \foo'", 61, r"the command \foo"),
    (r"latex = 'O(g)'", 57, "belongs in holds"),
    (r"latex = '\sum_{g=1}^{3} g'", 57, "already has a meaning"),
    (r"latex = ''", 57, "empty"),
]


@pytest.mark.parametrize(("said", "column", "message"), FAULTS)
def test_faults_stand_at_their_column(said: str, column: int, message: str) -> None:
    found = sheet(f"claim.a = {{ about = 'decay rate', which = 1, {said} }}")
    fault = found.faults[0]
    assert message in fault.message and fault.line == 6 and abs(fault.column - column) <= 3


def test_a_matrix_is_not_one_formula() -> None:
    fault = sheet("claim.a = { about = 'generator', which = 1, latex = 'g' }").faults[0]
    assert "is a matrix" in fault.message and fault.key == "claim.a.latex"


def test_owners_latex_is_known() -> None:
    found = sheet(r"claim.a = { about = 'generator', which = 1, entry = [1, 1], latex = '2\varphi g' }")
    assert found.taken().claims[0].formula == parse("2*phi*g")
