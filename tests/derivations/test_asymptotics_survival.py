"""Survival at late asks on the line against the renewal recursion in double precision."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.special

from derive.checks.asymptotics.road import in_n
from derive.derivations.asymptotics.topic import derive_asymptotics
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values
from derive.problem.setting import Setting, Wish
from tests.lattices import lattice


def measured(gt: float, distance: int, asks: int) -> np.ndarray:
    """S_0 ... S_asks: the renewal recursion, Bessel values from scipy."""
    u, v = (scipy.special.jv(k, 2 * gt * np.arange(asks + 1)) for k in (0, distance))
    phi = np.zeros(asks + 1)
    for n in range(1, asks + 1):
        phi[n] = v[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    return 1 - np.cumsum(phi**2)


def law(setting: Setting, order: int) -> Formula | None:
    claims = derive_asymptotics(setting, Wish("asymptotics", (("order", order),))).claims
    found = next((c.value for c in claims if c.id == "asymptotics.survival"), None)
    return found if isinstance(found, Formula) else None


@pytest.mark.parametrize(("distance", "gt", "number_of"), [(0, "1/4", 0.25), (0, "7/10", 0.7), (2, "7/20", 0.35)])
def test_what_is_left_out_falls_as_it_should(distance: int, gt: str, number_of: float) -> None:
    """n^3 |dS| after one power of 1/n and n^4 |dS| after two stay bounded from n = 100 to 800."""
    seen = measured(number_of, distance, 900)
    asks = [*range(100, 140), *range(800, 840)]
    for order in (1, 2):
        f = law(lattice(start=distance), order)
        assert f is not None
        at = in_n(f, Values.at({"g": parse("1"), "tau": parse(gt)}))
        off = np.array([abs(float(at(n).real) - seen[n]) * n ** (order + 2) for n in asks])
        assert off[40:].max() < 1.3 * off[:40].max()


def test_the_return_leaves_g_tau_over_pi_n_squared() -> None:
    """The mean of the published law of F_n, (4 g tau/(pi n^3)) cos^2, summed from n on: by hand."""
    f = law(lattice(), 1)
    assert f is not None and text(f).endswith(" + g*tau/(pi*n^2)")


def test_where_the_limit_has_no_closed_form_there_is_no_law() -> None:
    assert law(lattice("half line"), 1) is None
    assert law(lattice(below=False), 1) is None
