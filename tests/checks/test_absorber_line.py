"""The absorber on a line: its laws agree with the line evolved, planted ones are refuted."""

from __future__ import annotations

import pytest

from derive.checks.absorber.line import check_line_enclosed, check_line_trend
from derive.derivations.absorber.lattice import derive_absorber_lattice
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim
from tests.lattices import lattice

EFFORT = Check(samples=0, points=((("g", parse("1")), ("tau", parse("1/2"))),))
LATE = "as t -> infinity, error O(t^(-5/2))"


def law(name: str, k: int = 0) -> str:
    claims = derive_absorber_lattice(lattice(start=k), Wish("absorber")).claims
    value = next(c.value for c in claims if c.id == f"absorber.{name}")
    assert isinstance(value, Formula)
    return text(value)


def verdict(about: str, formula: str, holds: str = "exactly", k: int = 0) -> str:
    claim = Claim("claim.mine", "absorber", Quantity(about), parse(formula), kind_of(holds), origin="user")
    setting = lattice(start=k)
    findings = check_line_enclosed(setting, (claim,), EFFORT).findings
    findings = findings or check_line_trend(setting, (claim,), EFFORT).findings
    return findings["claim.mine"].verdict


@pytest.mark.parametrize("k", [0, 2])
def test_derived_laws_agree(k: int) -> None:
    assert verdict("absorber amplitude", law("amplitude", k), k=k) == "agrees"
    assert verdict("absorber amplitude", law("tail", k), LATE, k) == "agrees"
    assert verdict("absorbed fraction", law("fraction", k), k=k) == "agrees"


def test_the_return_factor() -> None:
    assert verdict("return factor", "4") == "agrees"
    assert verdict("return factor", "1") == verdict("return factor", "401/100") == "refuted"


AMPLITUDE, TAIL, FRACTION = law("amplitude"), law("tail"), law("fraction")
PLANTED = {
    "strength halved": ("absorber amplitude", AMPLITUDE.replace("2/tau", "1/tau"), "exactly"),
    "a source for a sink": ("absorber amplitude", AMPLITUDE.replace(" - 2/tau", " + 2/tau"), "exactly"),
    "no absorber": ("absorber amplitude", "bessel_J(0, 2*g*t)", "exactly"),
    "twice the tail": ("absorber amplitude", f"2*({TAIL})", LATE),
    "eighth of a turn": ("absorber amplitude", TAIL.replace("pi/4", "pi/2"), LATE),
    "the free power": ("absorber amplitude", TAIL.replace("t^(3/2)", "t^(1/2)"), LATE),
    "half the fraction": ("absorbed fraction", f"1/2*({FRACTION})", "exactly"),
    "inside the band only": ("absorbed fraction", FRACTION.replace("sinh(y)/(", "0*sinh(y)/("), "exactly"),
    "a per mille more": ("absorbed fraction", f"1001/1000*({FRACTION})", "exactly"),
}


@pytest.mark.parametrize("name", PLANTED)
def test_planted_laws_are_refuted(name: str) -> None:
    about, formula, holds = PLANTED[name]
    assert formula not in (AMPLITUDE, TAIL, FRACTION) and verdict(about, formula, holds) == "refuted"
