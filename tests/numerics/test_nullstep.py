"""The null-outcome step and absorbers in balls, against scipy, numpy and published numbers."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import sqrt

import numpy as np
import pytest
import scipy.linalg
import scipy.sparse
import scipy.sparse.linalg
from flint import acb, arb, ctx

from derive.formula.tree import ONE
from derive.numerics import nullstep
from derive.numerics.evaluate import Values
from derive.numerics.slow_contour import choose_slow_circle, enclose_slow_generators
from derive.numerics.system import system
from tests.absorber_cases import pair
from tests.settings_of_graphs import watched


def as_numpy(matrix) -> np.ndarray:
    rows = [[complex(float(c.real.mid()), float(c.imag.mid())) for c in row] for row in matrix.tolist()]
    return np.array(rows)


def chain(sites: int, at) -> nullstep.Measured:
    return nullstep.measured_at(watched("chain", {"sites": sites}, at, (), hopping="-1"), Values({}))


def test_step_and_its_levels_against_scipy() -> None:
    with ctx.workprec(128):
        m = chain(6, [1, 4])
        h, d = as_numpy(m.hamiltonian), as_numpy(m.d)
        step = nullstep.null_step(m, arb(1) / 8, acb(arb(3) / 5))
        expected = (np.eye(6) - 0.4 * d @ d.conj().T) @ scipy.linalg.expm(-1j * h / 8)
        assert np.allclose(as_numpy(step), expected, atol=1e-13)
        levels = nullstep.step_levels(step, arb(1) / 8, 2)
        wanted = sorted((1j * np.log(x) * 8 for x in np.linalg.eigvals(expected) if abs(x) > 0.8), key=np.real)
        ours = sorted((complex(float(x.real.mid()), float(x.imag.mid())) for x in levels), key=np.real)
        assert np.allclose(ours, wanted, atol=1e-10)


def test_what_the_detector_reaches_keeps_the_levels_it_sees() -> None:
    """Ring of six: three of its levels are bright (even under reflection), two are dark (textbook)."""
    setting = watched("ring", {"sites": 6}, 0, (), hopping="-1")
    with ctx.workprec(128):
        m = nullstep.measured_at(setting, Values({}))
        seen, basis = nullstep.reached(m, [True, True, True, False])
        assert seen.size == 4
        assert np.allclose(as_numpy(basis).conj().T @ as_numpy(basis), np.eye(4), atol=1e-13)
        whole = nullstep.bright_levels(nullstep.step_levels(nullstep.null_step(m, arb("0.1"), acb(0.5)), arb("0.1"), 1))
        part = nullstep.step_levels(nullstep.null_step(seen, arb("0.1"), acb(0.5)), arb("0.1"), 1)
        assert len(whole) == len(part) == 3
        for x in part:
            assert any(x.overlaps(y) for y in whole)


def test_trap_on_the_infinite_chain() -> None:
    """Absorbed fraction for Gamma = 1/2, hopping 1, from 0, 1, 2 sites away (check values, computed independently;
    problem: J. Stat. Phys. 154, 1430 (2014)); a finite chain long enough, until nothing has come back."""
    size, time = 501, 120.0
    with ctx.workprec(64):
        matrix = scipy.sparse.csr_matrix(-1j * as_numpy(nullstep.plain(chain(size, size // 2), acb(0.5))))
    for site, absorbed in enumerate((0.5311994413, 0.2954924958, 0.2461248589)):
        psi = np.zeros(size, dtype=complex)
        psi[size // 2 + site] = 1
        half = scipy.sparse.linalg.expm_multiply(matrix * time / 2, psi)
        late = scipy.sparse.linalg.expm_multiply(matrix * time / 2, half)
        before, lost = (1 - np.linalg.norm(x) ** 2 for x in (half, late))
        assert lost + (lost - before) / 3 == pytest.approx(absorbed, abs=1e-4)  # what is to come falls like t^-2


def test_mean_return_is_w_over_eta() -> None:
    """Hexagon at eta = 1/2: w/eta = 4/(1/2) = 8 (check value; w = 4 distinct phases, Commun. Math. Phys. 320, 543
    (2013))."""
    eta = 0.5
    with ctx.workprec(64):
        setting = watched("ring", {"sites": 6}, 0, (), hopping="-1")
        m = nullstep.measured_at(setting, Values({}))
        step = as_numpy(nullstep.null_step(m, arb("0.7"), acb(sqrt(1 - eta))))
    u = scipy.linalg.expm(-1j * as_numpy(m.hamiltonian) * 0.7)
    psi = np.zeros(6, dtype=complex)
    psi[0] = 1
    mean, total = 0.0, 0.0
    for n in range(1, 1200):
        clicked = eta * abs((u @ psi)[0]) ** 2
        mean, total, psi = mean + n * clicked, total + clicked, step @ psi
    assert total == pytest.approx(1, abs=1e-9)
    assert mean == pytest.approx(8, abs=1e-6)


def test_low_energy_length_of_a_half_watched_chain() -> None:
    """psi ~ x + l next to a half line of detectors, Im l = g tau/2 lattice units to first order (check value;
    continuum limit: Phys. Rev. A 103, 032221 (2021)): a box of L sites has k = pi/(L + l)."""
    box, watched_sites = 40, 6
    with ctx.workprec(128):
        m = chain(box + watched_sites, list(range(watched_sites)))
        for tau in (0.02, 0.01):
            step = nullstep.null_step(m, arb(tau), acb(0))
            levels = [1j * np.log(x) / tau for x in np.linalg.eigvals(as_numpy(step)) if abs(x) > 0.5]
            lowest = min(levels, key=lambda e: e.real)
            shift = float(m.hamiltonian[0, 0].real.mid())
            k = np.arccos(-(lowest - shift) / 2)
            length = np.pi / k - box - 1
            assert length.imag == pytest.approx(tau / 2, rel=0.05)


@pytest.mark.parametrize("eta", ["1", "3/4", "1/4"])
def test_samples_of_the_slow_step_against_eigenvectors(eta: str) -> None:
    """numpy: G(tau) from the slow eigenvectors of K against sum tau^k G_k in balls; the rest is O(tau^5)."""
    setting = pair()
    perfect = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
    kept = sqrt(1 - float(Fraction(eta)))
    with ctx.workprec(64):
        circle = choose_slow_circle(arb(kept), 4, 20, 6)
    with ctx.workprec(circle.bits):
        values = Values({"g": acb(1), "phi": acb(arb(1) / 3)})
        s = system(perfect, values)
        m = nullstep.measured_of(s)
        found = [as_numpy(x) for x in enclose_slow_generators(m, s.E0, acb(kept), 4, circle)]
    h, d = as_numpy(m.hamiltonian) + float(s.E0.mid()) * np.eye(6), as_numpy(m.d)
    errors = []
    for tau in (0.02 * (1 - kept), 0.01 * (1 - kept)):
        step = (np.eye(6) - (1 - kept) * d @ d.conj().T) @ scipy.linalg.expm(-1j * tau * h)
        values_, vectors = np.linalg.eig(step)
        slow = np.argsort(-abs(values_))[:4]
        q = np.eye(6) - d @ d.conj().T
        w = q @ vectors[:, slow]
        g = w @ np.diag(1j * np.log(values_[slow]) / tau) @ np.linalg.pinv(w)
        errors.append(np.linalg.norm(g - sum(tau**k * x for k, x in enumerate(found))))
    assert errors[0] < 1e-5
    assert errors[1] < max(errors[0] / 25, 3e-10)
