"""Power series in tau: against mpmath's values near tau = 0 and against textbook coefficients."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest
from flint import ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.numerics.evaluate import Values
from derive.numerics.series import enclose_series
from tests.numerics.oracle import by_mpmath

LENGTH = 6


def coefficients(source: str, length: int = LENGTH) -> list:
    with ctx.workprec(220):
        return enclose_series(parse(source), Values.at({"g": number(Fraction(1, 3))}), length)


EXPANDED = [
    "sin(g*tau)/tau", "exp(i*tau)*conj(exp(2*i*tau))", "abs(1 + i*tau)", "coth(tau) - 1/tau", "sqrt(tau^2 + tau^3)",
    "log(1 + g*tau)", "bessel_J(2, g*tau)", "bessel_I(1/2, 1 + tau)", "bessel_J(g, 2 - tau)", "asin(g + tau)",
    "acos(tau)", "atan(2*tau + i/2)", "elliptic_K(tau)", "Gamma(1 + tau)", "tau*cot(tau)", "(1 + tau)^(1/3)",
    "(2 + tau)^tau", "Re(exp(i*tau))", "Im((1 + i*tau)^3)", "tan(tau)", "tanh(g + tau)", "binomial(5 + tau, 2)",
    "floor(g + tau)", "cosh(tau)*sinh(tau)", "abs(i*tau - 2*tau)", "1/(1 - tau) + 1/tau - 1/tau",
    "(exp(tau) - 1)^2/tau^2",
]  # fmt: skip


@pytest.mark.parametrize("source", EXPANDED)
def test_partial_sums_approach_the_function(source: str) -> None:
    """f - partial sum falls like tau^6: mpmath's f at tau = 1e-6 and 1e-7, real tau, to a factor of 3."""
    found = coefficients(source)
    with mpmath.workdps(80):
        gaps = []
        for exponent in (6, 7):
            tau = mpmath.mpf(10) ** -exponent
            total = sum(_number(c) * tau**k for k, c in enumerate(found))
            gaps.append(abs(by_mpmath(source, {"g": mpmath.mpf(1) / 3, "tau": tau}, 90) - total))
        assert gaps[0] < mpmath.mpf(10) ** (-6 * LENGTH + 4)
        assert gaps[1] < mpmath.mpf(10) ** -55 or gaps[1] < gaps[0] / mpmath.mpf(10) ** (LENGTH - 1)


def _number(c) -> mpmath.mpc:  # type: ignore[no-untyped-def]
    return mpmath.mpc(c.real.mid().str(70, radius=False), c.imag.mid().str(70, radius=False))


def test_bernoulli_numbers() -> None:
    """tau/(exp(tau) - 1) = sum B_n tau^n/n! (textbook; B_n from mpmath)."""
    found = coefficients("tau/(exp(tau) - 1)", 9)
    for n, c in enumerate(found):
        b = mpmath.bernfrac(n)
        assert c.overlaps(_ball(Fraction(int(b[0]), int(b[1])) / _factorial(n)))


def _factorial(n: int) -> int:
    return int(mpmath.factorial(n))


def _ball(q: Fraction):  # type: ignore[no-untyped-def]
    from flint import acb, fmpq

    with ctx.workprec(220):
        return acb(fmpq(q.numerator, q.denominator))


def test_conjugates_act_on_coefficients() -> None:
    """abs(exp(i*g*tau)) = 1 for real tau: every later coefficient vanishes."""
    one, *rest = coefficients("abs(exp(i*g*tau))")
    assert one.contains(1)
    assert all(c.contains(0) and c.abs_upper() < 1e-50 for c in rest)


@pytest.mark.parametrize("source", ["sqrt(tau)", "1/tau", "log(tau)", "1/(tau - tau)", "tau^(1/2)*tau", "coth(tau)"])
def test_no_power_series(source: str) -> None:
    with pytest.raises(OutsideValidity):
        coefficients(source)


def test_not_expanded_and_undecided() -> None:
    with pytest.raises(NotCovered):
        coefficients("integral(x from 0 to 1: exp(tau*x))")
    with pytest.raises(NotCovered):
        coefficients("bessel_J(tau, 1)")
    with pytest.raises(NeedsPrecision):
        coefficients("1/(sqrt(2)^2 - 2 + tau)")
    with pytest.raises(NeedsPrecision):
        coefficients("floor(2 + tau)")


def test_the_process_wide_cap_is_left_alone() -> None:
    before = ctx.cap
    coefficients("exp(tau)", 40)
    assert ctx.cap == before
