"""The slow generator of an imperfect detector, measured: log of the slow step sampled on a small circle, in balls.

    K(z) = (1 - (1 - q) P) exp(-i z H'),   H' = (H - E0)/h,  ||H'|| <= 1,  z = h tau on |z| = y
    K (1; X) = (1; X) E,   X(0) = 0:       X = [ q U_PQ + q (U_PP - 1) X - X (E - 1) ]/(1 - q),   E = U_QQ + U_QP X

At each sample X is found by repeating the last line and then certified: where the right side maps a matrix of balls
into itself it has a fixed point there (Brouwer), the only small one (it contracts).  On a larger circle |z| = R the
same line bounds ||X|| by rho and ||E - 1|| by e < 1, so that the coefficients of L = log E obey
||L_d|| <= -log(1 - e) R^-d: that bounds the aliases of the discrete Fourier transform.

    G_k = i h^(k+1) L_(k+1)   (and E0 Q is added to G_0)

No recursion for coefficients is used.  Derived here; for q = 0 it agrees with `contour.py`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil

from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision, NotCovered
from derive.numerics.nullstep import Measured, identity, on_detector
from derive.numerics.precision import BITS_PER_DIGIT

SHRINK = 24  # y = R 2^-24: few samples and few terms, at the price of bits
ROUNDS = 400  # of the fixed-point line; each gains about SHRINK bits
HIGHEST_ORDER = 24


@dataclass(frozen=True)
class Circle:
    """R and rho, e on it; y = R 2^-SHRINK; samples, terms of the log, working bits."""

    reach: arb
    e: arb
    samples: int
    terms: int
    bits: int

    @property
    def y(self) -> arb:
        return self.reach / arb(2) ** SHRINK


def choose_slow_circle(q: arb, order: int, digits: int, size: int) -> Circle:
    """The circle for given digits; `NotCovered` where the detector is too weak for any."""
    if order > HIGHEST_ORDER:
        raise NotCovered(f"order {order} is above {HIGHEST_ORDER}, the highest one that is measured")
    goal = ceil(digits * BITS_PER_DIGIT) + 8
    reach, e = slow_reach(q)
    lost = ceil(float((-(reach.log()) / arb(2).log()).upper())) if reach < 1 else 0
    samples = order + 2 + ceil(goal / SHRINK)
    terms = order + 2 + ceil(goal / SHRINK)
    return Circle(reach, e, samples, terms, goal + (SHRINK + lost) * (order + 3) + 4 * size.bit_length() + 64)


def slow_reach(q: arb) -> tuple[arb, arb]:
    """(R, e): the largest power of 1/2 at which some rho maps into itself, and the bound on ||E - 1|| there."""
    reach = arb(1) / 2
    for _ in range(60):
        d = reach.expm1()
        for rho in (arb(1) / 8, arb(1) / 4, arb(1) / 2):
            e = d + d * rho
            maps_in = q * d + q * d * rho + rho * e < rho * (1 - q)
            contracts = q * d + e + d * rho < 1 - q
            if maps_in and contracts and e < arb(1) / 2:
                return reach, e
        reach = reach / 2
    raise NotCovered("a detector this weak leaves no slow states of their own")


def enclose_slow_generators(m: Measured, E0: arb, q: acb, order: int, circle: Circle) -> list[acb_mat]:
    """Balls for G_0 ... G_order (n x n each, energy^(k+1)), at the working precision."""
    unit = m.h if m.h > 0 else arb(1)
    scaled = m.hamiltonian * acb(1 / unit)
    logs = [_log_at(m, scaled, _direction(j, circle) * circle.y, q, circle) for j in range(circle.samples)]
    found = [_coefficient(logs, k + 1, circle, unit) for k in range(order + 1)]
    found[0] = found[0] + m.q * acb(E0)
    return found


def _direction(j: int, circle: Circle) -> acb:
    return acb(arb(2 * j) / circle.samples).exp_pi_i()


def _log_at(m: Measured, scaled: acb_mat, z: acb, q: acb, circle: Circle) -> acb_mat:
    """log E on range(Q) at one sample, the tail of the series in every entry."""
    minus = (scaled * (z * acb(0, -1))).exp() - identity(m.size)
    e = slow_step(m, minus, q)
    size = _norm_bound(circle.y, q)
    total, power = acb_mat(m.size, m.size), e
    for n in range(1, circle.terms + 1):
        total = total + power * acb(arb((-1) ** (n + 1)) / n)
        power = power * e
    return total + _blur(m.size, size ** (circle.terms + 1) / (circle.terms + 1) / (1 - size))


def _norm_bound(y: arb, q: acb) -> arb:
    """||E - 1|| <= d (1 + rho), ||X|| <= rho = 4 q d/(1 - q) once d is small beside 1 - q."""
    d = y.expm1()
    kept = arb(q.abs_upper())
    rho = 4 * kept * d / (1 - kept) if kept > 0 else arb(0)
    if not (kept * d + kept * d * rho + rho * (d + d * rho)) <= rho * (1 - kept):
        raise NeedsPrecision("the slow step's norm is not bounded on this circle")
    return d * (1 + rho)


def slow_step(m: Measured, minus: acb_mat, q: acb) -> acb_mat:
    """E - 1 on range(Q), n x n, with X certified."""
    p, off = on_detector(m), m.q
    pq, pp, qq, qp = p * minus * off, p * minus * p, off * minus * off, off * minus * p
    weight = acb(1) / (1 - q)

    def line(x: acb_mat) -> acb_mat:
        return (pq * q + pp * x * q - x * (qq + qp * x)) * weight

    x = acb_mat(m.size, m.size)
    if not q.is_zero():
        x = _certified(line, x)
    return qq + qp * x


def _certified(line: Callable[[acb_mat], acb_mat], x: acb_mat) -> acb_mat:
    """A matrix of balls that holds the small fixed point of `line`."""
    goal = arb(2) ** (-ctx.prec * 3 // 4)
    for _ in range(ROUNDS):
        new = _middle(line(x))
        moved = _largest(new - x)
        x = new
        if moved < goal:
            break
    wide = x + _blur(x.nrows(), goal * 16)
    image = line(wide)
    if not wide.contains(image):
        raise NeedsPrecision("the slow states were not certified at this precision")
    return image


def _middle(matrix: acb_mat) -> acb_mat:
    entries = [acb(c.real.mid(), c.imag.mid()) for c in matrix.entries()]
    return acb_mat(matrix.nrows(), matrix.ncols(), entries)


def _largest(matrix: acb_mat) -> arb:
    found = arb(0)
    for c in matrix.entries():
        found = found.max(c.abs_upper())
    return found


def _blur(size: int, radius: arb) -> acb_mat:
    spread = arb(0, radius.upper())
    return acb_mat(size, size, [acb(spread, spread)] * (size * size))


def _coefficient(logs: list[acb_mat], d: int, circle: Circle, unit: arb) -> acb_mat:
    """G_(d-1) = i h^d L_d."""
    total = acb_mat(logs[0].nrows(), logs[0].nrows())
    for j, sample in enumerate(logs):
        total = total + sample * (_direction(j, circle) ** (-d) / circle.samples)
    total = total * acb(circle.y ** (-d)) + _blur(total.nrows(), _alias(d, circle))
    return total * acb(0, unit**d)


def _alias(d: int, circle: Circle) -> arb:
    """sum_{l>=1} ||L_(d+lM)|| y^(lM), ||L_d|| <= -log(1 - e) R^-d."""
    ratio = arb(2) ** (-SHRINK * circle.samples)
    return -(1 - circle.e).log() * circle.reach ** (-d) * ratio / (1 - ratio)
