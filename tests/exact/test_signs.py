"""Which sums are known to be positive, and the roots a field takes for that; decided by hand, checked by evaluation."""

from fractions import Fraction

import pytest

from derive.exact.arguments import is_nonnegative, is_positive
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.problem.setting import POSITIVE, Domain

DOMAINS = {
    "eta": Domain("interval", "in (0, 1]", number(0), number(1), True, False),
    "p": Domain("interval", "in [0, 1)", number(0), number(1), False, True),
    "g": POSITIVE,
    "x": Domain("real", "real"),
}


@pytest.mark.parametrize("text, positive, nonnegative", [
    ("1 - eta", False, True),
    ("1 - p", True, True),
    ("2 - eta + 4*sqrt(1 - eta)", True, True),
    ("eta + g", True, True),
    ("1/2 - eta", False, False),
    ("g - eta", False, False),
    ("1 + x^2", True, True),
    ("x^2", False, True),
    ("1 + x", False, False),
    ("3 - 2*eta - p", True, True),
    ("-eta", False, False),
])
def test_signs(text, positive, nonnegative):
    f = parse(text)
    assert is_positive(f, DOMAINS) is positive
    assert is_nonnegative(f, DOMAINS) is nonnegative


@pytest.mark.parametrize("text, zero", [
    ("(1 - sqrt(1-eta))*(1 + sqrt(1-eta)) - eta", True),
    ("sqrt(2 - eta + 4*sqrt(1-eta))^2 - 2 + eta - 4*sqrt(1-eta)", True),
    ("sqrt(1-eta) - 1 + eta", False),
    ("sqrt(1/2 - eta)", None),
])
def test_root_of_one_minus_eta(text, zero):
    assert vanishes(parse(text), DOMAINS) is zero


def test_claims_hold_where_evaluated():
    """The bound 0 of 3 - 2 eta - p is reached in the limit only: at eta = 1, p -> 1."""
    assert all(3 - 2 * Fraction(a, 8) - Fraction(b, 8) > 0 for a in range(1, 9) for b in range(8))
