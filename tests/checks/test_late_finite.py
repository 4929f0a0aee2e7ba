"""Poles, rates and late laws on finite graphs: what holds agrees, every planted fault is refuted."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg

from derive import Problem
from derive.checks.asymptotics.finite import check_late_finite
from derive.checks.asymptotics.finite_plot import tail_plot
from derive.checks.asymptotics.poles import check_late_poles
from derive.checks.asymptotics.rates import check_late_rates
from derive.formula.grammar import parse
from derive.formula.tree import operator
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Setting
from derive.record.holds import kind_of
from derive.record.said import Claim, Finding, Number


def setting_of(family: str, sites: int, start: int) -> Setting:
    graph = {"family": family, "sites": sites, "hopping": "-g"}
    return Problem(graph=graph, detector={"at": 0}, start={"at": start}, symbols={"g": "positive"}).setting


HEXAGON, THREE = setting_of("ring", 6, 3), setting_of("chain", 3, 2)


def at(tau: str) -> Check:
    return Check(samples=0, points=((("g", parse("1")), ("tau", parse(tau))),))


def claim(about: str, formula: str, holds: str = "exactly", j: int | None = None) -> Claim:
    keys = () if j is None else (("pole", j),)
    return Claim("claim.mine", "asymptotics", Quantity(about, keys), parse(formula), kind_of(holds), origin="user")


def eigenvalues(gt: float) -> np.ndarray:
    """Of Q U on the hexagon, largest first, the dark ones left out; scipy and numpy."""
    ring = np.roll(np.eye(6), 1, axis=0) + np.roll(np.eye(6), -1, axis=0)
    step = scipy.linalg.expm(1j * gt * ring)
    step[0] = 0
    found = np.linalg.eigvals(step)
    inside = found[np.abs(found) < 1 - 1e-9]
    return inside[np.argsort(-np.abs(inside))]


def certified(about: str, j: int | None = None) -> float:
    """The number that the road gives a derived entry."""
    mine = claim(about, "1", j=j)
    mine = Claim(mine.id, mine.topic, mine.quantity, operator("x"))
    found = check_late_poles(HEXAGON, (mine,), at("7/10"))
    value = found.values["claim.mine"]
    assert isinstance(value, Number) and found.findings["claim.mine"].verdict == "agrees"
    return float(value.value)


def test_numbers_are_those_of_linear_algebra() -> None:
    """Moduli, angles, rate and the tail's start by numpy's eigenvectors."""
    lam = eigenvalues(0.7)
    assert certified("pole modulus", 1) == pytest.approx(1 / abs(lam[0]), rel=1e-12)
    assert certified("pole angle", 1) == pytest.approx(abs(np.angle(lam[0])), rel=1e-10)
    assert certified("pole modulus", 2) == pytest.approx(1 / abs(lam[2]), rel=1e-12)
    assert certified("tail rate") == pytest.approx(-2 * np.log(abs(lam[0])), rel=1e-10)
    ring = np.roll(np.eye(6), 1, axis=0) + np.roll(np.eye(6), -1, axis=0)
    u = scipy.linalg.expm(0.7j * ring)
    phi, psi = [], np.eye(6, dtype=complex)[3]
    for _ in range(3):
        moved = u @ psi
        phi.append(moved[0])
        moved[0] = 0
        psi = moved
    c = np.linalg.solve(np.vander(lam[:3], 3, increasing=True).T, np.array(phi))  # phi_1 ... phi_3 fix the three c
    ratio = np.log(100 * abs(c[2]) / (abs(c[0]) + abs(c[1]))) / np.log(abs(lam[0]) / abs(lam[2]))
    assert certified("tail start") == pytest.approx(1 + ratio, rel=1e-9)


def enclosed(about: str, formula: str, j: int | None = None, tau: str = "7/10", setting: Setting = HEXAGON) -> Finding:
    return check_late_poles(setting, (claim(about, formula, j=j),), at(tau)).findings["claim.mine"]


MODULUS = "1.09358135026312091796081116477872"


def test_a_claimed_number_shares_its_digits() -> None:
    assert enclosed("pole modulus", MODULUS, 1).verdict == "agrees"
    assert enclosed("pole modulus", MODULUS[:20] + "9", 1).verdict == "refuted"
    assert enclosed("pole modulus", MODULUS, 2).verdict == "refuted"
    assert enclosed("pole modulus", MODULUS, 3).verdict == "untested"  # two moduli are all there are
    assert enclosed("tail rate", f"2*log({MODULUS})").verdict == "agrees"


PAIRED = "-2*log(abs(cos(g*tau/sqrt(2))))"


@pytest.mark.parametrize("check", ["enclosure", "trend"])
def test_rates_in_closed_form(check: str) -> None:
    """Three cavities: while the poles pair, |lambda|^2 is their product cos^2(g tau/sqrt 2); no longer at g tau = 2."""
    def finding(formula: str, tau: str) -> str | None:
        road = check_late_poles if check == "enclosure" else check_late_rates
        found = road(THREE, (claim("tail rate", formula),), at(tau)).findings
        return found["claim.mine"].verdict if found else None

    assert finding(PAIRED, "7/10") == "agrees"
    assert finding(PAIRED, "2") == "refuted"
    assert finding(f"2*({PAIRED})", "7/10") == "refuted"  # of the amplitude taken for that of the probability
    assert finding(PAIRED.replace("-2", "-1"), "7/10") == "refuted"


C, S = "cos(sqrt(2)*g*tau)", "sin(g*tau/sqrt(2))^2"
ROOT = f"sqrt((1 + 3*{C})^2/4 - 4*cos(g*tau/sqrt(2))^2)"
NEAR, FAR = f"((1 + 3*{C})/2 - {ROOT})/2", f"((1 + 3*{C})/2 + {ROOT})/2"


def law(near: str, far: str, front: str = "1") -> str:
    return f"{front}*({S}*(1 + {near})/({near} - {far}))^2*abs({near})^(2*n - 2)"


def late(formula: str, holds: str = "as n -> infinity", about: str = "detection probability") -> Finding:
    return check_late_finite(THREE, (claim(about, formula, holds),), at("2")).findings["claim.mine"]


def test_the_nearest_pole_alone_is_the_law_in_the_limit() -> None:
    """c_1 = B(x)/(x - y) at the larger of two real roots: partial fractions by hand."""
    assert late(law(NEAR, FAR)).verdict == "agrees"
    assert late(law(NEAR, FAR), "as n -> infinity, within 1/100").verdict == "agrees"


@pytest.mark.parametrize(
    "planted",
    [law(FAR, NEAR), law(NEAR, FAR, "2"), law(NEAR, FAR).replace("2*n - 2", "2*n"), law(NEAR, FAR).replace("2*n", "n"),
     law(NEAR, FAR).replace("(1 + ", "(1 - "), f"({law(NEAR, FAR)})/n"],
)
def test_planted_laws_are_refuted(planted: str) -> None:
    assert late(planted).verdict == "refuted"


def test_what_is_not_followed_is_untested() -> None:
    assert late("1/n", "as n -> infinity, smooth part").verdict == "untested"


def test_the_figure_shows_clicks_below_their_envelope() -> None:
    """From the tail's start on no click exceeds the nearest poles' envelope by more than the hundredth allowed."""
    rate = Claim("asymptotics.rate", "asymptotics", Quantity("tail rate"), operator("x"))
    (plot,) = tail_plot(HEXAGON, (rate,), at("7/10"))
    envelope, seen = (dict(zip(c.x, map(float, c.y), strict=True)) for c in plot.curves)
    late = [n for n in seen if int(n) >= 17]
    assert all(seen[n] < 1.01**2 * envelope[n] for n in late) and max(seen[n] / envelope[n] for n in late) > 0.9
    assert tail_plot(HEXAGON, (), at("7/10")) == ()
