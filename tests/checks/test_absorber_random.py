"""Random intervals: averaged evolution against quadrature and published means; planted errors refuted by each road."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.linalg
from flint import acb, acb_mat, arb, ctx

from derive.checks.absorber.road import check_absorber_exact, check_absorber_trend
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import number
from derive.numerics import averaged, nullstep
from derive.numerics.evaluate import Values
from derive.problem.setting import Check, Interval, Letter, Setting
from tests.absorber_cases import ETA, derived, of_efficiency, own
from tests.numerics.test_nullstep import as_numpy
from tests.settings_of_graphs import POSITIVE, watched

QUICK = Check(samples=1)


def random(setting: Setting, law: str, shape: str | None = None) -> Setting:
    return replace(setting, interval=Interval(law=law, shape=None if shape is None else parse(shape)))


CHAIN = watched("chain", {"sites": 4}, 1)
CASES = {
    "exponential": random(CHAIN, "exponential"),
    "gamma": random(CHAIN, "gamma", "5/2"),
    "missed clicks": random(of_efficiency(CHAIN, "3/4"), "gamma", "3"),
    "letters": random(of_efficiency(CHAIN, "eta", ETA, Letter("s", POSITIVE)), "gamma", "s"),
}


@pytest.mark.parametrize("name", CASES)
def test_averaged_equation_is_proved(name: str) -> None:
    claims = tuple(derived(CASES[name]).values())
    exact = check_absorber_exact(CASES[name], claims, QUICK).findings
    trend = check_absorber_trend(CASES[name], claims, QUICK).findings
    assert {(exact[c.id].verdict, trend[c.id].verdict) for c in claims} == {("proved", "agrees")}


def test_exponential_intervals_lose_twice_as_fast() -> None:
    """Factor 1 + 1/s against a fixed interval of the same mean (derived here; measured below by averaging)."""
    assert text(derived(CASES["exponential"])["plain.strength"].value) == "1/tau"
    assert text(derived(CASES["gamma"])["plain.strength"].value) == "10/(7*tau)"


@pytest.mark.parametrize("name", ["exponential", "missed clicks"])
@pytest.mark.parametrize("entry, wrong", [
    ("averaged.dephasing", "0"), ("averaged.dephasing", "tau"), ("averaged.loss", "tau/2"), ("plain.strength", "2/tau"),
])
def test_wrong_coefficients(name: str, entry: str, wrong: str) -> None:
    """The dephasing term left out (and others) is refuted: coherence falls by 2 per halving where 4 is due."""
    claim = replace(derived(CASES[name])[entry], value=parse(wrong))
    assert check_absorber_exact(CASES[name], (claim,), QUICK).findings[claim.id].verdict == "refuted"
    trend = check_absorber_trend(CASES[name], (claim,), QUICK).findings[claim.id]
    assert trend.verdict == "refuted"


def test_average_against_quadrature() -> None:
    """scipy's matrix exponential under Gauss-Laguerre quadrature of the exponential law."""
    with ctx.workprec(128):
        m = nullstep.measured_at(watched("chain", {"sites": 3}, 0, (), hopping="-1"), Values({}))
        rho = acb_mat([[1, acb(0, 1), 0], [acb(0, -1), 2, 1], [0, 1, 0]])
        found = as_numpy(averaged.averaged(m, rho, arb(1) / 16, arb(1)))
    h, start = as_numpy(m.hamiltonian), as_numpy(rho)
    nodes, weights = np.polynomial.laguerre.laggauss(24)
    expected = sum(
        w * scipy.linalg.expm(-1j * h * t / 16) @ start @ scipy.linalg.expm(1j * h * t / 16)
        for t, w in zip(nodes, weights, strict=True)
    )
    assert np.allclose(found, expected, atol=1e-12)


@pytest.mark.parametrize("g_mean", [0.1, 0.2])
def test_two_level_transition_under_a_poisson_clock(g_mean: float) -> None:
    """sum n F_n = 2 + 1/(2 (g <tau>)^2) for exponential intervals (check value; "First-detection time of a quantum
    state under random probing", Phys. Rev. A 103, 022222 (2021))."""
    with ctx.workprec(64):
        m = nullstep.measured_at(watched("chain", {"sites": 2}, 0, (), hopping="-1"), Values({}))
        step = as_numpy(averaged.averaged_step(m, arb(g_mean), arb(1), acb(0)))
    start = np.zeros(4)
    start[3] = 1
    trace = np.array([1, 0, 0, 1])
    survived = np.linalg.solve(np.eye(4) - step, start)  # sum_n S_n, which is the mean of n
    assert float((trace @ survived).real) == pytest.approx(2 + 1 / (2 * g_mean**2), rel=1e-9)


@pytest.mark.parametrize("sites, start, mean", [(3, 1, 1.25), (4, 1, 2.0), (4, 2, 3.5)])
def test_transitions_on_rings_under_a_poisson_clock(sites: int, start: int, mean: float) -> None:
    """sum n F_n for exponential intervals of mean 1/g: ring of 3: 5/4; ring of 4: 2 (neighbour), 7/2 (opposite)
    (check values, computed independently)."""
    with ctx.workprec(64):
        m = nullstep.measured_at(watched("ring", {"sites": sites}, 0, (), hopping="-1"), Values({}))
        step = as_numpy(averaged.averaged_step(m, arb(1), arb(1), acb(0)))
    size = sites * sites
    begin = np.zeros(size)
    begin[start * sites + start] = 1
    trace = np.eye(sites).reshape(size)
    values, vectors = np.linalg.eig(step)  # dark states never click: their part does not count
    weights = np.linalg.solve(vectors, begin.astype(complex))
    fading = abs(values) < 1 - 1e-9
    clicks = (trace @ vectors) * weights
    assert float((clicks[fading] / (1 - values[fading])).sum().real) == pytest.approx(mean, rel=1e-8)


@pytest.mark.parametrize("shape", [1, 3])
def test_inverse_power_and_series_are_the_same(shape: int) -> None:
    with ctx.workprec(128):
        m = nullstep.measured_at(CHAIN, Values({"g": acb(1)}))
        rho = acb_mat([[1, 0, acb(0, 1), 0], [0, 2, 0, 0], [acb(0, -1), 0, 1, 1], [0, 0, 1, 3]])
        powers = averaged.averaged_step(m, arb(1) / 32, arb(shape), acb(1)) * acb_mat([[c] for c in rho.entries()])
        series = averaged.averaged(m, rho, arb(1) / 32, arb(shape)).entries()
        assert all(a.overlaps(b) for a, b in zip(powers.entries(), series, strict=True))


def test_what_random_intervals_do_not_serve() -> None:
    claim = own("absorber strength", parse("3/tau"), absorber="dressed")
    trend = check_absorber_trend(CASES["exponential"], (claim,), QUICK).findings[claim.id]
    assert trend.verdict == "untested"
    assert "random" in trend.evidence


def test_too_long_or_too_large_is_said() -> None:
    m = nullstep.measured_at(watched("chain", {"sites": 10}, 0, (), hopping="-1"), Values({}))
    with pytest.raises(NotCovered, match="at most 8"):
        averaged.averaged_step(m, arb("0.001"), arb(1), acb(0))
    with pytest.raises(NotCovered, match="too long"):
        averaged.averaged(m, nullstep.identity(10), arb(1), arb(1))


def test_a_weak_detector_is_refused() -> None:
    with pytest.raises(NotCovered, match="free of tau"):
        derived(random(of_efficiency(CHAIN, "1 - exp(-2*g*tau)"), "exponential"))


def test_zero_is_a_formula_too() -> None:
    claim = own("averaged dephasing", number(0))
    assert check_absorber_exact(CASES["gamma"], (claim,), QUICK).findings[claim.id].verdict == "refuted"
