"""Absorbers derived: closed forms against published and independent numbers, maps against their words."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import sqrt

import numpy as np
import pytest

from derive.derivations.absorber.topic import derive_absorber
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.formula.tree import replace as put
from derive.problem.setting import Family, Wish
from derive.record.said import Matrix
from tests.absorber_cases import ETA, derived, detuned, of_efficiency, pair, ring
from tests.derivations.test_generator import columns
from tests.exact.test_field import value
from tests.settings_of_graphs import watched

CHAIN = watched("chain", {"sites": 5}, 2)


def at_point(f: Formula, at: dict[str, float]) -> complex:
    return complex(value(put(f, {name: number(Fraction(str(x))) for name, x in at.items()})))


def closed(setting, name: str) -> str:
    found = derived(setting)[name].value
    assert isinstance(found, Formula)
    return text(found)


def test_perfect_detector() -> None:
    """Gamma tau = 2 and the factor 4: "Non-Hermitian and Zeno limit of quantum systems under rapid measurements",
    Phys. Rev. A 102, 012218 (2020).  The dressed and ancilla numbers are derived here."""
    assert closed(CHAIN, "plain.strength") == "2/tau"
    assert closed(CHAIN, "return_factor") == "4"
    assert closed(CHAIN, "dressed.strength") == "3/tau"
    assert closed(CHAIN, "dressed.coupling") == "sqrt(3/2)"
    assert closed(CHAIN, "ancilla.coupling") == "2*sqrt(3)/tau"
    assert closed(CHAIN, "ancilla.loss") == "6/tau"


@pytest.mark.parametrize("eta", [0.25, 0.3, 0.75, 0.99])
def test_efficiency_closed_forms(eta: float) -> None:
    """tanh and coth of kappa/2 evaluated by floats, kappa = -log(1 - eta)/2; factor 4/(1 + sqrt(1-eta))^2."""
    kappa = -0.5 * np.log1p(-eta)
    th = np.tanh(kappa / 2)
    s2 = 1 / (1 - th**2 / 3)
    wanted = {
        "plain.strength": 2 * th / 0.1, "dressed.strength": 2 * th * s2 / 0.1, "dressed.coupling": sqrt(s2),
        "ancilla.loss": 6 / th / 0.1, "return_factor": 4 / (1 + sqrt(1 - eta)) ** 2,
    }
    for spelled in (str(eta), "eta"):
        found = derived(of_efficiency(CHAIN, spelled, ETA))
        for name, expected in wanted.items():
            formula = found[name].value
            assert isinstance(formula, Formula)
            at = {"eta": eta, "tau": 0.1}
            assert complex(at_point(formula, at)) == pytest.approx(expected, rel=1e-12), (name, spelled)


def test_error_orders() -> None:
    orders = {
        kind: (closed(detuned(), f"{kind}.energy_error"), closed(detuned(), f"{kind}.rate_error"))
        for kind in ("plain", "dressed", "ancilla", "cascade")
    }
    assert orders == {
        "plain": ("O(tau^2)", "O(tau^3)"), "dressed": ("O(tau^4)", "O(tau^3)"),
        "ancilla": ("O(tau^4)", "O(tau^5)"), "cascade": ("O(tau^6)", "O(tau^7)"),
    }


@pytest.mark.parametrize("setting", [detuned("3/4"), pair("1/4"), ring()], ids=["detuned", "pair", "ring"])
def test_maps_are_the_words_they_were_found_as(setting) -> None:
    """L = 1 - tau^2 B_0/12 - (i tau^3/24) coth(kappa/2) (B_0 A - B_1), evaluated with numpy matrices."""
    point = {"g": 0.7, "Delta": 0.3, "phi": 0.4, "tau": 0.1}
    at = {"g": 0.7, "Delta": 0.3, "phi": 0.4}
    h, d = _at(hamiltonian_matrix(setting), at), columns(setting)
    q = np.eye(h.shape[0]) - d @ d.conj().T
    a, v, c = q @ h @ q, q @ h @ d, d.conj().T @ h @ d
    b0, b1 = v @ v.conj().T, v @ c @ v.conj().T
    eta = float(complex(value(setting.detectors[0].efficiency)).real)
    coth = (1 + sqrt(1 - eta)) / (1 - sqrt(1 - eta))
    tau = point["tau"]
    left = q - tau**2 * b0 / 12 - 1j * tau**3 / 24 * coth * (b0 @ a - b1)
    right = q - tau**2 * b0 / 12 - 1j * tau**3 / 24 * coth * (a @ b0 - b1)
    found = derived(setting)
    assert np.allclose(_at(found["ancilla.map.left"].value, point), left, atol=1e-14)
    assert np.allclose(_at(found["ancilla.map.right"].value, point), right, atol=1e-14)
    dressed = q - tau**2 * b0 / 12
    assert np.allclose(_at(found["dressed.map.left"].value, point), dressed, atol=1e-14)
    assert np.allclose(_at(found["plain.map.left"].value, point), q, atol=1e-14)


def hamiltonian_matrix(setting) -> Matrix:
    return Matrix(setting.space.size, setting.space.rows)


def _at(matrix, at) -> np.ndarray:
    out = np.zeros((matrix.size, matrix.size), dtype=complex)
    for x, y, f in matrix.entries():
        out[x, y] = complex(at_point(f, at))
    return out


def test_perfect_detector_holds_nothing_back() -> None:
    names = derived(detuned())
    assert "ancilla.map.to_detector" not in names
    assert "ancilla.map.to_detector" in derived(detuned("3/4"))


def test_cascade_only_for_rank_one() -> None:
    assert not any(name.startswith("cascade") for name in derived(pair()))
    notes = derive_absorber(pair(), Wish("absorber")).notes
    assert any("rank one" in "".join(p for p in note if isinstance(p, str)) for note in notes)


def test_weak_detector_has_orders_but_no_maps() -> None:
    """kappa = g tau: the measurement is continuous, energies and rates go together."""
    found = derived(of_efficiency(CHAIN, "1 - exp(-2*g*tau)"))
    assert text(found["plain.rate_error"].value) == "O(tau^2)"
    assert text(found["ancilla.energy_error"].value) == "O(tau^4)"
    assert not any("map" in name for name in found)


def test_every_step_that_earns_names_a_claim() -> None:
    for setting in (detuned(), pair("eta", ETA)):
        d = derive_absorber(setting, Wish("absorber"))
        ids = {c.id for c in d.claims}
        earned = [s.earns for s in d.steps if s.earns]
        assert set(earned) == ids
        assert len(earned) == len(set(earned))


@pytest.mark.parametrize("change, words", [
    ({"space": Family("chain", (("sites", parse("2*g")),), parse("-g"))}, "finite graph"),
    ({"detectors": CHAIN.detectors * 2}, "one detector"),
])
def test_what_is_not_served_is_one_sentence(change, words) -> None:
    with pytest.raises(NotCovered, match=words):
        derive_absorber(replace(CHAIN, **change), Wish("absorber"))


def test_other_cascades_and_growing_efficiencies_are_refused() -> None:
    with pytest.raises(NotCovered, match="cascade"):
        derive_absorber(CHAIN, Wish("absorber", (("cascade", 11),)))
    with pytest.raises(NotCovered, match="vanishes with tau"):
        derive_absorber(of_efficiency(CHAIN, "1/2 + g*tau"), Wish("absorber"))
