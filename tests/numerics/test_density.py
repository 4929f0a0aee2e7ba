"""Amplitudes between asks from a local density of states: against Bessel functions and mpmath's quadrature."""

from __future__ import annotations

import mpmath
import pytest
from flint import acb, arb, ctx

from derive.errors import NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.numerics.density import band_returns, completed, completed_returns, points_at
from derive.numerics.evaluate import Values
from derive.problem.setting import Setting
from tests.densities import LINE, SEMICIRCLE, TUNED_END, density, line_by_its_edges, two_bands, two_edges

AT = {"g": parse("1"), "tau": parse("2/5")}
PAIRS = {"a": parse("1/2"), "b": parse("2"), "tau": parse("2/5")}


def returns(setting: Setting, count: int, at: dict = AT, digits: int = 30) -> list:
    with ctx.workprec(int(3.4 * digits)):
        return band_returns(setting, lambda: Values.at(at), lambda: arb(2) / 5)(count)


def same(ball: acb, wanted: complex, within: float = 1e-20) -> bool:
    re, im = (mpmath.mpf(part.mid().str(40, radius=False)) for part in (ball.real, ball.imag))
    return abs(mpmath.mpc(re, im) - wanted) < within


@pytest.mark.parametrize("n", [1, 7, 300])
def test_line_and_half_line(n: int) -> None:
    """DLMF 10.9.4 with nu = 0 and nu = 1: int cos(x t) (1 - t^2)^(nu-1/2) dt gives J_nu(x)."""
    with mpmath.workdps(30):
        x = mpmath.mpf(4) / 5 * n
        assert same(returns(two_edges(*LINE), n)[n], mpmath.besselj(0, x))
        assert same(returns(two_edges(*SEMICIRCLE), n)[n], 2 * mpmath.besselj(1, x) / x)


@pytest.mark.parametrize("n", [1, 12])
def test_other_bands(n: int) -> None:
    """mpmath.quad of the density as it is written."""
    with mpmath.workdps(30):
        t = mpmath.mpf(2) / 5 * n

        def tuned(e: mpmath.mpf) -> mpmath.mpf:
            return mpmath.sqrt((2 + e) / (2 - e)) / (2 * mpmath.pi) * mpmath.expj(-e * t)

        def pairs(e: mpmath.mpf) -> mpmath.mpf:
            return 2 * e / (mpmath.pi * mpmath.sqrt((e**2 - 0.25) * (4 - e**2))) * mpmath.cos(e * t)

        def steep(e: mpmath.mpf) -> mpmath.mpf:
            return (2 + e) ** mpmath.mpf("-0.25") * (2 - e) ** mpmath.mpf("0.75") / weight * mpmath.expj(-e * t)

        weight = mpmath.mpf(4) ** mpmath.mpf("1.5") * mpmath.beta(0.75, 1.75)
        assert same(returns(two_edges(*TUNED_END), n)[n], mpmath.quad(tuned, [-2, 0, 2]), 1e-12)
        assert same(returns(two_bands(), n, PAIRS)[n], mpmath.quad(pairs, [0.5, 1, 2]), 1e-12)
        kummer = two_edges("-1/4", "3/4", "1/((4*g)^(3/2)*Gamma(3/4)*Gamma(7/4)/Gamma(5/2))")
        assert same(returns(kummer, n)[n], mpmath.quad(steep, [-2, 0, 2]), 1e-12)


def test_balls_hold_what_a_finer_run_finds() -> None:
    coarse, fine = (returns(two_bands(), 200, PAIRS, digits) for digits in (15, 60))
    assert all(a.overlaps(b) and a.rad() < 1e-9 for a, b in zip(coarse, fine, strict=True))


def test_a_pole_next_to_the_band() -> None:
    """A tree of branching 2: rho = 3 sqrt(8 g^2 - E^2)/(2 pi (9 g^2 - E^2)), the pole 3 g beside the edge 2.83 g
    (regular trees, "Random walks on infinite graphs and groups", textbook; from memory); u by mpmath.quad."""
    ends = [("-sqrt(8)*g", "1/2", "above"), ("sqrt(8)*g", "1/2", "below")]
    tree = density(ends, [("-sqrt(8)*g", "sqrt(8)*g", "3/(2*pi*(9*g^2 - E^2))")])
    with mpmath.workdps(25):
        root = mpmath.sqrt(8)

        def rho(e: mpmath.mpf) -> mpmath.mpf:
            return 3 * mpmath.sqrt(8 - e**2) / (2 * mpmath.pi * (9 - e**2)) * mpmath.cos(2 * e)

        assert same(returns(tree, 5)[5], mpmath.quad(rho, [-root, 0, root]), 1e-14)


def test_what_cannot_be_integrated_is_said() -> None:
    with pytest.raises(OutsideValidity, match="hold a weight of 0.5"):
        returns(two_edges("1/2", "1/2", "1/(4*pi*g^2)"), 3)
    with pytest.raises(OutsideValidity, match="from low to high"):
        returns(two_bands(), 3, {**PAIRS, "a": parse("3")})
    with pytest.raises(NotCovered, match="singularity too close"):
        returns(two_edges("1/2", "1/2", "1/(2*pi*(g^2 - E^2))"), 3)
    with pytest.raises(NotCovered, match="constant factor"):
        returns(two_edges("1/3", "1/3", "E^2"), 3)


@pytest.mark.parametrize("share", [1, 2])
def test_completed_densities(share: int) -> None:
    """int rho(E) exp(-i E t) dE by mpmath.quad of the density that the singular points are completed to."""
    setting = density([("w", "-1/3", "both")], amplitudes=["c"], symbols='w = "real", c = "positive"')
    values = {"w": parse("1/2"), "c": parse("1/5"), "tau": parse("1")}
    u = completed_returns(lambda: points_at(setting, Values.at(values)), lambda: arb(1), share)(3)
    s = completed(points_at(setting, Values.at(values)), share).spread
    width = mpmath.mpf(s.numerator) / s.denominator

    def piece(e: mpmath.mpf) -> mpmath.mpf:
        return 0.2 * e ** (mpmath.mpf(-1) / 3) * mpmath.exp(-e / width)

    for n in (1, 3):
        turning = mpmath.quad(lambda e, n=n: 2 * piece(e) * mpmath.cos(e * n), [0, 0.1, 1, 5, 60])
        rest = 1 - mpmath.quad(lambda e: 2 * piece(e), [0, 0.1, 1, 5, 60])
        assert 0 < rest < 1
        wanted = turning * mpmath.expj(-0.5 * n) + rest * mpmath.exp(-32 * n**2)
        assert same(u[n], wanted, 1e-7)
    assert u[0] == 1


def test_points_are_told_side_by_side() -> None:
    found = points_at(line_by_its_edges(), Values.at(AT))
    assert [(p.above, str(p.power)) for p in found] == [(True, "-1/2"), (False, "-1/2")]
    with pytest.raises(OutsideValidity):
        points_at(density([("0", "-1/2", "above")], amplitudes=["g - 2"]), Values.at(AT))
