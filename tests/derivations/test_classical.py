"""Classical walks against scipy's matrix exponential and textbook means (gambler's ruin)."""

import numpy as np
import pytest
import scipy.linalg

from derive.derivations.classical.topic import derive_classical
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import number, replace
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Wish
from tests.settings_of_graphs import cluster, family, watched


def claims_of(setting, walk="continuous"):
    return {c.id: c.value for c in derive_classical(setting, Wish("classical", (("walk", walk),))).claims}


def value(f, **letters):
    return float(enclose(f, Values.at({k: parse(str(v)) for k, v in letters.items()})).real)


def matrices(edges, size, absorbing):
    """(L, W) off the absorbing site."""
    rates = np.zeros((size, size))
    for x, y, r in edges:
        rates[x, y] = rates[y, x] = r
    rest = [x for x in range(size) if x != absorbing]
    L = np.diag(rates.sum(axis=0)) - rates
    W = (rates > 0) / (rates > 0).sum(axis=0)
    return L[np.ix_(rest, rest)], W[np.ix_(rest, rest)], rest


EDGES = [(0, 1, 2.0), (1, 2, 1.0), (2, 3, 3.0), (3, 0, 1.0), (2, 4, 1.0)]
SETTING = cluster([(x, y, f"-{int(r)}") for x, y, r in EDGES], 0, (), start=4)


def test_continuous_against_scipy():
    L, _, rest = matrices(EDGES, 5, 0)
    claims = claims_of(SETTING)
    p = np.array([1.0 if x == 4 else 0.0 for x in rest])
    for t in (0.1, 1.0, 7.5):
        left = scipy.linalg.expm(-L * t) @ p
        assert abs(value(claims["classical.survival"], t=t) - left.sum()) < 1e-12
        assert abs(value(claims["classical.density"], t=t) - (L @ left).sum()) < 1e-12
    assert abs(value(claims["classical.mean"]) - np.linalg.solve(L, p).sum()) < 1e-12
    late = scipy.linalg.expm(-L * 60) @ p
    assert abs(value(claims["classical.law"], t=60) / late.sum() - 1) < 1e-9


def test_discrete_against_numpy():
    _, W, rest = matrices(EDGES, 5, 0)
    claims = claims_of(SETTING, "discrete")
    p = np.array([1.0 if x == 4 else 0.0 for x in rest])
    for n in (1, 2, 5, 20):
        now, before = np.linalg.matrix_power(W, n) @ p, np.linalg.matrix_power(W, n - 1) @ p
        assert abs(value(claims["classical.survival"], n=n) - now.sum()) < 1e-12
        assert abs(value(claims["classical.density"], n=n) - before.sum() + now.sum()) < 1e-12
    assert abs(value(claims["classical.mean"]) - np.linalg.solve(np.eye(4) - W, p).sum()) < 1e-12


@pytest.mark.parametrize("walk, law", [("continuous", "j*(N - j)/(2*g)"), ("discrete", "j*(N - j)")])
def test_gamblers_ruin(walk, law):
    """Mean duration of the game j (N - j), fair coin (textbook): a ring, both as a formula in N and at numbers."""
    general = claims_of(family("ring", {"sites": "N"}, 0, {"N": 3, "j": 1}, distance="j"), walk)["classical.mean"]
    ring = watched("ring", {"sites": 7}, 0, start=3)
    domains = {**ring.domains(), "N": ring.domains()["g"], "j": ring.domains()["g"]}
    assert vanishes(general - parse(law), domains) is True
    put = {"N": number(7), "j": number(3)}
    assert vanishes(claims_of(ring, walk)["classical.mean"] - replace(parse(law), put), domains) is True


def test_a_piece_cut_off_has_no_mean():
    """Nothing is ever caught there: S = 1, and no mean is claimed."""
    claims = claims_of(cluster([(0, 1, "-g"), (2, 3, "-g")], 3, start=0))
    assert "classical.mean" not in claims
    assert abs(value(claims["classical.survival"], g=1, t=5) - 1) < 1e-12


def test_first_passage_falls_like_the_three_halves_power():
    """On a long path, before the far end is felt: density ~ j t^(-3/2)/sqrt(4 pi g) (textbook first passage)."""
    density = claims_of(family("chain", {"sites": "N"}, "end", {"N": 2, "j": 1}, distance="j"))["classical.density"]
    for t in (100, 400):
        said = value(density, g=1, N=300, j=2, t=t)
        assert abs(said * np.sqrt(4 * np.pi) * t**1.5 / 2 - 1) < 3 / t


@pytest.mark.parametrize("setting, walk", [
    (watched("chain", {"sites": 4}, 0, hopping="Delta", letters=("Delta",), start=1), "continuous"),
    (watched("chain", {"sites": 4}, {0: "1/sqrt(2)", 1: "1/sqrt(2)"}, start=2), "discrete"),
    (watched("chain", {"sites": 4}, 0, start={1: "1/sqrt(2)", 2: "1/sqrt(2)"}), "discrete"),
])
def test_what_is_not_served_is_one_sentence(setting, walk):
    with pytest.raises(NotCovered) as said:
        claims_of(setting, walk)
    assert "\n" not in str(said.value)
