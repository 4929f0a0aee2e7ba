"""Late-time laws beside an impurity on the trend road, bound states on the enclosure road: right ones agree, each plant
is refuted."""

from __future__ import annotations

from functools import lru_cache

import pytest

from derive.checks.asymptotics.bound import check_bound
from derive.checks.asymptotics.road import check_late
from derive.derivations.asymptotics.topic import derive_asymptotics
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Setting, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim, Finding
from tests.lattices import lattice

AT = {"tau": parse("2/5"), "g": parse("1"), "Delta": parse("3/4")}
EFFORT = Check(samples=0, points=(tuple(sorted(AT.items())),))
WATCHED = lattice(impurity=(0, "Delta"))


@lru_cache(maxsize=8)
def claims(setting: Setting) -> dict[str, Claim]:
    return {c.id: c for c in derive_asymptotics(setting, Wish("asymptotics")).claims}


def law(setting: Setting = WATCHED, name: str = "F") -> str:
    return text(claims(setting)[f"asymptotics.{name}"].value)  # type: ignore[arg-type]


def found(formula: str, holds: str, setting: Setting = WATCHED, about: str = "detection probability") -> Finding:
    claim = Claim("claim.mine", "renewal", Quantity(about), parse(formula), kind_of(holds), origin="user")
    road = check_bound if about.startswith("bound") else check_late
    return road(setting, (claim,), EFFORT).findings["claim.mine"]


@pytest.mark.parametrize(
    "setting",
    [WATCHED, lattice(start=2, impurity=(0, "Delta")), lattice(impurity=(1, "Delta")),
     lattice("half line", impurity=(0, "2*Delta")), lattice("half line", 1, 0, impurity=(1, "Delta"))],
    ids=["watched", "start elsewhere", "beside the detector", "end of a half line", "inside a half line"],
)
def test_derived_laws_agree(setting: Setting) -> None:
    mine = tuple(claims(setting).values())
    findings = {**check_late(setting, mine, EFFORT).findings, **check_bound(setting, mine, EFFORT).findings}
    assert {name: f.verdict for name, f in findings.items()} == dict.fromkeys(claims(setting), "agrees")


@pytest.mark.parametrize(
    ("right", "wrong"),
    [
        ("g*tau/pi", "2*g*tau/pi"),
        ("n^3", "n^(29/10)"),
        ("pi/4", "pi/2"),
        ("+ i*Delta*tau/2 -", "- i*Delta*tau/2 -"),
        ("Delta", "(2*Delta)"),
        ("Delta", "0"),
    ],
    ids=["factor", "power", "phase", "the impurity's sign at one edge", "its size", "no impurity"],
)
def test_planted_laws_are_refuted(right: str, wrong: str) -> None:
    assert right in law()
    planted = law().replace(right, wrong)
    assert found(planted, "as n -> infinity").verdict == "refuted"
    assert found(planted, "as n -> infinity, error O(n^-4)").verdict == "refuted"


def test_images_and_the_order_of_the_error_are_seen() -> None:
    assert found(law(), "as n -> infinity, error O(n^-4)").verdict == "agrees"
    assert found(law(), "as n -> infinity, error O(n^-5)").verdict == "refuted"
    without = law().replace("m from 1", "m from 2")
    assert without != law() and found(without, "as n -> infinity, error O(n^-4)").verdict == "refuted"


def test_a_complex_amplitude_counts_with_its_phase() -> None:
    amplitude = law(name="amplitude")
    about = "detection amplitude"
    assert found(amplitude, "as n -> infinity", about=about).verdict == "agrees"
    assert found(f"i*({amplitude})", "as n -> infinity", about=about).verdict == "refuted"
    assert found(f"conj({amplitude})", "as n -> infinity", about=about).verdict == "refuted"
    turned = amplitude.replace("Delta", "(-Delta)")
    assert found(turned, "as n -> infinity", about=about).verdict == "refuted"
    both_signs = law().replace("Delta", "(-Delta)")  # the amplitude of a return is conjugated, no more
    assert found(both_signs, "as n -> infinity").verdict == "agrees"
    assert found(f"i*({amplitude})", "as n -> infinity, up to a phase", about=about).verdict == "agrees"


def test_the_start_of_the_tail() -> None:
    start = law(name="from")
    for planted in (f"2*({start})", f"1001/1000*({start})"):
        assert found(planted, "exactly", about="tail start").verdict == "refuted"


@pytest.mark.parametrize(
    ("energy", "verdict"),
    [("sqrt(4*g^2 + Delta^2)", "agrees"), ("-sqrt(4*g^2 + Delta^2)", "refuted"), ("2*g", "refuted"),
     ("Delta + g^2/Delta", "refuted"), ("2*g + Delta^2/(4*g)", "refuted")],
)
def test_bound_energies(energy: str, verdict: str) -> None:
    """sgn(Delta) sqrt(4 g^2 + Delta^2), from memory (textbook)."""
    assert found(energy, "exactly", about="bound state energy").verdict == verdict


def test_bound_weights_and_what_cannot_be_told() -> None:
    weight = "abs(Delta)/sqrt(4*g^2 + Delta^2)"
    assert found(weight, "exactly", about="bound state weight").verdict == "agrees"
    assert found(f"({weight})^2", "exactly", about="bound state weight").verdict == "refuted"
    weak = lattice("half line", impurity=(0, "Delta"))  # Delta < g here
    finding = found("Delta + g^2/Delta", "exactly", weak, "bound state energy")
    assert finding.verdict == "untested" and "binds no state" in finding.evidence
    assert found(weight, "exactly", lattice(), "bound state weight").verdict == "untested"
    assert found(weight, "as n -> infinity", about="bound state weight").verdict == "untested"
    at_threshold = lattice("half line", impurity=(0, "4*Delta/3"))
    assert found("2*g", "exactly", at_threshold, "bound state energy").verdict == "undecided"
