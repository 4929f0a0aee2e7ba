"""The derived generator against numbers computed without it: logarithms of the measured step, parity, locality."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
import scipy.linalg

from derive.derivations.generator.topic import derive_generator, generator_terms
from derive.formula.text import text
from derive.formula.tree import letter
from derive.problem.setting import Setting, Wish
from derive.record.said import Matrix
from tests.exact.test_field import value
from tests.strategies import POSITIVE, chain, random_hermitian, random_pair, setting_of, site


def complex_matrix(matrix: Matrix) -> np.ndarray:
    out = np.zeros((matrix.size, matrix.size), dtype=complex)
    for x, y, f in matrix.entries():
        out[x, y] = complex(value(f))
    return out


def hamiltonian(setting: Setting) -> np.ndarray:
    return complex_matrix(Matrix(setting.space.size, setting.space.rows))


def columns(setting: Setting) -> np.ndarray:
    vectors = setting.detectors[0].vectors
    out = np.zeros((setting.space.size, len(vectors)), dtype=complex)
    for a, v in enumerate(vectors):
        for x, f in v:
            out[x, a] = complex(value(f))
    return out


CASES = {
    "chain, detuned": chain(6, 2, detuning=True),
    "dense complex, one site": setting_of(random_hermitian(5, 3), (site(1),)),
    "complex, rank two, spread": setting_of(random_hermitian(7, 5), random_pair(7, 5)),
    "two sites": setting_of(random_hermitian(6, 8), (site(0), site(3))),
}


@pytest.mark.parametrize("name", CASES)
def test_partial_sums_reach_the_logarithm_of_the_measured_step(name: str) -> None:
    """Outside oracle: scipy.linalg.expm and logm of Q U(tau) Q on range(Q).

    The remainder after order 6 at h tau = 0.05 is below 2e-9 (majorant with 47293/20160 at degree 8); logm carries
    about 1e-12/tau.
    """
    setting = CASES[name]
    h_matrix = hamiltonian(setting)
    tau = 0.05 / np.linalg.norm(h_matrix, 2)
    off = scipy.linalg.null_space(columns(setting).conj().T)
    step = off.conj().T @ scipy.linalg.expm(-1j * tau * h_matrix) @ off
    measured = off @ (1j / tau * scipy.linalg.logm(step)) @ off.conj().T
    matrices = generator_terms(setting, 6).matrices
    derived = sum(tau**k * complex_matrix(m) for k, m in enumerate(matrices))
    scale = np.linalg.norm(h_matrix, 2)
    assert np.abs(derived - measured).max() < 3e-9 * scale
    spoilt = derived + tau**2 * complex_matrix(matrices[2]) / 100  # the check can fail
    assert np.abs(spoilt - measured).max() > 3e-9 * scale


def test_thirty_digits_against_a_multiprecision_logarithm() -> None:
    """Outside oracle: mpmath.expm and logm at 60 digits, chain of four, tau = 10^-6, order 4: error of order 10^-30."""
    setting = chain(4, 1, detuning=True)
    with mpmath.workdps(60):
        n, keep = 4, [0, 2, 3]
        h_matrix = mpmath.matrix(n, n)
        for x, row in enumerate(setting.space.rows):
            for y, f in row:
                h_matrix[x, y] = value(f)
        tau = mpmath.mpf(10) ** -6
        step = mpmath.expm(-1j * tau * h_matrix)
        cut = mpmath.matrix(3, 3)
        for a, x in enumerate(keep):
            for b, y in enumerate(keep):
                cut[a, b] = step[x, y]
        log = mpmath.logm(cut)
        worst = mpmath.mpf(0)
        found = [{(x, y): f for x, y, f in m.entries()} for m in generator_terms(setting, 4).matrices]
        for a, x in enumerate(keep):
            for b, y in enumerate(keep):
                total = sum(tau**k * value(m[x, y]) for k, m in enumerate(found) if (x, y) in m)
                worst = max(worst, abs(total - 1j * log[a, b] / tau))
        assert worst < mpmath.mpf(10) ** -28


@pytest.mark.parametrize("name", CASES)
def test_even_orders_are_hermitian_and_odd_ones_anti_hermitian(name: str) -> None:
    """Parity (section "Parity" of the method: at tau = i x the step is positive definite)."""
    for k, m in enumerate(generator_terms(CASES[name], 5).matrices):
        g = complex_matrix(m)
        assert np.allclose(g, (-1) ** k * g.conj().T, atol=1e-12)
        assert k > 1 or np.abs(g).max() > 0


def test_first_terms_in_closed_form() -> None:
    """A - (i tau/2) B + (tau^2/12)({A, B} - 2 V C V†): Phys. Rev. A 91, 062115 (2015) for the first two terms, from
    memory; the third by hand.  Computed here in floating point from H alone."""
    setting = CASES["complex, rank two, spread"]
    h_matrix, d = hamiltonian(setting), columns(setting)
    q = np.eye(7) - d @ d.conj().T
    a, v, c = q @ h_matrix @ q, q @ h_matrix @ d, d.conj().T @ h_matrix @ d
    b = v @ v.conj().T
    wanted = [a, -0.5j * b, (a @ b + b @ a - 2 * v @ c @ v.conj().T) / 12]
    for m, w in zip(generator_terms(setting, 2).matrices, wanted, strict=True):
        assert np.allclose(complex_matrix(m), w, atol=1e-12)


def test_two_levels() -> None:
    """Q U Q = cos(g tau) (textbook), so G = (i/tau) log cos(g tau) = -i g^2 tau/2 - i g^4 tau^3/12 - i g^6 tau^5/45."""
    g = letter("g")
    setting = setting_of([{1: -g}, {0: -g}], (site(0),), g=POSITIVE)
    shown = [
        {(x, y): text(f) for x, y, f in m.entries()} for m in generator_terms(setting, 5).matrices
    ]
    assert shown == [{}, {(1, 1): "-i*g^2/2"}, {}, {(1, 1): "-i*g^4/12"}, {}, {(1, 1): "-i*g^6/45"}]


def test_support_grows_one_site_an_order() -> None:
    """Locality: G_k reaches k sites from the detector and no further, and does reach that far."""
    setting = chain(15, 7)
    for k, m in enumerate(generator_terms(setting, 6).matrices):
        if k:
            reach = max(abs(x - 7) for x, _, _ in m.entries())
            assert reach == k or (k % 2 and reach == k - 1)


def test_what_lies_far_away_plays_no_part() -> None:
    near, far = generator_terms(chain(31, 15), 4), generator_terms(chain(301, 150), 4)
    for a, b in zip(near.matrices[1:], far.matrices[1:], strict=True):
        assert [(x - 15, y - 15, f) for x, y, f in a.entries()] == [(x - 150, y - 150, f) for x, y, f in b.entries()]


def test_a_large_matrix_shares_its_rows() -> None:
    m = generator_terms(chain(2001, 1000), 2).matrices[0]
    assert len(m.patch) == 3 and len(m.base) == 2001
    assert (1000, 999) not in {(x, y) for x, y, _ in m.entries()}


def test_every_claim_is_earned_by_a_step() -> None:
    derivation = derive_generator(chain(9, 4, detuning=True), Wish("generator", (("order", 4),)))
    earned = [s.earns for s in derivation.steps if s.earns]
    assert sorted(earned) == sorted(c.id for c in derivation.claims)
    assert [c.id for c in derivation.claims] == [
        *(f"generator.universal.{k}" for k in range(5)), *(f"generator.{k}" for k in range(5)), "generator.truncated"
    ]
    assert text(derivation.claims[1].value) == "-i*B_0/2"  # type: ignore[arg-type]


def test_order_zero_is_the_cut_alone() -> None:
    derivation = derive_generator(chain(3, 1), Wish("generator", (("order", 0),)))
    assert [c.id for c in derivation.claims] == ["generator.universal.0", "generator.0", "generator.truncated"]
    assert derivation.claims[-1].kind.phrase == "up to O(tau)"


def test_floats_never_enter() -> None:
    with pytest.raises(TypeError):

        letter("g") * 0.5  # type: ignore[operator]


def test_what_was_divided_by_is_named() -> None:
    g = letter("g")
    setting = setting_of([{1: 1 / (g - 1)}, {0: 1 / (g - 1), 2: 1 / (g + 1)}, {1: 1 / (g + 1)}], (site(1),), g=POSITIVE)
    claims = derive_generator(setting, Wish("generator", (("order", 1),))).claims
    assert claims[-1].valid_for.endswith("; where g - 1 is not 0")
