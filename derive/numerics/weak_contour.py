"""The generator under weak measurement, measured: log K sampled on a small circle of complex tau, in balls.

    K(tau) = (1 - (1 - q(tau)) P) exp(-i (H - E0) tau),   q(0) = 1,   z = h tau on |z| = y
    log K = sum_d L_d z^d,      G_k = i h^(k+1) L_(k+1)      (and E0 is added to G_0)

On a larger circle |z| = R, with w >= |q - 1| there (q evaluated on a ball that holds the disc), ||K - 1|| <= e =
(e^R - 1)(1 + w) + w < 1/2, so ||L_d|| <= -log(1 - e) R^-d bounds the aliases of the discrete Fourier transform, and a
power series of the logarithm ends with the usual tail.  Derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.numerics.nullstep import identity, measured_of, on_detector
from derive.numerics.precision import BITS_PER_DIGIT
from derive.numerics.system import System

SHRINK = 24
TRIES = 80


@dataclass(frozen=True)
class WeakCircle:
    """R, the bound e on it, the number of samples and terms, working bits; y = R 2^-SHRINK."""

    reach: arb
    e: arb
    samples: int
    terms: int
    bits: int

    @property
    def y(self) -> arb:
        return self.reach / arb(2) ** SHRINK


def choose_weak_circle(q: Formula, values: Values, s: System, order: int, digits: int) -> WeakCircle:
    """The largest disc on which K stays near 1, and what given digits ask for."""
    goal, reach = ceil(digits * BITS_PER_DIGIT) + 8, arb(1) / 4
    for _ in range(TRIES):
        e = _far(q, values, s, reach)
        if e is not None and e < arb(1) / 2:
            lost = ceil(float((-(reach.log()) / arb(2).log()).upper()))
            count = order + 2 + ceil(goal / SHRINK)
            bits = goal + (SHRINK + lost) * (order + 3) + 4 * s.size.bit_length() + 64
            return WeakCircle(reach, e, count, count, bits)
        reach = reach / 2
    raise NotCovered("the efficiency is not analytic, or not small, near tau = 0")


def _far(q: Formula, values: Values, s: System, reach: arb) -> arb | None:
    """e on |z| = R, None where q has no bound on the disc."""
    span = arb(0, (reach / _unit(s)).upper())
    try:
        w = (enclose(q, values.with_letter("tau", acb(span, span))) - 1).abs_upper()
    except (NeedsPrecision, OutsideValidity):
        return None
    return arb(reach.expm1() * (1 + w) + w)


def _unit(s: System) -> arb:
    return s.h if s.h > 0 else arb(1)


def enclose_weak_generators(s: System, q: Formula, values: Values, order: int, circle: WeakCircle) -> list[acb_mat]:
    """Balls for G_0 ... G_order (n x n each, energy^(k+1)), at the working precision."""
    unit, m = _unit(s), measured_of(s)
    p, one = on_detector(m), identity(s.size)
    logs = []
    for j in range(circle.samples):
        tau = _direction(j, circle) * circle.y / unit
        kept = enclose(q, values.with_letter("tau", tau))
        evolved = (m.hamiltonian * (tau * acb(0, -1))).exp()
        logs.append(_log(evolved - p * evolved * (1 - kept) - one, circle))
    found = [_coefficient(logs, k + 1, circle, unit) for k in range(order + 1)]
    found[0] = found[0] + one * acb(s.E0)
    return found


def _direction(j: int, circle: WeakCircle) -> acb:
    return acb(arb(2 * j) / circle.samples).exp_pi_i()


def _log(x: acb_mat, circle: WeakCircle) -> acb_mat:
    """log(1 + X), the tail in every entry; ||X|| is bounded by the Frobenius norm."""
    size = arb(0)
    for c in x.entries():
        size += c.abs_upper() ** 2
    size = arb(size.sqrt().upper())
    if not size < arb(1) / 4:
        raise NeedsPrecision("the step is too far from 1 on this circle")
    total, power = acb_mat(x.nrows(), x.nrows()), x
    for n in range(1, circle.terms + 1):
        total = total + power * acb(arb((-1) ** (n + 1)) / n)
        power = power * x
    return total + _blur(x.nrows(), size ** (circle.terms + 1) / (circle.terms + 1) / (1 - size))


def _blur(size: int, radius: arb) -> acb_mat:
    spread = arb(0, radius.upper())
    return acb_mat(size, size, [acb(spread, spread)] * (size * size))


def _coefficient(logs: list[acb_mat], d: int, circle: WeakCircle, unit: arb) -> acb_mat:
    """G_(d-1) = i h^d L_d."""
    total = acb_mat(logs[0].nrows(), logs[0].nrows())
    for j, sample in enumerate(logs):
        total = total + sample * (_direction(j, circle) ** (-d) / circle.samples)
    ratio = arb(2) ** (-SHRINK * circle.samples)
    alias = -(1 - circle.e).log() * circle.reach ** (-d) * ratio / (1 - ratio)
    return (total * acb(circle.y ** (-d)) + _blur(total.nrows(), alias)) * acb(0, unit**d)
