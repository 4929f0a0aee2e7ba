"""A simple root of q(E) that moves: E(x) = E_0 + a_1 x + a_2 x^2 + ..., without a single inversion.

    F(E, x) = q(E) + sum_{m>=1} x^m f_m(E) = 0,      q(E_0) = 0,   s = q'(E_0)

Put x = s^2 z and E = E_0 + s nu.  Every term but the first two of F(E_0 + s nu, s^2 z)/s^2 = 0 has whole powers of s:

    nu = - sum_{j>=2} q_j s^(j-2) nu^j - sum_{m>=1, j>=0} f_(m,j) s^(j+2m-2) nu^j z^m,     g_j = (d/dE)^j g(E_0)/j!

so nu = sum n_k z^k has its n_k in the ring that E_0 lives in, be it K[E]/(p), and a_k = n_k/s^(2k-1).  Exact in each
coefficient; the remainder is O(x^(K+1)).  Derived here; the check inserts the series into F.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from derive.algebra.polynomial import Polynomial, at, taylor
from derive.exact.field import Element

Series = list[Element]
"""Coefficients of z^0, z^1, ..., all of one length."""


@dataclass(frozen=True)
class Moving:
    """E_0, the slope s = q'(E_0), and n_1 ... n_K: a_k = n_k/s^(2k-1)."""

    root: Element
    slope: Element
    numerators: tuple[Element, ...]

    def coefficient(self, k: int) -> Element:
        """a_k, divided out."""
        down = self.slope
        for _ in range(2 * k - 2):
            down = down * self.slope
        return self.numerators[k - 1] / down


def truncated_root(q: Polynomial, further: Sequence[Polynomial], root: Element, order: int) -> Moving:
    """The series of the root `root` of q to x^order; `further[m-1]` is f_m, in the root's own field.

    The root must be simple: q'(E_0) is not zero.
    """
    slope = at(taylor(q, 1), root)
    if not slope:
        raise ZeroDivisionError("the root is not simple")
    powers = _powers(slope, max(len(q), 2 * order + max(map(len, further), default=0)))
    curved = [at(taylor(q, j), root) * powers[j - 2] for j in range(2, min(len(q), order + 1))]
    pushed = [
        [at(taylor(f, j), root) * powers[j + 2 * m - 2] for j in range(min(len(f), order - m + 1))]
        for m, f in enumerate(further[:order], start=1)
    ]
    return Moving(root, slope, tuple(_solved(curved, pushed, root, order)))


def _powers(slope: Element, highest: int) -> list[Element]:
    out = [slope.field.one]
    for _ in range(highest):
        out.append(out[-1] * slope)
    return out


def _solved(curved: list[Element], pushed: list[list[Element]], root: Element, order: int) -> list[Element]:
    """n_1 ... n_K; nu^j at z^k needs n_1 ... n_(k-1) only, for j >= 2 or behind a power of z."""
    zero, one = root.field.zero, root.field.one
    powers: list[Series] = [[one] + [zero] * order, [zero] * (order + 1)]
    powers += [[zero] * (order + 1) for _ in range(order - 1)]
    for k in range(1, order + 1):
        for j in range(2, k + 1):
            powers[j][k] = _convolved(powers[1], powers[j - 1], k, zero)
        total = zero
        for j, c in enumerate(curved, start=2):
            if powers[j][k]:
                total = total - c * powers[j][k]
        for m, line in enumerate(pushed[:k], start=1):
            for j, c in enumerate(line):
                if powers[j][k - m]:
                    total = total - c * powers[j][k - m]
        powers[1][k] = total
    return powers[1][1:]


def _convolved(a: Series, b: Series, k: int, zero: Element) -> Element:
    total = zero
    for i in range(1, k):
        if a[i] and b[k - i]:
            total = total + a[i] * b[k - i]
    return total
