"""The experiment itself, in balls: evolve, ask, evolve, ask.

    psi -> Q exp(-i H tau) psi,   S_n = |(QU)^n psi|^2,   F_n = S_(n-1) - S_n

exp(M) v is summed by Taylor's series with its remainder: ||sum_{m>n} M^m v/m!|| <= ||v|| b^(n+1)/(n+1)! 1/(1 - b/(n+2))
for any b >= ||M||, added to every component.  Sparse rows, never a dense matrix.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from flint import acb, arb, ctx

from derive.errors import NotCovered
from derive.numerics.system import SparseRow, State, System

LARGEST_EXPONENT = 64
"""Norm of an exponent beyond which Taylor's series is not summed in one piece."""


def apply_rows(rows: Sequence[SparseRow], v: State) -> State:
    """M v for sparse rows."""
    result = []
    for row in rows:
        total = acb(0)
        for y, value in row:
            total += value * v[y]
        result.append(total)
    return result


def project_out(s: System, v: State) -> State:
    """Q v = v - D D† v."""
    result = list(v)
    for vector in s.detector:
        overlap = acb(0)
        for x, a in vector:
            overlap += a.conjugate() * v[x]
        for x, a in vector:
            result[x] = result[x] - a * overlap
    return result


def squared_norm(v: State) -> arb:
    total = arb(0)
    for a in v:
        total += a.real * a.real + a.imag * a.imag
    return total


def norm(v: State) -> arb:
    """|v|; exact 0 for the exact zero vector."""
    square = squared_norm(v)
    return square.nonnegative_part().sqrt()


def distance(v: State, w: State) -> arb:
    """|v - w|."""
    return norm([a - b for a, b in zip(v, w, strict=True)])


def exponential_action(act: Callable[[State], State], bound: arb, v: State) -> State:
    """exp(M) v, where act(w) = M w and ||M|| <= bound."""
    if not bound < LARGEST_EXPONENT:
        raise NotCovered("an exponent too large for Taylor's series in one piece")
    length, b = norm(v), bound.upper()
    goal = arb(2) ** (-ctx.prec)
    total, term, m, size = list(v), v, 0, arb(1)
    while not (size < goal and b < m + 2):
        m += 1
        term = [a / m for a in act(term)]
        total = [a + c for a, c in zip(total, term, strict=True)]
        size = size * b / m
        if term_is_zero(term):
            return total
    tail = size * b / (m + 1) / (1 - b / (m + 2)) * length
    around = arb(0, tail.upper())
    return [a + acb(around, around) for a in total]


def term_is_zero(v: State) -> bool:
    return all(a.is_zero() for a in v)


def shifted_rows(s: System, factor: acb) -> list[SparseRow]:
    """Rows of factor (H - E0)."""
    rows = []
    for x, row in enumerate(s.rows):
        held = dict(row)
        held[x] = held.get(x, acb(0)) - s.E0
        rows.append(tuple((y, held[y] * factor) for y in sorted(held)))
    return rows


def evolve_and_ask(s: System, tau: arb, psi: State) -> Iterator[State]:
    """(QU)^n psi for n = 1, 2, ...; the common phase exp(-i E0 tau) is kept."""
    rows = shifted_rows(s, acb(0, -tau))
    turn = (acb(0, -tau) * s.E0).exp()
    bound = s.h * tau
    while True:
        moved = exponential_action(lambda w: apply_rows(rows, w), bound, psi)
        psi = project_out(s, [turn * a for a in moved])
        yield psi


def survival(s: System, tau: arb, psi: State, asks: int) -> list[arb]:
    """S_0, S_1, ..., S_asks for a normalised psi (S_0 = |psi|^2)."""
    steps = evolve_and_ask(s, tau, psi)
    return [squared_norm(psi)] + [squared_norm(next(steps)) for _ in range(asks)]
