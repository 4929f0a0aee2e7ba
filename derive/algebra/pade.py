"""A power series in x as a finite continued fraction, its coefficients truncated power series in a small tau.

    F(x) = f_0 + f_1 x + ... + O(x^(p+q+1))  =  P(x)/Q(x),  deg P = p, deg Q = q, Q(0) = 1       (Pade's fraction)
    N/D = alpha x + beta + 1/(alpha_1 x + beta_1 + 1/(...)),  deg N = deg D + 1                   (Euclid)

Coefficients are lists of field elements, index k the coefficient of tau^k, all of one length.  What is divided by
must not vanish at tau = 0.  Textbook: Pade approximants and J-fractions.
"""

from __future__ import annotations

from collections.abc import Sequence

from derive.exact.field import Element, Field

Tau = list[Element]  # a truncated series in tau
Poly = list[Tau]  # index k is the coefficient of x^k


def zero(field: Field, n: int) -> Tau:
    return [field.zero] * n


def one(field: Field, n: int) -> Tau:
    return [field.one] + [field.zero] * (n - 1)


def added(a: Tau, b: Tau) -> Tau:
    return [x + y for x, y in zip(a, b, strict=True)]


def negative(a: Tau) -> Tau:
    return [-x for x in a]


def multiplied(a: Tau, b: Tau) -> Tau:
    n, out = len(a), zero(a[0].field, len(a))
    for i, x in enumerate(a):
        if x:
            for j in range(n - i):
                if b[j]:
                    out[i + j] = out[i + j] + x * b[j]
    return out


def inverted(a: Tau) -> Tau:
    """1/a; `ZeroDivisionError` where a vanishes at tau = 0."""
    if not a[0]:
        raise ZeroDivisionError("a series that vanishes at tau = 0")
    first = a[0].field.one / a[0]
    out = [first]
    for k in range(1, len(a)):
        total = a[0].field.zero
        for m in range(1, k + 1):
            total = total + a[m] * out[k - m]
        out.append(-(total * first))
    return out


def pade(f: Sequence[Tau], p: int, q: int) -> tuple[Poly, Poly]:
    """P and Q from f_0 ... f_(p+q)."""
    field, n = f[0][0].field, len(f[0])
    nothing = zero(field, n)

    def at(k: int) -> Tau:
        return f[k] if k >= 0 else nothing

    rows = [[*(at(k - j) for j in range(1, q + 1)), negative(at(k))] for k in range(p + 1, p + q + 1)]
    below = [one(field, n), *_solved(rows)]
    above = []
    for k in range(p + 1):
        total = nothing
        for j in range(min(k, q) + 1):
            total = added(total, multiplied(below[j], at(k - j)))
        above.append(total)
    return above, below


def _solved(rows: list[list[Tau]]) -> list[Tau]:
    """The solution of a square linear system, each row with its right side last."""
    size = len(rows)
    for k in range(size):
        pivot = next((a for a in range(k, size) if rows[a][k][0]), None)
        if pivot is None:
            raise ZeroDivisionError("no fraction of this type at tau = 0")
        rows[k], rows[pivot] = rows[pivot], rows[k]
        lead = inverted(rows[k][k])
        rows[k] = [multiplied(lead, x) for x in rows[k]]
        for a in range(size):
            if a != k:
                factor = negative(rows[a][k])
                rows[a] = [added(x, multiplied(factor, y)) for x, y in zip(rows[a], rows[k], strict=True)]
    return [row[-1] for row in rows]


def continued(above: Poly, below: Poly) -> list[tuple[Tau, Tau]]:
    """(alpha, beta), (alpha_1, beta_1), ... of N/D with deg N = deg D + 1."""
    found = []
    while below:
        degree = len(below) - 1
        lead = inverted(below[degree])
        alpha = multiplied(above[degree + 1], lead)
        left = _reduced(above, below, alpha, 1)
        beta = multiplied(left[degree], lead)
        rest = _reduced(left[: degree + 1], below, beta, 0)[:degree]
        found.append((alpha, beta))
        above, below = below, rest
    return found


def _reduced(above: Poly, below: Poly, factor: Tau, shift: int) -> Poly:
    """N - factor x^shift D."""
    out = list(above)
    for k, c in enumerate(below):
        out[k + shift] = added(out[k + shift], negative(multiplied(factor, c)))
    return out
