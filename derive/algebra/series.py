"""Truncated logarithm of a graded series, over any algebra whose members add, multiply and scale.

For F = 1 + sum_{d>=1} x^d F_d, log F = sum_{p>=1} (-1)^(p+1)/p (F - 1)^p; the coefficient of x^d needs p <= d.
Nothing commutes.  The truncation is exact in every coefficient it returns.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Protocol, Self, TypeVar


class Graded(Protocol):
    """A member of an associative algebra over Q."""

    def __add__(self, other: Self) -> Self: ...

    def __mul__(self, other: Self) -> Self: ...

    def scaled(self, q: Fraction) -> Self: ...


T = TypeVar("T", bound=Graded)

def truncated_log(coefficients: Sequence[T]) -> list[T]:
    """L_1 ... L_n from F_1 ... F_n (index 0 is degree 1); exact, the remainder is O(x^(n+1))."""
    n = len(coefficients)
    total = list(coefficients)
    power: dict[int, T] = dict(enumerate(coefficients, start=1))
    for p in range(2, n + 1):
        power = _raised(coefficients, power, p, n)
        sign = Fraction((-1) ** (p + 1), p)
        for d, term in power.items():
            total[d - 1] = total[d - 1] + term.scaled(sign)
    return total


def _raised(coefficients: Sequence[T], power: dict[int, T], p: int, n: int) -> dict[int, T]:
    """Coefficients of (F - 1)^p, degrees p to n, from those of (F - 1)^(p-1)."""
    out: dict[int, T] = {}
    for d in range(p, n + 1):
        products = [coefficients[e - 1] * power[d - e] for e in range(1, d - p + 2)]
        total = products[0]
        for more in products[1:]:
            total = total + more
        out[d] = total
    return out
