"""The truncated generator against the experiment: by how much are both apart, for every start at once?

    K = Q U(tau) Q,    Khat = Q exp(-i tau G^(K)) Q,    G^(K) = sum_{k<=K} tau^k G_k

    remainder   || i log K - tau G^(K) ||        e_n = || K^n - Khat^n ||        in operator norm on range(Q)

A matrix norm is enclosed by its largest column from below and by (tr (E†E)^8)^(1/16) from above, at most N^(1/16)
times too much.  What only marks a place in a figure or says "measured" is found in doubles and promises nothing.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

from flint import acb, acb_mat, arb

from derive.errors import NotCovered
from derive.numerics.bright import midpoints
from derive.numerics.precision import upper
from derive.numerics.system import System, dagger, dense, projector

DIGITS = 24
"""Of a measured logarithm; an error is compared with a bound, not with a number."""

STRIDE = 50
LARGEST = 100
"""Sites up to which dense matrices are measured."""


@dataclass(frozen=True)
class Norm:
    """low <= ||E|| <= high."""

    low: arb
    high: arb


class Experiment:
    """One point: the measured step and the measured truncation of given order."""

    def __init__(self, s: System, order: int):
        if s.size > LARGEST:
            raise NotCovered(f"the experiment is repeated on at most {LARGEST} sites, and there are {s.size}")
        self.s, self.order = s, order

    @cached_property
    def terms(self) -> list[acb_mat]:
        """G_0 ... G_K = (-i)^k L_(k+1), L_d of degree d in log(1 + sum_m x^m (H^m)_QQ/m!), x = -i tau."""
        steps = self._steps()
        logs, powers = list(steps), dict(enumerate(steps, start=1))
        for p in range(2, self.order + 2):
            powers = {
                d: _sum([steps[e - 1] * powers[d - e] for e in range(1, d - p + 2)]) for d in range(p, self.order + 2)
            }
            for d, m in powers.items():
                logs[d - 1] = logs[d - 1] + m * acb(arb((-1) ** (p + 1)) / p)
        return [L * acb(0, -1) ** k for k, L in enumerate(logs)]

    def _steps(self) -> list[acb_mat]:
        """(H^m)_QQ/m! for m = 1 ... K + 1."""
        H = dense(self.s)
        power, found = H, []
        for m in range(1, self.order + 2):
            found.append(self.Q * power * self.Q)
            power = H * power * acb(arb(1) / (m + 1))
        return found

    @cached_property
    def Q(self) -> acb_mat:
        return projector(self.s)

    def step(self, tau: arb) -> acb_mat:
        """K."""
        return self.Q * (dense(self.s) * acb(0, -tau)).exp() * self.Q

    def generator(self, tau: arb) -> acb_mat:
        """G^(K)."""
        total = acb_mat(self.s.size, self.s.size)
        for k, term in enumerate(self.terms):
            total = total + term * acb(tau**k)
        return total

    def truncated_step(self, tau: arb) -> acb_mat:
        """Khat."""
        return self.Q * (self.generator(tau) * acb(0, -tau)).exp() * self.Q

    def remainder(self, tau: arb) -> Norm:
        """|| i log K - tau G^(K) ||, log K by its alternating series; for h tau < log 2."""
        centred = self.step(tau) * (acb(0, tau) * self.s.E0).exp() - self.Q
        q = (self.s.h * tau).expm1()
        if not q < arb("0.9"):
            raise NotCovered("the logarithm's series is summed for h*tau < 0.6 only")
        total, power, n, tail = centred, centred, 1, q
        while not tail < arb(10) ** -DIGITS:
            n, tail = n + 1, q ** (n + 2) / (1 - q)
            power = power * centred
            total = total + power * acb(arb((-1) ** (n + 1)) / n)
        gap = total * acb(0, 1) + self.Q * acb(tau * self.s.E0) - self.generator(tau) * acb(tau)
        found = norm_of(gap)
        return Norm(found.low - tail, found.high + tail)

    def error(self, tau: arb, n: int) -> Norm:
        """e_n."""
        return norm_of(power_of(self.step(tau), n) - power_of(self.truncated_step(tau), n))

    def least_survival(self, tau: arb, n: int) -> Norm:
        """The least of |K^n v| over unit v in range(Q): 1/||K^-n||, the inverse taken on range(Q)."""
        whole = power_of(self.step(tau), n) + projector_beside(self.Q)
        try:
            inverse = whole.inv()
        except ZeroDivisionError as fault:
            raise NotCovered("the step has no inverse here: some states are surely detected") from fault
        found = norm_of(self.Q * inverse * self.Q)
        return Norm(1 / found.high, 1 / found.low)


def _sum(matrices: list[acb_mat]) -> acb_mat:
    total = matrices[0]
    for m in matrices[1:]:
        total = total + m
    return total


def projector_beside(Q: acb_mat) -> acb_mat:
    """P = 1 - Q."""
    n = Q.nrows()
    return acb_mat(n, n, [int(x == y) - Q[x, y] for x in range(n) for y in range(n)])


def power_of(m: acb_mat, n: int) -> acb_mat:
    """m^n, n >= 1."""
    found: acb_mat | None = None
    while n:
        if n & 1:
            found = m if found is None else found * m
        n >>= 1
        m = m * m if n else m
    return m if found is None else found


def norm_of(E: acb_mat) -> Norm:
    """The operator norm of E."""
    square = dagger(E) * E
    low = arb(0)
    for x in range(square.nrows()):
        low = low.max(square[x, x].real.lower())
    high = square
    for _ in range(3):
        high = high * high
    trace = arb(upper(high.trace()))
    return Norm(arb(low.max(arb(0)).sqrt().lower()), trace.root(16))


def approx_first_failure(s: System, terms: list[acb_mat], time: float, tolerance: float, first: int) -> int | None:
    """The largest n <= first with e_n > tolerance at tau = time/n, in doubles; None where no n fails.

    n falls from `first` by a fiftieth or by 1 at a time; between the last that held and the first that failed
    every n is looked at.
    """
    error = _approx_errors(s, terms, time)
    held, n = first, first
    while n >= 1:
        if not error(n) <= tolerance:
            return next((k for k in range(held - 1, n, -1) if not error(k) <= tolerance), n)
        held, n = n, min(n - 1, n - n // STRIDE)
    return None


def _approx_errors(s: System, terms: list[acb_mat], time: float) -> Callable[[int], float]:
    """n -> e_n in doubles."""
    import numpy as np

    H, Q = midpoints(dense(s)), midpoints(projector(s))
    G = [midpoints(m) for m in terms]
    levels, states = np.linalg.eigh((H + H.conj().T) / 2)

    def error(n: int) -> float:
        tau = time / n
        step = Q @ (states * np.exp(-1j * tau * levels)) @ states.conj().T @ Q
        truncated = sum(g * tau**k for k, g in enumerate(G))
        gap = np.linalg.matrix_power(step, n) - Q @ _exponential(-1j * time * truncated) @ Q
        return float(np.linalg.norm(gap, 2))

    return error


def _exponential(m: Any) -> Any:
    """exp(m) by Taylor's series of m/2^s, squared s times."""
    import numpy as np

    size = float(np.linalg.norm(m, 1))
    if not np.isfinite(size) or size > 1e6:
        return m * float("nan")
    s = max(0, int(np.ceil(np.log2(size + 1e-300))) + 3)
    small, total = m / 2**s, np.eye(len(m), dtype=complex)
    term = total
    for k in range(1, 18):
        term = term @ small / k
        total = total + term
    for _ in range(s):
        total = total @ total
    return total
