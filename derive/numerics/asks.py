"""Infinitely many asks, summed by doubling, with a rigorous tail.

K = Q U is one undetected interval (with efficiency eta: K = (1 - (1 - sqrt(1-eta)) P) U), X = U† U - K† K what a
click takes.  For p = 0, 1, 2, ...

    Z_p = sum_{m>=0} binomial(m+p, p) (K†)^m X K^m,     <psi|Z_p|psi> = sum_n binomial(n+p-1, p) F_n

so Z_0 holds the total probability, Z_1 the mean, 2 Z_2 - Z_1 the second moment.  Doubling the number of terms:

    Z_p(2n) = Z_p(n) + (K†)^n [ sum_i binomial(n+p-i-1, p-i) Z_i(n) ] K^n.

Tail.  On the dark space, of a dimension that the caller knows exactly, (K†)^n K^n is 1, so e = tr (K†)^n K^n minus
that dimension bounds ||K^n||^2 on the bright space, which K never leaves.  With z_p = ||Z_p|| there, z_0 <= 1 and
z_p <= (||Z_p(n)|| + e sum_{i<p} binomial(n+p-i-1, p-i) z_i)/(1 - e); what is left out of <psi|Z_p|psi> lies between 0
and e sum_i binomial(n+p-i-1, p-i) z_i |psi|^2.  Everything in balls.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import comb

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision
from derive.formula.tree import ONE
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import step_matrix
from derive.numerics.system import State, dagger, system
from derive.problem.setting import Setting, Unitary, Vector

MOST_DOUBLINGS = 200


@dataclass(frozen=True)
class Step:
    """U, the undetected step K, and what each detector's click takes: U† eta_w P_w U, by detector."""

    u: acb_mat
    k: acb_mat
    clicks: tuple[acb_mat, ...]

    @property
    def size(self) -> int:
        return int(self.u.nrows())

    @property
    def all_clicks(self) -> acb_mat:
        total = self.clicks[0]
        for x in self.clicks[1:]:
            total = total + x
        return total


def measured_step(setting: Setting, values: Values, tau: arb) -> Step:
    """U = exp(-i H tau), or the step given, then a "no" of every detector."""
    u = _given(setting.space, values) if isinstance(setting.space, Unitary) else _evolved(setting, values, tau)
    size = int(u.nrows())
    k, clicks = u, []
    for watcher in setting.detectors:
        p = acb_mat(size, size)
        for vector in watcher.vectors:
            row = [(x, enclose(f, values)) for x, f in vector]
            for x, a in row:
                for y, b in row:
                    p[x, y] = p[x, y] + a * b.conjugate()
        eta = enclose(watcher.efficiency, values).real
        k = k - p * k * acb(1 - (1 - eta).nonnegative_part().sqrt())
        clicks.append(dagger(u) * p * u * acb(eta))
    return Step(u, k, tuple(clicks))


def _evolved(setting: Setting, values: Values, tau: arb) -> acb_mat:
    """exp(-i (H - E0) tau): the common phase counts for nothing."""
    perfect = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
    return step_matrix(system(perfect, values), tau)


def _given(space: Unitary, values: Values) -> acb_mat:
    rows = space.rows
    u = acb_mat(len(rows), len(rows))
    for x, row in enumerate(rows):
        for y, f in row:
            u[x, y] = enclose(f, values)
    return u


@dataclass(frozen=True)
class Sums:
    """Z_0(n) ... Z_p(n) and how much <psi|Z_i|psi> may still grow, for |psi| = 1."""

    partial: tuple[acb_mat, ...]
    tails: tuple[arb, ...]

    def enclose(self, p: int, psi: Sequence[acb]) -> arb:
        """A ball of <psi|Z_p|psi> for a normalised psi."""
        value = expectation(self.partial[p], psi)
        return value + half_open(self.tails[p])


def half_open(width: arb) -> arb:
    """A ball that holds [0, width]."""
    half = width.upper() / 2
    return arb(half.mid(), half.upper())


def expectation(matrix: acb_mat, psi: Sequence[acb]) -> arb:
    """<psi|M|psi>, real for Hermitian M."""
    size = len(psi)
    image = (matrix * acb_mat(size, 1, list(psi))).entries()
    total = acb(0)
    for a, b in zip(psi, image, strict=True):
        total += a.conjugate() * b
    return total.real


def enclose_sums(k: acb_mat, taken: acb_mat, dark: int, highest: int, narrow: arb) -> Sums:
    """Z_0 ... Z_highest with tails below `narrow`; `dark` is the exact dimension of the dark space."""
    z, power, n = [taken] * (highest + 1), k, 1
    for _ in range(MOST_DOUBLINGS):
        rest = (dagger(power) * power).trace().real - dark
        if rest.upper() < 0:
            raise ArithmeticError("the dark space is larger than it can be")
        if rest < 1 and (tails := _tails(z, n, arb(rest.upper()).max(arb(0)))) and tails[-1] < narrow:
            return Sums(tuple(z), tuple(tails))
        z = [z[p] + dagger(power) * _shifted(z, p, n) * power for p in range(highest + 1)]
        power, n = power * power, 2 * n
        if not all(x.real.is_finite() and x.rad() < 1 for x in power.entries()):
            break
    raise NeedsPrecision("the sum over asks did not settle at this precision")


def _shifted(z: Sequence[acb_mat], p: int, n: int) -> acb_mat:
    """sum_i binomial(n+p-i-1, p-i) Z_i(n)."""
    total = z[p]
    for i in range(p):
        total = total + z[i] * acb(comb(n + p - i - 1, p - i))
    return total


def _tails(z: Sequence[acb_mat], n: int, e: arb) -> list[arb]:
    """Bounds on what each sum leaves out after n terms."""
    bounds: list[arb] = []
    tails: list[arb] = []
    for p, partial in enumerate(z):
        beyond = arb(0)
        for i in range(p):
            beyond += bounds[i] * comb(n + p - i - 1, p - i)
        whole = arb(1) if p == 0 else (arb(partial.trace().real.upper()) + e * beyond) / (1 - e)
        bounds.append(arb(whole.upper()))
        tails.append(arb((e * (beyond + whole)).upper()))
    return tails


def state_of(vector: Vector, size: int, values: Values) -> State:
    """A start vector as balls."""
    psi = [acb(0)] * size
    for x, f in vector:
        psi[x] = enclose(f, values)
    return psi
