"""One argument of an exponential, however it is written, is one monomial (identities by hand)."""

import pytest

from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.problem.setting import Domain

WHOLE, REAL = Domain("integer", "integer >= 1"), Domain("real", "real")
DOMAINS = {"L": WHOLE, "k": WHOLE, "g": REAL, "t": REAL}


@pytest.mark.parametrize("text", [
    "2*cos(pi/(2 + 1)) - 1",
    "cos(pi*k/(2*L + 2)) - cos(pi*k/(1 + L)/2)",
    "sin(2*pi*k/(L + 1)) - 2*sin(pi*k/(L + 1))*cos(pi*k/(L + 1))",
    "cos(g*g*t) - cos(g^2*t)",
    "cos(g^3/g) - cos(g^2)",
    "cos((2*g)^2) - cos(4*g^2)",
    "exp(i*g/(t - 2*L)) - exp(-2*i*g/(4*L - 2*t))",
])
def test_equal_arguments_are_one(text):
    assert vanishes(parse(text), DOMAINS) is True


@pytest.mark.parametrize("text", ["cos(pi*k/(L + 1)) - cos(pi*k/L)", "cos(g^2) - cos(g)", "cos(pi/(2 + 1)) - 1"])
def test_different_arguments_stay_apart(text):
    assert vanishes(parse(text), DOMAINS) is not True
