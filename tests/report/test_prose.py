"""The report's own sentences: the question in words, findings in a clause, mathematics inside plain sentences."""

from __future__ import annotations

import pytest

from derive.formula.grammar import parse
from derive.formula.tree import ONE, Formula, letter
from derive.problem.setting import Interval, Start, Watcher
from derive.record.said import Finding, Prose
from derive.report import latex
from derive.report.context import Context
from derive.report.ledger import plain
from derive.report.prose import finding, graph, holds, mathematics, question

from .sample import chain, generator_claims, setting

HALF = parse("1/2")


def asked(**changes) -> str:
    return plain(question(Context(setting(**changes))))


def test_the_question_in_words() -> None:
    assert asked() == "Every tau, site 4 is asked. It starts on site 2."
    assert asked(start=None) == "Every tau, site 4 is asked."


def test_other_detectors_starts_and_intervals() -> None:
    two = Watcher((((3, ONE),), ((5, ONE),)))
    spread = Watcher((((3, HALF), (5, HALF)),), efficiency=parse("3/4"))
    mixture = Start(((HALF, ((0, ONE),)), (HALF, ((2, ONE), (3, ONE)))))
    assert asked(detectors=(two,), start=None) == "Every tau, sites 3 and 5 are asked."
    assert asked(detectors=(spread,), start=None) == (
        "Every tau, one state on sites 3 and 5 is asked. A click comes with probability 3/4."
    )
    assert asked(start=mixture).endswith(
        "It starts on site 0 with weight 1/2, or spread over sites 2 and 3 with weight 1/2."
    )
    assert asked(interval=Interval(law="gamma", shape=parse("2")), start=None) == (
        "At random intervals of mean tau (gamma law of shape 2), site 4 is asked."
    )


def test_sites_by_name_and_the_graph() -> None:
    named = setting(space=chain(9, tuple("abcdefghi")))
    assert plain(question(Context(named))) == "Every tau, site e is asked. It starts on site c."
    assert graph(named) == "a chain of 9 sites"


def test_findings_in_a_clause() -> None:
    assert finding(Finding("proved", "exact")) == "exact zero"
    assert finding(Finding("agrees", "coefficient", 41, 4)) == "coefficients measured at 4 points, 41 digits shared"
    refuted = Finding("refuted", "enclosure", 3, 1, (("g", "1"),), "too small by 4")
    assert finding(refuted) == "measured otherwise at g = 1: too small by 4"
    assert "too small" not in finding(refuted, evidence=False)


def test_where_a_claim_holds() -> None:
    truncated = next(c for c in generator_claims() if c.id == "generator.truncated")
    assert holds(truncated) == ("up to ", parse("O(tau^3)"))


FOUND: dict[str, list[str]] = {
    "too small by 2; 4*g^2*tau*sin(pi/5)^2/5 is accepted": ["4*g^2*tau*sin(pi/5)^2/5"],
    "it demands tau*g^2*(-3 + 2*cos(pi/5))/10; E - g = 0": ["tau*g^2*(-3 + 2*cos(pi/5))/10", "E - g"],
    "claimed 0.5 + 0.1*i, measured -0.75i; law/measured - 1": [],
    "|law/S - 1| at doubled times, and/or I/O, e.g. 4.9e-08": [],
    "h*tau*coth(kappa/2) well below 1": ["h*tau*coth(kappa/2)"],
    "as n -> infinity, error O(n^(-5))": ["n", "O(n^(-5))"],
    "claimed minus solved is -g^2*Delta/6": ["-g^2*Delta/6"],
    "a step of I and A": [],
    "entry (1, 3) of G_2": ["G_2"],
    "contour samples of log(Q U Q)": [],
    "8x per halving, 2.5 times": [],
}


@pytest.mark.parametrize("sentence", FOUND)
def test_only_what_is_surely_mathematics(sentence: str) -> None:
    found: Prose = mathematics(sentence)
    assert [f for f in found if isinstance(f, Formula)] == [parse(s) for s in FOUND[sentence]]


def test_nothing_is_lost() -> None:
    sentence = "for every tau below 1/g the error is O(tau^3), g = 3/2"
    assert plain(mathematics(sentence)).replace(" ", "") == sentence.replace(" ", "")
    assert letter("tau") in mathematics(sentence)


def test_measured_exponents_keep_their_digits() -> None:
    """A slope that was measured is no fraction."""
    found = [f for f in mathematics("falls like n^-3.41, by 2^3.998 a halving") if isinstance(f, Formula)]
    assert [latex(f) for f in found] == ["n^{-3.41}", "2^{3.998}"]
    assert mathematics("claimed -0.5 + 0.1*i") == ("claimed ", "−0.5 + 0.1i")


def test_detectors_told_apart_by_name() -> None:
    west = Watcher((((3, ONE),),), name="west")
    east = Watcher((((5, ONE),),), HALF, "east")
    assert asked(detectors=(west, east), start=None) == (
        "Every tau, site 3 (west), and apart from it site 5 (east) are asked. "
        "A click at east comes with probability 1/2."
    )
