"""Constants of a late-time law from measured values: solved for, not summed.

    phi_n n^p = Re[ exp(-i a n) (C_1 + C_2/n + ... + C_J/n^(J-1)) ] + O(n^-J)

with known a and p: 2J values of n between N and 2N give C_1 ... C_J by linear equations (J values and real C_j where
exp(-i a n) is real).  Doubling N divides the error of C_1 by about 2^J, of C_2 by 2^(J-1): two solutions tell how
good the better one is.  `approx_`: nothing is promised, the comparison of the two is the evidence.  Common practice
(Richardson's extrapolation with oscillating terms), no source.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import log2

from flint import acb, acb_mat, arb, arb_mat

from derive.errors import NeedsPrecision

TERMS = 6


def _nodes(N: int, count: int) -> list[int]:
    """`count` values of n between N and 2N, unevenly apart: even steps may be whole turns of an oscillation."""
    step = N // count
    return [N + k * step + (k * (k + 1) // 2) % max(step, 1) for k in range(count)]


def approx_constants(phi: Sequence[arb], a: arb, p: Fraction, N: int, turns: int | None = None) -> list[acb]:
    """C_1 ... C_TERMS from values between N and 2N; `turns` = a/pi where it is whole."""
    columns = TERMS if turns is not None else 2 * TERMS
    asks = _nodes(N, columns)
    rows = [_row(n, a, turns) for n in asks]
    right = [[phi[n] * arb(n) ** (arb(p.numerator) / p.denominator)] for n in asks]
    try:
        found = arb_mat(rows).solve(arb_mat(right))
    except ZeroDivisionError:
        raise NeedsPrecision("the equations for the constants are singular at this precision") from None
    if turns is not None:
        return [acb(found[j, 0]) for j in range(TERMS)]
    return [acb(found[2 * j, 0], found[2 * j + 1, 0]) for j in range(TERMS)]


def _row(n: int, a: arb, turns: int | None) -> list[arb]:
    """Coefficients of Re C_j, Im C_j: cos(a n)/n^(j-1) and sin(a n)/n^(j-1)."""
    out = []
    for j in range(TERMS):
        scale = arb(1) / arb(n) ** j
        if turns is not None:
            out.append(scale * (-1) ** (turns * n))
        else:
            out += [(a * n).cos() * scale, (a * n).sin() * scale]
    return out


def approx_edges(
    phi: Sequence[arb] | Sequence[acb], a: arb, p: Fraction, N: int
) -> tuple[list[acb], list[acb]]:
    """C_j and D_j of complex phi_n n^p = sum_j [C_j exp(-i a n) + D_j exp(i a n)]/n^(j-1), n between N and 2N."""
    asks = _nodes(N, 2 * TERMS)
    rows = [[turn / arb(n) ** j for turn in (_turn(-a * n), _turn(a * n)) for j in range(TERMS)] for n in asks]
    right = [[acb(phi[n]) * arb(n) ** (arb(p.numerator) / p.denominator)] for n in asks]
    try:
        found = acb_mat(rows).solve(acb_mat(right))
    except ZeroDivisionError:
        raise NeedsPrecision("the equations for the constants are singular at this precision") from None
    return [found[j, 0] for j in range(TERMS)], [found[TERMS + j, 0] for j in range(TERMS)]


def _turn(angle: arb) -> acb:
    return acb(0, angle).exp()


def approx_limit(sums: Sequence[arb], a: arb, N: int, real_turn: bool) -> arb:
    """S of S_n = S + sum_j [c_j n^-(j+2) + Re(d_j exp(-2 i a n)) n^-(j+3)], j < TERMS - 1, from n between N and 2N.

    The partial sums of F_n = |phi_n|^2 for a band with two edges; `real_turn` where exp(-2 i a n) is real.
    """
    smooth = TERMS - 1
    columns = 1 + smooth + smooth * (1 if real_turn else 2)
    rows, right = [], []
    for n in _nodes(N, columns):
        row = [arb(1)]
        for j in range(smooth):
            scale = arb(1) / arb(n) ** (j + 2)
            row.append(scale)
            row.append((2 * a * n).cos() * scale / n)
            if not real_turn:
                row.append((2 * a * n).sin() * scale / n)
        rows.append(row)
        right.append([sums[n]])
    try:
        return arb(arb_mat(rows).solve(arb_mat(right))[0, 0])
    except ZeroDivisionError:
        raise NeedsPrecision("the equations for the limit are singular at this precision") from None


def approx_exponent(phi: Sequence[arb] | Sequence[acb], N: int) -> float:
    """-log2 of the ratio of sum |phi| over [2N, 4N) to that over [N, 2N), less the 1 that the longer range adds."""
    first = sum(float(abs(x).mid()) for x in phi[N : 2 * N])
    second = sum(float(abs(x).mid()) for x in phi[2 * N : 4 * N])
    return 1 - log2(second / first)
