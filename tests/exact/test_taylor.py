"""Taylor coefficients in tau, exactly, against mpmath's."""

import mpmath
import pytest

from derive.errors import NotCovered
from derive.exact.field import Field
from derive.exact.taylor import taylor
from derive.formula.grammar import parse
from derive.formula.tree import letter
from derive.problem.setting import POSITIVE

FIELD = Field.of([letter("g")], {"g": POSITIVE})


@pytest.mark.parametrize("text, function", [
    ("exp(-g*tau)", lambda t: mpmath.exp(-2 * t)),
    ("sqrt(1 - 4*g*tau + tau^2)", lambda t: mpmath.sqrt(1 - 8 * t + t * t)),
    ("(1 + g*tau)^-2*(3 - tau)", lambda t: (1 + 2 * t) ** -2 * (3 - t)),
])
def test_against_mpmath(text, function):
    with mpmath.workdps(30):
        expected = mpmath.taylor(function, 0, 5)
        found = taylor(parse(text), "tau", FIELD, 6)
        for a, b in zip(found, expected, strict=True):
            value = sum(mpmath.mpf(int(c.p)) / int(c.q) * 2 ** sum(map(int, m)) for m, c in a.num.terms())
            assert abs(value - b) < mpmath.mpf(10) ** -20


@pytest.mark.parametrize("text", ["exp(1 + tau)", "sqrt(2 + tau)", "tau^-1", "sin(tau)", "sqrt(tau)"])
def test_what_is_not_expanded(text):
    with pytest.raises(NotCovered):
        taylor(parse(text), "tau", FIELD, 4)
