"""A formula in one letter as a sum of exponentials, where it is one: values and integrals without quadrature.

    f(t) = sum_k c_k e^(l_k t),      integral over [t_1, t_2] = sum_k c_k (e^(l_k t_2) - e^(l_k t_1))/l_k

Sums, sums over roots and products of constants, exponentials, cosines and sines of multiples of t are taken apart;
roots are found once, whatever number of t is asked for.  Anything else is no wave, and `wave_of` returns None.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from flint import acb

from derive.errors import NeedsPrecision
from derive.formula.tree import Formula, free_letters, letter, number, times
from derive.numerics.evaluate import Values, enclose, whole_number
from derive.numerics.roots import enclose_roots

MOST = 20_000
"""Terms beyond which a product is not multiplied out."""
Terms = list[tuple[acb, acb]]


@dataclass(frozen=True)
class Wave:
    """(c, l) of every term c e^(l t)."""

    terms: tuple[tuple[acb, acb], ...]

    def at(self, t: acb) -> acb:
        return _total(c * (rate * t).exp() for c, rate in self.terms)

    def integral(self, start: acb, end: acb) -> acb:
        """`NeedsPrecision` where an l is not told from 0."""
        return _total(c * _integrated(rate, start, end) for c, rate in self.terms)


def wave_of(f: Formula, name: str, values: Values) -> Wave | None:
    """f as a wave in the letter `name`, at the values of the other letters; None where it is no such sum."""
    terms = _terms(f, name, values)
    return None if terms is None else Wave(tuple(terms))


def _integrated(rate: acb, start: acb, end: acb) -> acb:
    if rate.is_zero():
        return end - start
    if rate.contains(0):
        raise NeedsPrecision("a rate that is not told from zero")
    return ((rate * end).exp() - (rate * start).exp()) / rate


def _total(terms: Iterable[acb]) -> acb:
    total = acb(0)
    for x in terms:
        total += x
    return total


def _terms(f: Formula, name: str, values: Values) -> Terms | None:
    if name not in free_letters(f):
        return [(enclose(f, values), acb(0))]
    if f.head == "plus":
        return _joined(_terms(a, name, values) for a in f.args)
    if f.head == "times":
        return _product(f, name, values)
    if f.head == "rootsum" and name not in free_letters(f.args[1]):
        bound, polynomial, body = f.args
        roots = enclose_roots(polynomial, bound, values)
        return _joined(_terms(body, name, values.with_letter(bound, x)) for x in roots)
    if f.head == "sum" and not any(name in free_letters(a) for a in f.args[1:3]):
        bound, low, high, body = f.args
        first, last = (whole_number(a, values, "a sum's end") for a in (low, high))
        each = range(first, last + 1)
        return _joined(_terms(body, name, values.with_letter(bound, acb(m), Fraction(m))) for m in each)
    return _single(f, name, values) if f.head == "call" else None


def _joined(parts: Iterable[Terms | None]) -> Terms | None:
    out: Terms = []
    for part in parts:
        if part is None:
            return None
        out += part
    return out


def _product(f: Formula, name: str, values: Values) -> Terms | None:
    still = enclose(times(number(1), *(a for a in f.args if name not in free_letters(a))), values)
    out: Terms = [(still, acb(0))]
    for a in f.args:
        if name in free_letters(a):
            more = _terms(a, name, values)
            if more is None or len(more) * len(out) > MOST:
                return None
            out = [(c * d, x + y) for c, x in out for d, y in more]
    return out


def _single(f: Formula, name: str, values: Values) -> Terms | None:
    """exp, cos or sin of a multiple of the letter."""
    kind = f.args[0]
    rate = _slope(f.args[1], name, values) if kind in ("exp", "cos", "sin") else None
    if rate is None:
        return None
    if kind == "exp":
        return [(acb(1), rate)]
    turn, half = acb(0, 1) * rate, acb(1) / 2
    if kind == "cos":
        return [(half, turn), (half, -turn)]
    return [(acb(0, -1) * half, turn), (acb(0, 1) * half, -turn)]


def _slope(f: Formula, name: str, values: Values) -> acb | None:
    """l where f = l t."""
    factors = f.args if f.head == "times" else (f,)
    others = [a for a in factors if a != letter(name)]
    if len(others) != len(factors) - 1 or any(name in free_letters(a) for a in others):
        return None
    return enclose(times(number(1), *others), values)
