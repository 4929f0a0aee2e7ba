"""Series in tau that are none: a pole, a root, a logarithm at tau = 0, refuted; what only looks singular, not.

Outside: whether a term is O(tau^p) is read off by hand (tau^q is for q >= p, tau^q log(tau) for q > p); the right
formulas are those of a path of five watched in the middle, rate (4/3) g^2 tau sin^2(pi/3) of each level -+g.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.checks import branch
from derive.checks.branch import check_branch, is_series
from derive.pipeline import answer
from derive.problem.setting import Check
from derive.record.own import own_claim
from derive.record.said import Judged
from derive.worksheet.reader import survey_bytes

HEAD = """title = "Five cavities"
symbols.g = "positive"
graph = { family = "chain", sites = 5, hopping = "-g" }
detector.at = 2
start.at = 1
check.samples = 1
"""
RIGHT = {
    "decay rate": ("which = 1, holds = 'up to O(tau^3)'", "g^2*tau", 3),
    "level energy": ("which = 1, holds = 'up to O(tau^2)'", "-g", 2),
    "generator": ("entry = [1, 1], holds = 'up to O(tau^2)'", "-i*g^2*tau/2", 2),
}
TERMS = {
    "1/tau": -1, "g/tau^2": -2, "sqrt(tau)": 0, "1/sqrt(tau)": -1, "log(tau)": -1, "tau*log(g*tau)": 0,
    "tau^(3/2)": 1, "tau^2*log(tau)": 1, "tau^(5/2)": 2, "tau^3*log(tau)": 2, "1/(tau + tau^2)": -1,
}
"""Term -> the highest p for which it is O(tau^p)."""


def judged(about: str, more: str) -> Judged:
    said, right, _ = RIGHT[about]
    claim = f"claim.mine = {{ about = '{about}', {said}, formula = '{right} + {more}' }}\n"
    return answer(survey_bytes(f"{HEAD}{claim}".encode(), "w", Path(".")).taken()).judged[-1]


@pytest.mark.parametrize("about", RIGHT)
@pytest.mark.parametrize("term", TERMS)
def test_a_singular_term_below_the_order_is_refuted(about: str, term: str) -> None:
    found = judged(about, term)
    if TERMS[term] < RIGHT[about][2]:
        assert found.verdict == "refuted" and "is too much" in found.diagnosis
    else:
        assert found.verdict != "refuted"


@pytest.mark.parametrize("term", ["sin(tau)/tau - 1", "tau^3/sqrt(tau^2)", "(exp(tau) - 1)^2/tau - tau", "exp(-1/tau)"])
def test_what_only_looks_singular_is_not_refuted_for_it(term: str) -> None:
    said, right, _ = RIGHT["level energy"]
    claim = f"claim.mine = {{ about = 'level energy', {said}, formula = '{right} + {term}' }}\n"
    asked = survey_bytes(f"{HEAD}{claim}".encode(), "w", Path(".")).taken()
    own = own_claim(asked.claims[0], asked.setting)
    assert is_series(own) and check_branch(asked.setting, own, Check(samples=2)) is None


def test_a_law_at_fixed_product_is_no_series() -> None:
    claim = "claim.mine = { about = 'survival probability', holds = 'up to O(tau) at fixed t*tau', formula = 'tau' }\n"
    asked = survey_bytes(f"{HEAD}{claim}".encode(), "w", Path(".")).taken()
    assert not is_series(own_claim(asked.claims[0], asked.setting))


def test_an_efficiency_with_a_root_brings_roots(monkeypatch: pytest.MonkeyPatch) -> None:
    """With eta = sqrt(tau)/2 a root of tau is no reason to refute; planted, the guard taken out refutes."""
    said, right, _ = RIGHT["level energy"]
    claim = f"claim.mine = {{ about = 'level energy', {said}, formula = '{right} + sqrt(tau)' }}\n"
    head = HEAD.replace("detector.at = 2", "detector = { at = 2, efficiency = 'sqrt(tau)/2' }")
    asked = survey_bytes(f"{head}{claim}".encode(), "w", Path("."))
    assert asked.question is not None
    own = own_claim(asked.question.claims[0], asked.question.setting)
    assert check_branch(asked.question.setting, own, Check(samples=1)) is None
    monkeypatch.setattr(branch, "free_letters", lambda f: frozenset())
    assert check_branch(asked.question.setting, own, Check(samples=1)) is not None


@pytest.mark.parametrize(
    ("about", "formula", "verdict"),
    [("level multiplicity", "tau", "refuted"), ("level multiplicity", "tau/tau", "passes"),
     ("level weight", "1/4 + tau", "refuted"), ("level weight", "1/4", "passes"),
     ("dark level multiplicity", "1 + tau", "refuted"), ("dark level energy", "-g + tau", "refuted")],
)
def test_what_does_not_depend_on_tau(about: str, formula: str, verdict: str) -> None:
    """Outside: by symmetry each of the levels -+g has a dark partner, and a start on one side is seen in half of it."""
    claim = f"claim.mine = {{ about = '{about}', which = 1, formula = '{formula}' }}\n"
    found = answer(survey_bytes(f"{HEAD}{claim}".encode(), "w", Path(".")).taken()).judged[-1].verdict
    assert (found in ("agrees", "proved")) if verdict == "passes" else found == verdict
