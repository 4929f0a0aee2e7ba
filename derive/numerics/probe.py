"""The generator's coefficients applied to a vector: the contour of `contour.py` without a dense matrix.

    G_k v = i h^(k+1) [z^(k+1)] log(Q U Q) v,   log(1 + X) v = sum_n (-1)^(n+1) X^n v/n,
    X v = Q (exp(-i z H') - 1) Q v  by Taylor's series of the sparse H'

Errors as there, times ||v||: the tails are bounds in operator norm, so they bound every component.
Cost: M T m (non-zero entries of H), for M samples, T terms of the log, m terms of the exponential.
"""

from __future__ import annotations

from collections.abc import Callable

from flint import acb, arb

from derive.numerics.contour import Circle, alias_bound, log_tail, phase, radius
from derive.numerics.evolution import linear_action, norm, project_out, shifted_rows
from derive.numerics.system import SparseRow, State, System

Action = Callable[[State], State]


def probe_cost(s: System, circle: Circle) -> float:
    """Products of one complex number with another that `enclose_actions` takes, roughly."""
    exponential = circle.bits / circle.shrink + 2
    return circle.samples * circle.terms * exponential * (s.entries + 3.0 * s.size)


def enclose_actions(s: System, order: int, circle: Circle, v: State) -> list[State]:
    """Balls for G_0 v, ..., G_order v (energy^(k+1)), at the working precision."""
    unit = s.h if s.h > 0 else arb(1)
    act = linear_action(_scaled_rows(s))
    length = norm(v)
    logs = [_log_action(s, act, z, circle, v, length) for z in _directions(circle)]
    found = [_coefficient(logs, k + 1, circle, unit, length) for k in range(order + 1)]
    still = project_out(s, v)
    found[0] = [a + s.E0 * b for a, b in zip(found[0], still, strict=True)]
    return found


def _scaled_rows(s: System) -> list[SparseRow]:
    """Rows of -i (H - E0)/h; empty where h = 0."""
    return shifted_rows(s, acb(0, -1) / s.h) if s.h > 0 else [() for _ in s.rows]


def _directions(circle: Circle) -> list[acb]:
    return [phase(j, circle.samples) for j in range(circle.samples)]


def _log_action(
    s: System, act: Action, direction: acb, circle: Circle, v: State, length: arb
) -> State:
    """L(z) v at z = y * direction."""
    z = direction * radius(circle)
    total = [acb(0)] * s.size
    power = v
    for n in range(1, circle.terms + 1):
        power = _step_action(s, act, z, circle, power)
        weight = arb((-1) ** (n + 1)) / n
        total = [a + b * weight for a, b in zip(total, power, strict=True)]
    return blurred(total, log_tail(circle) * length)


def _step_action(s: System, act: Action, z: acb, circle: Circle, v: State) -> State:
    """X v = Q (exp(-i z H') - 1) Q v, with the tail of the exponential series."""
    term = project_out(s, v)
    length, y = norm(term), radius(circle)
    total = [acb(0)] * s.size
    m = 0
    while circle.shrink * m <= circle.bits + 8:
        m += 1
        factor = z / m
        term = [a * factor for a in act(term)]
        total = [a + b for a, b in zip(total, term, strict=True)]
    tail = y ** (m + 1) / arb.fac_ui(m + 1) / (1 - y)
    return project_out(s, blurred(total, tail * length))


def _coefficient(logs: list[State], d: int, circle: Circle, unit: arb, length: arb) -> State:
    M, y = circle.samples, radius(circle)
    weights = [phase(j, M) ** (-d) / M for j in range(M)]
    spread = alias_bound(d, circle) * length
    factor, found = acb(0, unit**d), []
    for x in range(len(logs[0])):
        total = acb(0)
        for weight, sample in zip(weights, logs, strict=True):
            total += weight * sample[x]
        found.append(total * y ** (-d))
    return [a * factor for a in blurred(found, spread)]


def blurred(v: State, spread: arb) -> State:
    """v with `spread` added to the radius of every component."""
    around = arb(0, spread.upper())
    return [a + acb(around, around) for a in v]
