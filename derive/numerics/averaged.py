"""Random intervals, averaged exactly: density matrices under independent intervals of gamma law, in balls.

    E[ U(tau) rho U(tau)† ] = (1 + i theta L)^(-s) rho,   L = [H - E0, .],   theta = m1/s
                            = sum_k binomial(-s, k) (i theta)^k L^k rho

mean m1, shape s (exponential law: s = 1).  ||L|| <= 2 h, so with x = 2 h theta the terms from the k-th on are at most
|c_k| x^k (1 + r + r^2 + ...), r = x (s + k)/(k + 1), c_k = binomial(-s, k).  A "no" multiplies by 1 - (1 - q) P on
both sides.  Superoperators act on matrices written row after row, rho_xy at place x N + y.
"""

from __future__ import annotations

from flint import acb, acb_mat, arb, ctx

from derive.errors import NotCovered
from derive.numerics.nullstep import Measured, dagger, identity, on_detector

MOST_STATES = 8  # the superoperator has the fourth power of this in entries
MOST_TERMS = 4000


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
    columns = []
    for a in range(m.size):
        for b in range(m.size):
            unit = acb_mat(m.size, m.size)
            unit[a, b] = acb(1)
            columns.append((no * averaged(m, unit, mean, shape) * dagger(no)).entries())
    return acb_mat([[column[x] for column in columns] for x in range(m.size**2)])


def master(m: Measured, loss: arb, dephasing: arb) -> acb_mat:
    """The superoperator -i[A, .] - loss {V V†, .} - dephasing [A, [A, .]] on range(Q), N^2 x N^2."""
    a = m.q * m.hamiltonian * m.q
    v = m.q * m.hamiltonian * on_detector(m)
    b = v * dagger(v)
    columns = []
    for x in range(m.size):
        for y in range(m.size):
            rho = acb_mat(m.size, m.size)
            rho[x, y] = acb(1)
            inner = a * rho - rho * a
            out = inner * acb(0, -1) - (b * rho + rho * b) * loss - (a * inner - inner * a) * dephasing
            columns.append(out.entries())
    return acb_mat([[column[k] for column in columns] for k in range(m.size**2)])


def both_sides(m: Measured) -> acb_mat:
    """rho -> Q rho Q, N^2 x N^2."""
    columns = []
    for x in range(m.size):
        for y in range(m.size):
            rho = acb_mat(m.size, m.size)
            rho[x, y] = acb(1)
            columns.append((m.q * rho * m.q).entries())
    return acb_mat([[column[k] for column in columns] for k in range(m.size**2)])
