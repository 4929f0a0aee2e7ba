"""An imperfect detector's numbers: what is left of an amplitude that was there and gave no click.

    "no":  1 - a P,  1 - a = sqrt(1 - eta) = exp(-kappa);      coth(kappa/2) = (1 + q)/(1 - q),  q = sqrt(1 - eta)

A root that can be taken on sight is taken, so that exact fields have less to adjoin.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import isqrt

from derive.exact.arguments import is_positive
from derive.formula.tree import (
    ONE,
    ZERO,
    Formula,
    call,
    free_letters,
    inverse,
    negate,
    number,
    plus,
    power,
    replace,
    times,
)
from derive.problem.setting import Domain


def missed(eta: Formula, domains: Mapping[str, Domain]) -> Formula:
    """q = sqrt(1 - eta)."""
    if eta.head == "number":
        return root_of(1 - eta.args[0])
    rest = _rest(eta)
    if rest.head == "call" and rest.args[0] == "exp":
        return call("exp", times(number(Fraction(1, 2)), rest.args[1]))
    even = rest.head == "power" and rest.args[1].head == "number" and rest.args[1].args[0] % 2 == 0
    if even and is_positive(rest.args[0], domains):
        half = rest.args[1].args[0] / 2
        return rest.args[0] if half == 1 else power(rest.args[0], number(half))
    return call("sqrt", rest)


def root_of(value: Fraction) -> Formula:
    """The square root of a rational number, as a number where it is one."""
    top, below = isqrt(value.numerator), isqrt(value.denominator)
    if top * top == value.numerator and below * below == value.denominator:
        return number(Fraction(top, below)) if top else ZERO
    return call("sqrt", number(value))


def _rest(eta: Formula) -> Formula:
    """1 - eta; the 1 of an eta written as 1 - X cancels."""
    if eta.head == "plus" and ONE in eta.args:
        others = [a for a in eta.args if a != ONE]
        if len(others) == len(eta.args) - 1:
            return plus(*(negate(a) for a in others))
    return plus(ONE, negate(eta))


def half_coth(q: Formula) -> Formula:
    """coth(kappa/2)."""
    return ONE if q == ZERO else times(plus(ONE, q), inverse(plus(ONE, negate(q))))


def half_tanh(q: Formula) -> Formula:
    """tanh(kappa/2)."""
    return ONE if q == ZERO else times(plus(ONE, negate(q)), inverse(plus(ONE, q)))


def vanishes_with_interval(eta: Formula, domains: Mapping[str, Domain]) -> bool:
    """Does the efficiency depend on tau and go to 0 with it: a weak, in the limit continuous, measurement?"""
    from derive.exact.zero import vanishes  # flint is loaded only where an efficiency depends on tau

    return "tau" in free_letters(eta) and vanishes(replace(eta, {"tau": ZERO}), domains) is True


def is_free_of_interval(eta: Formula) -> bool:
    """Does the efficiency stay the same when the interval is changed?"""
    return "tau" not in free_letters(eta)
