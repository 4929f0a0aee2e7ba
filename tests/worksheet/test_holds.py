"""The `holds` phrases, against the language's definition written out by hand."""

from __future__ import annotations

import pytest

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.record.holds import kind_of
from derive.record.said import Kind

KINDS = [
    ("exactly", Kind("exactly", "exactly")),
    ("up to O(tau^3)", Kind("order", "up to O(tau^3)", 3)),
    ("up to O(tau)", Kind("order", "up to O(tau)", 1)),
    ("up to O(2*g*tau^4/pi)", Kind("order", "up to O(2*g*tau^4/pi)", 4)),
    ("up to O(tau^2) at fixed t*tau", Kind("order", "up to O(tau^2) at fixed t*tau", 2, parse("t*tau"))),
    ("as an upper bound", Kind("upper", "as an upper bound")),
    ("as a lower bound", Kind("lower", "as a lower bound")),
    ("exactly, for every L", Kind("exactly", "exactly, for every L", every="L")),
    ("for every L", Kind("exactly", "for every L", every="L")),
    ("up to O(tau^3), for every L", Kind("order", "up to O(tau^3), for every L", 3, every="L")),
    ("as n -> infinity", Kind("limit", "as n -> infinity", toward=(("n", parse("infinity")),))),
    (
        "as L -> infinity, then t -> infinity",
        Kind(
            "limit", "as L -> infinity, then t -> infinity", toward=(("L", parse("infinity")), ("t", parse("infinity")))
        ),
    ),
    (
        "as n -> infinity, error O(n^-5), within 1/100, up to a phase, smooth part",
        Kind(
            "limit",
            "as n -> infinity, error O(n^-5), within 1/100, up to a phase, smooth part",
            toward=(("n", parse("infinity")),),
            error=parse("O(n^-5)"),
            within=parse("1/100"),
            phase=True,
            smooth=True,
        ),
    ),
    ("as tau -> binomial(4, 2)", Kind("limit", "as tau -> binomial(4, 2)", toward=(("tau", parse("binomial(4, 2)")),))),
]


@pytest.mark.parametrize(("phrase", "kind"), KINDS)
def test_phrases(phrase, kind):
    assert kind_of(phrase) == kind


REFUSED = [
    ("", 0, "no words"),
    ("roughly", 0, "says nothing known"),
    ("up to O(n^3)", 0, "a power of tau"),
    ("up to O(tau^-1)", 0, "a power of tau"),
    ("up to O(1)", 0, "a power of tau"),
    ("up to O(tau^(1/2))", 0, "a power of tau"),
    ("up to O(sin(tau))", 0, "a power of tau"),
    ("up to O(2g)", 9, "side by side"),
    ("up to O(tau) at fixed (t", 22, "not closed"),
    ("exactly, really", 9, "really cannot stand here"),
    ("as n -> infinity, error n^-5", 18, "told by O(...)"),
    ("as n -> infinity, quickly", 18, "quickly cannot stand behind a limit"),
    ("then n -> infinity", 0, "says nothing known"),
    ("as n -> ", 0, "says nothing known"),
    ("exactly,, for every L", 8, "between two commas"),
    ("as n -> infinity, within (", 25, "not closed"),
]


@pytest.mark.parametrize(("phrase", "position", "words"), REFUSED)
def test_refused(phrase, position, words):
    with pytest.raises(FormulaFault) as caught:
        kind_of(phrase)
    assert words in caught.value.message
    assert caught.value.position == position
