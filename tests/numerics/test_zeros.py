"""Zeros of entire functions: isolated, counted, and found missing."""

import mpmath
import pytest
from flint import acb, arb, ctx

from derive.errors import NeedsPrecision
from derive.numerics.zeros import clusters, count_inside, enclose_taylor


@pytest.fixture(autouse=True)
def working_precision():
    with ctx.workprec(400):
        yield


def _sine(rho="10"):
    return enclose_taylor(lambda z: z.sin(), lambda size: size.exp(), arb(rho), 300)


def _plus_bump(power):
    """(sin z - 1)^power has zeros pi/2 + 2 pi k, each of multiplicity 2 power."""
    return enclose_taylor(lambda z: (z.sin() - 1) ** power, lambda size: (size.exp() + 1) ** power, arb(6), 330)


def test_taylor_coefficients_hold_those_of_the_sine():
    """The textbook series of sin: (-1)^k/(2k+1)!."""
    g = _sine()
    for k in range(30):
        exact = arb((-1) ** k) / arb.fac_ui(2 * k + 1)
        assert g.coefficients[2 * k + 1].real.contains(exact) or abs(g.coefficients[2 * k + 1] - exact) < arb("1e-60")
        assert abs(g.coefficients[2 * k]) < arb("1e-60")


def test_zeros_of_the_sine():
    """sin vanishes at whole multiples of pi (mpmath's pi)."""
    found = clusters(_sine(), 30)
    assert [c.count for c in found] == [1] * 6  # +-pi, +-2 pi, +-3 pi; z = 0 is left to the count
    with mpmath.workdps(40):
        for n, c in enumerate(found):
            assert abs(mpmath.mpf(str(abs(c.centre).mid().str(38, radius=False))) - (n // 2 + 1) * mpmath.pi) < 1e-29
    assert count_inside(_sine(), arb("9.9").mid()) == 7
    assert count_inside(_sine(), arb("6").mid()) == 3


@pytest.mark.parametrize("power", [1, 2])
def test_multiple_zeros_are_one_disc(power):
    g = _plus_bump(power)
    found = clusters(g, 12)
    assert {c.count for c in found} == {2 * power}
    assert count_inside(g, arb("5").mid()) == 2 * power * 2


def test_a_circle_through_a_zero_is_refused():
    with pytest.raises(NeedsPrecision):
        count_inside(_sine(), arb.pi().mid())


def test_two_zeros_closer_than_a_disc_are_counted_together():
    near = acb("1e-40")
    g = enclose_taylor(
        lambda z: (z - 1) * (z - 1 - near) * (z + 2), lambda size: (size + 3) ** 3, arb(4), 390
    )
    with ctx.workprec(600):
        assert [c.count for c in clusters(g, 30)] == [2, 1]
