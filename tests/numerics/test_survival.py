"""Survival by repeated squaring against plain repetition in mpmath, closed laws, and an earlier direct measurement."""

from fractions import Fraction as F

import mpmath as mp
import pytest
from flint import acb, arb, ctx, fmpq

from derive.checks.krylov import reach_pattern
from derive.numerics.evaluate import Values
from derive.numerics.spectrum import enclose_reached
from derive.numerics.survival import bits_for_survival, enclose_survival
from derive.numerics.system import system
from tests.settings_of_graphs import cluster, watched


def reached(setting, bits):
    with ctx.workprec(bits):
        return enclose_reached(system(setting, Values({})), reach_pattern(setting))


def unit(n, x):
    return [acb(1) if y == x else acb(0) for y in range(n)]


def survival(setting, start, tau, asks, digits=30):
    size = setting.space.size
    r = reached(setting, 400 + 12 * size)
    with ctx.workprec(bits_for_survival(digits, max(asks), size)):
        return enclose_survival(r, arb(fmpq(tau.numerator, tau.denominator)), [(arb(1), unit(size, start))], asks)


UNEVEN = cluster([(0, 1, "-2"), (1, 2, "i"), (2, 3, "-1"), (3, 0, "-1/2"), (2, 4, "-3")], 1, ())


@pytest.mark.parametrize("start", [0, 1, 4])
def test_against_plain_repetition(start):
    """psi -> Q U psi again and again, mpmath, 40 digits."""
    asks = [1, 2, 3, 7, 50]
    found = survival(UNEVEN, start, F(1, 5), asks)
    with mp.workdps(40):
        H = mp.matrix([[0, -2, 0, -0.5, 0], [-2, 0, 1j, 0, 0], [0, -1j, 0, -1, -3], [-0.5, 0, -1, 0, 0],
                       [0, 0, -3, 0, 0]])
        U = mp.expm(-1j * H / 5, method="taylor")
        psi = mp.matrix([1 if y == start else 0 for y in range(5)])
        for n in range(1, 51):
            psi = U * psi
            psi[1] = 0
            if n in asks:
                square = mp.fsum(abs(a) ** 2 for a in psi)
                assert abs(mp.mpf(found[asks.index(n)].str(32, radius=False)) - square) < 1e-28


def test_two_levels():
    """Q U Q = cos(g tau) (check by hand): S_n = cos(g tau)^(2 n), also after a million asks."""
    setting = watched("chain", {"sites": 2}, 0, (), hopping="-1")
    found = survival(setting, 1, F(1, 1000), [1, 10, 10**6], 40)
    with ctx.workprec(300):
        for s, n in zip(found, (1, 10, 10**6), strict=True):
            assert s.overlaps(arb(fmpq(1, 1000)).cos() ** (2 * n)) and s.rad() < 1e-40


def test_fifty_sites_at_the_end():
    """Direct measurement, N = 50, tau = 1/10, 25 steps from the detector: .2316496, .0782120 (made independently)."""
    setting = watched("chain", {"sites": 50}, 49, (), hopping="-1")
    found = survival(setting, 24, F(1, 10), [16384, 131072])
    assert [round(float(s), 7) for s in found] == [0.2316496, 0.0782120]


@pytest.mark.slow
def test_a_million_asks_on_201_sites_to_50_digits():
    setting = watched("chain", {"sites": 201}, 100, (), hopping="-1")
    r = reached(setting, 2000)
    with ctx.workprec(bits_for_survival(50, 10**6, 100)):
        (found,) = enclose_survival(r, arb(fmpq(1, 10)), [(arb(1), unit(201, 90))], [10**6])
    assert found.rad() < 1e-50
    assert 0.5 < float(found) < 0.51
