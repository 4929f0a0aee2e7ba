"""Survival laws on lattices: the derived one agrees, every way of being wrong is refuted."""

from __future__ import annotations

import pytest

from derive.checks.asymptotics.survival import check_late_survival
from derive.derivations.asymptotics.topic import derive_asymptotics
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim
from tests.lattices import lattice

EFFORT = Check(samples=0, points=((("g", parse("1")), ("tau", parse("2/5"))),))


def law(order: int) -> str:
    claims = derive_asymptotics(lattice(), Wish("asymptotics", (("order", order),))).claims
    value = next(c.value for c in claims if c.id == "asymptotics.survival")
    assert isinstance(value, Formula)
    return text(value)


ONE, TWO = law(1), law(2)


def verdict(formula: str, holds: str) -> str:
    about = Quantity("survival probability")
    claim = Claim("claim.mine", "survival", about, parse(formula), kind_of(holds), origin="user")
    return check_late_survival(lattice(), (claim,), EFFORT).findings["claim.mine"].verdict


def test_the_derived_laws_agree() -> None:
    assert verdict(ONE, "as n -> infinity, error O(n^-3)") == "agrees"
    assert verdict(TWO, "as n -> infinity, error O(n^-4)") == "agrees"


PLANTED = {
    "twice the tail": (ONE.replace(" + g*tau/(pi*n^2)", " + 2*g*tau/(pi*n^2)"), 3),
    "the power of F_n": (ONE.replace("(pi*n^2)", "(pi*n^3)"), 3),
    "1 per cent more for ever": (f"101/100*({ONE})", 3),
    "sign of the oscillation": (TWO.replace("+ cos(2*g*tau*(2*n + 1))", "- cos(2*g*tau*(2*n + 1))"), 4),
    "half an ask": (TWO.replace("2*n + 1", "2*n"), 4),
    "images dropped": (TWO.replace("8*g*tau*sum", "0*sum"), 4),
}


@pytest.mark.parametrize("name", PLANTED)
def test_planted_laws_are_refuted(name: str) -> None:
    formula, error = PLANTED[name]
    assert formula not in (ONE, TWO)
    assert verdict(formula, f"as n -> infinity, error O(n^-{error})") == "refuted"


def test_an_error_better_than_it_is_is_refuted() -> None:
    assert verdict(ONE, "as n -> infinity, error O(n^-4)") == "refuted"
