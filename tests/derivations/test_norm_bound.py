"""h as a formula: never below half the width of the spectrum, which is numpy's, networkx's or a textbook's."""

from fractions import Fraction

import networkx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from derive.derivations.validity.norm_bound import bound_norm, on_sites
from derive.derivations.validity.tight_bound import bound_tightly, simplest_between
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.numerics.evaluate import Values, enclose_real
from tests.settings_of_graphs import cluster, watched


def half_width(H):
    levels = np.linalg.eigvalsh(np.array(H, dtype=complex))
    return (levels[-1] - levels[0]) / 2


def evaluated(f, **letters):
    return float(enclose_real(f, Values.at({k: parse(v) for k, v in letters.items()})).mid())


@given(st.integers(0, 10**6))
def test_rational_matrices(seed):
    """numpy's eigenvalues: h is above them, by less than a hundredth where elimination proved it."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(2, 8))
    H = rng.integers(-5, 6, (n, n))
    H = np.triu(H) + np.triu(H, 1).T
    rows = [{y: Fraction(int(H[x, y])) for y in range(n) if H[x, y]} for x in range(n)]
    found = bound_tightly(rows)
    if found is None:
        return
    e, h = float(found[0]), float(found[1])
    levels = np.linalg.eigvalsh(H.astype(float))
    reach = max(abs(levels - e))
    assert h >= reach * (1 - 1e-12)
    assert h <= 1.12 * half_width(H)


@pytest.mark.parametrize("name, sizes, width", [
    ("ring", {"sites": 6}, "2*g"), ("complete", {"sites": 6}, "3*g"), ("hypercube", {"dimension": 4}, "4*g"),
])
def test_spectra_of_the_textbooks(name, sizes, width):
    """Half widths 2, N/2 and d times g ("Spectra of Graphs", 2012, ch. 1)."""
    setting = watched(name, sizes, 0)
    assert text(bound_norm(setting.space.rows, setting.domains()).h) == width


def test_letters_that_do_not_scale_together():
    """At numbers: not below numpy's half width, for a detuning of either sign."""
    setting = watched("chain", {"sites": 5}, 0, ("g", "Delta"), energies={2: "Delta"})
    bound = bound_norm(setting.space.rows, setting.domains())
    for g, delta in ((1, 3), (2, -1), (1, -9)):
        H = -g * networkx.to_numpy_array(networkx.path_graph(5))
        H[2, 2] = delta
        assert evaluated(bound.h, g=str(g), Delta=str(delta)) >= half_width(H)


def test_complex_bonds():
    setting = watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[((0, 1, 2, 3, 4), "phi")])
    bound = bound_norm(setting.space.rows, setting.domains())
    for phi in (0.0, 1.0, 2.5):
        H = np.zeros((5, 5), complex)
        for x in range(5):
            H[x, (x + 1) % 5] = -np.exp(1j * phi / 5)
        assert evaluated(bound.h, g="1", phi=str(phi)) >= half_width(H + H.conj().T) - 1e-12


def test_a_planted_bound_is_caught():
    """Elimination refuses what is too small: a star's half width is sqrt(arms), 2.236 for five arms."""
    edges = [(0, x, "1") for x in range(1, 6)]
    setting = cluster(edges, 0, ())
    bound = bound_norm(setting.space.rows, setting.domains())
    assert 5**0.5 <= evaluated(bound.h) < 1.01 * 5**0.5


def test_a_part_of_the_graph():
    setting = watched("chain", {"sites": 9}, 0, (), "-1", energies={8: "100"})
    near = on_sites(setting.space.rows, (0, 1, 2))
    assert evaluated(bound_norm(near, {}).h) < 1.42
    assert evaluated(bound_norm(setting.space.rows, {}).h) > 50


def test_simplest_fractions():
    """Between 3.14 and 3.15: 22/7; between 0.3 and 0.35: 1/3 (Stern and Brocot's tree, from memory)."""
    assert simplest_between(3.14, 3.15) == Fraction(22, 7)
    assert simplest_between(0.3, 0.35) == Fraction(1, 3)
    assert simplest_between(-0.35, -0.3) == Fraction(-1, 3)
    assert simplest_between(-1, 2) == 0
