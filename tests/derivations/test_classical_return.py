"""Whether a classical walk comes back on the endless lattice: Pólya's 1, 1, 0.340537329551, from means on tori.

On a torus of N^d sites, from a site drawn evenly, the mean time to a given site is the sum over k /= 0 of 1/lambda_k
(eigentime identity, textbook: Reversible Markov Chains and Random Walks on Graphs, ch. 3).  Divided by N^d it tends to
the endless lattice's time at the origin G, and the walk returns with probability 1 - 1/(2 d G).  Where G grows without
end that is 1.
"""

import itertools
from dataclasses import replace as changed
from fractions import Fraction

import mpmath as mp
import numpy as np
import pytest

from derive.formula.tree import ONE, number
from derive.problem.setting import Start
from tests.derivations.test_classical import claims_of, value
from tests.settings_of_graphs import cluster


def torus(dimension, size):
    """Hopping -1 on every edge, watched at site 0, started evenly on all sites."""
    sites = list(itertools.product(range(size), repeat=dimension))
    place = {x: n for n, x in enumerate(sites)}
    edges = [(place[x], place[_ahead(x, axis, size)], "-1") for x in sites for axis in range(dimension)]
    share = number(Fraction(1, len(sites)))
    return changed(cluster(edges, 0, ()), start=Start(tuple((share, ((x, ONE),)) for x in range(len(sites)))))


def _ahead(x, axis, size):
    return tuple((c + (a == axis)) % size for a, c in enumerate(x))


def time_at_origin(dimension, size, walk="continuous"):
    """The derived mean, divided by the number of sites."""
    return value(claims_of(torus(dimension, size), walk)["classical.mean"]) / size**dimension


def test_three_dimensions_return_with_polyas_probability():
    """1 - 1/u, u = sqrt(6)/(32 pi^3) Gamma(1/24) Gamma(5/24) Gamma(7/24) Gamma(11/24): Watson's third integral, Three
    triple integrals, Quarterly Journal of Mathematics 10, 266 (1939); its product of Gammas from memory, its decimals
    those of the published 0.340537329551.  Tori differ from the lattice by 1/N and odd powers of it."""
    u = mp.sqrt(6) / (32 * mp.pi**3) * mp.fprod(mp.gamma(mp.mpf(k) / 24) for k in (1, 5, 7, 11))
    polya = 1 - 1 / u
    assert abs(polya - mp.mpf("0.340537329551")) < 1e-12
    sizes = np.array([4.0, 6.0, 8.0])
    means = [time_at_origin(3, int(size)) for size in sizes]
    endless = np.linalg.solve(np.stack([sizes**0, 1 / sizes, sizes**-3], axis=1), means)[0]
    assert abs(1 - 1 / (6 * endless) - float(polya)) < 1e-3
    assert abs(1 - 1 / (6 * means[-1]) - float(polya)) > 0.05  # the sequence is what agrees, not one torus


@pytest.mark.parametrize("size", [6, 13])
@pytest.mark.parametrize("walk, speed", [("continuous", 1), ("discrete", 2)])
def test_one_dimension_always_returns(size, walk, speed):
    """G = (N^2 - 1)/(12 N) at hopping 1 (sum of 1/sin^2, textbook) grows like N."""
    assert abs(time_at_origin(1, size, walk) - speed * (size**2 - 1) / (12 * size)) < 1e-12


def test_two_dimensions_always_return():
    """G grows by log(2)/(2 pi) at every doubling (lattice Green's function, textbook)."""
    assert abs(time_at_origin(2, 16) - time_at_origin(2, 8) - np.log(2) / (2 * np.pi)) < 1e-3
