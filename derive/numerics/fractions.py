"""A formula as a ratio of polynomials over Q in one letter, every other letter at a rational value.

Sums with whole ends, binomial coefficients of whole numbers and whole powers are worked out: an equation such as
sum_j binomial(d, j)/(d - 2 j - E) = 0 has roots once d is a number.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import comb

from flint import fmpq, fmpq_poly

from derive.formula.tree import Formula

Ratio = tuple[fmpq_poly, fmpq_poly]
LONGEST_SUM = 400
HIGHEST_POWER = 400


def numerator(f: Formula, name: str, exact: Mapping[str, Fraction]) -> fmpq_poly | None:
    """What is above the line once common factors are out; None where f is no ratio of polynomials here."""
    ratio = _ratio(f, name, exact)
    return None if ratio is None else ratio[0]


def rational_at(f: Formula, exact: Mapping[str, Fraction]) -> Fraction | None:
    """The rational number that f is at rational values of its letters; None where it is none of that kind."""
    ratio = _ratio(f, "", exact)
    if ratio is None:
        return None
    value = ratio[0][0] / ratio[1][0]
    return Fraction(int(value.p), int(value.q))


def _ratio(f: Formula, name: str, exact: Mapping[str, Fraction]) -> Ratio | None:
    if f.head == "number":
        return _constant(f.args[0])
    if f.head == "letter":
        if f.args[0] == name:
            return fmpq_poly([0, 1]), fmpq_poly([1])
        return _constant(exact[f.args[0]]) if f.args[0] in exact else None
    if f.head in ("plus", "times"):
        return _together([_ratio(a, name, exact) for a in f.args], f.head)
    if f.head == "power":
        return _powered(f, name, exact)
    if f.head == "sum":
        return _summed(f, name, exact)
    if f.head == "call" and f.args[0] == "binomial":
        n, k = (_whole(a, name, exact) for a in f.args[1:])
        return None if n is None or k is None or n < 0 else _constant(Fraction(comb(n, k) if k >= 0 else 0))
    return None


def _constant(q: Fraction) -> Ratio:
    return fmpq_poly([fmpq(q.numerator, q.denominator)]), fmpq_poly([1])


def _whole(f: Formula, name: str, exact: Mapping[str, Fraction]) -> int | None:
    """The integer that f is; None where it is none, or depends on the letter."""
    ratio = _ratio(f, name, exact)
    if ratio is None or ratio[0].degree() > 0 or ratio[1].degree() > 0:
        return None
    value = ratio[0][0] / ratio[1][0]
    return int(value.p) if value.q == 1 else None


def _together(parts: list[Ratio | None], head: str) -> Ratio | None:
    total = _constant(Fraction(0 if head == "plus" else 1))
    for part in parts:
        if part is None:
            return None
        (a, b), (c, d) = total, part
        total = _lowest(a * d + c * b, b * d) if head == "plus" else _lowest(a * c, b * d)
    return total


def _lowest(a: fmpq_poly, b: fmpq_poly) -> Ratio:
    common = a.gcd(b)
    return (a // common, b // common) if common.degree() > 0 else (a, b)


def _powered(f: Formula, name: str, exact: Mapping[str, Fraction]) -> Ratio | None:
    base, n = _ratio(f.args[0], name, exact), _whole(f.args[1], name, exact)
    if base is None or n is None or abs(n) > HIGHEST_POWER or (n < 0 and base[0] == 0):
        return None
    a, b = base if n >= 0 else base[::-1]
    return a ** abs(n), b ** abs(n)


def _summed(f: Formula, name: str, exact: Mapping[str, Fraction]) -> Ratio | None:
    letter, low, high, body = f.args
    first, last = _whole(low, name, exact), _whole(high, name, exact)
    if first is None or last is None or last - first > LONGEST_SUM or letter == name:
        return None
    return _together([_ratio(body, name, {**exact, letter: Fraction(k)}) for k in range(first, last + 1)], "plus")
