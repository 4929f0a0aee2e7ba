"""Taylor coefficients in one letter, exactly, of a formula built from sums, products, whole powers, exp and sqrt.

`taylor(f, "tau", field, n)` gives the coefficients of tau^0 ... tau^(n-1) as elements of a field that holds the other
letters.  exp is expanded where its argument vanishes with the letter, sqrt where its radicand starts from 1; what does
not start that way, and everything else with the letter in it, is `NotCovered`.
"""

from __future__ import annotations

from fractions import Fraction

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters

Coefficients = list[Element]


def taylor(f: Formula, name: str, field: Field, n: int) -> Coefficients:
    """Coefficients of name^0 ... name^(n-1)."""
    if name not in free_letters(f):
        return [field.element(f), *[field.zero] * (n - 1)]
    if f.head == "letter":
        return [field.one if k == 1 else field.zero for k in range(n)]
    if f.head in ("plus", "times"):
        parts = [taylor(a, name, field, n) for a in f.args]
        total = parts[0]
        for part in parts[1:]:
            total = _added(total, part) if f.head == "plus" else _multiplied(total, part)
        return total
    if f.head == "power" and f.args[1].head == "number" and f.args[1].args[0].denominator == 1:
        return _power(taylor(f.args[0], name, field, n), int(f.args[1].args[0]))
    if f.head == "call" and f.args[0] in ("exp", "sqrt"):
        inner = taylor(f.args[1], name, field, n)
        return _exponential(inner) if f.args[0] == "exp" else _root(inner, f)
    raise NotCovered(f"{text(f)} is not expanded in {name} exactly")


def _added(a: Coefficients, b: Coefficients) -> Coefficients:
    return [x + y for x, y in zip(a, b, strict=True)]


def _multiplied(a: Coefficients, b: Coefficients) -> Coefficients:
    out = [a[0].field.zero] * len(a)
    for i, x in enumerate(a):
        if x:
            for j in range(len(a) - i):
                out[i + j] = out[i + j] + x * b[j]
    return out


def _power(a: Coefficients, n: int) -> Coefficients:
    if n < 0:
        if not a[0]:
            raise NotCovered("a negative power of what vanishes at 0")
        a, n = _inverse(a), -n
    out = [a[0].field.one, *[a[0].field.zero] * (len(a) - 1)]
    for _ in range(n):
        out = _multiplied(out, a)
    return out


def _inverse(a: Coefficients) -> Coefficients:
    first = a[0].field.one / a[0]
    out = [first]
    for k in range(1, len(a)):
        total = a[0].field.zero
        for m in range(1, k + 1):
            total = total + a[m] * out[k - m]
        out.append(-(total * first))
    return out


def _exponential(a: Coefficients) -> Coefficients:
    """k e_k = sum_m m a_m e_(k-m)."""
    if a[0]:
        raise NotCovered("an exponential whose argument does not vanish at 0")
    out = [a[0].field.one]
    for k in range(1, len(a)):
        total = a[0].field.zero
        for m in range(1, k + 1):
            total = total + (a[m] * out[k - m]).scaled(Fraction(m, k))
        out.append(total)
    return out


def _root(a: Coefficients, f: Formula) -> Coefficients:
    """r_k = (a_k - sum_(0<m<k) r_m r_(k-m))/2, r_0 = 1."""
    if a[0] - a[0].field.one:
        raise NotCovered(f"{text(f)} does not start from 1")
    out = [a[0].field.one]
    for k in range(1, len(a)):
        total = a[k]
        for m in range(1, k):
            total = total - out[m] * out[k - m]
        out.append(total.scaled(Fraction(1, 2)))
    return out
