"""Survival after many asks, in balls, without many products: S_n = |(QU)^n psi|^2 on what the detector reaches.

The part of psi outside that space is dark and stays.  Inside, the first step takes psi to Q U psi; the others are the
block K of U on the bright space, and K^(n-1) comes from its repeated squares: for all n together about log2(n_max)
products of m x m matrices and as many products with a vector for each n.  K is a contraction; a squaring costs a few
bits, which `bits_for_survival` adds beforehand.

Below efficiency 1 the step is (1 - (1 - q) P) U, q = sqrt(1 - eta), on the detector and all that it reaches.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil, log2

from flint import acb, acb_mat, arb

from derive.numerics.evolution import squared_norm
from derive.numerics.precision import BITS_PER_DIGIT
from derive.numerics.spectrum import Reached, overlap
from derive.numerics.system import State


def bits_for_survival(digits: int, asks: int, size: int) -> int:
    """Working bits for a first try: entrywise balls lose log2(2 sqrt(m)) bits a squaring."""
    squarings = log2(asks + 2)
    return ceil(digits * BITS_PER_DIGIT + squarings * (1 + log2(size + 1) / 2) + 64)


def enclose_survival(
    reached: Reached, tau: arb, states: Sequence[tuple[arb, State]], asks: Sequence[int], q: acb | None = None
) -> list[arb]:
    """S_n for each n >= 1 of `asks`, averaged over a mixture of (weight, state); q None for a perfect detector."""
    U = _step(reached, tau)
    m, r = reached.bright, reached.rank
    if q is not None:
        for i in range(r):
            for j in range(m + r):
                U[i, j] = U[i, j] * q
    kept = range(r, m + r) if q is None else range(m + r)
    K = acb_mat(len(kept), len(kept), [U[i, j] for i in kept for j in kept])
    squares = [K]
    for _ in range(max(asks).bit_length() - 1):
        squares.append(squares[-1] * squares[-1])
    found = [arb(0) for _ in asks]
    for weight, psi in states:
        inside = acb_mat(m + r, 1, [overlap(u, psi) for u in reached.basis])
        dark = squared_norm(psi) - _norm(inside)
        moved = U * inside
        first = acb_mat(len(kept), 1, [moved[i, 0] for i in kept])
        for k, n in enumerate(asks):
            found[k] += weight * (dark + _norm(_powered(squares, n - 1, first)))
    return found


def _step(reached: Reached, tau: arb) -> acb_mat:
    """exp(-i (T - E0) tau): the common phase plays no part."""
    turn = reached.T * acb(0, -tau)
    for x in range(int(reached.T.nrows())):
        turn[x, x] = turn[x, x] + acb(0, tau) * reached.E0
    return turn.exp()


def _powered(squares: Sequence[acb_mat], n: int, v: acb_mat) -> acb_mat:
    """K^n v from K, K^2, K^4, ..."""
    for square in squares:
        if n & 1:
            v = square * v
        n >>= 1
        if not n:
            break
    return v


def _norm(v: acb_mat) -> arb:
    total = arb(0)
    for x in range(int(v.nrows())):
        total += v[x, 0].real * v[x, 0].real + v[x, 0].imag * v[x, 0].imag
    return total
