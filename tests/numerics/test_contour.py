"""The contour's enclosures against matrix logarithms of scipy and mpmath, closed forms, parity and locality."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest
import scipy.linalg
from flint import acb, acb_mat, arb, ctx, fmpq

from derive.errors import NotCovered
from derive.numerics.contour import MAJORANT_AT_HALF, Circle, choose_circle, enclose_generators
from derive.numerics.evaluate import Values
from derive.numerics.probe import enclose_actions
from derive.numerics.system import System, assemble, dagger, dense, projector, system
from tests.numerics.oracle import log10_of
from tests.strategies import random_hermitian, random_pair, setting_of, site

DIGITS = 34


def measured(s_of, order: int, digits: int = DIGITS) -> tuple[System, list[acb_mat]]:  # type: ignore[no-untyped-def]
    """A system made by `s_of()` at the circle's precision, and its G_0 .. G_order."""
    circle = choose_circle(order, digits, 8)
    with ctx.workprec(circle.bits):
        s = s_of()
        return s, enclose_generators(s, order, circle)


def random_system(sites: int, seed: int, rank: int) -> System:
    detector = random_pair(sites, seed) if rank == 2 else (site(seed % sites),)
    return system(setting_of(random_hermitian(sites, seed), detector), Values({}))


def two_levels() -> System:
    """H = g sigma_x with g = 3/7, watched on level 1."""
    g = acb(fmpq(3, 7))
    return assemble((((1, g),), ((0, g),)), (((1, acb(1)),),), (0, 1))


def as_numpy(matrix: acb_mat) -> np.ndarray:
    return np.array([[complex(float(e.real.mid()), float(e.imag.mid())) for e in row] for row in matrix.tolist()])


def reduced_step(s: System, tau: float) -> tuple[np.ndarray, np.ndarray]:
    """(Q U Q on an orthonormal basis of range(Q), that basis), by scipy's expm."""
    H, Q = as_numpy(dense(s)), as_numpy(projector(s))
    _, basis = np.linalg.eigh(Q)
    W = basis[:, len(s.detector) :]
    return W.conj().T @ scipy.linalg.expm(-1j * H * tau) @ W, W


@pytest.mark.parametrize(("seed", "rank"), [(1, 1), (2, 1), (3, 2), (4, 2)])
def test_against_scipy_logm(seed: int, rank: int) -> None:
    """sum_k tau^k G_k = (i/tau) logm(Q U Q) (scipy.linalg.expm and logm); remainder O(tau^5) at h tau = 1/50."""
    s, G = measured(lambda: random_system(6, seed, rank), 4)
    tau = 0.02 / float(s.h)
    step, W = reduced_step(s, tau)
    generator = W @ (1j / tau * scipy.linalg.logm(step)) @ W.conj().T
    series = sum(tau**k * as_numpy(G[k]) for k in range(5))
    assert np.abs(generator - series).max() < 2e-8 * float(s.h)
    without_last = generator - series + tau**4 * as_numpy(G[4])
    assert np.abs(without_last).max() > 10 * np.abs(generator - series).max()


def test_against_mpmath_logm() -> None:
    """The same to 40 digits with mpmath's expm and logm: the remainder falls 2^6 when tau halves."""
    s, G = measured(lambda: random_system(4, 7, 1), 4)
    watched = 7 % 4
    keep = [x for x in range(4) if x != watched]
    gaps = []
    with mpmath.workdps(60):
        H = mpmath.matrix([[mpmath.mpc(*_parts(e)) for e in row] for row in dense(s).tolist()])
        for n in (2000, 4000):
            tau = mpmath.mpf(1) / n
            U = mpmath.expm(-1j * tau * H)
            step = mpmath.matrix([[U[x, y] for y in keep] for x in keep])
            generator = mpmath.logm(step) * (mpmath.mpc(0, 1) / tau)
            gap = 0
            for a, x in enumerate(keep):
                for b, y in enumerate(keep):
                    series = sum(tau**k * mpmath.mpc(*_parts(G[k][x, y])) for k in range(5))
                    gap = max(gap, abs(generator[a, b] - series))
            gaps.append(gap)
    assert gaps[0] < 1e-12
    assert 30 < gaps[0] / gaps[1] < 34  # 2^5


def _parts(e: acb) -> tuple[str, str]:
    with ctx.workprec(300):
        return e.real.mid().str(60, radius=False), e.imag.mid().str(60, radius=False)


def test_two_levels_by_the_cosine() -> None:
    """Q U Q = cos(g tau): tau G = i log cos(g tau), so G_k are the coefficients of i log cos (textbook series).

    log cos x = -x^2/2 - x^4/12 - x^6/45 - 17 x^8/2520 - ...
    """
    _, G = measured(two_levels, 8)
    series = {1: Fraction(-1, 2), 3: Fraction(-1, 12), 5: Fraction(-1, 45), 7: Fraction(-17, 2520)}
    g = Fraction(3, 7)
    for k in range(9):
        q = series.get(k, Fraction(0)) * g ** (k + 1)
        with ctx.workprec(200):
            assert G[k][0, 0].contains(acb(0, arb(fmpq(q.numerator, q.denominator))).mid())
        assert G[k][0, 1].contains(0)
        assert G[k][1, 1].contains(0)


@pytest.mark.parametrize(("seed", "rank"), [(11, 1), (12, 2)])
def test_published_first_terms(seed: int, rank: int) -> None:
    """G_0 = A, G_1 = -(i/2) B (Phys. Rev. A 91, 062115 (2015)); G_2 = ({A,B} - 2 V C V†)/12."""
    circle = choose_circle(2, DIGITS, 6)
    with ctx.workprec(circle.bits):
        s = random_system(6, seed, rank)
        G = enclose_generators(s, 2, circle)
        H, Q = dense(s), projector(s)
        P = acb_mat(6, 6, [acb(int(x == y)) for x in range(6) for y in range(6)]) - Q
        A, V, C = Q * H * Q, Q * H * P, P * H * P
        B = V * dagger(V)
        wanted = [A, B * acb(0, -0.5), (A * B + B * A - V * C * dagger(V) * acb(2)) * acb(fmpq(1, 12))]
        for k in range(3):
            assert G[k].overlaps(wanted[k])
            assert max(log10_of(e.rad()) for e in G[k].entries()) < -DIGITS + 6
        transposed = V * C * V.transpose() * acb(fmpq(1, 12))
        assert not G[2].overlaps(transposed)


@pytest.mark.parametrize("seed", range(20, 24))
def test_parity(seed: int) -> None:
    """G_k Hermitian for even k, anti-Hermitian for odd k; by construction of the rule, so also with a full circle.

    The full-circle sum is made by the probes, which use no reflection.
    """
    circle = choose_circle(5, DIGITS, 5)
    with ctx.workprec(circle.bits):
        s = random_system(5, seed, 1 + seed % 2)
        columns = [enclose_actions(s, 5, circle, [acb(int(x == y)) for x in range(5)]) for y in range(5)]
        for k in range(6):
            for x in range(5):
                for y in range(5):
                    mirrored = columns[x][k][y].conjugate() * (-1) ** k
                    assert columns[y][k][x].overlaps(mirrored)


@pytest.mark.parametrize("seed", [31, 32])
def test_probes_are_columns(seed: int) -> None:
    """G_k v from sparse actions against the dense G_k times v; they share the contour, not the linear algebra."""
    circle = choose_circle(4, DIGITS, 7)
    with ctx.workprec(circle.bits):
        s = random_system(7, seed, 2)
        G = enclose_generators(s, 4, circle)
        v = [acb(x - 3, 2 * x % 5) for x in range(7)]
        actions = enclose_actions(s, 4, circle, v)
        for k in range(5):
            image = G[k] * acb_mat(7, 1, v)
            assert all(actions[k][x].overlaps(image[x, 0]) for x in range(7))
            assert max(log10_of(a.rad()) for a in actions[k]) < -DIGITS + 8


@pytest.mark.parametrize("circle", [(6, 60, 30, 420), (20, 12, 6, 320), (50, 9, 6, 500)])
def test_any_circle_encloses_the_same(circle: tuple[int, int, int, int]) -> None:
    """Radius, terms and samples only cost time: every choice encloses the cosine's coefficients."""
    with ctx.workprec(circle[3]):
        G = enclose_generators(two_levels(), 3, Circle(*circle))
        x = arb(fmpq(3, 7))
        assert G[3][0, 0].overlaps(acb(0, -(x**4) / 12))


def test_a_careless_circle_is_wide_and_not_wrong() -> None:
    """Too few terms and samples: the bounds of tail and aliases widen the balls until they hold the truth."""
    with ctx.workprec(200):
        G = enclose_generators(two_levels(), 3, Circle(6, 5, 4, 200))
        truth = acb(0, -(arb(fmpq(3, 7)) ** 4) / 12)
        assert G[3][0, 0].contains(truth.mid())
        assert log10_of(G[3][0, 0].rad()) > -8


def test_too_few_terms_of_the_log_are_wide_and_not_wrong() -> None:
    """Three terms cannot give the fourth coefficient: the bound on what is left out has to cover it."""
    with ctx.workprec(400):
        G = enclose_generators(two_levels(), 3, Circle(6, 3, 40, 400))
        truth = acb(0, -(arb(fmpq(3, 7)) ** 4) / 12)
        assert G[3][0, 0].contains(truth.mid())
        assert log10_of(G[3][0, 0].rad()) > -3
        assert G[1][0, 0].contains(acb(0, -(arb(fmpq(3, 7)) ** 2) / 2).mid())


def test_majorant_constant() -> None:
    """f(1/2) = -log(2 - e^(1/2)) (mpmath) is below the constant, and c_d <= f(1/2) 2^d for its coefficients."""
    with mpmath.workdps(30):
        f = -mpmath.log(2 - mpmath.exp(mpmath.mpf(1) / 2))
        assert f < mpmath.mpf(MAJORANT_AT_HALF) < f + mpmath.mpf("1e-4")
        for d, c in enumerate(mpmath.taylor(lambda y: -mpmath.log(2 - mpmath.exp(y)), 0, 12)):
            assert c <= f * 2**d


def test_majorant_holds_on_random_systems() -> None:
    """||G_(d-1)|| <= c_d h^d, the fact the alias bound rests on."""
    s, G = measured(lambda: random_system(6, 41, 1), 6)
    coefficients = mpmath.taylor(lambda y: -mpmath.log(2 - mpmath.exp(y)), 0, 7)
    for k in range(1, 7):
        assert np.linalg.norm(as_numpy(G[k]), 2) <= float(coefficients[k + 1]) * float(s.h) ** (k + 1)


def test_bound_on_the_norm() -> None:
    """Gershgorin's h against numpy's eigenvalues."""
    for seed in range(50, 55):
        s, _ = measured(lambda seed=seed: random_system(6, seed, 1), 0)  # type: ignore[misc]
        energies = np.linalg.eigvalsh(as_numpy(dense(s)))
        assert np.abs(energies - float(s.E0)).max() <= float(s.h) + 1e-12


def test_no_detector_coupling_leaves_H() -> None:
    """A watched site without bonds: G_0 = QHQ, everything else vanishes; h = 0 works as well."""
    one, two = acb(1), acb(2)
    rows = (((0, two), (1, one)), ((0, one), (1, -two)), ((2, two),))
    _, G = measured(lambda: assemble(rows, (((2, one),),), (0, 1, 2)), 3)
    assert G[0][0, 1].contains(1)
    assert all(e.contains(0) and log10_of(e.rad()) < -20 for k in (1, 2, 3) for e in G[k].entries())
    _, flat = measured(lambda: assemble((((0, two),), ((1, two),)), (((1, one),),), (0, 1)), 2)
    assert flat[0][0, 0].contains(2)
    assert flat[1][0, 0].contains(0)


def test_highest_order() -> None:
    with pytest.raises(NotCovered):
        measured(two_levels, 65)


def test_locality_on_the_whole_chain() -> None:
    """Order 10 on all 61 sites against the 23 within reach: the same entries, zeros beyond."""
    circle = choose_circle(10, 33, 61)
    with ctx.workprec(circle.bits):
        whole = _chain(range(61), 30)
        part = _chain(range(19, 42), 30)
        G, near = enclose_generators(whole, 10, circle), enclose_generators(part, 10, circle)
        for k in range(1, 11):
            for x in range(61):
                for y in range(61):
                    inside = 19 <= x < 42 and 19 <= y < 42
                    wanted = near[k][x - 19, y - 19] if inside else acb(0)
                    assert G[k][x, y].overlaps(wanted)


def _chain(sites: range, watched: int) -> System:
    rows = tuple(
        tuple((y - sites[0], acb(-1) if y != x else acb(fmpq(1, 3))) for y in (x - 1, x, x + 1) if y in sites)
        for x in sites
    )
    return assemble(rows, (((watched - sites[0], acb(1)),),), tuple(sites))


def test_digits_asked_for_are_delivered() -> None:
    """12 and 60 digits of the same coefficients overlap, and the 60 are there."""
    _, few = measured(lambda: random_system(5, 61, 1), 3, 12)
    _, many = measured(lambda: random_system(5, 61, 1), 3, 60)
    for k in range(4):
        assert few[k].overlaps(many[k])
        assert max(log10_of(e.rad()) for e in many[k].entries()) < -50
