"""Sums without end, against zeta values and mpmath's own summation."""

from __future__ import annotations

import mpmath
import pytest
from flint import acb, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.numerics.evaluate import Values, enclose

BITS = 200


def ball(source: str) -> acb:
    with ctx.workprec(BITS):
        return enclose(parse(source), Values({}))


def close(x: arb, wanted: mpmath.mpf, digits: int) -> bool:
    with mpmath.workdps(60):
        return abs(mpmath.mpf(x.mid().str(60, radius=False)) - wanted) < mpmath.mpf(10) ** -digits


def test_zeta_values() -> None:
    """pi^2/6 and pi^4/90 (Euler; DLMF 25.6.1, from memory)."""
    assert ball("sum(m from 1 to infinity: 1/m^2) - pi^2/6").contains(0)
    assert ball("sum(m from 1 to infinity: 1/m^4) - pi^4/90").contains(0)
    assert not ball("sum(m from 2 to infinity: 1/m^2) - pi^2/6").contains(0)


@pytest.mark.parametrize(
    ("source", "term", "first"),
    [
        ("sum(m from 1 to infinity: log(1 + 1/m^2))", lambda m: mpmath.log(1 + 1 / m**2), 1),
        ("sum(m from 1 to infinity: sin(1/m)^2*exp(-1/m))", lambda m: mpmath.sin(1 / m) ** 2 * mpmath.exp(-1 / m), 1),
        (
            "sum(m from 1 to infinity: 1/sqrt((2*pi*m + 1/2)^2 - 1/4) - 1/sqrt((2*pi*m - 1/2)^2 - 1/4))",
            lambda m: 1 / mpmath.sqrt((2 * mpmath.pi * m + 0.5) ** 2 - 0.25)
            - 1 / mpmath.sqrt((2 * mpmath.pi * m - 0.5) ** 2 - 0.25),
            1,
        ),
    ],
)
def test_against_mpmath(source: str, term: object, first: int) -> None:
    """Outside oracle: mpmath.nsum at 30 digits."""
    found = ball(source)
    assert found.rad() < 1e-40
    with mpmath.workdps(30):
        assert close(found.real, mpmath.nsum(term, [first, mpmath.inf]), 25)


def test_a_closed_form_with_a_slow_tail() -> None:
    """sum log(1 + 1/m^2) = log(sinh(pi)/pi), from Euler's product for the sine (textbook)."""
    assert ball("sum(m from 1 to infinity: log(1 + 1/m^2)) - log(sinh(pi)/pi)").contains(0)


def test_fractional_powers() -> None:
    """Outside oracle: mpmath's Hurwitz zeta function (its general summation misses the slow tail)."""
    with mpmath.workdps(30):
        assert close(ball("sum(m from 3 to infinity: 1/m^(3/2))").real, mpmath.zeta(mpmath.mpf(3) / 2, 3), 25)


def test_the_precision_is_used() -> None:
    with ctx.workprec(1000):
        found = enclose(parse("sum(m from 1 to infinity: 1/(m*sqrt(m^2 + 1)))"), Values({}))
    assert found.rad() < arb(10) ** -200


def test_what_does_not_converge_is_refused() -> None:
    for source in ("sum(m from 1 to infinity: 1/m)", "sum(m from 1 to infinity: 1 + 1/m^2)"):
        with pytest.raises(OutsideValidity):
            ball(source)


def test_what_is_not_served_says_so() -> None:
    with pytest.raises((NotCovered, NeedsPrecision)):
        ball("sum(m from 1 to infinity: log(m)/m^2)")
    with pytest.raises(NotCovered):
        ball("sum(m from 1 to infinity: exp(-m))")
