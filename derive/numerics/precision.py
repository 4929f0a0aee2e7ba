"""Working precision: an argument, kept inside `workprec`, raised by a loop with a stated cap.

`flint.ctx.prec` belongs to the whole process.  Nothing here sets it for longer than one computation.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

from flint import acb, arb, ctx, fmpq, fmpz

from derive.errors import NeedsPrecision

T = TypeVar("T")

BITS_PER_DIGIT = 3.3219280948873626
LEAST_BITS = 64
MOST_BITS = 40_000


def bits_for(digits: float, spare: int = 32) -> int:
    """Bits that hold `digits` decimal digits and `spare` bits of rounding besides."""
    return max(LEAST_BITS, int(digits * BITS_PER_DIGIT) + 1 + spare)


def retry(compute: Callable[[int], T], first: int, cap: int = MOST_BITS) -> T:
    """compute(bits) at `first`, twice that, ... until it no longer raises `NeedsPrecision`.

    Each attempt runs at its own working precision.  Above `cap` bits the last complaint is passed on.
    """
    bits = min(first, cap)
    while True:
        try:
            with ctx.workprec(bits):
                return compute(bits)
        except NeedsPrecision:
            if bits >= cap:
                raise
            bits = min(2 * bits, cap)


def upper(x: arb | acb) -> arb:
    """An exact number that |x| does not exceed."""
    return acb(x).abs_upper() if isinstance(x, acb) else arb(abs(x).upper())


def power_of_ten(exponent: int) -> arb:
    """10^exponent as a ball, exact as a rational."""
    ten = fmpz(10) ** abs(exponent)
    return arb(ten) if exponent >= 0 else arb(fmpq(1, ten))


def digits_of(gap: arb, scale: arb) -> int | None:
    """Decimal digits that a gap leaves at `scale`: floor(-log10(gap/scale)); None where the gap is exactly 0."""
    if gap.is_zero():
        return None
    ratio = gap / scale
    if not ratio.is_finite():
        return 0
    digits = (-(ratio.upper().log()) / arb(10).log()).lower()
    return int(digits.floor().mid().str(20, radius=False).split(".")[0]) if digits.is_finite() else 0
