"""Random intervals, averaged exactly: density matrices under independent intervals of gamma law, in balls.

    E[ U(tau) rho U(tau)† ] = (1 + i theta L)^(-s) rho,   L = [H - E0, .],   theta = m1/s
                            = sum_k binomial(-s, k) (i theta)^k L^k rho

mean m1, shape s (exponential law: s = 1).  ||L|| <= 2 h, so with x = 2 h theta the terms from the k-th on are at most
|c_k| x^k (1 + r + r^2 + ...), r = x (s + k)/(k + 1), c_k = binomial(-s, k).  For a whole s the superoperator is a
power of an inverse, for intervals of any length.  A "no" multiplies by 1 - (1 - q) P on both sides.  Superoperators
act on matrices written row after row, rho_xy at place x N + y.
"""

from __future__ import annotations

from collections.abc import Callable

from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision, NotCovered
from derive.numerics.nullstep import Measured, dagger, identity, on_detector

MOST_STATES = 8  # the superoperator has the fourth power of this in entries
MOST_TERMS = 4000
MOST_POWERS = 16  # of the inverse, for a whole shape


def averaged(m: Measured, rho: acb_mat, mean: arb, shape: arb) -> acb_mat:
    """E[U rho U†] with the tail of the series in every entry, scaled by the norm of rho."""
    theta = mean / shape
    x = 2 * m.h * theta
    if not x < arb(1) / 2:
        raise NotCovered("the mean interval is too long for the averaged evolution's series")
    total, term, k, size = rho, rho, 0, arb(1)
    while True:
        factor = -(shape + k) / (k + 1)  # binomial(-s, k+1)/binomial(-s, k)
        term = (m.hamiltonian * term - term * m.hamiltonian) * (acb(0, 1) * theta * factor)
        total = total + term
        size = size * abs(factor) * x
        k += 1
        r = x * (shape + k) / (k + 1)
        if r < arb(3) / 4 and size < arb(2) ** (-ctx.prec):
            return total + _blur(total, size * r / (1 - r) * _norm(rho))
        if k > MOST_TERMS:
            raise NotCovered("a shape this large needs too many terms of the averaged evolution's series")


def _norm(rho: acb_mat) -> arb:
    total = arb(0)
    for c in rho.entries():
        total += c.abs_upper() ** 2
    return total.sqrt()


def _blur(matrix: acb_mat, radius: arb) -> acb_mat:
    spread = arb(0, radius.upper())
    return acb_mat(matrix.nrows(), matrix.ncols(), [acb(spread, spread)] * (matrix.nrows() * matrix.ncols()))


def averaged_step(m: Measured, mean: arb, shape: arb, q: acb) -> acb_mat:
    """One averaged interval and a "no", N^2 x N^2."""
    if m.size > MOST_STATES:
        raise NotCovered(f"averaged evolution is repeated for at most {MOST_STATES} states that the detector reaches")
    no = identity(m.size) - on_detector(m) * (1 - q)
    whole = shape.unique_fmpz() if shape.is_exact() else None
    if whole is not None and whole <= MOST_POWERS:
        evolved = _inverse_power(m, mean / shape, int(whole))
        return _superoperator(m, lambda rho: no * rho * dagger(no)) * evolved
    return _superoperator(m, lambda rho: no * averaged(m, rho, mean, shape) * dagger(no))


def _inverse_power(m: Measured, theta: arb, s: int) -> acb_mat:
    """(1 + i theta L)^-s."""
    h = m.hamiltonian
    forward = _superoperator(m, lambda rho: rho + (h * rho - rho * h) * acb(0, theta))
    try:
        step = forward.inv()
    except ZeroDivisionError as fault:
        raise NeedsPrecision("the averaged step is not inverted at this precision") from fault
    total = step
    for _ in range(s - 1):
        total = total * step
    return total


def _superoperator(m: Measured, act: Callable[[acb_mat], acb_mat]) -> acb_mat:
    """rho -> act(rho), N^2 x N^2."""
    columns = []
    for x in range(m.size):
        for y in range(m.size):
            unit = acb_mat(m.size, m.size)
            unit[x, y] = acb(1)
            columns.append(act(unit).entries())
    return acb_mat([[column[k] for column in columns] for k in range(m.size**2)])


def master(m: Measured, loss: arb, dephasing: arb) -> acb_mat:
    """The superoperator -i[A, .] - loss {V V†, .} - dephasing [A, [A, .]] on range(Q), N^2 x N^2."""
    a = m.q * m.hamiltonian * m.q
    v = m.q * m.hamiltonian * on_detector(m)
    b = v * dagger(v)

    def act(rho: acb_mat) -> acb_mat:
        inner = a * rho - rho * a
        return inner * acb(0, -1) - (b * rho + rho * b) * loss - (a * inner - inner * a) * dephasing

    return _superoperator(m, act)


def both_sides(m: Measured) -> acb_mat:
    """rho -> Q rho Q, N^2 x N^2."""
    return _superoperator(m, lambda rho: m.q * rho * m.q)
