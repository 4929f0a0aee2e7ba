"""Means and variances of the first click against published values and against sums over asks in mpmath."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import mpmath
import networkx as nx
import numpy as np
import pytest
from flint import ctx

from derive.checks.summed import check_summed
from derive.derivations.moments.topic import derive_moments
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ONE, TAU, Formula, letter, number
from derive.formula.tree import replace as put
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Check, Interval, Setting, Start, Watcher, Wish
from tests.graphs import UNIT, karate_club, on_graph
from tests.strategies import POSITIVE, REAL, random_hermitian, setting_of, site


def values(setting: Setting, highest: int = 2) -> dict[str, Formula]:
    """The closed ones."""
    claims = derive_moments(setting, Wish("moments", (("highest", highest),))).claims
    out = {}
    for c in claims:
        assert isinstance(c.value, Formula)
        if c.value.head != "operator":
            out[c.id.removeprefix("moments.")] = c.value
    return out


def at(f: Formula, g: str, tau: str) -> mpmath.mpf:
    """The formula's value to 40 digits."""
    with ctx.workprec(256):
        ball = enclose(f, Values.at({"g": parse(g), "tau": parse(tau)}))
    return mpmath.mpf(ball.real.mid().str(45, radius=False))


@pytest.mark.parametrize(
    ("length", "start", "mean", "variance"),
    [
        ("pi/(2*g)", 0, "3", "4/3"),
        ("pi/(2*g)", 1, "5/18", None),
        ("pi/(2*g)", 2, "1", None),
        ("pi/(2*g)", 3, "10/9", None),
        ("2*pi/(3*g)", 0, "2", "2/3"),
        ("2*pi/(3*g)", 3, "4/3", None),
    ],
)
def test_hexagon_where_phases_merge(length: str, start: int, mean: str, variance: str | None) -> None:
    """Exact rationals; source: ring results of Phys. Rev. E 95, 032141 (2017), numbers recomputed for this test."""
    found = values(on_graph(nx.cycle_graph(6), 0, start, length=parse(length)))
    assert text(found["mean"]) == mean
    assert variance is None or text(found["variance"]) == variance


@pytest.mark.parametrize("sites", range(3, 8))
def test_return_mean_of_rings(sites: int) -> None:
    """floor(L/2) + 1; source: Commun. Math. Phys. 320, 543 (2013)."""
    assert text(values(on_graph(nx.cycle_graph(sites), 0, 0))["mean"]) == str(sites // 2 + 1)


@pytest.mark.parametrize(
    ("sites", "expected"),
    [(3, "0.990339002935"), (4, "4.315535100772"), (5, "6.302342226990"), (6, "18.8828047000136")],
)
def test_return_variance_of_rings(sites: int, expected: str) -> None:
    """At g tau = 0.7, by the double sum over eigenvalues of QU; source: Phys. Rev. Research 1, 033086 (2019)."""
    found = at(values(on_graph(nx.cycle_graph(sites), 0, 0))["variance"], "1", "7/10")
    assert abs(found - mpmath.mpf(expected)) < mpmath.mpf("1e-11")


def test_two_levels() -> None:
    """Return: mean 2, variance 2 cot^2; transition: mean 1/s, variance c/s^2, s = sin^2(g tau); by hand."""
    back, over = values(on_graph(nx.path_graph(2), 0, 0)), values(on_graph(nx.path_graph(2), 0, 1))
    for found, wanted in (
        (back["mean"], "2"),
        (back["variance"], "2*cot(g*tau)^2"),
        (over["mean"], "1/sin(g*tau)^2"),
        (over["variance"], "cos(g*tau)^2/sin(g*tau)^4"),
    ):
        assert vanishes(found - parse(wanted), {"g": POSITIVE, "tau": POSITIVE}) is True


def test_hexagon_from_the_opposite_site_is_one_trigonometric_function() -> None:
    """Poles at sin(2 g tau) = 0 only, where phases of seen energies merge; by hand from the energies +-2g, +-g."""
    mean = values(on_graph(nx.cycle_graph(6), 0, 3))["mean"]
    wanted = "(27 + 23*cos(g*tau) + 24*cos(2*g*tau) + 9*cos(3*g*tau) - 2*cos(4*g*tau))/(9*sin(2*g*tau)^2)"
    assert vanishes(mean - parse(wanted), {"g": POSITIVE, "tau": POSITIVE}) is True


def summed(graph: nx.Graph, start: int, tau: str, efficiency: str, asks: int) -> tuple[mpmath.mpf, ...]:
    """P, sum n F_n and sum n^2 F_n by applying U and the ask again and again, in mpmath."""
    with mpmath.workdps(40):
        h = mpmath.matrix((-nx.to_numpy_array(graph)).tolist())
        u = mpmath.expm(mpmath.mpc(0, -1) * h * mpmath.mpf(tau))
        eta = mpmath.mpf(efficiency)
        psi = mpmath.zeros(graph.number_of_nodes(), 1)
        psi[start] = 1
        total, mean, square = mpmath.mpf(0), mpmath.mpf(0), mpmath.mpf(0)
        for n in range(1, asks + 1):
            psi = u * psi
            f = eta * abs(psi[0]) ** 2
            psi[0] *= mpmath.sqrt(1 - eta)
            total, mean, square = total + f, mean + n * f, square + n * n * f
        return total, mean, square


@pytest.mark.parametrize(
    ("graph", "start", "efficiency"),
    [
        (nx.cycle_graph(5), 2, "1"),
        (nx.path_graph(4), 3, "1"),
        (nx.cycle_graph(6), 1, "0.75"),
        (nx.path_graph(5), 3, "1"),
    ],
)
def test_against_the_experiment_in_mpmath(graph: nx.Graph, start: int, efficiency: str) -> None:
    """Source: direct summation over asks with mpmath's matrix exponential."""
    watcher = Watcher((site(0),), parse(efficiency))
    found = values(replace(on_graph(graph, 0, start), detectors=(watcher,)))
    total, mean, square = summed(graph, start, "0.75", efficiency, 900)
    assert abs(at(found["mean"], "1", "3/4") - mean) < mpmath.mpf("1e-9")
    if "variance" in found:
        assert abs(at(found["variance"], "1", "3/4") - (square / total - (mean / total) ** 2)) < mpmath.mpf("1e-7")


def test_imperfect_detector_returns_after_w_over_eta() -> None:
    """w/eta, eta = 1/2: 8 on the hexagon; by hand from the renewal equation."""
    watcher = Watcher((site(0),), number(Fraction(1, 2)))
    setting = replace(on_graph(nx.cycle_graph(6), 0, 0), detectors=(watcher,))
    assert text(values(setting)["mean"]) == "8"


def test_two_merging_phases_return_variance() -> None:
    """w = 2: 1/(2 p1 p2 sin^2(delta/2)) - 2; source: Phys. Rev. Research 1, 033086 (2019), as recalled; star's leaf.

    A complete graph of 4 with hopping -g: energies -3g (p = 1/4) and g (p = 3/4), delta = 4 g tau.
    """
    found = values(on_graph(nx.complete_graph(4), 0, 0))["variance"]
    wanted = parse("1/(2*(1/4)*(3/4)*sin(2*g*tau)^2) - 2")
    assert vanishes(found - wanted, {"g": POSITIVE, "tau": POSITIVE}) is True


def test_higher_moments_of_the_geometric_law() -> None:
    """Two levels, transition: F_n = s c^(n-1); third moment of a geometric law, a textbook value."""
    third = values(on_graph(nx.path_graph(2), 0, 1), 3)["3"]
    wanted = parse("(6 - 6*sin(g*tau)^2 + sin(g*tau)^4)/sin(g*tau)^6")
    assert vanishes(third - wanted, {"g": POSITIVE, "tau": POSITIVE}) is True


def test_a_return_on_34_vertices() -> None:
    """Karate club watched at vertex 33: w = 23 different energies are seen, as numpy's eigensolver counts them."""
    found = values(on_graph(karate_club(), 33, 33, UNIT))
    assert text(found["mean"]) == "23" and "variance" not in found


@pytest.mark.parametrize("seed", [1, 3])
def test_sums_over_roots_agree_with_the_experiment(seed: int) -> None:
    """Six complex sites, energies without closed form: 20 digits against the experiment summed over all asks."""
    setting = replace(setting_of(random_hermitian(6, seed), (site(0),)), start=Start(((ONE, site(4)),)))
    claims = derive_moments(setting, Wish("moments")).claims
    assert "rootsum" in text(claims[0].value)  # type: ignore[arg-type]
    found = check_summed(setting, claims, Check(samples=1, digits=20)).findings
    assert {f.verdict for f in found.values()} == {"agrees"}


def test_return_variance_of_a_detuned_chain_as_a_sum_over_roots() -> None:
    """Cubic energies with two letters; against the same chain at Delta = 0, where they are closed."""
    g, delta = letter("g"), letter("Delta")
    rows: list[dict[int, Formula]] = [{} for _ in range(3)]
    for x in range(2):
        rows[x][x + 1] = rows[x + 1][x] = -g
    rows[0][0] = delta
    detuned = replace(setting_of(rows, (site(0),), g=POSITIVE, Delta=REAL), start=Start(((ONE, site(0)),)))
    plain = on_graph(nx.path_graph(3), 0, 0)
    nested = put(values(detuned)["variance"], {"Delta": parse("0")})
    assert abs(at(nested, "1", "3/4") - at(values(plain)["variance"], "1", "3/4")) < mpmath.mpf("1e-30")


def test_a_start_that_is_never_detected() -> None:
    found = values(on_graph(nx.cycle_graph(6), 0, 1, length=parse("2*pi/(3*g)")))
    assert text(found["mean"]) == "0" and "conditional_mean" not in found


def gamma_mean(graph: nx.Graph, start: int, mean: float, shape: int, efficiency: float) -> float:
    """sum n F_n in numpy's doubles: X = 1 + (K† X K averaged) on the sites, energies by numpy's eigensolver."""
    energies, states = np.linalg.eigh(-nx.to_numpy_array(graph))
    size = len(energies)
    factor = (1 - 1j * (energies[:, None] - energies[None, :]) * mean / shape) ** -shape
    no = np.diag([np.sqrt(1 - efficiency), *[1.0] * (size - 1)])
    carried, bench = states.T @ no @ states, []
    for k in range(size**2):
        x = np.zeros(size**2)
        x[k] = 1
        bench.append((factor * (carried @ x.reshape(size, size) @ carried)).ravel())
    survival = np.linalg.solve(np.eye(size**2) - np.array(bench).T, np.eye(size).ravel())
    return float((states[start] @ survival.reshape(size, size) @ states[start]).real)


@pytest.mark.parametrize("efficiency", ["1", "3/4"])
@pytest.mark.parametrize(("sites", "shape"), [(3, 2), (3, 4), (4, 3), (5, 2)])
def test_gamma_intervals(sites: int, shape: int, efficiency: str) -> None:
    """A chain from its second site; source: the averaged step's linear system in numpy, (1 - i theta [H, .])^(-s)."""
    graph = nx.path_graph(sites)
    watcher = Watcher((site(0),), parse(efficiency))
    setting = replace(on_graph(graph, 0, 1), detectors=(watcher,), interval=Interval(TAU, "gamma", number(shape)))
    wanted = gamma_mean(graph, 1, 0.75, shape, float(Fraction(efficiency)))
    assert abs(float(at(values(setting)["mean"], "1", "3/4")) - wanted) < 1e-9


def test_a_gamma_law_of_shape_one_is_exponential() -> None:
    """Textbook; the two laws are solved along different lines."""
    setting = on_graph(nx.path_graph(4), 0, 2)
    one = values(replace(setting, interval=Interval(TAU, "gamma", ONE)))
    other = values(replace(setting, interval=Interval(TAU, "exponential")))
    assert all(vanishes(one[name] - other[name], {"g": POSITIVE, "tau": POSITIVE}) for name in one)


def test_a_wrong_gamma_mean_is_refuted() -> None:
    """The mean at shape 2 claimed at shape 3."""
    setting = replace(on_graph(nx.path_graph(3), 0, 1), interval=Interval(TAU, "gamma", number(2)))
    claims = derive_moments(setting, Wish("moments")).claims
    other = replace(setting, interval=Interval(TAU, "gamma", number(3)))
    assert check_summed(setting, claims, Check(samples=1, digits=20)).findings["moments.mean"].verdict == "agrees"
    assert check_summed(other, claims, Check(samples=1, digits=20)).findings["moments.mean"].verdict == "refuted"
