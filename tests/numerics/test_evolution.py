"""The experiment in balls: exponentials against scipy, detection against textbook two-level results."""

from __future__ import annotations

from fractions import Fraction
from itertools import islice

import numpy as np
import pytest
import scipy.linalg
from flint import acb, acb_mat, arb, ctx, fmpq

from derive.errors import NotCovered
from derive.numerics.evaluate import Values
from derive.numerics.evolution import (
    ask_by_matrix,
    centred,
    evolve_and_ask,
    exponential_action,
    linear_action,
    norm,
    squared_norm,
    step_matrix,
    survival,
)
from derive.numerics.system import System, assemble, dense, system
from tests.numerics.oracle import log10_of
from tests.numerics.test_contour import as_numpy
from tests.strategies import random_hermitian, random_pair, setting_of


def two_levels(g: Fraction = Fraction(3, 7)) -> System:
    hop = acb(fmpq(g.numerator, g.denominator))
    return assemble((((1, hop),), ((0, hop),)), (((1, acb(1)),),), (0, 1))


def random_system(sites: int, seed: int) -> System:
    return system(setting_of(random_hermitian(sites, seed), random_pair(sites, seed)), Values({}))


def as_vector(state: list[acb]) -> np.ndarray:
    return np.array([complex(float(a.real.mid()), float(a.imag.mid())) for a in state])


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_exponential_action_against_scipy(seed: int) -> None:
    """exp(-i H t) v against scipy.linalg.expm, sparse rows and dense matrix alike."""
    with ctx.workprec(160):
        s = random_system(6, seed)
        v = [acb(x, 1 - x) for x in range(6)]
        rows = [tuple((y, f * acb(0, -1)) for y, f in row) for row in s.rows]
        found = exponential_action(linear_action(rows), s.h + abs(s.E0), v)
        wanted = scipy.linalg.expm(-1j * as_numpy(dense(s))) @ as_vector(v)
        assert np.abs(as_vector(found) - wanted).max() < 1e-12
        assert max(log10_of(a.rad()) for a in found) < -35


def test_remainder_is_in_the_radius() -> None:
    """exp(3) applied with a goal of 30 bits only: the ball still holds e^3."""
    with ctx.workprec(30):
        (found,) = exponential_action(lambda w: [3 * a for a in w], arb(3), [acb(1)])
    with ctx.workprec(200):
        assert found.real.contains(arb(3).exp().mid())


def test_too_large_an_exponent_is_refused() -> None:
    with pytest.raises(NotCovered):
        exponential_action(lambda w: w, arb(100), [acb(1)])


def test_two_level_transition() -> None:
    """First detection from the other level: F_n = s c^(n-1), so S_n = c^n, c = cos^2 g tau (derived in two lines)."""
    with ctx.workprec(160):
        tau = arb(fmpq(1, 3))
        found = survival(two_levels(), tau, [acb(1), acb(0)], 12)
        c = (arb(fmpq(3, 7)) * tau).cos() ** 2
        for n, S in enumerate(found):
            assert S.overlaps(c**n)
            assert log10_of(S.rad()) < -38


def test_two_level_return() -> None:
    """Start on the detector: F_1 = c, F_n = s^2 c^(n-2); S_n = s c^(n-1) for n >= 1."""
    with ctx.workprec(160):
        tau = arb(fmpq(1, 3))
        found = survival(two_levels(), tau, [acb(0), acb(1)], 9)
        c = (arb(fmpq(3, 7)) * tau).cos() ** 2
        assert found[1].overlaps(1 - c)
        for n in range(1, 10):
            assert found[n].overlaps((1 - c) * c ** (n - 1))


@pytest.mark.parametrize("seed", [5, 6])
def test_asking_against_numpy_powers(seed: int) -> None:
    """(QU)^n psi against numpy's matrix power; both ways to step."""
    with ctx.workprec(160):
        s, tau = random_system(6, seed), arb(fmpq(1, 9))
        psi = [acb(1, x) for x in range(6)]
        by_rows = next(islice(evolve_and_ask(s, tau, psi), 19, None))
        by_matrix = next(islice(ask_by_matrix(s, step_matrix(s, tau), psi), 19, None))
        D = np.zeros((6, 2), complex)
        for n, vector in enumerate(s.detector):
            for x, a in vector:
                D[x, n] = complex(float(a.real.mid()), float(a.imag.mid()))
        H = as_numpy(dense(s)) - float(s.E0) * np.eye(6)
        step = (np.eye(6) - D @ D.conj().T) @ scipy.linalg.expm(-1j * H / 9)
        wanted = np.linalg.matrix_power(step, 20) @ as_vector(psi)
        assert np.abs(as_vector(by_rows) - wanted).max() < 1e-11
        assert all(a.overlaps(b) for a, b in zip(by_rows, by_matrix, strict=True))


def test_radii_add_and_do_not_multiply() -> None:
    """After 2000 asks with a plane watched the state is still known to 25 digits at 120 bits."""
    with ctx.workprec(120):
        s = random_system(5, 8)
        state = next(islice(evolve_and_ask(s, arb(fmpq(1, 50)), [acb(1)] * 5), 1999, None))
        assert max(log10_of(a.rad()) for a in state) < -25


def test_centred_covers_the_ball() -> None:
    v = [acb(arb(1, "1e-3"), arb(2, "2e-3")), acb(arb(0, "2e-3"), 0)]
    middle, r = centred(v)
    assert all(a.is_exact() for a in middle)
    assert r >= arb("3e-3").mid()
    assert norm(middle) > 2
    assert squared_norm(middle).contains(5)
    assert acb_mat(2, 1, v).contains(acb_mat(2, 1, middle))
