"""The experiment itself, in balls: evolve, ask, evolve, ask.

    psi -> Q exp(-i H tau) psi,   S_n = |(QU)^n psi|^2,   F_n = S_(n-1) - S_n

exp(M) v is summed by Taylor's series with its remainder: ||sum_{m>n} M^m v/m!|| <= ||v|| b^(n+1)/(n+1)! 1/(1 - b/(n+2))
for any b >= ||M||, added to every component.  Sparse rows, never a dense matrix.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from flint import acb, acb_mat, arb, ctx

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


def linear_action(rows: Sequence[SparseRow]) -> Callable[[State], State]:
    """w -> M w by sparse rows, or by one dense matrix where that is cheaper (measured: three to one)."""
    n = len(rows)
    if 3 * sum(len(row) for row in rows) < n * n:
        return lambda w: apply_rows(rows, w)
    matrix = acb_mat(n, n)
    for x, row in enumerate(rows):
        for y, value in row:
            matrix[x, y] = value
    return lambda w: (matrix * acb_mat(n, 1, w)).entries()


def evolve_and_ask(s: System, tau: arb, psi: State) -> Iterator[State]:
    """(QU)^n psi for n = 1, 2, ..., without the common phase exp(-i E0 n tau)."""
    act, bound = linear_action(shifted_rows(s, acb(0, -tau))), s.h * tau
    return _asked(s, lambda v: exponential_action(act, bound, v), psi)


def step_matrix(s: System, tau: arb) -> acb_mat:
    """exp(-i (H - E0) tau) as a dense matrix."""
    matrix = acb_mat(s.size, s.size)
    for x, row in enumerate(shifted_rows(s, acb(0, -tau))):
        for y, value in row:
            matrix[x, y] = value
    return matrix.exp()


def ask_by_matrix(s: System, step: acb_mat, psi: State) -> Iterator[State]:
    """The same as `evolve_and_ask`, with U at hand as a matrix."""
    return _asked(s, lambda v: (step * acb_mat(s.size, 1, v)).entries(), psi)


def _asked(s: System, evolve: Callable[[State], State], psi: State) -> Iterator[State]:
    """Q evolve(.) again and again, its errors added up and never multiplied.

    QU is a contraction, so a state known as middle +- r in norm comes out as QU middle +- r.  Only the middle goes
    through ball arithmetic, and only the rounding of one step is added to r.  Balls carried along component by
    component would widen by a factor a step instead (about 2 where the projection subtracts a number from itself).
    """
    middle, r = centred(psi)
    while True:
        middle, rounding = centred(project_out(s, evolve(middle)))
        r = (r + rounding).upper()
        around = arb(0, r)
        yield [a + acb(around, around) for a in middle]


def centred(v: State) -> tuple[State, arb]:
    """Exact midpoints, and a bound on the norm of what is around them."""
    square = arb(0)
    for a in v:
        square += a.real.rad() ** 2 + a.imag.rad() ** 2
    return [a.mid() for a in v], arb(square.sqrt().upper())


def survival(s: System, tau: arb, psi: State, asks: int) -> list[arb]:
    """S_0, S_1, ..., S_asks for a normalised psi (S_0 = |psi|^2)."""
    steps = evolve_and_ask(s, tau, psi)
    return [squared_norm(psi)] + [squared_norm(next(steps)) for _ in range(asks)]
