"""Survival laws against closed forms, modified Bessel functions (mpmath) and hand-made cases."""

import mpmath as mp
import pytest
from flint import ctx

from derive.derivations.survival.topic import derive_survival
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import number
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Wish
from tests.checks.test_levels_missed import missing
from tests.settings_of_graphs import family, watched


def claims_of(setting):
    return {c.id: c.value for c in derive_survival(setting, Wish("survival", (("order", 1),))).claims}


def value(f, **letters):
    return mp.mpf(enclose(f, Values.at({k: parse(v) for k, v in letters.items()})).real.str(15, radius=False))


def test_two_levels_by_hand():
    """S_n = cos(g tau)^(2n), and exp(-g^2 tau t) at small tau."""
    claims = claims_of(watched("chain", {"sites": 2}, 0, start=1))
    assert text(claims["survival.exact"]) == "cos(g*tau)^(2*n)"
    assert text(claims["survival.small_tau"]) == "exp(-g^2*tau*t)"


def test_star_with_equal_arms():
    """S = 1 - 1/m + (1/m) sum_k (2/(L+1)) sin^2(j theta_k) exp(-Gamma_k t): path states (textbook)."""
    law = claims_of(watched("star", {"arms": 3, "length": 4}, 0, start=2))["survival.small_tau"]
    for t in ("0", "7", "100"):
        said = value(law, g="1", tau="1/10", t=t)
        terms = [mp.mpf(2) / 5 * mp.sin(2 * mp.pi * k / 5) ** 2
                 * mp.exp(-mp.mpf(6) / 5 * mp.sin(mp.pi * k / 5) ** 2 * mp.mpf(t) / 10) for k in range(1, 5)]
        assert abs(said - mp.mpf(2) / 3 - mp.fsum(terms) / 3) < 1e-13


@pytest.mark.parametrize("size, j, x", [(8, 3, 2), (12, 5, 9), (5, 1, 30)])
def test_image_sum(size, j, x):
    """(2/M) sum_k sin^2(j theta_k) e^(-2x sin^2 theta_k) = e^-x sum_m [I_mM(x) - I_(j+mM)(x)], by mpmath's besseli."""
    law = claims_of(family("chain", {"sites": "N"}, "end", {"N": 2, "j": 1}, distance="j"))["survival.small_tau"]
    said = value(law, g="1", tau="1", t=str(x * size), N=str(size), j=str(j))  # x = g^2 tau t/M
    pairs = [(abs(m * size), abs(j + m * size)) for m in range(-14, 15)]
    images = mp.fsum(mp.besseli(a, x) - mp.besseli(b, x) for a, b in pairs if a < 80)
    assert abs(said - mp.exp(-x) * images) < 1e-12


@pytest.mark.parametrize("L", range(2, 13))
def test_image_sum_in_the_middle_of_a_chain_to_thirty_digits(L):
    """The same for 2 L + 1 sites watched in the middle, start next to it and L away, by mpmath at 40 digits."""
    law = claims_of(family("chain", {"sites": "2*L + 1"}, "centre", {"L": 2, "j": 1}, distance="j"))
    M, x = L + 1, mp.mpf(3) / 2
    for j in (1, L):
        with mp.workdps(40), ctx.workprec(200):
            put = {"g": "1", "tau": "1", "t": f"3*{M}/4", "L": str(L), "j": str(j)}  # x = 2 g^2 tau t/M
            ball = enclose(law["survival.small_tau"], Values.at({k: parse(v) for k, v in put.items()}))
            pairs = [(abs(m * M), abs(j + m * M)) for m in range(-30, 31)]
            images = mp.fsum(mp.besseli(a, x) - mp.besseli(b, x) for a, b in pairs if max(a, b) < 60)
            said = mp.mpf(ball.real.str(38, radius=False))
            assert abs(said - mp.mpf(1) / 2 - mp.exp(-x) * images / 2) < mp.mpf(10) ** -32


def test_ring_without_flux_keeps_half():
    """The even half is dark: S -> 1/2, or 0 from opposite the detector (reflection symmetry)."""
    setting = family("ring", {"sites": "N"}, 0, {"N": 3, "j": 1}, distance="j")
    law = claims_of(setting)["survival.small_tau"]
    assert abs(value(law, g="1", tau="1", t="10^6", N="7", j="2") - 0.5) < 1e-12
    assert abs(value(law, g="1", tau="1", t="10^6", N="6", j="3")) < 1e-12
    assert abs(value(law, g="1", tau="1", t="0", N="6", j="2") - 1) < 1e-12


def test_return_is_of_second_order():
    """A start on the detector: S = tau^2 |V|^2 at t -> 0, V = -g to one neighbour."""
    law = claims_of(watched("chain", {"sites": 4}, 0, start=0))["survival.small_tau"]
    assert abs(value(law, g="3", tau="1/100", t="0") - mp.mpf(9) / 10000) < 1e-13


def test_density_is_minus_the_derivative():
    """By central differences of the law (textbook)."""
    claims = claims_of(watched("star", {"lengths": (1, 2, 3)}, 0, start=4))
    step = mp.mpf(1) / 10**4
    up, down = (value(claims["survival.small_tau"], g="1", tau="1/10", t=t) for t in ("50001/10000", "49999/10000"))
    assert abs((down - up) / (2 * step) - value(claims["survival.density"], g="1", tau="1/10", t="5")) < 1e-9


def test_two_watched_sites_at_one_energy():
    """Pairs of sites beside the watched 2 and 5: V† Pi V = g^2/2 [[2, 1], [1, 1]] at both energies, by hand."""
    law = claims_of(watched("chain", {"sites": 7}, [2, 5], start=3))["survival.small_tau"]
    matrix, seen = mp.matrix([[1, mp.mpf(1) / 2], [mp.mpf(1) / 2, mp.mpf(1) / 2]]), mp.matrix([1, 1]) / 2
    rates, vectors = mp.eighe(matrix)
    for x in ("0", "3", "40"):  # t*tau; the start is half on each energy, s = (1, 1)/2 on both
        terms = [2 * abs((vectors[:, k].H * seen)[0]) ** 2 / rates[k] * mp.exp(-rates[k] * mp.mpf(x)) for k in (0, 1)]
        assert abs(value(law, g="1", tau="1", t=x) - mp.fsum(terms)) < 1e-13


def test_efficiency_multiplies_rates_by_coth():
    """coth(kappa/2) = 3 at eta = 3/4; a start on the detector leaks 1/(1 - q) = 2 times as much (by hand)."""
    for start in (2, 0):
        perfect = watched("chain", {"sites": 4}, 0, start=start)
        law, weak = (claims_of(s)["survival.small_tau"] for s in (perfect, missing(perfect, "3/4")))
        at = {"g": "1", "tau": "1/10"}
        ratio = value(weak, t="7", **at) / value(law, t="21", **at)
        assert abs(ratio - (1 if start else 4)) < 1e-12


def test_mixture_is_averaged():
    from dataclasses import replace as changed

    from derive.problem.setting import Start

    setting = watched("chain", {"sites": 5}, 4, start=1)
    half = parse("1/2")
    mixed = changed(setting, start=Start(((half, ((1, number(1)),)), (half, ((2, number(1)),)))))
    laws = [claims_of(watched("chain", {"sites": 5}, 4, start=x))["survival.small_tau"] for x in (1, 2)]
    at = {"g": "1", "tau": "1/7", "t": "9"}
    assert abs(value(claims_of(mixed)["survival.small_tau"], **at) - sum(value(f, **at) for f in laws) / 2) < 1e-13


def test_weights_and_the_dark_part_add_up():
    law = claims_of(watched("hypercube", {"dimension": 3}, 0, start=6))["survival.small_tau"]
    assert vanishes(parse(text(law).replace("*tau*t", "*0")) - 1, watched("chain", {"sites": 2}, 0).domains())


@pytest.mark.parametrize("setting, order", [
    (watched("chain", {"sites": 5}, 0), 1),
    (watched("chain", {"sites": 5}, 0, start=2), 3),
    (watched("chain", {"sites": 7}, [2, 5], start={1: "3/5", 3: "4*i/5"}), 2),  # levels of one energy, and complex
    (family("chain", {"sites": "N"}, "end", {"N": 2}), 1),
])
def test_what_is_not_served_is_one_sentence(setting, order):
    with pytest.raises(NotCovered) as said:
        derive_survival(setting, Wish("survival", (("order", order),)))
    assert "\n" not in str(said.value)
