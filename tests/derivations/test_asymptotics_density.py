"""Late-time laws from singular points: known lattices come out again, and experiments on long chains agree."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction

import numpy as np
import pytest
from flint import ctx

from derive.checks.asymptotics.road import in_n
from derive.derivations.asymptotics.topic import derive_asymptotics, late_law
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values
from derive.problem.setting import Setting, Wish
from tests.densities import LINE, SEMICIRCLE, TUNED_END, density, line_by_its_edges, two_bands, two_edges
from tests.lattices import lattice


def laws(setting: Setting) -> dict[str, Formula]:
    """amplitude and F; each reads back as it is written."""
    claims = derive_asymptotics(setting, Wish("asymptotics")).claims
    found = {c.id.split(".")[1]: c.value for c in claims}
    assert all(isinstance(f, Formula) and parse(text(f)) == f for f in found.values())
    return found  # type: ignore[return-value]


def values(f: Formula, asks: Iterable[int], **at: str) -> list[complex]:
    with ctx.workprec(100):
        law = in_n(f, Values.at({name: parse(x) for name, x in at.items()}))
        return [complex(law(n)) for n in asks]


def value(f: Formula, n: int, **at: str) -> complex:
    return values(f, [n], **at)[0]


@pytest.mark.parametrize("setting", [line_by_its_edges(), two_edges(*LINE)], ids=["points", "band"])
def test_the_line_comes_out_of_its_edges(setting: Setting) -> None:
    """Phys. Rev. E 95, 032141 (2017): F_n ~ (4 g tau/(pi n^3)) cos^2(2 g tau n + pi/4)."""
    found, known = laws(setting), late_law(lattice(), 1)
    for n in (3, 10, 101):
        wanted = 1.2 * np.cos(0.6 * n + np.pi / 4) ** 2 / (np.pi * n**3)
        assert abs(value(found["F"], n, g="3", tau="1/10") / wanted - 1) < 1e-12
        for f, own in ((found["amplitude"], known.real), (found["F"], known.square)):
            assert abs(value(f, n, g="3", tau="1/10") - value(own, n, g="3", tau="1/10")) < 1e-22


def test_where_the_edges_meet_the_oscillation_is_gone() -> None:
    """g tau = pi/2: both edges fall on one point, F_n ~ g tau/(2 pi n^3) (published with the line's law)."""
    f = laws(line_by_its_edges("pi/(2*g)"))["F"]
    for n in (4, 9):
        assert abs(value(f, n, g="2", tau="pi/4") * n**3 - 0.25) < 1e-15


@pytest.mark.parametrize("gt", ["1/4", "7/10", "6/5"])
def test_a_semicircle_is_the_end_of_a_half_line(gt: str) -> None:
    """The half line's law has its constant from image sums, this one from an integral over the band."""
    known = late_law(lattice("half line", 0, 0), 1)
    f = laws(two_edges(*SEMICIRCLE))
    for n in (7, 20):
        assert abs(value(f["amplitude"], n, g="1", tau=gt) - value(known.real, n, g="1", tau=gt)) < 1e-14
        assert abs(value(f["F"], n, g="1", tau=gt) - value(known.square, n, g="1", tau=gt)) < 1e-14


def by_recursion(h: np.ndarray, tau: float, asks: int) -> np.ndarray:
    """phi_1 ... phi_asks on site 0 of a chain too long for its far end to matter: numpy.linalg.eigh, then the renewal
    recursion phi_n = u_n - sum phi_k u_(n-k)."""
    energies, vectors = np.linalg.eigh(h)
    u = np.exp(-1j * tau * np.outer(np.arange(asks + 1), energies)) @ vectors[0] ** 2
    phi = np.zeros(asks + 1, dtype=complex)
    for n in range(1, asks + 1):
        phi[n] = u[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    return phi


def chain(hoppings: np.ndarray, first: float = 0) -> np.ndarray:
    h = np.diag(hoppings, 1) + np.diag(hoppings, -1)
    h[0, 0] = first
    return h


def off_by(f: Formula, phi: np.ndarray, asks: range, **at: str) -> float:
    """Relative error over consecutive asks, envelope against envelope."""
    return sum(abs(np.array(values(f, asks, **at)) - phi[asks])) / sum(abs(phi[asks]))


def test_one_edge_diverges_and_the_other_vanishes() -> None:
    """Half line with its end at energy g: n^(-3/2) from both edges, at |alpha| = 1/2 either way."""
    f = laws(two_edges(*TUNED_END))["amplitude"]
    phi = by_recursion(chain(-np.ones(700), 1), 0.7, 400)
    errors = [off_by(f, phi, range(n, n + 40), g="1", tau="7/10") for n in (90, 180, 360)]
    assert errors[2] < 0.01 and errors[0] / errors[2] > 3.0, errors


def test_four_edges_interfere() -> None:
    """An endless row of pairs, couplings 5/4 and 3/4: two bands with a square-root divergence at every edge."""
    size = 1100
    hoppings = np.where(np.arange(size - 1) % 2 == 0, -1.25, -0.75)
    h = np.diag(hoppings, 1) + np.diag(hoppings, -1)
    middle = size // 2
    order = [middle, *(k for k in range(size) if k != middle)]
    phi = by_recursion(h[np.ix_(order, order)], 0.4, 330)
    f = laws(two_bands())["amplitude"]
    errors = [off_by(f, phi, range(n, n + 40), a="1/2", b="2", tau="2/5") for n in (70, 140, 280)]
    assert errors[2] < 0.02 and errors[0] / errors[2] > 3.0, errors


@pytest.mark.parametrize(
    ("power", "exponent"), [("-1/2", "-3"), ("-1/3", "-8/3"), ("-3/4", "-7/2"), ("1/2", "-3"), ("3/2", "-5")]
)
def test_spectral_dimension(power: str, exponent: str) -> None:
    """Phys. Rev. A 97, 062105 (2018): F_n ~ n^(d_s - 4) below d_s = 2 and n^(-d_s) above, d_s = 2 (power + 1)."""
    d = 2 * (Fraction(power) + 1)
    assert Fraction(exponent) == (d - 4 if d < 2 else -d)
    factor = f"Gamma(2*({power}) + 2)/((4*g)^(2*({power}) + 1)*Gamma({power} + 1)^2)"
    f = laws(two_edges(power, power, factor))["F"]
    n = 10**6
    scaled = [sum(values(f, range(k, k + 200), g="1", tau="2/5")).real for k in (n, 4 * n)]
    assert abs(np.log(scaled[1] / scaled[0]) / np.log(4) - float(Fraction(exponent))) < 0.02


def test_the_smallest_distance_from_two_dimensions_wins() -> None:
    points = [("0", "-1/3", "both"), ("g", "-1/2", "above"), ("2*g", "1/2", "below")]
    claims = derive_asymptotics(density(points, amplitudes=["1/5", "1/7", "1/9"]), Wish("asymptotics")).claims
    assert "g*" not in text(claims[0].value)  # type: ignore[arg-type]
    assert [c.kind.phrase for c in claims] == [
        "as n -> infinity, error O(n^(-3/2))", "as n -> infinity, error O(n^(-17/6))"
    ]


def test_sides_that_differ() -> None:
    """c = K/(A_+ exp(-i pi/4) + A_- exp(i pi/4)), K = tau^(1/2)/(2 pi^(3/2)): by hand, for power -1/2."""
    points = [("0", "-1/2", "above"), ("0", "-1/2", "below")]
    found = laws(density(points, amplitudes=["1/3", "1/5"]))
    c = 0.5 / np.pi**1.5 / (np.exp(-0.25j * np.pi) / 3 + np.exp(0.25j * np.pi) / 5)
    assert abs(value(found["amplitude"], 4, tau="1") * 8 / c - 1) < 1e-13
    assert abs(value(found["F"], 4, tau="1") * 64 / abs(c) ** 2 - 1) < 1e-13


@pytest.mark.parametrize(
    ("setting", "says"),
    [
        (density([("0", "1/2", "above")], amplitudes=["1"]), "add its bands"),
        (density([("0", "0", "above")], amplitudes=["1"]), "inverse logarithms"),
        (density([("0", "1", "above")], amplitudes=["1"]), "inverse logarithms"),
        (two_edges(*SEMICIRCLE, below=False), "assume (4*g)*tau < 2*pi"),
        (density([("0", "-s", "above")], amplitudes=["1"], symbols='s = "positive"'), "powers that are numbers"),
    ],
)
def test_what_is_not_covered_says_so(setting: Setting, says: str) -> None:
    with pytest.raises(NotCovered, match=says.replace("(", r"\(").replace(")", r"\)").replace("*", r"\*")):
        derive_asymptotics(setting, Wish("asymptotics"))
