"""Topic `validity`, derived: entries, bounds at numbers against scipy, and what the lines say."""

import numpy as np
import pytest
from scipy.linalg import expm, logm

from derive.derivations.validity.steps import where_it_ends
from derive.derivations.validity.topic import derive_validity
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.series import enclose_series
from derive.problem.setting import Wish
from tests.settings_of_graphs import watched

CHAIN = np.array([[0, -1, 0, 0], [-1, 0, -1, 0], [0, -1, 0, -1], [0, 0, -1, 0]], float)


def claims(setting, **options):
    return {c.id: c for c in derive_validity(setting, Wish("validity", tuple(options.items()))).claims}


def four(**options):
    return claims(watched("chain", {"sites": 4}, 0), **options)


def at(f, **letters):
    return float(enclose_real(f, Values.at({k: parse(v) for k, v in letters.items()})).mid())


def test_entries_and_keys():
    found = four()
    assert list(found)[:5] == [
        "validity.radius", "validity.radius_kind", "validity.remainder", "validity.state", "validity.interval",
    ]
    keys = dict(found["validity.interval"].quantity.keys)
    assert keys["order"] == 3 and text(keys["tolerance"]) == "1/100"
    assert found["validity.radius_kind"].quantity is None
    assert found["validity.remainder"].kind.phrase == "as an upper bound"


def test_the_default_time_is_ten_over_h():
    """Half the width of a four-site chain is 2 cos(pi/5) g (textbook); h is above it by less than a hundredth."""
    time = dict(four()["validity.interval"].quantity.keys)["time"]
    assert 10 / 1.01 < at(time, g="1") * 2 * np.cos(np.pi / 5) <= 10


@pytest.mark.parametrize("order", [0, 1, 2, 3, 5])
def test_the_remainder_begins_where_the_truncation_ends(order):
    """Orders tau^1 ... tau^(K+1) are absent, tau^(K+2) is not."""
    remainder = four(order=order)["validity.remainder"].value
    series = enclose_series(remainder, Values.at({"g": parse("1")}), order + 4)
    assert all(abs(c) < 1e-10 for c in series[: order + 2])
    assert float(series[order + 2].real.mid()) > 0.5


@pytest.mark.parametrize("tau", [0.05, 0.15, 0.3])
def test_the_remainder_bounds_scipys_logarithm(tau):
    """scipy.linalg.logm of the step against A - i tau V V†/2, the truncation at order 1 (published first two terms)."""
    remainder = four(order=1)["validity.remainder"].value
    G = 1j * logm(expm(-1j * tau * CHAIN)[1:, 1:]) / tau
    V = CHAIN[1:, :1]
    gap = np.linalg.norm(tau * (G - CHAIN[1:, 1:] + 0.5j * tau * V @ V.T), 2)
    bound = at(remainder, g="1", tau=str(tau))
    assert gap <= bound
    assert bound < 1e4 * gap


def test_near_orders_take_their_own_norm():
    """A far detuning is absent from the first omitted order, three sites wide: h_3 = sqrt 2 and a little."""
    setting = watched("chain", {"sites": 9}, 0, ("g", "Delta"), energies={8: "Delta"})
    remainder = text(claims(setting, order=1)["validity.remainder"].value)
    assert remainder.startswith("(17*g*tau/12)^3")
    assert "abs(Delta)" in remainder


def test_the_return_amplitude_is_printed_with_its_first_terms():
    """numpy's moments of the four-site chain watched at its second site: <1|H^n|1> = 1, 0, 2, 0, 5, 0, 13."""
    steps = where_it_ends(watched("chain", {"sites": 4}, 1))
    printed = steps[0].lines[-1].right
    assert isinstance(printed, Formula)
    moments = [np.linalg.matrix_power(CHAIN, n)[1, 1] for n in range(7)]
    assert moments[::2] == [1, 2, 5, 13]
    assert text(printed) == "1 - g^2*tau^2 + 5*g^4*tau^4/24 - 13*g^6*tau^6/720 + O(tau^7)"


def test_every_formula_reads_back():
    for claim in four(order=2).values():
        if claim.quantity is not None and claim.kind.name == "upper":
            assert parse(text(claim.value)) == claim.value
