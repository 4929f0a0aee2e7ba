"""The trend road: laws that hold agree, and every way of being wrong is refuted or left undecided as it should be."""

from __future__ import annotations

import pytest

from derive.checks.asymptotics.road import check_late
from derive.derivations.asymptotics.topic import derive_asymptotics, late_law
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Setting, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim, Finding
from tests.lattices import lattice

AT = {"tau": parse("2/5"), "g": parse("1")}
EFFORT = Check(samples=0, points=(tuple(sorted(AT.items())),))
LAW = "4*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2"
TWO_TERMS = text(late_law(lattice(), 2).square)


def found(formula: str, holds: str, setting: Setting | None = None, about: str = "detection probability") -> Finding:
    claim = Claim("claim.mine", "renewal", Quantity(about), parse(formula), kind_of(holds), origin="user")
    return check_late(setting or lattice(), (claim,), EFFORT).findings["claim.mine"]


@pytest.mark.parametrize("more", ["", ", error O(n^-4)", ", within 1/100"])
def test_the_published_law_agrees(more: str) -> None:
    finding = found(LAW, "as n -> infinity" + more)
    assert finding.verdict == "agrees" and "off by" in finding.evidence and finding.points == 1


@pytest.mark.parametrize(
    "planted",
    [
        "4*g*tau/(pi*n^(29/10))*cos(2*g*tau*n + pi/4)^2",
        "4*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/2)^2",
        "8*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2",
        "4*g*tau/(pi*n^3)*cos(2*g*tau*n - pi/4)^2",
        "2*g*tau/(pi*n^3)",
    ],
)
def test_planted_laws_are_refuted(planted: str) -> None:
    finding = found(planted, "as n -> infinity")
    assert finding.verdict == "refuted" and dict(finding.point)["tau"] == "2/5"
    assert found(planted, "as n -> infinity, error O(n^-4)").verdict == "refuted"


def test_the_order_of_the_error_is_measured() -> None:
    assert found(LAW, "as n -> infinity, error O(n^-5)").verdict == "refuted"
    assert found(TWO_TERMS, "as n -> infinity, error O(n^-5)").verdict == "agrees"
    assert found(TWO_TERMS, "as n -> infinity, error O(n^-6)").verdict == "refuted"


ETA = text(parse("sum(m from 1 to infinity: 1/(2*sqrt(pi*m*(pi*m + 2*g*tau))) - 1/(2*sqrt(pi*m*(pi*m - 2*g*tau))))"))


@pytest.mark.parametrize(
    "instead",
    ["0", f"(-{ETA})", ETA.replace("m from 1", "m from 2")],
    ids=["dropped", "sign flipped", "an image dropped"],
)
def test_planted_image_sums_are_refuted(instead: str) -> None:
    assert ETA in TWO_TERMS
    assert found(TWO_TERMS.replace(ETA, instead), "as n -> infinity, error O(n^-5)").verdict == "refuted"


def test_a_law_true_in_the_limit_says_how_far_off_it_is() -> None:
    """Two terms that differ in the second agree as n -> infinity, both: a bare limit does not look at it."""
    finding = found(TWO_TERMS.replace(ETA, "0"), "as n -> infinity")
    assert finding.verdict == "agrees" and "of the law at n = " in finding.evidence


def test_bounds_on_the_ratio() -> None:
    assert found("5/4*" + LAW, "as n -> infinity, within 1/2").verdict == "agrees"
    assert found("5/4*" + LAW, "as n -> infinity, within 1/5").verdict == "refuted"


def test_phases() -> None:
    setting = lattice(start=1)
    law = text(late_law(setting, 1).real)
    assert found(f"i*({law})", "as n -> infinity", setting, "detection amplitude").verdict == "agrees"
    assert found(law, "as n -> infinity", setting, "detection amplitude").verdict == "refuted"
    assert found(f"-i*({law})", "as n -> infinity", setting, "detection amplitude").verdict == "refuted"
    assert found(f"-({law})", "as n -> infinity, up to a phase", setting, "detection amplitude").verdict == "agrees"
    assert found(f"2*({law})", "as n -> infinity, up to a phase", setting, "detection amplitude").verdict == "refuted"


def test_where_the_edges_meet() -> None:
    setting = lattice(below=False, length="pi/(2*g)")
    assert found("g*tau/(2*pi*n^3)", "as n -> infinity, error O(n^-4)", setting).verdict == "agrees"
    assert found(LAW, "as n -> infinity", setting).verdict == "refuted"


def test_the_start_of_the_tail() -> None:
    derivation = derive_asymptotics(lattice(), Wish("asymptotics"))
    start = next(c for c in derivation.claims if c.id == "asymptotics.from")
    assert check_late(lattice(), (start,), EFFORT).findings[start.id].verdict == "agrees"
    for planted in (f"2*({text(start.value)})", f"1001/1000*({text(start.value)})"):  # type: ignore[arg-type]
        assert found(planted, "exactly", about="tail start").verdict == "refuted"


def test_what_cannot_be_followed_is_untested() -> None:
    assert found(LAW + " + j", "as n -> infinity").verdict == "untested"
    assert found(LAW, "as n -> infinity, error O(log(n)/n^4)").verdict == "untested"
    from tests.strategies import chain

    claim = Claim("claim.mine", "renewal", Quantity("detection probability"), parse(LAW), kind_of("as n -> infinity"))
    assert check_late(chain(5, 2), (claim,), EFFORT).findings == {}  # finite graphs have a road of their own


def test_a_slow_exponential_is_waited_for() -> None:
    """Half line watched at site 1 from site 0, g tau = 2/5: site 0 is emptied slowly, and only then is there a law."""
    setting = lattice("half line", 1, 0)
    law = derive_asymptotics(setting, Wish("asymptotics"))
    assert [c.id for c in law.claims] == ["asymptotics.amplitude", "asymptotics.F"] and law.notes
    findings = check_late(setting, law.claims, EFFORT).findings
    assert {f.verdict for f in findings.values()} == {"agrees"}
