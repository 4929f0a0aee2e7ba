"""One late coefficient of a generating function, in balls, from its values on a circle inside the unit disc.

    phi_n = r^-n (1/M) sum_j phi(r w^j) w^(-n j) - (phi_(n+M) r^M + phi_(n+2M) r^2M + ...),     w = exp(2 pi i/M)

For amplitudes |phi_n| <= 1, so what is left out is at most r^M/(1 - r^M).  With M = 2 n and r^M = 10^-d the division
by r^n costs d/2 digits, whatever n.  (Cauchy's integral by the trapezoidal rule; "The exponentially convergent
trapezoidal rule", SIAM Rev. 56, 385 (2014).)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from flint import acb, arb

from derive.errors import NeedsPrecision
from derive.numerics.precision import power_of_ten

LEAST_SAMPLES = 64


def enclose_amplitudes(phi: Callable[[acb], acb], asks: Sequence[int], digits: int) -> list[acb]:
    """phi_n to an absolute 10^-digits for every n >= 1 of `asks`, where |phi_n| <= 1 for all n."""
    M = max(2 * max(asks), LEAST_SAMPLES)
    left_out = power_of_ten(-digits - 4)
    r = (left_out.log() / M).exp()
    turns = [_turn(j, M) for j in range(M)]
    samples = [phi(acb(r) * w) for w in turns]
    found = [_coefficient(samples, turns, n) / acb(r) ** n for n in asks]
    beyond = (left_out / (1 - left_out)).upper()
    if any(not x.is_finite() for x in found):
        raise NeedsPrecision("a generating function is not bounded on its circle")
    return [x + acb(arb(0, beyond), arb(0, beyond)) for x in found]


def _turn(j: int, M: int) -> acb:
    angle = arb(2 * j) / M
    return acb(angle.cos_pi(), angle.sin_pi())


def _coefficient(samples: Sequence[acb], turns: Sequence[acb], n: int) -> acb:
    M, total = len(samples), acb(0)
    for j, value in enumerate(samples):
        total += value * turns[-n * j % M]
    return total / M
