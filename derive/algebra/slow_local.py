"""The slow generator of an imperfect detector in the detector-local algebra (`local.py`).

    K = (1 - (1 - q) P) exp(x H),   K (1; X) = (1; X) exp(x G),   X(0) = 0,   c = (1 + q)/(1 - q) = coth(kappa/2)

Every X_k is sum_j a_j V† A^j with r x r blocks a_j, so order by order

    X_k = (c - 1)/2 [ U_PQ + sum_m U_PP X ]_k - (c + 1)/2 sum_m X_(k-m) E_m,      E_k = [ U_QQ + U_QP X ]_k,

and x G = log(1 + sum_k x^k E_k) by the series that a perfect detector (c = 1, X = 0) uses.  Derived here.
"""

from __future__ import annotations

from fractions import Fraction
from math import factorial

from derive.algebra.local import Block, Local, Moments, product, scaled, step_of, sum_of
from derive.algebra.series import truncated_log
from derive.exact.field import Element

Half = dict[int, Block]  # sum_j block_j V† A^j, or sum_i A^i V block_i


def truncated_slow_log(moments: Moments, c: Element, n: int) -> list[Local]:
    """L_1 ... L_n of x G = sum_d x^d L_d + O(x^(n+1)), in local form; exact in each coefficient.

    Needs mu_0 ... mu_(n-3).
    """
    return truncated_log(slow_steps(moments, c, n)[0])


def slow_steps(moments: Moments, c: Element, n: int) -> tuple[list[Local], list[Half]]:
    """E_1 ... E_n and X_0 ... X_n (X_0 = 0)."""
    one = moments.field.one
    kept, slow = (c - one).scaled(Fraction(1, 2)), (c + one).scaled(Fraction(1, 2))
    returns = moments.returns(max(n, 0))
    x: list[Half] = [{}]
    steps: list[Local] = []
    for k in range(1, n + 1):
        found = _times(_source(returns, x, k), kept)
        for m in range(1, k):
            found = _added(found, _times(_after(x[k - m], steps[m - 1], moments), -slow))
        x.append(found)
        steps.append(step_of(moments, returns, k) + _dips(returns, x, k, moments))
    return steps, x


def _source(returns: list[Block], x: list[Half], k: int) -> Half:
    """[U_PQ + U_PP X]_k: (H^k)_PQ = sum_j T_(k-1-j) V† A^j, (H^m)_PP = T_m."""
    out = {j: scaled(returns[k - 1 - j], Fraction(1, factorial(k))) for j in range(k)}
    for m in range(1, k):
        share = scaled(returns[m], Fraction(1, factorial(m)))
        out = _added(out, {j: product(share, b) for j, b in x[k - m].items()})
    return out


def _dips(returns: list[Block], x: list[Half], k: int, moments: Moments) -> Local:
    """[U_QP X]_k: (H^m)_QP = sum_i A^i V T_(m-1-i)."""
    local: dict[tuple[int, int], Block] = {}
    for m in range(1, k):
        for i in range(m):
            share = scaled(returns[m - 1 - i], Fraction(1, factorial(m)))
            for j, b in x[k - m].items():
                term = product(share, b)
                local[i, j] = sum_of(local[i, j], term) if (i, j) in local else term
    return Local(moments, {}, local)


def _after(x: Half, step: Local, moments: Moments) -> Half:
    """X E for one order of each."""
    out: Half = {}
    for j, a in x.items():
        for n, p in step.pure.items():
            out = _added(out, {j + n: scaled(a, p)})
        for (k, column), b in step.local.items():
            out = _added(out, {column: product(product(a, moments.mu[j + k]), b)})
    return out


def _added(a: Half, b: Half) -> Half:
    out = dict(a)
    for j, block in b.items():
        out[j] = sum_of(out[j], block) if j in out else block
    return out


def _times(a: Half, factor: Element) -> Half:
    if not factor:
        return {}
    return {j: [[x * factor for x in line] for line in block] for j, block in a.items()}
