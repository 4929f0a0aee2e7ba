"""How fast the G_k grow: |G_k|^(1/k) tends, along its largest members, to 1 over the radius of convergence.

On a sector (`bright.py`), L(z) = log K(z) = sum_d L_d z^d as power series of matrices, G_k = i h^(k+1) L_(k+1):

    K_m = (-i)^m (H'^m)_QQ/m!,      log(1 + X) = sum_{p <= n} (-1)^(p+1) X^p/p + O(z^(n+1))

since X starts at z.  No contour, no eigenvalue: a road of its own to the radius.  Norms are Frobenius's.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isqrt

from flint import acb, acb_poly, arb

from derive.numerics.bright import Sector

EARLY, LATE = (39, 40, 41), (79, 80, 81)
SPARE_BITS = 320
"""The X^p cancel among each other by some bits an order; the balls say whether this was enough."""

Matrix = list[list[acb_poly]]


@dataclass(frozen=True)
class Growth:
    """The largest |G_k|^(1/k) over k = 39, 40, 41 and over k = 79, 80, 81."""

    early: arb
    late: arb


def enclose_growth(sectors: Sequence[Sector]) -> Growth:
    """Over all sectors, at the working precision."""
    sizes = {k: arb(0) for k in (*EARLY, *LATE)}
    for s in sectors:
        if s.bright:
            logs = _log(s, LATE[-1] + 1)
            for k in sizes:
                sizes[k] = sizes[k].max(_frobenius(logs, k + 1) * s.h ** (k + 1))
    rates = {k: _root(size, k) for k, size in sizes.items()}
    return Growth(_largest([rates[k] for k in EARLY]), _largest([rates[k] for k in LATE]))


def _root(size: arb, k: int) -> arb:
    """size^(1/k); from 0 up where size may vanish (of b = 1, every other order does)."""
    if size > 0:
        return size.root(k)
    half = arb(size.upper()).root(k) / 2 if size.upper() > 0 else arb(0)
    return half + arb(0, half.upper())


def _largest(values: Sequence[arb]) -> arb:
    found = values[0]
    for v in values[1:]:
        found = found.max(v)
    return found


def _frobenius(logs: Matrix, d: int) -> arb:
    total = arb(0)
    for row in logs:
        for p in row:
            total += abs(acb(p[d])) ** 2
    return total.sqrt()


def _log(s: Sector, n: int) -> Matrix:
    """L_1 ... L_n, by blocks of about sqrt(n) powers of X."""
    X = _step(s, n)
    b, block = len(X), isqrt(n) + 1
    powers = [X]
    while len(powers) < block:
        powers.append(_product(powers[-1], X, n))
    total: Matrix | None = None
    for first in range((n - 1) // block * block, -1, -block):
        inner = [[acb_poly([]) for _ in range(b)] for _ in range(b)]
        for p in range(first + 1, min(first + block, n) + 1):
            weight = acb(arb((-1) ** (p + 1)) / p)
            inner = _sum(inner, [[f * weight for f in row] for row in powers[p - first - 1]])
        total = inner if total is None else _sum(inner, _product(powers[-1], total, n))
    return X if total is None else total


def _step(s: Sector, n: int) -> Matrix:
    """X = K - 1 to z^n."""
    places = range(s.rank, s.matrix.nrows())
    power, terms = s.matrix * acb(0, -1), []
    turned = power
    for m in range(1, n + 1):
        terms.append(power)
        power = turned * power * acb(arb(1) / (m + 1))
    return [[acb_poly([acb(0), *(t[x, y] for t in terms)]) for y in places] for x in places]


def _product(a: Matrix, b: Matrix, n: int) -> Matrix:
    size = range(len(a))
    found = []
    for x in size:
        row = []
        for y in size:
            total = acb_poly([])
            for k in size:
                total = total + a[x][k] * b[k][y]
            row.append(total.truncate(n + 1))
        found.append(row)
    return found


def _sum(a: Matrix, b: Matrix) -> Matrix:
    return [[f + g for f, g in zip(p, q, strict=True)] for p, q in zip(a, b, strict=True)]

