"""First detection by division of series: against the experiment itself, the plain recursion, and published numbers."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from flint import arb, ctx

from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.numerics.acceleration import approx_constants, approx_exponent
from derive.numerics.evaluate import Values
from derive.numerics.inversion import enclose_first_detection, predicted_loss
from derive.numerics.lattice import enclose_returns, waves
from derive.problem.setting import Setting
from tests.lattices import by_evolution, lattice


def sequences(setting: Setting, gt: str) -> Callable[[int], tuple[list[arb], list[arb]]]:
    return lambda count: enclose_returns(waves(setting, Values.at({"g": number(1), "tau": parse(gt)})), count)


@pytest.mark.parametrize(
    ("name", "at", "start"),
    [("line", 0, 0), ("line", 0, 1), ("line", 3, -2), ("half line", 0, 0), ("half line", 2, 0), ("half line", 1, 4)],
)
def test_against_the_experiment(name: str, at: int, start: int) -> None:
    """Outside oracle: scipy.linalg.expm on a long piece of the lattice, evolving and asking."""
    setting = lattice(name, at, start)
    phi = enclose_first_detection(sequences(setting, "2/5"), 40, 15)
    factor = waves(setting, Values.at({"g": number(1), "tau": parse("2/5")})).factor
    wanted = by_evolution(name, at, start, 0.4, 40)
    found = np.array([complex(factor * c) for c in phi[1:]])
    assert np.abs(found - wanted).max() < 1e-12
    assert np.abs(found[1:] - wanted[:-1]).max() > 1e-3  # asks are counted from 1


def test_other_signs_of_the_hopping() -> None:
    """+g in place of -g turns the amplitude by (-1)^d; i g by a gauge that a single start does not see in |phi|."""
    for hopping, turn in (("g", -1), ("-g", 1)):
        w = waves(lattice("line", 0, 3, hopping=hopping), Values.at({"g": number(1), "tau": parse("2/5")}))
        assert complex(w.factor) == turn * (1j) ** 3


def test_against_the_plain_recursion() -> None:
    """phi_n = u_n - sum_k phi_k u_(n-k), written out at 50 digits with mpmath's Bessel function."""
    phi = enclose_first_detection(sequences(lattice(), "1/4"), 200, 30)
    with mpmath.workdps(50):
        u = [mpmath.besselj(0, mpmath.mpf(n) / 2) for n in range(201)]
        plain = [mpmath.mpf(0)]
        for n in range(1, 201):
            plain.append(u[n] - sum(plain[k] * u[n - k] for k in range(1, n)))
        for n in (1, 2, 50, 200):
            assert abs(mpmath.mpf(phi[n].mid().str(45, radius=False)) - plain[n]) < mpmath.mpf(10) ** -32


def test_the_loss_is_predicted() -> None:
    """What one pass keeps is what was asked, and not twice as much: the prediction is neither short nor wasteful."""
    found = enclose_first_detection(sequences(lattice(), "1/4"), 4000, 40)
    digits = min(c.rel_accuracy_bits() for c in found[3600:]) * 0.30103
    assert 40 < digits < 70
    assert 40 < predicted_loss(sequences(lattice(), "1/4"), 4000) < 120


def test_published_constant_at_the_critical_interval() -> None:
    """n^3 F_n at n = 4000 for g tau = pi/2: .249868 (computed independently beforehand)."""
    phi = enclose_first_detection(sequences(lattice(), "pi/2"), 4000, 20)
    assert abs(float(phi[4000] ** 2 * 4000**3) - 0.249868) < 1e-6


def test_constants_and_exponent_are_recovered() -> None:
    """C_1 of the return law: sqrt(4 g tau/pi) (phys-rev-e-95-032141, from memory); here to 12 digits, unasked."""
    phi = enclose_first_detection(sequences(lattice(), "2/5"), 4100, 40)
    with ctx.workprec(300):
        c = approx_constants(phi, arb("0.8"), Fraction(3, 2), 1000)
        assert abs(float(abs(c[0])) - (1.6 / np.pi) ** 0.5) < 1e-12
        d = approx_constants(phi, arb("0.8"), Fraction(3, 2), 500)
        assert abs(float(abs(d[1] / c[1])) - 1) < 1e-7
    assert abs(approx_exponent(phi, 1000) - 1.5) < 0.02
