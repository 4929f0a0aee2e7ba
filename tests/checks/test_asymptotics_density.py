"""The trend road on a local density of states: derived laws agree, and every way of being wrong is refuted."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.special

from derive.checks.asymptotics.density import check_density, own_amplitudes
from derive.derivations.asymptotics.topic import derive_asymptotics
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.points import Point
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Setting, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim, Finding
from tests.densities import SEMICIRCLE, TUNED_END, density, line_by_its_edges, two_bands, two_edges

AT = (("g", parse("1")), ("tau", parse("2/5")))
EFFORT = Check(samples=0, points=(AT,))
LAW = "4*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2"
THIRD = density([("g", "-1/3", "both")], amplitudes=["g^(-2/3)/7"])


def found(formula: str, holds: str, setting: Setting, about: str = "detection probability") -> Finding:
    claim = Claim("claim.mine", "renewal", Quantity(about), parse(formula), kind_of(holds), origin="user")
    return check_density(setting, (claim,), EFFORT).findings["claim.mine"]


UNEQUAL = density([("0", "-1/2", "above"), ("0", "-1/2", "below")], amplitudes=["1/3", "1/5"])
BESIDE = density([("0", "-1/2", "above"), ("g", "3/4", "both")], amplitudes=["1/5", "1"])


@pytest.mark.parametrize(
    "setting", [line_by_its_edges(), two_edges(*SEMICIRCLE), two_edges(*TUNED_END), THIRD, UNEQUAL, BESIDE]
)
def test_derived_laws_agree(setting: Setting) -> None:
    claims = derive_asymptotics(setting, Wish("asymptotics")).claims
    seen = check_density(setting, claims, EFFORT)
    assert [f.verdict for f in seen.findings.values()] == ["agrees", "agrees"], seen.findings


def test_numbers_are_those_of_the_line() -> None:
    """F_n by the renewal recursion from scipy.special.jv (phys. rev. e 95, 032141): phi_n = u_n - sum phi_k u_(n-k)."""
    setting, point = two_edges("-1/2", "-1/2", "1/pi"), Point((*AT,))
    u = scipy.special.jv(0, 0.8 * np.arange(101))
    phi = np.zeros(101)
    for n in range(1, 101):
        phi[n] = u[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    measured = own_amplitudes(setting, point, 100, 30)
    assert all(abs(complex(measured[n]) - phi[n]) < 1e-13 for n in (1, 2, 50, 100))
    with pytest.raises(NotCovered, match="no numbers of its own"):
        own_amplitudes(line_by_its_edges(), point, 10, 30)


def test_drawn_points() -> None:
    claims = derive_asymptotics(line_by_its_edges(), Wish("asymptotics")).claims[:1]
    drawn = check_density(line_by_its_edges(), claims, Check(samples=2)).findings["asymptotics.amplitude"]
    assert drawn.verdict == "agrees" and drawn.points == 2, drawn


def test_two_bands() -> None:
    claims = derive_asymptotics(two_bands(), Wish("asymptotics")).claims
    point = (("a", parse("1/2")), ("b", parse("2")), ("tau", parse("2/5")))
    seen = check_density(two_bands(), claims, Check(samples=0, points=(point,)))
    assert [f.verdict for f in seen.findings.values()] == ["agrees", "agrees"]
    assert [dict(x.at)["n"] for x in seen.numbers["asymptotics.F"]] == ["10", "100", "1000"]
    assert [p.id for p in seen.plots] == ["asymptotics.law", "asymptotics.error"]
    lower = text(claims[1].value).split(" + 2*sqrt")[0].lstrip("(") + ")^2/n^3"  # type: ignore[arg-type]
    one = Claim("claim.mine", "renewal", Quantity("detection probability"), parse("(" + lower), claims[1].kind)
    assert check_density(two_bands(), (one,), Check(samples=0, points=(point,))).findings["claim.mine"].verdict == (
        "refuted"
    )


PLANTS = [
    LAW.replace("n^3", "n^(29/10)"),
    LAW.replace("+ pi/4", "- pi/4"),
    LAW.replace("4*g*tau/", "8*g*tau/"),
    LAW.replace("pi/4", "pi/2"),
    "2*g*tau/(pi*n^3)",
]


@pytest.mark.parametrize("planted", PLANTS)
def test_planted_laws_are_refuted(planted: str) -> None:
    setting = line_by_its_edges()
    assert found(LAW, "as n -> infinity", setting).verdict == "agrees"
    assert found(planted, "as n -> infinity, error O(n^-4)", setting).verdict == "refuted"
    finding = found(planted, "as n -> infinity", setting)
    assert finding.verdict == "refuted" and dict(finding.point)["tau"] == "2/5"


@pytest.mark.parametrize("planted", PLANTS[:3])
def test_planted_laws_are_refuted_by_the_bands(planted: str) -> None:
    setting = two_edges("-1/2", "-1/2", "1/pi")
    assert found(LAW, "as n -> infinity, error O(n^-4)", setting).verdict == "agrees"
    assert found(planted, "as n -> infinity, error O(n^-4)", setting).verdict == "refuted"


def test_the_constant_where_the_density_vanishes() -> None:
    """u_k replaced by its 1/2, by its conjugate, and by twice itself."""
    setting = two_edges(*SEMICIRCLE)
    law = text(derive_asymptotics(setting, Wish("asymptotics")).claims[1].value)  # type: ignore[arg-type]
    begins, ends = law.index("1/2 - "), law.index(")^2)^2")
    u = law[begins:ends]
    assert found(law, "as n -> infinity", setting).verdict == "agrees"
    for instead in ("1/2", u.replace("1/2 - ", "1/2 + "), f"2*({u})"):
        assert found(law[:begins] + instead + law[ends:], "as n -> infinity", setting).verdict == "refuted"


def test_powers_other_than_halves() -> None:
    law = text(derive_asymptotics(THIRD, Wish("asymptotics")).claims[0].value)  # type: ignore[arg-type]
    holds, about = "as n -> infinity, error O(n^(-5/3))", "detection amplitude"
    assert "n^(4/3)" in law and "exp(-i*g*tau*n)" in law
    for planted in (f"2*{law}", law.replace("n^(4/3)", "n^(3/2)"), law.replace("exp(-i*g", "exp(i*g"), f"i*{law}"):
        assert found(planted, holds, THIRD, about).verdict == "refuted", planted
    assert found(f"i*{law}", holds + ", up to a phase", THIRD, about).verdict == "agrees"


def test_the_order_of_the_error_is_measured() -> None:
    assert found(LAW, "as n -> infinity, error O(n^-4)", line_by_its_edges()).verdict == "agrees"
    assert found(LAW, "as n -> infinity, error O(n^-5)", line_by_its_edges()).verdict == "refuted"


def test_what_is_not_measured_says_so() -> None:
    wrong_weight = two_edges("1/2", "1/2", "1/(4*pi*g^2)")
    finding = found(LAW, "as n -> infinity", wrong_weight)
    assert finding.verdict == "untested" and "weight of 0.5" in finding.evidence
    finding = found(LAW, "as n -> infinity, smooth part", line_by_its_edges())
    assert finding.verdict == "untested" and "the whole law" in finding.evidence
    step = density([("0", "0", "above")], amplitudes=["1/3"])
    assert "has a step" in found(LAW, "as n -> infinity", step).evidence
    slow = density([("0", "-1/10", "above")], amplitudes=["1/3"])
    assert "sets in later" in found(LAW, "as n -> infinity", slow).evidence
