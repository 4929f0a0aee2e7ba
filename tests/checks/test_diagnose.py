"""What is said about a refuted formula, and that the formula named instead is accepted.

The right formulas are those of "check values" below; each slip is put in by hand, so the source of the right answer is
the formula before the slip.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from flint import acb, arb, ctx

from derive.checks.diagnose.constants import recognised
from derive.checks.diagnose.edits import edits, places
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.judging.diagnosis import diagnosis_of
from derive.pipeline import _derive, answer
from derive.problem.setting import Question
from derive.record.own import own_claim
from derive.worksheet.reader import survey_bytes

CHAIN = """title = "Chain"
symbols = { g = "positive", Delta = "real" }
graph = { family = "chain", sites = 9, hopping = "-g", energies = { 4 = "Delta" } }
detector.at = 4
start.at = 2
"""
RING = """title = "Ring with a phase"
symbols = { g = "positive", phi = "real" }
graph = { family = "ring", sites = 5, hopping = "-g", flux = "phi" }
detector.at = 0
start.at = 1
"""
FAMILY = """title = "Odd chain"
symbols = { g = "positive", L = "integer >= 2" }
graph = { family = "chain", sites = "2*L + 1", hopping = "-g" }
detector.at = "centre"
"""
LINE = """title = "Line"
assume = ["2*g*tau < pi"]
symbols.g = "positive"
graph = { family = "line", hopping = "-g" }
detector.at = 0
start.at = "detector"
check = { samples = 1, points = [{ g = 1, tau = "1/4" }] }
"""
RATE = "about = 'decay rate', which = 'k', holds = 'up to O(tau^3)'"
ENTRY = "about = 'generator', which = 2, entry = [3, 5]"
BOND = "about = 'generator', which = 1, entry = [1, 4]"
TAIL = "about = 'detection probability', holds = 'as n -> infinity'"

SLIPS = [
    (CHAIN, ENTRY, "-g^2*Delta/12", "too small by 2"),
    (CHAIN, ENTRY, "g^2*Delta/6", "the sign is wrong"),
    (CHAIN, ENTRY, "-g^2*Delta/(6*pi)", "too small by pi"),
    (CHAIN, ENTRY, "-sqrt(2)*g^2*Delta/6", "too small by sqrt(1/2)"),
    (CHAIN, ENTRY, "i*g^2*Delta/6", "lacks a factor i"),
    (CHAIN, ENTRY, "-g*Delta/6", "the formula lacks a factor g"),
    (CHAIN, ENTRY, "-g^3*Delta/6", "the formula has g too much"),
    (CHAIN, ENTRY, "-g*Delta^2/6", "Delta and g are swapped"),
    (CHAIN, ENTRY, "-g^2*Delta/6 + g^3/7", "g^3/7 is too much"),
    (CHAIN, RATE, "4/5*g^2*tau*sin(pi*k/6)^2", "pi*k/6 stands where pi*k/5 belongs"),
    (CHAIN, RATE, "4/5*g^2*tau*cos(pi*k/5)^2", "cos(pi*k/5) stands where sin(pi*k/5) belongs"),
    (CHAIN, RATE, "4/5*g^2*tau*sin(pi*k/5)", "sin(pi*k/5) stands where sin(pi*k/5)^2 belongs"),
    (CHAIN, RATE, "4/5*g^2*tau*sin(pi*(k+1)/5)^2", "belongs"),
    (CHAIN, RATE.replace("'k'", "2"), "4/5*g^2*tau*sin(pi/5)^2", "belongs"),
    (CHAIN, RATE.replace("tau^3", "tau^5"), "4/5*g^2*tau*sin(pi*k/5)^2", "right up to O(tau^3) and wrong from tau^3"),
    (CHAIN, "about = 'level energy', which = 1, holds = 'up to O(tau)'", "2*g*cos(pi/5)", "the sign is wrong"),
    (CHAIN, "about = 'absorber strength', which = 'plain'", "1/tau", "too small by 2"),
    (CHAIN, "about = 'number of phases'", "9", "is right"),
    (RING, BOND, "-i*g^2*exp(i*phi)/2", "belongs"),
    (RING, BOND, "-i*g^2/2", "holds only where phi = 0"),
    (FAMILY, RATE, "4*g^2*tau*sin(pi*k/L)^2/L", "L + 1 belongs everywhere"),
    (FAMILY, RATE, "4*g^2*tau*sin(pi*k/(L+1))^2/L", "belongs"),
    (LINE, TAIL, "g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2", "too small by 4"),
    (LINE, TAIL, "4*g*tau/(pi*n^2)*cos(2*g*tau*n + pi/4)^2", "the formula has n too much"),
]


def question_of(head: str, about: str, formula: str) -> Question:
    found = survey_bytes(f"{head}claim.mine = {{ {about}, formula = '{formula}' }}\n".encode(), "w", Path("."))
    return found.taken()


@pytest.mark.parametrize(("head", "about", "formula", "said"), SLIPS)
def test_a_slip_is_named_and_its_undoing_accepted(head: str, about: str, formula: str, said: str) -> None:
    question = question_of(head, about, formula)
    judged = answer(question).judged[-1]
    assert judged.verdict == "refuted" and said in judged.diagnosis
    found = diagnosis_of(own_claim(question.claims[0], question.setting), question, ())
    assert found is not None and found.mended is not None
    own = question.claims[0]
    again = question_of(head, about, formula)
    if found.slip not in ("case", "order"):
        again = question_of(head, about, text(found.mended.value))  # type: ignore[arg-type]
        assert answer(again).judged[-1].verdict in ("agrees", "proved"), (own.formula, found.words)


@pytest.mark.parametrize(
    ("head", "about", "formula"),
    [
        (CHAIN, ENTRY, "-g^2*Delta/6 + exp(g)/97"),
        (CHAIN, ENTRY, "sin(g)^3"),
        (CHAIN, RATE, "g^2*tau*exp(k)/7"),
    ],
)
def test_nothing_is_made_up(head: str, about: str, formula: str) -> None:
    """A formula that no slip explains keeps the counterexample; a term that does not belong is named as such."""
    found = answer(question_of(head, about, formula)).judged[-1]
    assert found.verdict == "refuted" and found.diagnosis
    assert "accepted" not in found.diagnosis or "too much" in found.diagnosis


def test_a_factor_that_fits_one_point_only_is_not_named() -> None:
    """g = 1 at the worksheet's own point: 2 would fit there; elsewhere it is 2/g."""
    head = CHAIN + 'check = { samples = 3, points = [{ g = 1, Delta = "1/3", tau = "1/50" }] }\n'
    found = answer(question_of(head, ENTRY, "-g*Delta/12")).judged[-1]
    assert "too small by 2;" not in found.diagnosis and "factor g" in found.diagnosis


def test_the_wrong_entries_of_a_matrix() -> None:
    rows = "[[3, 3, '-i*g^2/2'], [3, 5, 'i*g^2/2'], [5, 3, 'i*g^2/2'], [5, 5, '-i*g^2/2']]"
    written = f"{CHAIN}claim.m = {{ about = 'generator', which = 1, matrix = {rows} }}"
    found = survey_bytes(written.encode(), "w", Path("."))
    said = answer(found.taken()).judged[-1].diagnosis
    assert "entry (3, 5): the sign is wrong" in said and "1 more" in said


PAIR = """title = "Two resonators"
symbols.g = "positive"
graph = { family = "chain", sites = 2, hopping = "-g" }
detector.at = 0
start.at = 1
check = { samples = 1, points = [{ g = 1, tau = "7/10" }] }
"""
PRINTED = "about = 'detection probability', assume = ['g*tau = 7/10']"


def told(head: str, claim: str) -> tuple[str, str]:
    found = answer(survey_bytes(f"{head}claim.mine = {{ {claim} }}\n".encode(), "w", Path(".")).taken()).judged[-1]
    return found.verdict, found.diagnosis


@pytest.mark.parametrize(
    ("first", "step", "change", "said"),
    [
        (0, 1, {}, "each number is that of n + 1"),
        (2, -1, {}, "each number is that of n - 1"),
        (1, 0, {3: "0.1500"}, "all numbers are right but those at n = 3 (0.1500)"),
    ],
)
def test_published_numbers_beside_their_asks(first: int, step: int, change: dict[int, str], said: str) -> None:
    """Outside: F_n = s c^(n-1), s = sin^2 0.7, c = cos^2 0.7, by hand."""
    s, c = math.sin(0.7) ** 2, math.cos(0.7) ** 2
    asks = range(max(first, 1), 7)
    rows = [[str(n), change.get(n, f"{s * c ** (n - 1 + step):.4f}")] for n in asks]
    verdict, diagnosis = told(PAIR, f"{PRINTED}, values = {rows}")
    assert verdict == "refuted" and said in diagnosis


def test_published_numbers_of_another_quantity() -> None:
    """Outside: S_n = c^n, by hand."""
    rows = [[str(n), f"{math.cos(0.7) ** (2 * n):.4f}"] for n in range(1, 6)]
    assert "these are numbers of the survival probability" in told(PAIR, f"{PRINTED}, values = {rows}")[1]


@pytest.mark.parametrize(
    ("head", "claim", "said"),
    [
        (f"{RING}derive.detection = {{}}\n", "about = 'total detection probability', cases = ["
         "{ if = 'phi = 0', formula = '1/2' }, { if = 'otherwise', formula = '2' }]", "otherwise: 1 is right"),
        (RING, "about = 'total detection probability', cases = [{ if = 'phi = 0', formula = '1' },"
               " { if = 'otherwise', formula = '1' }]", "where phi = 0: too large by 2; 1/2 is accepted"),
        (RING, "about = 'total detection probability', cases = [{ if = 'phi = 0', formula = '1/2' },"
               " { if = 'otherwise', formula = '1/2' }]", "otherwise: too small by 2; 1 is accepted"),
        (RING, "about = 'number of phases', assume = ['phi = 0'], formula = '6'", "3 is right"),
        (CHAIN, "about = 'decay rate', holds = 'up to O(tau^3)', assume = ['Delta = 0'],"
                " per_root = { polynomial = 'E^4 - 3*g^2*E^2 + g^4', letter = 'E', formula = '(4*g^2 - E^2)*tau/10' }",
         "too small by 2"),
        (CHAIN, "about = 'decay rate', holds = 'up to O(tau^3)', assume = ['Delta = 0'],"
                " per_root = { polynomial = 'E^4 - 3*g^2*E^2 + g^4', letter = 'E', formula = '(4*g^2 + E^2)*tau/5' }",
         "E^2 has the wrong sign"),
        (CHAIN, "about = 'total detection probability', holds = 'as an upper bound', formula = '1/3'",
         "it is a lower bound"),
        (LINE, "about = 'detection probability', holds = 'as n -> infinity, error O(n^-5)',"
               " formula = '4*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2'", "it holds in the limit only"),
    ],
)
def test_what_is_said_about_pieces_bounds_and_limits(head: str, claim: str, said: str) -> None:
    verdict, diagnosis = told(head, claim)
    assert verdict == "refuted" and said in diagnosis


@pytest.mark.parametrize(
    ("value", "name"),
    [
        (lambda: acb(4), "4"), (lambda: acb(arb(2) / 3), "2/3"), (lambda: acb(-1), "-1"),
        (lambda: acb(arb.pi() / 2), "pi/2"), (lambda: acb(0, arb(3).sqrt()), "sqrt(3)*i"),
        (lambda: acb(arb.pi() ** -2 * 5), "5/pi^2"), (lambda: acb(arb(1).exp()), None),
        (lambda: acb(1, 1), None), (lambda: acb(arb(4, 1e-9)), None), (lambda: acb(arb.const_euler()), None),
    ],
)
def test_constants(value, name: str | None) -> None:
    """Oracle: constants by name, from flint; e and Euler's constant are none of ours, nor is a wide ball."""
    with ctx.workprec(200):
        found = recognised(value())
    assert (None if found is None else text(found)) == (None if name is None else text(parse(name)))


def test_every_place_can_be_put_back() -> None:
    f = parse("4/5*g^2*tau*sin(pi*k/(L+1))^2/(L+1) + sum(m from 1 to L: m*x)")
    assert all(p.put(p.node) == f for p in places(f))
    assert len({e.formula for e in edits(f, {})}) > 100


def test_assumptions_on_a_counter_are_heard() -> None:
    """A star of arms of 3, 5 and L sites: rates of the arm of 3 are those of a box of 3 watched at its end, by hand
    (g^2 tau/2) sin^2(k pi/4), where no other arm has the same level."""
    sheet = (Path(__file__).parents[2] / "worksheets" / "levels-uneven-star.toml").read_text(encoding="utf-8")
    claim = """
[claim.mine]
about = "decay rate"
which = "k"
arm = 1
holds = "up to O(tau^3), for every L"
formula = "g^2*sin(pi*k/4)^2*tau"
assume = ["sin(3*pi*k/2) != 0", "sin(pi*k*(L + 1)/4) != 0"]
"""
    question = survey_bytes(f"{sheet}{claim}".encode(), "w", Path(".")).taken()
    derived = _derive(question, lambda words: None)
    found = diagnosis_of(own_claim(question.claims[-1], question.setting), question, derived)
    assert found is not None and "too large by 2" in found.words
