"""Factors over a tower of roots, against sympy's factor_list over an extension, and multiplied out again."""

import pytest
import sympy

from derive.algebra.factor import factored
from derive.algebra.norm import split_by_norm
from derive.algebra.polynomial import multiplied
from derive.exact.adjoin import WithRoot
from derive.exact.field import Field
from derive.formula.grammar import parse
from derive.problem.setting import Domain

DOMAINS = {"g": Domain("positive", "positive"), "phi": Domain("real", "real")}


def over(also, coefficients):
    """A field with `also` in it, and the polynomial, constant term first."""
    field = Field.of([parse(f) for f in [*also, *coefficients]], DOMAINS)
    return field, [field.element(parse(c)) for c in coefficients]


def again(found):
    out = found[0]
    for f in found[1:]:
        out = multiplied(out, f)
    return out


@pytest.mark.parametrize("coefficients, extension", [
    (["2", "0", "-3*sqrt(2)*0 - 3", "0", "1"], "sqrt(2)"),  # (x^2 - 1)(x^2 - 2)
    (["-sqrt(2)", "1 - sqrt(2)", "1"], "sqrt(2)"),
    (["1", "sqrt(2)", "1"], "sqrt(2)"),  # stays whole over the reals
    (["1", "sqrt(5)", "1"], "sqrt(5)"),
    (["-2*sqrt(3)", "-2", "sqrt(3)", "1"], "sqrt(3)"),  # (x^2 - 2)(x + sqrt(3))
    (["1", "i - i", "1"], "i"),
])
def test_as_many_factors_as_sympy_finds(coefficients, extension):
    field, p = over([extension], coefficients)
    x = sympy.Symbol("x")
    theirs = sum(sympy.sympify(c.replace("i", "I") if "sqrt" not in c else c) * x**k
                 for k, c in enumerate(coefficients))
    ext = sympy.I if extension == "i" else sympy.sympify(extension)
    ours = split_by_norm(field, p)
    degrees = [sympy.degree(f, x) for f, _ in sympy.factor_list(theirs, x, extension=ext)[1]]
    assert sorted(len(f) - 1 for f in ours) == sorted(degrees)
    assert again(ours) == p


def test_with_letters_and_phases():
    field, p = over([], ["sqrt(1 + g^2)*exp(i*phi)", "-(sqrt(1 + g^2) + exp(i*phi))", "1"])
    ours = split_by_norm(field, p)
    assert sorted(map(len, ours)) == [2, 2] and again(ours) == p


def test_a_root_that_is_there_already_is_found():
    """x^2 - 2 over Q(E), E^4 - 4 E^2 + 1 = 0: E = (sqrt(6) +- sqrt(2))/2, so that sqrt(2) is in Q(E) (by hand)."""
    base = Field.of([parse("1")], {})
    field = WithRoot(base, "E", [base.rational(c) for c in (1, 0, -4, 0)])
    p = [field.rational(-2), field.zero, field.one]
    found = factored(field, p)
    assert [len(f) for f, _ in found] == [2, 2] and again([f for f, _ in found]) == p
    assert len(factored(field, [field.rational(-5), field.zero, field.one])) == 1
