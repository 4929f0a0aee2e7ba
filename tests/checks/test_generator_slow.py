"""The slow generator of an imperfect detector: two exact algorithms, samples of the step, levels; planted errors."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.linalg

from derive.checks.judge import verdict_of
from derive.checks.roads import ROADS
from derive.derivations.generator.slow import derive_any_generator
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import I_UNIT, letter, number, times
from derive.problem.setting import Check, Letter, Setting, Wish
from derive.record.said import Claim
from tests.absorber_cases import ETA, altered, detuned, of_efficiency, pair, ring
from tests.derivations.test_absorber import _at, hamiltonian_matrix
from tests.derivations.test_generator import columns
from tests.settings_of_graphs import POSITIVE, watched

QUICK = Check(samples=1)


def derived(setting: Setting, order: int = 3) -> dict[str, Claim]:
    return {c.id: c for c in derive_any_generator(setting, Wish("generator", (("order", order),))).claims}


def seen(setting: Setting, *claims: Claim) -> dict[str, dict[str, str]]:
    found: dict[str, dict[str, str]] = {c.id: {} for c in claims}
    for road in ROADS["generator"].values():
        for name, finding in road(setting, claims, QUICK).findings.items():
            found[name][finding.road] = finding.verdict
    return found


@pytest.mark.parametrize("setting", [detuned("3/4"), pair("1/4"), ring("1/3"), detuned("eta", ETA)],
                         ids=["detuned", "pair", "ring", "letter"])
def test_all_roads_agree(setting: Setting) -> None:
    found = seen(setting, *derived(setting).values())
    assert found["generator.truncated"] == {"exact": "proved", "coefficient": "agrees", "trend": "agrees"}
    assert all(found[f"generator.{k}"] == {"exact": "proved", "coefficient": "agrees"} for k in range(4))


@pytest.mark.parametrize("order", [1, 2, 3])
def test_a_perfect_detector_s_generator_is_refuted(order: int) -> None:
    """The coefficient without coth(kappa/2) in it."""
    setting = detuned("3/4")
    wrong = replace(derived(setting)[f"generator.{order}"], value=derived(detuned())[f"generator.{order}"].value)
    assert set(seen(setting, wrong)[wrong.id].values()) == {"refuted"}


def test_one_entry_doubled_is_refuted_by_each_road() -> None:
    setting = pair("1/4")
    claim = derived(setting)["generator.2"]
    place = next((x, y) for x, y, _ in claim.value.entries())
    wrong = altered(claim, lambda x, y, f: times(number(2), f) if (x, y) == place else f)
    assert seen(setting, wrong)[wrong.id] == {"exact": "refuted", "coefficient": "refuted"}


def test_regular_at_efficiency_one() -> None:
    """eta = 1 put into the letter gives the perfect detector's generator (evaluated just below 1 by floats)."""
    low, perfect = derived(detuned("eta", ETA)), derived(detuned())
    at = {"g": 0.7, "Delta": 0.3, "phi": 0.4}
    for k in range(4):
        near = _at(low[f"generator.{k}"].value, {**at, "eta": 1})
        assert np.allclose(near, _at(perfect[f"generator.{k}"].value, at), atol=1e-13)


def test_first_order_is_half_coth() -> None:
    entries = {(x, y): text(f) for x, y, f in derived(detuned("3/4"))["generator.1"].value.entries()}
    assert entries[2, 2] == "-3*i*g^2/2"


def test_slow_states_evolve_by_it() -> None:
    """scipy: K^n of a start in the slow subspace against exp(-i G t) of its part off the detector; O(tau^5) a step."""
    setting = watched("chain", {"sites": 4}, 1, (), hopping="-1")
    setting = of_efficiency(setting, "1/2")
    h, d = _at(hamiltonian_matrix(setting), {}), columns(setting)
    p = d @ d.conj().T
    q = np.eye(4) - p
    found = derived(setting, 4)
    errors = []
    for tau in (0.016, 0.008):
        step = (np.eye(4) - (1 - np.sqrt(0.5)) * p) @ scipy.linalg.expm(-1j * tau * h)
        slow = np.linalg.matrix_power(step, 400) @ q[:, [0]]  # only slow states are left, 0.7^400 of the rest
        g = sum(tau**k * _at(found[f"generator.{k}"].value, {}) for k in range(5))
        ours = scipy.linalg.expm(-1j * tau * g) @ (q @ slow)
        errors.append(np.linalg.norm(q @ step @ slow - q @ ours) / np.linalg.norm(slow))
    assert errors[0] < 1e-6
    assert errors[0] / errors[1] > 2**5.7


GAMMA = Letter("gamma", POSITIVE)


@pytest.mark.parametrize("eta", ["1 - exp(-2*gamma*tau)", "4*gamma*tau"])
def test_weak_measurement_on_all_sites(eta: str) -> None:
    """kappa in proportion to tau: log of K on all sites, three roads."""
    setting = pair(eta, GAMMA)
    found = seen(setting, *derived(setting).values())
    assert found["generator.truncated"] == {"exact": "proved", "coefficient": "agrees", "trend": "agrees"}
    assert all(found[f"generator.{k}"] == {"exact": "proved", "coefficient": "agrees"} for k in range(4))


def test_weak_measurement_against_scipy() -> None:
    """logm of K (scipy) against G_0 + tau G_1 + tau^2 G_2; the error falls by 8 per halving."""
    setting = of_efficiency(watched("chain", {"sites": 4}, 1, (), hopping="-1"), "1 - exp(-2*tau)")
    h, d = _at(hamiltonian_matrix(setting), {}), columns(setting)
    found, errors = derived(setting, 2), []
    for tau in (0.02, 0.01):
        step = (np.eye(4) - (1 - np.exp(-tau)) * d @ d.conj().T) @ scipy.linalg.expm(-1j * tau * h)
        ours = sum(tau**k * _at(found[f"generator.{k}"].value, {}) for k in range(3))
        errors.append(np.linalg.norm(1j / tau * scipy.linalg.logm(step) - ours))
    assert errors[0] < 1e-5
    assert errors[0] / errors[1] == pytest.approx(8, rel=0.05)


def test_weak_measurement_planted_errors() -> None:
    """The commutator's sign turned; the loss doubled."""
    setting = detuned("1 - exp(-2*gamma*tau)", GAMMA)
    claims = derived(setting, 1)
    turned = altered(claims["generator.1"], lambda x, y, f: -f)
    assert seen(setting, turned)[turned.id] == {"exact": "refuted", "coefficient": "refuted"}
    doubled = altered(claims["generator.0"], lambda x, y, f: f - I_UNIT * letter("gamma") if x == y == 3 else f)
    assert seen(setting, doubled)[doubled.id] == {"exact": "refuted", "coefficient": "refuted"}


def test_an_efficiency_that_stays_and_moves_is_refused() -> None:
    with pytest.raises(NotCovered, match="vanishes with tau"):
        derived(of_efficiency(detuned(), "1/2 + g*tau"))


def test_verdict_is_proved() -> None:
    found = derived(ring("3/4"))
    verdicts = []
    for claim in found.values():
        findings = [r(ring("3/4"), (claim,), QUICK).findings.get(claim.id) for r in ROADS["generator"].values()]
        verdicts.append(verdict_of(claim.id, tuple(f for f in findings if f is not None)))
    assert set(verdicts) == {"proved"}
