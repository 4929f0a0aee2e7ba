"""Values of a flux or a detuning at which fewer phases are seen: cycle spectra, numpy's eigh, mpmath's roots."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest

from derive.algebra.special_zeros import on_circle, on_line
from derive.checks.exceptional.values import check_values_enclosed, check_values_exact
from derive.derivations.exceptional.topic import derive_exceptional
from derive.derivations.turning import approx_number
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Finite, Question, Setting, Wish
from derive.record.said import Claim
from tests.settings_of_graphs import cluster, watched

QUICK = Check(samples=1)


def ring(sites: int) -> Setting:
    return watched("ring", {"sites": sites}, 0, ("g", "phi"), loops=[(tuple(range(sites)), "phi")], start=1)


def ladder(at: int = 0) -> Setting:
    """Two plaquettes with the same flux."""
    loops = [((0, 1, 3, 2), "phi"), ((2, 3, 5, 4), "phi")]
    return watched("ladder", {"rungs": 3}, at, ("g", "phi"), loops=loops, start=5)


def detuned() -> Setting:
    return watched("ring", {"sites": 4}, 0, ("g", "Delta"), start=1, energies={1: "Delta", 3: "g"})


def entries(setting: Setting) -> dict[str, str]:
    found = {}
    for c in derive_exceptional(setting, Wish("exceptional")).claims:
        assert isinstance(c.value, Formula)
        found[c.id.removeprefix("exceptional.letter.")] = text(c.value)
    return found


@pytest.mark.parametrize("sites", [3, 4, 5, 6])
def test_ring_with_a_flux(sites: int) -> None:
    """Energies 2 cos((2 pi k + phi)/N), the cycle's (textbook "Spectra of Graphs", ch. 1): pairs meet at 0 and pi."""
    found = entries(ring(sites))
    assert [found[f"{n}.value"] for n in (1, 2)] == ["0", "pi"] and "3.value" not in found
    for n, phi in ((1, 0.0), (2, np.pi)):
        spectrum = 2 * np.cos((2 * np.pi * np.arange(sites) + phi) / sites)
        assert int(found[f"{n}.phases"]) == len(set(np.round(spectrum, 9)))
        assert found[f"{n}.total"] == "1/2"


@pytest.mark.parametrize("at", [0, 2])
def test_ladder_against_eigenvectors(at: int) -> None:
    """Phases seen by numpy's eigh at the values found, and at 500 others: nowhere else are they fewer."""
    setting = ladder(at)
    found = entries(setting)
    values = {n[0]: approx_number(parse(f)) for n, f in found.items() if n.endswith("value")}
    assert len(values) == (3 if at == 0 else 4)
    for n, phi in values.items():
        assert _seen(setting, phi, at) == int(found[f"{n}.phases"])
    others = np.linspace(-np.pi, np.pi, 501)[1:-1] + 0.0007
    assert all(_seen(setting, phi, at) == 6 for phi in others)


def _seen(setting: Setting, phi: float, at: int) -> int:
    assert isinstance(setting.space, Finite)
    h = np.zeros((6, 6), complex)
    there = Values.at({"g": parse("1")}).with_letter("phi", _ball(phi))
    for x, row in enumerate(setting.space.rows):
        for y, f in row:
            c = enclose(f, there)
            h[x, y] = complex(float(c.real.mid()), float(c.imag.mid()))
    energies, vectors = np.linalg.eigh(h)
    groups: dict[float, float] = {}
    for e, v in zip(energies, vectors.T, strict=True):
        key = next((k for k in groups if abs(k - e) < 1e-9), e)
        groups[key] = groups.get(key, 0.0) + abs(v[at]) ** 2
    return sum(p > 1e-12 for p in groups.values())


def _ball(x: float) -> object:
    from flint import acb

    return acb(x)


def test_a_detuning_in_units_of_the_coupling() -> None:
    """Delta = g makes sites 1 and 3 alike; Delta = -g makes a dark superposition across both paths; by hand."""
    found = entries(detuned())
    assert [found["1.value"], found["2.value"]] == ["-g", "g"] and found["2.total"] == "1/2"


@pytest.mark.parametrize(
    "setting", [ring(4), ring(6), ladder(), detuned()], ids=["square", "hexagon", "ladder", "detuned"]
)
def test_entries_are_proved(setting: Setting) -> None:
    report = answer(Question(setting, (Wish("exceptional"),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"}


@pytest.mark.parametrize(
    ("about", "which", "value", "roads"),
    [
        ("exceptional value", 1, "pi/3", ("exact", "enclosure")),
        ("exceptional value", 1, "pi", ("enclosure",)),  # special, but the second one
        ("phases at exceptional value", 1, "4", ("exact", "enclosure")),
        ("total probability at exceptional value", 2, "1", ("exact", "enclosure")),
        ("total probability at exceptional value", 2, "1/2 + phi/7", ("exact", "enclosure")),  # phi is pi there
    ],
)
def test_wrong_claims_are_refuted(about: str, which: int, value: str, roads: tuple[str, ...]) -> None:
    setting = ring(4)
    derived = derive_exceptional(setting, Wish("exceptional")).claims
    mine = Claim("claim.mine", "exceptional", Quantity(about, (("value", which),)), parse(value), origin="user")
    for name, road in (("exact", check_values_exact), ("enclosure", check_values_enclosed)):
        found = road(setting, (*derived, mine), QUICK).findings.get("claim.mine")
        assert (found is not None and found.verdict == "refuted") == (name in roads)


def test_a_number_beyond_the_last_value_is_not_judged() -> None:
    third = Quantity("exceptional value", (("value", 3),))
    mine = Claim("claim.mine", "exceptional", third, parse("pi"), origin="user")
    found = check_values_enclosed(ring(4), (mine,), QUICK).findings["claim.mine"]
    assert found.verdict == "untested" and "2 values are found" in found.evidence


def test_conditions_in_two_letters_are_told() -> None:
    loops = [((0, 1, 2, 3), "phi")]
    setting = watched("ring", {"sites": 4}, 0, ("g", "phi", "Delta"), loops=loops, start=1, energies={1: "Delta"})
    with pytest.raises(NotCovered, match="no closed form"):
        derive_exceptional(setting, Wish("exceptional"))


@pytest.mark.parametrize(
    "coefficients",
    [[-1, 0, 1], [1, 0, 0, 0, 1], [3, -2, 3], [1, 1, 3, 1, 1], [2, 1, 0, -3, 0, 1, 2], [1, -2, -3, -2, 1]],
)
def test_zeros_on_the_circle_against_mpmath(coefficients: list[int]) -> None:
    """Angles of mpmath's roots of modulus 1, and the formulas' own values."""
    roots = mpmath.polyroots([mpmath.mpf(c) for c in reversed(coefficients)], maxsteps=200, extraprec=200)
    wanted = sorted({round(float(mpmath.arg(r)), 9) for r in roots if abs(abs(r) - 1) < 1e-12})
    found = on_circle([list(map(Fraction, coefficients))])
    assert np.allclose([z.place for z in found], wanted, atol=1e-8)
    for z in found:
        if z.formula is not None:
            assert abs(float(enclose(z.formula, Values({})).real.mid()) - z.place) < 1e-12


def test_real_zeros_without_a_formula_are_counted() -> None:
    """(x^2 - 2)(x^3 - 3 x + 1): the cubic's are 2 cos(2 pi k/9) by hand."""
    found = on_line([list(map(Fraction, p)) for p in ([-2, 0, 1], [1, -3, 0, 1])])
    assert [z.formula is None for z in found] == [True, False, True, False, True]
    cubic = sorted(2 * np.cos(2 * np.pi * k / 9) for k in (1, 2, 4))
    assert np.allclose([z.place for z in found if z.formula is None], cubic)


def test_a_value_that_is_no_fraction_of_pi() -> None:
    """Six sites with a short cut, a phase on two bonds: numpy sees five energies at acos(-1/4), six next to it."""
    ring_bonds = [(x, (x + 1) % 6, "-g") for x in range(1, 6)]
    setting = cluster([(0, 1, "-g*exp(i*phi)"), *ring_bonds, (1, 3, "-g*exp(i*phi)")], 5, ("g", "phi"))
    found = entries(setting)
    assert [found[f"{n}.value"] for n in range(1, 7)] == ["-acos(-1/4)", "-pi/3", "0", "pi/3", "acos(-1/4)", "pi"]
    assert "1.phases" not in found and found["2.phases"] == "5"
    assert _seen(setting, float(np.arccos(-0.25)), 5) == 5 and _seen(setting, float(np.arccos(-0.25)) + 1e-3, 5) == 6
    report = answer(Question(setting, (Wish("exceptional"),), check=QUICK))
    verdicts = {j.claim.id: j.verdict for j in report.judged}
    assert verdicts["exceptional.letter.5.value"] == "agrees" and set(verdicts.values()) == {"agrees", "proved"}
