"""Fractions with phases: common powers of exp(i phi) and common factors cancel, and cosines show (by hand)."""

import pytest

from derive.exact.field import Field
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.setting import Domain

DOMAINS = {"g": Domain("positive", "positive"), "phi": Domain("real", "real"), "chi": Domain("real", "real")}


def written(f):
    field = Field.of([parse(f)], DOMAINS)
    return text(field.formula(field.element(parse(f))))


@pytest.mark.parametrize("f, shown", [
    ("(exp(2*i*phi) + exp(i*phi))/(1 + exp(-i*phi))", "exp(2*i*phi)"),
    ("(1 - cos(phi)^2)/(1 + cos(phi))", "-cos(phi) + 1"),
    ("g*(2 + 2*cos(phi))/4", "g*(cos(phi) + 1)/2"),
    ("1/(exp(i*phi) + 3 + exp(-i*phi))", "1/(2*cos(phi) + 3)"),
    ("exp(21*i*phi)/(2*exp(21*i*phi) + exp(22*i*phi) + exp(20*i*phi))", "1/(2*(cos(phi) + 1))"),
    ("sin(phi)^2/(exp(i*phi) - 1)", "(exp(2*i*phi) + exp(i*phi) - 1 - exp(-i*phi))/(-4*exp(i*phi))"),
    ("(cos(phi) + cos(chi))*exp(i*chi)/(2*cos(phi) + 2*cos(chi))", "exp(i*chi)/2"),
])
def test_what_is_common_goes(f, shown):
    assert written(f) == written(shown) and len(written(f)) <= len(shown) + 30
    if "sin" not in f:
        assert written(f) == shown


def test_sums_of_fractions_stay_short():
    field = Field.of([parse("exp(i*phi)"), parse("g")], DOMAINS)
    x = field.element(parse("1/(1 + cos(phi))"))
    total = field.zero
    for _ in range(6):
        total = total + x * field.element(parse("1 + exp(i*phi)")) * field.conjugate(x)
    assert len(text(field.formula(total))) < 80
    assert total == x * x * field.element(parse("6*(1 + exp(i*phi))"))
