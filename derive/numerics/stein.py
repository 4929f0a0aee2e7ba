"""Stein's equation solved in balls: b_p = sum_n binomial(n+p-1, p) F_n from one linear equation a power p.

    Y_p - K† Y_p K = Y_(p-1),   Y_0 = 1   on what the detectors reach, where it has one solution;   b_p = <psi|Y_p|psi>

As a linear system for any detectors and any law of intervals; or, for one detector state d at a fixed interval, level
by level: with z_j = exp(-i E_j tau), p_j = |<j|d>|^2, q_j = <d|j><j|psi>, a = 1 - sqrt(1 - eta), c_jk = x/(1 - x),
x = conj(z_j) z_k, <j|Y_(p-1)|k> = <j|d> rho_jk <d|k>, <j|Y_p|k> = <j|d> T_jk <d|k> and t_j = sum_k T_jk p_k,

    (2 a - a^2) y = sum_j p_j rho_jj,      2 a Re t_j = rho_jj + a^2 y,
    (1 - a/2) Im t_j = Im sum_(k != j) p_k [(1 + c_jk) rho_jk - c_jk (rho_jj + rho_kk)/2],
    T_jk = (1 + c_jk) rho_jk - c_jk (a t_j + a conj(t_k) - a^2 y),      p_j T_jj = t_j - sum_(k != j) p_k T_jk.

Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision
from derive.numerics.asks import Step
from derive.numerics.system import State, dagger


def solved_sums(step: Step, highest: int) -> list[acb_mat]:
    """Y_1 ... Y_highest on a frame without dark states."""
    y, found = acb_mat(step.size, step.size, 1), []
    for _ in range(highest):
        y = solved(step, y)
        found.append(y)
    return found


def solved(step: Step, source: acb_mat) -> acb_mat:
    """Y with Y - K† Y K = source."""
    n = step.size
    carried = step.averaged if step.averaged is not None else _both_sides(step.k)
    try:
        column = (acb_mat(n * n, n * n, 1) - carried).solve(acb_mat(n * n, 1, source.entries()))
    except ZeroDivisionError as fault:
        raise NeedsPrecision("Stein's equation is not solved at this precision") from fault
    return acb_mat(n, n, column.entries())


def _both_sides(k: acb_mat) -> acb_mat:
    """X -> K† X K on rows written one after the other."""
    n, left = k.nrows(), dagger(k)
    rows = [[left[i, a] * k[b, j] for a in range(n) for b in range(n)] for i in range(n) for j in range(n)]
    return acb_mat(rows)


@dataclass(frozen=True)
class ByLevels:
    """Weights p_j, c_jk and a of one detector state."""

    p: list[arb]
    c: list[list[acb]]
    a: arb

    def sums(self, highest: int) -> list[list[list[acb]]]:
        """T of Y_1 ... Y_highest."""
        size = range(len(self.p))
        rho = [[acb(1 / self.p[j]) if j == k else acb(0) for k in size] for j in size]
        found = []
        for _ in range(highest):
            rho = self._next(rho)
            found.append(rho)
        return found

    def _next(self, rho: list[list[acb]]) -> list[list[acb]]:
        p, c, a, size = self.p, self.c, self.a, range(len(self.p))
        y = sum((p[j] * rho[j][j].real for j in size), arb(0)) / (2 * a - a * a)
        t = [acb((rho[j][j].real + a * a * y) / (2 * a), self._imaginary(rho, j)) for j in size]
        out = [
            [(1 + c[j][k]) * rho[j][k] - c[j][k] * (a * t[j] + a * t[k].conjugate() - a * a * y) for k in size]
            for j in size
        ]
        for j in size:
            out[j][j] = (t[j] - sum((out[j][k] * p[k] for k in size if k != j), acb(0))) / p[j]
        return out

    def _imaginary(self, rho: list[list[acb]], j: int) -> arb:
        """Im t_j."""
        total = acb(0)
        for k, weight in enumerate(self.p):
            if k != j:
                mean = (rho[j][j] + rho[k][k]) / 2
                total += ((1 + self.c[j][k]) * rho[j][k] - self.c[j][k] * mean) * weight
        return total.imag / (1 - self.a / 2)


@dataclass(frozen=True)
class Eigenstates:
    """Energies and eigenvectors of H on a frame, all energies different."""

    energies: list[arb]
    columns: list[State]
    lengths: list[arb]

    @staticmethod
    def of(h: acb_mat) -> Eigenstates:
        try:
            energies, v = h.eig(right=True)
        except ValueError as fault:
            raise NeedsPrecision("the energies are not told apart at this precision") from fault
        n = h.nrows()
        columns = [[v[x, j] for x in range(n)] for j in range(n)]
        lengths = [sum((_square(c) for c in column), arb(0)) for column in columns]
        return Eigenstates([e.real for e in energies], columns, lengths)

    def overlaps(self, psi: State) -> list[acb]:
        """<v_j|psi>, the v_j as they come."""
        return [
            sum((c.conjugate() * f for c, f in zip(column, psi, strict=True)), acb(0)) for column in self.columns
        ]


def by_levels(states: Eigenstates, d: State, tau: arb, a: arb) -> ByLevels:
    """The levels of a detector state d at a fixed interval."""
    p = [_square(x) / n for x, n in zip(states.overlaps(d), states.lengths, strict=True)]
    z = [acb(0, -e * tau).exp() for e in states.energies]
    c = [[acb(0) if j == k else _through(x.conjugate() * y) for k, y in enumerate(z)] for j, x in enumerate(z)]
    return ByLevels(p, c, a)


def _square(x: acb) -> arb:
    """|x|^2; a power of a ball around 0 would be no number."""
    return x.real * x.real + x.imag * x.imag


def _through(x: acb) -> acb:
    return x / (1 - x)


def amplitudes(states: Eigenstates, d: State, psi: State) -> list[acb]:
    """q_j = <d|j><j|psi>."""
    pairs = zip(states.overlaps(d), states.overlaps(psi), states.lengths, strict=True)
    return [x.conjugate() * y / n for x, y, n in pairs]


def form_value(t: list[list[acb]], q: Sequence[acb]) -> arb:
    """sum_jk conj(q_j) T_jk q_k."""
    total = acb(0)
    for j, x in enumerate(q):
        total += x.conjugate() * sum((t[j][k] * y for k, y in enumerate(q)), acb(0))
    return total.real
