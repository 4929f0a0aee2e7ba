"""A nearly tight h with ||M - e|| <= h for a rational symmetric matrix M, proved by exact elimination.

h - (M - e) and h + (M - e) are positive semidefinite exactly if Gaussian elimination meets no negative pivot, and no
zero pivot but in a zero row.  The guess
for h comes from power iteration in floating point and promises nothing; e and h are the simplest fractions near it.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

LARGEST = 24
"""Sites up to which elimination in fractions is quick."""

ROUNDS = 300
EVEN = 1e-9  # so that a rational h that is reached is found
SLACK = (0.002, 0.01, 0.03, 0.1)
"""By how much h may exceed the guess, one after the other."""

Rows = Sequence[dict[int, Fraction]]


def bound_tightly(rows: Rows) -> tuple[Fraction, Fraction] | None:
    """(e, h), or None where the matrix is too large or no guess could be proved."""
    if len(rows) > LARGEST or not any(any(row.values()) for row in rows):
        return None
    low, high = _extremes(rows)
    width = high - low
    if not width > 0:
        return None
    e = simplest_between((low + high) / 2 - width / 500, (low + high) / 2 + width / 500)
    reach = max(high - float(e), float(e) - low)
    for slack in SLACK:
        h = simplest_between(reach * (1 - EVEN), reach * (1 + slack))
        if _is_positive(rows, h + e, -1) and _is_positive(rows, h - e, 1):
            return e, h
    return None


def simplest_between(low: float, high: float) -> Fraction:
    """The fraction of least denominator in [low, high], by continued fractions."""
    return _simplest(Fraction(low), Fraction(high))


def _simplest(low: Fraction, high: Fraction) -> Fraction:
    if low <= 0 <= high:
        return Fraction(0)
    if high < 0:
        return -_simplest(-high, -low)
    whole = -(-low.numerator // low.denominator)
    if whole <= high:
        return Fraction(whole)
    below = low.numerator // low.denominator
    return below + 1 / _simplest(1 / (high - below), 1 / (low - below))


def _extremes(rows: Rows) -> tuple[float, float]:
    """About the least and the largest eigenvalue."""
    M = [{y: float(f) for y, f in row.items()} for row in rows]
    reach = max(sum(abs(f) for f in row.values()) for row in M)
    return -_largest(M, -1.0, reach), _largest(M, 1.0, reach)


def _largest(M: list[dict[int, float]], sign: float, reach: float) -> float:
    """About the largest eigenvalue of sign M: Rayleigh's quotient after power iteration with sign M + 1.05 reach."""
    n = len(M)
    v = [1.0 + 0.37 * ((7 * x) % 11) for x in range(n)]
    for _ in range(ROUNDS):
        w = [sign * sum(f * v[y] for y, f in M[x].items()) + 1.05 * reach * v[x] for x in range(n)]
        size = max(map(abs, w)) or 1.0
        v = [f / size for f in w]
    length = sum(f * f for f in v)
    return sum(v[x] * sign * sum(f * v[y] for y, f in M[x].items()) for x in range(n)) / length


def _is_positive(rows: Rows, shift: Fraction, sign: int) -> bool:
    """Whether shift + sign M is positive semidefinite, exactly."""
    n = range(len(rows))
    table = [[sign * row.get(y, Fraction(0)) + (shift if x == y else 0) for y in n] for x, row in enumerate(rows)]
    for k in n:
        pivot, rest = table[k][k], range(k + 1, len(rows))
        if pivot < 0 or (pivot == 0 and any(table[k][y] for y in rest)):
            return False
        for x in rest:
            factor = table[x][k] / pivot if pivot else Fraction(0)
            if factor:
                for y in rest:
                    table[x][y] -= factor * table[k][y]
    return True
