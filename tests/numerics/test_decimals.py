"""Decimals against Python's own: the printed interval holds the ball, the printed number is the rounded midpoint."""

from __future__ import annotations

from fractions import Fraction

from flint import acb, arb, ctx, fmpq
from hypothesis import given
from hypothesis import strategies as st

from derive.numerics.decimals import rounded, spoken, with_radius
from derive.numerics.precision import bits_for, digits_of, power_of_ten

numbers = st.fractions(min_value=-(10**9), max_value=10**9, max_denominator=10**12)


def ball(q: Fraction, radius: Fraction) -> arb:
    with ctx.workprec(200):
        return arb(arb(fmpq(q.numerator, q.denominator)), arb(fmpq(radius.numerator, radius.denominator)))


@given(numbers, st.integers(1, 25), st.integers(-30, 2))
def test_value_and_radius_hold_the_number(q: Fraction, digits: int, size: int) -> None:
    """|q - value| <= radius, in Python's exact fractions."""
    value, radius = with_radius(ball(q, Fraction(10) ** size), digits)
    assert abs(Fraction(value) - q) <= Fraction(radius)
    assert Fraction(radius) >= Fraction(10) ** size


@given(numbers)
def test_rounded_to_six_digits(q: Fraction) -> None:
    """The same as Python's rounding of the exact fraction, up to half a unit of the sixth digit and a hair."""
    shown = Fraction(rounded(ball(q, Fraction(0)), 6))
    assert abs(shown - q) <= abs(q) * Fraction(500001, 10**11)


def test_wording() -> None:
    with ctx.workprec(100):
        assert rounded(arb(fmpq(1, 800))) == "0.00125"
        assert rounded(arb(0)) == "0"
        assert rounded(arb(10) ** -9 / 7) == "1.42857e-10"
        assert spoken(acb(1, -2) / 3) == "0.3333333333 - 0.6666666667*i"
        assert spoken(acb(0, -1)) == "-i"
        assert spoken(acb(fmpq(2, 3))) == "0.6666666667"
        assert with_radius(arb(5), 10) == ("5", "0")


def test_shared_digits_are_counted_downwards() -> None:
    with ctx.workprec(100):
        assert digits_of(power_of_ten(-30) * 2, arb(1)) == 29
        assert digits_of(power_of_ten(-30) / 2, arb(1)) == 30
        assert digits_of(arb(0), arb(1)) is None
        assert digits_of(power_of_ten(-3), power_of_ten(-2) * 5) == 1
    assert bits_for(100) > 332
