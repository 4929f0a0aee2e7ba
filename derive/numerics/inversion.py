"""First detection by one division of power series: phi(z) = v(z)/u(z), in balls, to n of 10^5.

    u(z) = sum_(n>=0) z^n u_n,   v(z) = sum_(n>=1) z^n v_n,   phi(z) = sum_(n>=1) z^n phi_n

(the renewal equation; phys-rev-e-95-032141).  The balls widen as n grows; how fast is seen on a short piece, where it
is a power of n, and the working precision for the whole length is set from that: one pass, and the result says what
it is worth.
"""

from __future__ import annotations

from collections.abc import Callable
from math import ceil, log2
from typing import Any, TypeVar

from flint import acb, acb_series, arb, arb_series, ctx

from derive.errors import NeedsPrecision
from derive.numerics.precision import BITS_PER_DIGIT

Ball = TypeVar("Ball", arb, acb)
Sequences = Callable[[int], tuple[list[Ball], list[Ball]]]
"""count -> (u_0..u_count, v_0..v_count) at the working precision, all real or all complex."""

PROBE = 512
"""Length of the short piece; its halves give the growth."""
SPARE_BITS = 24
ATTEMPTS = 4


def enclose_first_detection(sequences: Sequences[Ball], count: int, digits: int) -> list[Ball]:
    """[0, phi_1, ..., phi_count], the balls of radius below 10^-digits times the largest |phi| of the last tenth."""
    spare = SPARE_BITS + predicted_loss(sequences, count)
    for _ in range(ATTEMPTS):
        with ctx.workprec(ceil(digits * BITS_PER_DIGIT) + spare):
            found = divided(*sequences(count))
        if _accurate(found, digits):
            return found
        spare *= 2
    raise NeedsPrecision("the balls of a long division of series stay too wide")


def divided(u: list[Ball], v: list[Ball]) -> list[Ball]:
    """Coefficients of (v - v_0)/u, at the working precision."""
    ball: Any = type(u[0])
    series: Any = acb_series if ball is acb else arb_series
    length = len(u)
    before, ctx.cap = ctx.cap, max(ctx.cap, length)
    try:
        quotient = series([ball(0), *v[1:]], prec=length) / series(u, prec=length)
        found = [ball(c) for c in quotient.coeffs()]
    finally:
        ctx.cap = before
    return found + [ball(0)] * (length - len(found))


def predicted_loss(sequences: Sequences[Ball], count: int) -> int:
    """Bits that the division loses by n = count: measured at two lengths, carried on as a power of n."""
    bits = 256
    while True:
        with ctx.workprec(bits):
            found = divided(*sequences(min(PROBE, count)))
        half, full = (_lost(found, end, bits) for end in (len(found) // 2, len(found)))
        if full < bits - 32:
            break
        bits *= 2
    doublings = max(0.0, log2(count / PROBE))
    return ceil(full + max(full - half, 2) * 1.25 * doublings)


def _lost(found: list[Ball], end: int, bits: int) -> int:
    window = found[max(1, end - end // 10 - 8) : end]
    size = max((arb(abs(c).upper()) for c in window), key=float)
    radius = max((arb(c.rad()) for c in window), key=_exponent)
    return bits if not size > 0 else max(0, bits + _exponent(radius) - _exponent(size))


def _exponent(x: arb) -> int:
    """e with 2^(e-1) <= x < 2^e."""
    if not x > 0:
        return -(10**9)
    mantissa, exponent = x.mid().man_exp()
    return int(exponent) + int(mantissa).bit_length()


def _accurate(found: list[Ball], digits: int) -> bool:
    window = found[max(1, len(found) - len(found) // 10 - 8) :]
    size = max(_exponent(arb(abs(c).upper())) for c in window)
    return all(_exponent(arb(c.rad())) < size - digits * BITS_PER_DIGIT for c in found[1:])
