"""An absorbing site on an infinite line, evolved from the Hamiltonian.

    i d psi_x/dt = h psi_(x-1) + conj(h) psi_(x+1) - i Gamma psi_0 [x = 0],     psi_x(0) = [x = k]

In the gauge that takes out the phases of h, psi_x = w^(x-k) r_x, everything is real, g = |h|:

    r_x' = g (r_(x-1) - r_(x+1)) - Gamma r_0 [x = 0],     amplitude on the trap: w^k f_k, f_k = (-1)^k r_0.

As a function of the start, f_k' = g (f_(k-1) - f_(k+1)) for k >= 1 and f_0' = -Gamma f_0 - 2 g f_1.  `enclose_` sums
the Taylor series of that, |coefficient m| <= (2 g + Gamma)^m/m!; `approx_` evolves a line so long that nothing comes
back from its ends, in double precision, and promises nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

import numpy as np
from flint import arb

from derive.errors import NotCovered

LARGEST = 400
"""(2 g + Gamma) t up to which the Taylor series is summed."""
LONGEST = 6_000
"""Sites of a line in double precision."""


def enclose_trapped(g: arb, gamma: arb, k: int, times: list[arb], bits: int) -> list[arb]:
    """f_k(t) at several times, to about 2^-bits."""
    rate = 2 * g + gamma
    x = max((float((rate * t).upper()) for t in times), default=0.0)
    if x > LARGEST:
        raise NotCovered("a time so late that the Taylor series has too many terms")
    terms = ceil(4 * x) + bits + 8  # m! >= (m/e)^m: each term beyond 4x brings more than half a bit
    series = _series(g, gamma, k, terms)
    found = []
    for t in times:
        total = arb(0)
        for c in reversed(series):
            total = total * t + c
        y = rate * t
        rest = y**terms / arb(terms).fac() * 2  # y < terms/2: a geometric series of ratio below 1/2 follows
        found.append(total + arb(0, rest.upper()))
    return found


def _series(g: arb, gamma: arb, k: int, terms: int) -> list[arb]:
    """Taylor coefficients of f_k at t = 0."""
    reach = k + terms + 2
    f = [arb(0)] * reach
    f[0] = arb(1)
    found = [f[k]]
    for m in range(1, terms):
        last = min(m, reach - 2)
        new = [(-gamma * f[0] - 2 * g * f[1]) / m]
        new += [g * (f[x - 1] - f[x + 1]) / m for x in range(1, last + 1)]
        f = new + [arb(0)] * (reach - len(new))
        found.append(f[k])
    return found


@dataclass(frozen=True)
class Course:
    """f_k and what is left on the line, after 0, 1, 2, ... steps."""

    amplitude: np.ndarray
    left: np.ndarray


def approx_trapped(g: float, gamma: float, k: int, steps: int) -> Course:
    """`steps` steps of unit time; g and gamma are per step."""
    reach = int(2 * g * steps) + 12 * int((2 * g * steps) ** (1 / 3) + 1) + 40
    if reach > LONGEST:
        raise NotCovered("a line so long is not evolved")
    r = np.zeros(2 * reach + k + 1)
    r[reach + k] = 1.0
    pieces = ceil((2 * g + gamma) / 4)
    amplitude, left = [r[reach] * (-1) ** k], [1.0]
    for _ in range(steps):
        for _ in range(pieces):
            r = _evolved(r, g / pieces, gamma / pieces, reach)
        amplitude.append(r[reach] * (-1) ** k)
        left.append(float(r @ r))
    return Course(np.array(amplitude), np.array(left))


def _evolved(r: np.ndarray, g: float, gamma: float, trap: int) -> np.ndarray:
    """exp(M) r by its series, |M| <= 4."""
    total, term = r.copy(), r
    for m in range(1, 40):
        new = np.zeros_like(term)
        new[1:] += g * term[:-1]
        new[:-1] -= g * term[1:]
        new[trap] -= gamma * term[trap]
        term = new / m
        total += term
    return total
