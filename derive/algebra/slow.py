"""The slow subspace of a step, order by order: what an imperfect detector, or an absorber, leaves behind.

A step T(x) over range(Q) and a fast space F (the detector and whatever is attached to it),

    T = | T_QQ  T_QF |      T_QQ(0) = theta,   T_FF(0) = phi,   T_QF(0) = T_FQ(0) = 0,   phi - theta invertible,
        | T_FQ  T_FF |

has one invariant graph (1; X) with X(0) = 0 and one (1, Z) from the left:

    T (1; X) = (1; X) Y,   (1, Z) T = Y' (1, Z),   T^n_QQ = Y^n (1 + Z X)^-1 + what the fast space adds.

X_k and Z_k follow from lower orders, the fast block at x = 0 being a matrix of numbers.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.paths import FROM_DETECTOR, FROM_REST, TO_DETECTOR, TO_REST, A, C, Paths, V, W, steps, word
from derive.algebra.series import truncated_log
from derive.exact.field import Element, Field

Row = list[Paths]
Numbers = list[list[Element]]
Series = list[Paths]  # index k is the coefficient of x^k


@dataclass(frozen=True)
class Blocks:
    """The coefficient of x^k of a step, k >= 1: QQ, then QF, FQ (one word sum for each fast component), FF."""

    qq: Paths
    qf: Row
    fq: Row
    ff: list[Row]


@dataclass(frozen=True)
class Slow:
    """Y_1 ... Y_n, X_0 ... X_n, Z_0 ... Z_n (X_0 = Z_0 = 0); `y[0]` is left empty, theta stands for it."""

    y: Series
    x: list[Row]
    z: list[Row]

    def overlap(self) -> Series:
        """N = 1 + Z X, from order 0."""
        field = self.y[0].field
        found = [word(field)]
        for k in range(1, len(self.x)):
            total = Paths(field)
            for m in range(1, k):
                for a, b in zip(self.z[m], self.x[k - m], strict=True):
                    total = total + a * b
            found.append(total)
        return found


def truncated_slow(field: Field, inverse: Numbers, blocks: Sequence[Blocks]) -> Slow:
    """The slow subspace through order len(blocks); `inverse` is (phi - theta)^-1, blocks[k - 1] the order k."""
    zero = Paths(field)
    size = len(inverse)
    y, y_left = [zero], [zero]
    x, z = [[zero] * size], [[zero] * size]
    for k in range(1, len(blocks) + 1):
        x.append(_from_left(inverse, _x_source(blocks, x, y, k)))
        z.append(_from_right(inverse, _z_source(blocks, z, y_left, k)))
        y.append(_y(blocks, x, k))
        y_left.append(_y_left(blocks, z, k))
    return Slow(y, x, z)


def _x_source(blocks: Sequence[Blocks], x: list[Row], y: Series, k: int) -> Row:
    """sum_m (X_(k-m) Y_m - FF_m X_(k-m)) - FQ_k."""
    out = [-f for f in blocks[k - 1].fq]
    for m in range(1, k):
        for a in range(len(out)):
            out[a] = out[a] + x[k - m][a] * y[m]
            for b in range(len(out)):
                out[a] = out[a] - blocks[m - 1].ff[a][b] * x[k - m][b]
    return out


def _z_source(blocks: Sequence[Blocks], z: list[Row], y: Series, k: int) -> Row:
    """sum_m (Y'_m Z_(k-m) - Z_(k-m) FF_m) - QF_k."""
    out = [-f for f in blocks[k - 1].qf]
    for m in range(1, k):
        for a in range(len(out)):
            out[a] = out[a] + y[m] * z[k - m][a]
            for b in range(len(out)):
                out[a] = out[a] - z[k - m][b] * blocks[m - 1].ff[b][a]
    return out


def _from_left(numbers: Numbers, row: Row) -> Row:
    out = []
    for line in numbers:
        total = Paths(row[0].field)
        for c, f in zip(line, row, strict=True):
            total = total + f.times(c)
        out.append(total)
    return out


def _from_right(numbers: Numbers, row: Row) -> Row:
    return _from_left([list(column) for column in zip(*numbers, strict=True)], row)


def _y(blocks: Sequence[Blocks], x: list[Row], k: int) -> Paths:
    total = blocks[k - 1].qq
    for m in range(1, k):
        for a, b in zip(blocks[m - 1].qf, x[k - m], strict=True):
            total = total + a * b
    return total


def _y_left(blocks: Sequence[Blocks], z: list[Row], k: int) -> Paths:
    total = blocks[k - 1].qq
    for m in range(1, k):
        for a, b in zip(z[k - m], blocks[m - 1].fq, strict=True):
            total = total + a * b
    return total


def measured_slow(field: Field, c: Element, n: int) -> Slow:
    """The slow subspace of the null-outcome step K = (1 - a P) U, x = -i tau; c = coth(kappa/2).

    1 - a = exp(-kappa) = (c - 1)/(c + 1), so phi - theta = -2/(c + 1): regular for every efficiency in (0, 1].
    """
    kept = (c - field.one) / (c + field.one)
    blocks = [
        Blocks(
            steps(field, m, FROM_REST, TO_REST),
            [steps(field, m, FROM_REST, TO_DETECTOR)],
            [steps(field, m, FROM_DETECTOR, TO_REST).times(kept)],
            [[steps(field, m, FROM_DETECTOR, TO_DETECTOR).times(kept)]],
        )
        for m in range(1, n + 1)
    ]
    return truncated_slow(field, [[-(c + field.one).scaled(Fraction(1, 2))]], blocks)


def absorber_slow(field: Field, inverse: Numbers, entry: list[Element], more: Sequence[list[Row]], n: int) -> Slow:
    """The slow subspace of x H for an absorber on fast components 0 (the detector), 1, 2, ...

    `inverse` is that of x H_FF at x = 0; the couplings are entry[a] V from F to Q and W into component 0 alone;
    x H_FF holds x C on every component, and more[m - 1] at order m besides.
    """
    zero, size = Paths(field), len(inverse)
    blocks = []
    for m in range(1, n + 1):
        ff = [list(line) for line in more[m - 1]] if m <= len(more) else [[zero] * size for _ in range(size)]
        if m == 1:
            for a in range(size):
                ff[a][a] = ff[a][a] + word(field, C)
        into = [word(field, W), *[zero] * (size - 1)] if m == 1 else [zero] * size
        out = [word(field, V).times(f) for f in entry] if m == 1 else [zero] * size
        blocks.append(Blocks(word(field, A) if m == 1 else zero, out, into, ff))
    return truncated_slow(field, inverse, blocks)


# -- series of words


def log_of(slow: Slow) -> Series:
    """x G = log(1 + Y_1 x + ...), order 0 being zero."""
    return [Paths(slow.y[0].field), *truncated_log(slow.y[1:])]


def multiplied(a: Series, b: Series) -> Series:
    """a b, to the shorter one's order."""
    out = []
    for k in range(min(len(a), len(b))):
        total = Paths(a[0].field)
        for m in range(k + 1):
            total = total + a[m] * b[k - m]
        out.append(total)
    return out


def inverted(a: Series) -> Series:
    """1/a for a = 1 + O(x)."""
    out = [a[0]]
    for k in range(1, len(a)):
        total = Paths(a[0].field)
        for m in range(1, k + 1):
            total = total - a[m] * out[k - m]
        out.append(total)
    return out
