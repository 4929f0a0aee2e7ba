"""The detector-local algebra, in which the logarithm of the undetected step is taken.

Letters: A = QHQ (N x N), V = QHD (N x r), C = D†HD (r x r), mu_m = V† A^m V (r x r), D the detector's vectors.
Every word but A^n begins A^i V and ends V† A^j, and all in between collapses to an r x r matrix, so members are

    sum_n p_n A^n + sum_ij A^i V a_ij V† A^j,      (A^i V a V† A^j)(A^k V b V† A^l) = A^i V (a mu_{j+k} b) V† A^l.

The graph enters through C and mu_0, mu_1, ... alone.  Derived here; the check re-exponentiates without this algebra.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import factorial

from derive.algebra.series import truncated_log
from derive.exact.field import Element, Field

Block = list[list[Element]]


class Moments:
    """C, mu_0, mu_1, ... and the blocks T_n = D† H^n D made of them."""

    def __init__(self, field: Field, c: Block, mu: Sequence[Block]):
        self.field = field
        self.rank = len(c)
        self.c = c
        self.mu = list(mu)

    def returns(self, highest: int) -> list[Block]:
        """T_0 ... T_highest: T_n = C T_(n-1) + sum_a mu_a T_(n-2-a), a path being split at its next return."""
        found = [self.identity()]
        for n in range(1, highest + 1):
            total = product(self.c, found[n - 1])
            for a in range(n - 1):
                total = sum_of(total, product(self.mu[a], found[n - 2 - a]))
            found.append(total)
        return found

    def identity(self) -> Block:
        one, zero = self.field.one, self.field.zero
        return [[one if a == b else zero for b in range(self.rank)] for a in range(self.rank)]


def product(a: Block, b: Block) -> Block:
    """a b, r x r."""
    out = []
    for row in a:
        line = []
        for column in range(len(b[0])):
            total = row[0] * b[0][column]
            for k in range(1, len(b)):
                total = total + row[k] * b[k][column]
            line.append(total)
        out.append(line)
    return out


def sum_of(a: Block, b: Block) -> Block:
    return [[x + y for x, y in zip(p, q, strict=True)] for p, q in zip(a, b, strict=True)]


def scaled(a: Block, q: Fraction) -> Block:
    return [[x.scaled(q) for x in row] for row in a]


class Local:
    """sum_n pure[n] A^n + sum local[i, j]: A^i V a_ij V† A^j."""

    __slots__ = ("moments", "pure", "local")

    def __init__(self, moments: Moments, pure: dict[int, Fraction], local: dict[tuple[int, int], Block]):
        self.moments = moments
        self.pure = pure
        self.local = local

    def __add__(self, other: Local) -> Local:
        pure = dict(self.pure)
        for n, p in other.pure.items():
            pure[n] = pure.get(n, Fraction(0)) + p
        local = dict(self.local)
        for place, block in other.local.items():
            local[place] = sum_of(local[place], block) if place in local else block
        return Local(self.moments, {n: p for n, p in pure.items() if p}, local)

    def scaled(self, q: Fraction) -> Local:
        local = {place: scaled(block, q) for place, block in self.local.items()}
        return Local(self.moments, {n: p * q for n, p in self.pure.items()}, local)

    def __mul__(self, other: Local) -> Local:
        pure: dict[int, Fraction] = {}
        for n, p in self.pure.items():
            for m, q in other.pure.items():
                pure[n + m] = pure.get(n + m, Fraction(0)) + p * q
        out: dict[tuple[int, int], Block] = {}
        for (k, j), b in other.local.items():
            for n, p in self.pure.items():
                _put(out, (n + k, j), scaled(b, p))
        for (i, j), a in self.local.items():
            for n, p in other.pure.items():
                _put(out, (i, j + n), scaled(a, p))
        self._meet(other, out)
        return Local(self.moments, pure, out)

    def _meet(self, other: Local, out: dict[tuple[int, int], Block]) -> None:
        """The products in which two dips into the detector meet through a moment."""
        mu = self.moments.mu
        for (i, j), a in self.local.items():
            by_column: dict[int, Block] = {}
            for (k, column), b in other.local.items():
                term = product(mu[j + k], b)
                by_column[column] = sum_of(by_column[column], term) if column in by_column else term
            for column, inner in by_column.items():
                _put(out, (i, column), product(a, inner))


def _put(out: dict[tuple[int, int], Block], place: tuple[int, int], block: Block) -> None:
    out[place] = sum_of(out[place], block) if place in out else block


def truncated_local_log(moments: Moments, n: int) -> list[Local]:
    """L_1 ... L_n with log(Q U(tau) Q) = sum_d x^d L_d + O(x^(n+1)), x = -i tau, in local form.

    Exact in each coefficient.  Needs mu_0 ... mu_(n-4) and uses (H^m)_QQ = A^m + sum A^i V T_(m-2-i-j) V† A^j.
    """
    returns = moments.returns(max(n - 2, 0))
    return truncated_log([step_of(moments, returns, m) for m in range(1, n + 1)])


def step_of(moments: Moments, returns: list[Block], m: int) -> Local:
    """(H^m)_QQ / m!."""
    q = Fraction(1, factorial(m))
    local = {
        (i, j): scaled(returns[m - 2 - i - j], q) for i in range(m - 1) for j in range(m - 1 - i)
    }
    return Local(moments, {m: q}, local)
