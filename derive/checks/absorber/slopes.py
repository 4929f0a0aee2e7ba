"""How an error falls as tau is halved, and what that says about a claimed O(tau^p).

Slopes are log2 of successive ratios.  Agrees: the last slope is at least p - 0.1.  Refutes: the last two are alike
within 0.1 and surely below p - 0.4.  Anything between is undecided, and asks for more halvings.  Errors that are
zero within 10^-digits of their scale at every tau agree.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from flint import arb

from derive.errors import NeedsPrecision
from derive.numerics.precision import power_of_ten

ROAD = "trend"
FIRST_HALVINGS, MOST_HALVINGS = 4, 7
SHORT_OF, SURELY_BELOW, FLAT = "0.1", "0.4", "0.1"


@dataclass(frozen=True)
class Slope:
    """`verdict` and the ratio at the last halving, in words."""

    verdict: str
    ratio: str


def judge_slope(errors: Sequence[arb], p: int, scale: arb, digits: int) -> Slope:
    """What a run of errors at tau, tau/2, tau/4, ... says about O(tau^p)."""
    tiny = scale * power_of_ten(-digits)
    if all(e < tiny for e in errors):
        return Slope("agrees", "no difference seen")
    slopes = [_slope(a, b) for a, b in zip(errors[-3:], errors[-2:], strict=False)]
    last = slopes[-1]
    ratio = f"falls by {_short(errors[-2] / errors[-1])} per halving"
    if last > p - arb(SHORT_OF):
        return Slope("agrees", ratio)
    flat = len(slopes) > 1 and abs(last - slopes[-2]) < arb(FLAT)
    if flat and last < p - arb(SURELY_BELOW):
        return Slope("refuted", ratio)
    return Slope("undecided", ratio)


def _slope(a: arb, b: arb) -> arb:
    if not (a > 0 and b > 0):
        raise NeedsPrecision("an error is not told from zero")
    return (a / b).log() / arb(2).log()


def _short(x: arb) -> str:
    return str(x.mid().str(4, radius=False))
