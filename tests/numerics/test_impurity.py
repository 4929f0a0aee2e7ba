"""Amplitudes between asks beside an impurity: against evolution on a long piece, and the bound state's own law."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from flint import acb, arb, ctx

from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.numerics.evaluate import Values
from derive.numerics.impurity import Impurity, added, bessel_row, enclose_scattered, split
from derive.numerics.inversion import enclose_first_detection
from derive.numerics.lattice import enclose_returns, waves
from tests.lattices import by_evolution, lattice, square


def measured(name: str, at: int, start: int, site: int, energy: str, asks: int, digits: int = 15) -> np.ndarray:
    """phi_1 ... phi_asks at g = 1, tau = 2/5."""
    setting = lattice(name, at, start, impurity=(site, energy))
    at = {"g": number(1), "tau": parse("2/5")}
    phi = enclose_first_detection(
        lambda count: enclose_returns(waves(setting, Values.at(at)), count), asks, digits)
    factor = waves(setting, Values.at(at)).factor
    return np.array([complex(factor * c) for c in phi[1:]])


@pytest.mark.parametrize(
    ("name", "at", "start", "site"),
    [
        ("line", 0, 0, 0), ("line", 0, 2, 0), ("line", 0, 0, 3), ("line", 0, 2, 1), ("line", 1, -1, -4),
        ("half line", 0, 0, 0), ("half line", 0, 3, 0), ("half line", 2, 2, 0), ("half line", 2, 2, 2),
        ("half line", 1, 4, 3), ("half line", 3, 0, 1),
    ],
)
@pytest.mark.parametrize("energy", ["3/10", "-8/5"])
def test_against_the_experiment(name: str, at: int, start: int, site: int, energy: str) -> None:
    """Outside oracle: scipy.linalg.expm on a long piece of the lattice, evolving and asking; bound states or not."""
    strength = float(Fraction(energy))
    wanted = by_evolution(name, at, start, 0.4, 40, (site, strength))
    assert np.abs(measured(name, at, start, site, energy, 40) - wanted).max() < 1e-11
    assert np.abs(by_evolution(name, at, start, 0.4, 40, (site, -strength)) - wanted).max() > 1e-5  # its sign is seen


def test_the_bound_state_and_the_band() -> None:
    """u_n on the line, impurity watched: |eps|/E_b exp(-i E_b t) + integral of sqrt(4 - E^2) cos(E t)/(pi (4 - E^2 +
    eps^2)), E_b^2 = 4 + eps^2 (both from memory; textbook, one-site impurity), by mpmath.quad, at g = 1."""
    with ctx.workprec(200):
        a, e = arb(4) / 5, arb(7) / 10
        part = split(added(Impurity(e, 0, False), a, 0, 0))
        (found,) = enclose_scattered([part], a, 30)
        assert max(c.rad() for c in found) < arb(10) ** -45
        for n in (1, 7, 30):
            u, t = found[n] + (a * n).bessel_j(arb(0)), mpmath.mpf(2) * n / 5
            with mpmath.workdps(30):
                eps = mpmath.mpf(7) / 4
                bound = mpmath.sqrt(4 + eps**2)
                band = mpmath.quad(lambda q, t=t, eps=eps: 4 * mpmath.sin(q) ** 2 * mpmath.cos(2 * t * mpmath.cos(q))
                                   / (4 * mpmath.sin(q) ** 2 + eps**2), mpmath.linspace(0, mpmath.pi, 9)) / mpmath.pi
                wanted = eps / bound * mpmath.expj(-bound * t) + band
                assert abs(mpmath.mpmathify(complex(u)) - wanted) < 1e-14


def test_a_slow_resonance_at_late_asks() -> None:
    """Half line, strong impurity at site 3: u_n of site 2 behind it, against a long piece (numpy.linalg.eigh)."""
    size, eps, gt, asks = 700, 6.0, 0.4, 600
    h = -np.eye(size, k=1) - np.eye(size, k=-1)
    h[3, 3] = eps
    energies, states = np.linalg.eigh(h)
    with ctx.workprec(300):
        a = arb(4) / 5
        part = split(added(Impurity(arb(12) / 5, 3, True), a, 2, 2))
        assert max(abs(complex(r)) for r in part.ratios) > 0.98
        (found,) = enclose_scattered([part], a, asks)
        for n in (50, 300, 600):
            x = a * n
            u = complex(found[n] + x.bessel_j(arb(0)) + x.bessel_j(arb(6)))
            assert abs(u - (states[2] ** 2 * np.exp(-1j * energies * gt * n)).sum()) < 1e-11


def test_bessel_rows_both_ways() -> None:
    """J_k by recurrence against flint's own, upward and downward."""
    with ctx.workprec(200):
        for x in (arb(3), arb(40), arb(500)):
            for k, j in enumerate(bessel_row(x, 60)):
                assert j.overlaps(x.bessel_j(arb(k))) and j.rad() < arb(10) ** -35


def test_what_is_not_measured() -> None:
    values = Values.at({"g": number(1), "tau": parse("2/5"), "Delta": number(1)})
    for setting in (square(), lattice(impurity=(0, "Delta"))):
        space = setting.space
        two = (("0,0", parse("1")),) if space.name == "square lattice" else (("0", parse("1")), ("1", parse("1")))
        with pytest.raises(NotCovered):
            waves(replace(setting, space=replace(space, energies=two)), values)
    assert isinstance(enclose_returns(waves(lattice(), values), 3)[0][0], arb)
    assert isinstance(enclose_returns(waves(lattice(impurity=(0, "1")), values), 3)[0][0], acb)
