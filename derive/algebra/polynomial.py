"""Polynomials in one letter over an exact field: lists of coefficients, constant term first, no zero on top."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import comb

from derive.algebra.bright import Krylov
from derive.exact.field import Element, Field
from derive.formula.tree import Formula, letter, number, plus, power, times

Polynomial = list[Element]


def trimmed(p: Sequence[Element]) -> Polynomial:
    out = list(p)
    while out and not out[-1]:
        out.pop()
    return out


def added(a: Sequence[Element], b: Sequence[Element]) -> Polynomial:
    longer, shorter = (a, b) if len(a) >= len(b) else (b, a)
    return trimmed([x + shorter[k] if k < len(shorter) else x for k, x in enumerate(longer)])


def scaled(a: Sequence[Element], q: Fraction) -> Polynomial:
    return trimmed([x.scaled(q) for x in a])


def multiplied(a: Sequence[Element], b: Sequence[Element]) -> Polynomial:
    out: list[Element | None] = [None] * (len(a) + len(b) - 1 if a and b else 0)
    for i, x in enumerate(a):
        for j, y in enumerate(b):
            have = out[i + j]
            out[i + j] = x * y if have is None else have + x * y
    return trimmed([x for x in out if x is not None])


def integral(p: Sequence[Element]) -> tuple[Polynomial, Element]:
    """(q, D) for a monic p: q is monic without denominators, and its roots are D times those of p."""
    field = p[-1].field
    common = field.ring.constant(1)
    for c in p:
        if c.den is not None:
            common = common * c.den // common.gcd(c.den)
    scale = Element(field, common)
    out, raised = [field.one], field.one
    for c in reversed(p[:-1]):
        raised = raised * scale
        out.append(c * raised)
    return out[::-1], scale


def taylor(a: Sequence[Element], j: int) -> Polynomial:
    """The j-th derivative over j!."""
    return [x.scaled(Fraction(comb(k, j))) for k, x in enumerate(a) if k >= j]


def at(a: Sequence[Element], x: Element) -> Element:
    """a(x), x in the coefficients' own field."""
    total = x.field.zero
    for c in reversed(a):
        total = total * x + c
    return total


def characteristic(space: Krylov) -> Polynomial:
    """det(E - A) on an invariant space, monic.  For a space grown from one vector a three-term recurrence."""
    if all(abs(i - j) <= 1 for j, column in enumerate(space.columns) for i in column):
        return continuants(space, 0)
    return faddeev(space.field, _dense(space))


def continuants(space: Krylov, first: int) -> Polynomial:
    """det(E - A) of the tridiagonal block from `first` on: q_(j+1) = (E - a_jj) q_j - a_(j,j-1) a_(j-1,j) q_(j-1)."""
    field, columns = space.field, space.columns
    before: Polynomial = []
    now: Polynomial = [field.one]
    for j in range(first, space.size):
        a = columns[j].get(j, field.zero)
        following = added([field.zero, *now], [-(a * c) for c in now])
        if j > first:
            b = columns[j - 1].get(j, field.zero) * columns[j].get(j - 1, field.zero)
            following = added(following, [-(b * c) for c in before])
        before, now = now, following
    return now


def _dense(space: Krylov) -> list[list[Element]]:
    zero = space.field.zero
    return [[column.get(i, zero) for column in space.columns] for i in range(space.size)]


def faddeev(field: Field, a: list[list[Element]]) -> Polynomial:
    """det(E - a), monic, by the Faddeev-LeVerrier recurrence, which divides by integers only."""
    n = len(a)
    out = [field.one]
    m = [[field.one if i == j else field.zero for j in range(n)] for i in range(n)]
    for k in range(1, n + 1):
        product = [[_dot(field, a[i], [row[j] for row in m]) for j in range(n)] for i in range(n)]
        trace = field.zero
        for i in range(n):
            trace = trace + product[i][i]
        c = trace.scaled(Fraction(-1, k))
        out.append(c)
        m = [[x + c if i == j else x for j, x in enumerate(row)] for i, row in enumerate(product)]
    return out[::-1]


def _dot(field: Field, row: Sequence[Element], column: Sequence[Element]) -> Element:
    total = field.zero
    for x, y in zip(row, column, strict=True):
        if x and y:
            total = total + x * y
    return total


def polynomial_formula(a: Sequence[Element], name: str) -> Formula:
    """a in the letter `name`, highest power first."""
    terms = []
    for k in range(len(a) - 1, -1, -1):
        if a[k]:
            front = a[k].field.formula(a[k])
            x = letter(name)
            terms.append(times(front, power(x, number(k)) if k > 1 else x) if k else front)
    return plus(*terms)
