"""Integrals up to infinity against closed forms and mpmath."""

from __future__ import annotations

import mpmath
import pytest
from flint import acb, ctx

from derive.errors import NeedsPrecision, NotCovered
from derive.formula.grammar import parse
from derive.numerics.evaluate import Values, enclose


def ball(source: str, bits: int = 128) -> acb:
    with ctx.workprec(bits):
        return enclose(parse(source), Values({}))


@pytest.mark.parametrize(
    "source",
    [
        "integral(x from 0 to infinity: exp(-x)) - 1",
        "integral(x from 0 to infinity: exp(-x^2)) - sqrt(pi)/2",
        "integral(x from 0 to infinity: exp(-x)*log(x)) + euler_gamma",
        "integral(x from 1 to infinity: 1/x^3) - 1/2",
        "integral(x from 0 to infinity: x^(3/2)*exp(-x)) - Gamma(5/2)",
    ],
)
def test_closed_forms(source: str) -> None:
    """Textbook integrals."""
    found = ball(source)
    assert found.contains(0) and found.rad() < 1e-25
    assert not (found + acb("1e-20")).contains(0)


def test_an_inverse_square_logarithm() -> None:
    """Outside oracle: mpmath.quad in the variable log x."""
    found = ball("integral(x from 0 to infinity: exp(-x)/((10 - log(x))^2 + pi^2))")
    with mpmath.workdps(30):
        def inside(w: mpmath.mpf) -> mpmath.mpf:
            return mpmath.exp(w - mpmath.exp(w)) / ((10 - w) ** 2 + mpmath.pi**2)

        wanted = mpmath.quad(inside, [-80, -40, -20, -10, -5, 0, 2, 4, 6])
        assert abs(mpmath.mpf(found.real.str(30, radius=False)) - wanted) < 1e-22


def test_what_does_not_converge_is_not_answered() -> None:
    with pytest.raises(NeedsPrecision):
        ball("integral(x from 0 to infinity: 1/(1 + x))", 64)
    with pytest.raises(NotCovered):
        ball("integral(x from infinity to 0: exp(-x))")
