"""Reading claims by cases and at every root: what is well formed, and one clear message for what is not."""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.formula.grammar import parse
from derive.worksheet.faults import say
from derive.worksheet.reader import Sheet, survey_bytes
from derive.worksheet.words import words

HEAD = """title = "Ring with a phase"
symbols = { g = "positive", phi = "real" }
graph = { family = "ring", sites = 5, hopping = "-g", flux = "phi" }
detector.at = 0
start.at = 1
"""
TOTAL = "about = 'total detection probability'"
RATE = "about = 'decay rate'"


def sheet(claim: str) -> Sheet:
    return survey_bytes(f"{HEAD}claim.mine = {{ {claim} }}\n".encode(), "w.toml", Path("."))


def test_cases_are_read_in_both_syntaxes() -> None:
    cases = r"""cases = [{ if = "phi = 0", latex = '\frac12' }, { if = "0 < phi < 1", formula = 1 },
                         { if = "otherwise", formula = "g/g" }]"""
    found = sheet(f"{TOTAL}, {cases.replace(chr(10), ' ')}").taken().claims[0].cases
    assert [(when, f) for when, f in found] == [
        ("phi = 0", parse("1/2")), ("0 < phi < 1", parse("1")), ("otherwise", parse("g/g"))
    ]


def test_roots_say_which_levels_are_meant() -> None:
    said = 'per_root = { polynomial = "E^2 - g^2", letter = "E", formula = "tau*E^2" }'
    for which in ("", ", which = 1"):
        own = sheet(f"{RATE}{which}, {said}").taken().claims[0]
        assert own.per_root == (parse("E^2 - g^2"), "E", parse("tau*E^2"))


@pytest.mark.parametrize(
    ("claim", "message", "mend"),
    [
        (f"{TOTAL}, cases = []", "there is no case", "if ="),
        (f"{TOTAL}, cases = 3", "where cases is a list", "brackets"),
        (f"{TOTAL}, cases = [3]", "where a case is a table", "if, formula, latex"),
        (f"{TOTAL}, cases = [{{ formula = 1 }}]", "where this case holds is not said", "otherwise"),
        (f"{TOTAL}, cases = [{{ if = 'phi = 0' }}]", "this case says nothing", "formula ="),
        (f"{TOTAL}, cases = [{{ if = 'phi = 0', formula = 1, latex = '1' }}]", "both formula and latex", "formula ="),
        (f"{TOTAL}, cases = [{{ if = 'phi', formula = 1 }}]", "this is no comparison", "<"),
        (f"{TOTAL}, cases = [{{ if = 'theta = 0', formula = 1 }}]", "the letter theta is not declared", "theta ="),
        (f"{TOTAL}, cases = [{{ if = '1 = 0', formula = 1 }}]", "has no letter in it", "Take it out"),
        (f"{TOTAL}, cases = [{{ if = 'phi = 0', formula = 'x' }}]", "the letter x is not declared", "x ="),
        (f"{TOTAL}, cases = [{{ if = 'otherwise', formula = 1 }}, {{ if = 'phi = 0', formula = 1 }}]",
         "stands before another case", "at the end"),
        (f"{TOTAL}, cases = [{{ if = 'phi = 0', formula = 1 }}, {{ if = 'phi = 0', formula = 2 }}]", "twice", "Keep"),
        (f"{TOTAL}, cases = [{{ when = 'phi = 0', if = 'phi = 0', formula = 1 }}]", "has no key when", "if"),
        (f"{TOTAL}, formula = 1, cases = [{{ if = 'phi = 0', formula = 1 }}]", "both formula and cases", "Keep one"),
        ("about = 'generator', which = 1, cases = [{ if = 'phi = 0', formula = 1 }]", "is a matrix", "entry"),
        (f"{TOTAL}, per_root = {{ polynomial = 'E', letter = 'E', formula = 1 }}", "no value at each root", "decay"),
        (f"{RATE}, per_root = {{ polynomial = 'E', letter = 'E' }}", "says no formula", "polynomial ="),
        (f"{RATE}, per_root = {{ polynomial = 'E', letter = 'g', formula = 1 }}", "g already has a meaning", "another"),
        (f"{RATE}, per_root = {{ polynomial = 'E', letter = 'pi', formula = 1 }}", "already has a meaning", "pi_0"),
        (f"{RATE}, per_root = {{ polynomial = 'E', letter = 3, formula = 1 }}", "is no letter", "letter ="),
        (f"{RATE}, per_root = {{ polynomial = 'g^2', letter = 'E', formula = 1 }}", "does not stand in", "in E"),
        (f"{RATE}, per_root = 'E^2'", "where per_root is a table", "polynomial"),
        (f"{RATE}, formula = 1", "which decay rate is not said", "which = 1"),
    ],
)
def test_one_message_says_what_to_change(claim: str, message: str, mend: str) -> None:
    found = sheet(claim).faults
    assert len(found) == 1 and message in found[0].message and mend in found[0].mend, [say(f) for f in found]
    assert found[0].line == 6 and found[0].column


def test_the_words_are_listed() -> None:
    said = "\n".join(words())
    assert all(word in said for word in ("claim.<name>.cases: ", "cases.if: ", "per_root.polynomial: "))
