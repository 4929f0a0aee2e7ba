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
from dataclasses import dataclass
from functools import reduce
from math import comb
from typing import Protocol

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import step_matrix
from derive.numerics.frame import Frame, hamiltonian, whole_frame
from derive.numerics.system import State, dagger
from derive.problem.setting import Setting, Unitary, Vector

MOST_DOUBLINGS = 200
MOST_AVERAGED = 10
"""Dimensions up to which the average over random intervals is taken as a matrix on operators."""
MOST_INVERTED = 16
"""Whole shapes up to which that is the power of an inverse; beyond, and for others, it is taken energy by energy."""


@dataclass(frozen=True)
class Step:
    """U, the undetected step K, and what each detector's click takes: U† eta_w P_w U, by detector.

    At random intervals U and K are those of a vanishing interval, and clicks and steps are averaged (`averaged`).
    """

    u: acb_mat
    k: acb_mat
    clicks: tuple[acb_mat, ...]
    frame: Frame | None = None
    averaged: acb_mat | None = None

    @property
    def size(self) -> int:
        return int(self.u.nrows())

    @property
    def undetected(self) -> Undetected:
        """X -> K† X K, or its average."""
        return Fixed(self.k) if self.averaged is None else Averaged(self.averaged, self.size)

    def state(self, vector: Vector, values: Values) -> State:
        """A state in the coordinates of the step."""
        return state_of(vector, self.size, values) if self.frame is None else self.frame.state(vector, values)

    @property
    def all_clicks(self) -> acb_mat:
        total = self.clicks[0]
        for x in self.clicks[1:]:
            total = total + x
        return total


def measured_step(setting: Setting, values: Values, tau: arb, frame: Frame | None = None) -> Step:
    """U = exp(-i (H - E0) tau), or the step given, then a "no" of every detector; on the frame (None: all sites)."""
    if isinstance(setting.space, Unitary):
        u = _given(setting.space, values)
    else:
        frame = frame or whole_frame(setting, values)
        u = step_matrix(frame.system, tau)
    still = Step(u, u, (), frame)
    k, clicks = u, []
    for watcher in setting.detectors:
        p = acb_mat(still.size, still.size)
        for vector in watcher.vectors:
            d = acb_mat(still.size, 1, still.state(vector, values))
            p = p + d * dagger(d)
        eta = enclose(watcher.efficiency, values).real
        k = k - p * k * acb(1 - (1 - eta).nonnegative_part().sqrt())
        clicks.append(dagger(u) * p * u * acb(eta))
    return Step(u, k, tuple(clicks), frame)


def averaged_step(setting: Setting, values: Values, frame: Frame | None = None, energies: int | None = None) -> Step:
    """Exponential or gamma intervals: E[exp(i H t) X exp(-i H t)] = (1 - i theta [H, .])^(-s) X, theta = mean/s.

    `energies`: how many different energies H has on the frame, known exactly; only shapes beyond whole ones ask for it.
    """
    law = setting.interval
    frame = frame or whole_frame(setting, values)
    size = frame.size
    if size > MOST_AVERAGED:
        raise NotCovered(f"random intervals are summed in at most {MOST_AVERAGED} dimensions, and there are {size}")
    still = measured_step(setting, values, arb(0), frame)
    shape = arb(1) if law.law == "exponential" or law.shape is None else enclose(law.shape, values).real
    if not shape > 0:
        raise OutsideValidity("the shape of a gamma law is positive")
    theta = enclose(law.length, values).real / shape
    whole = shape.unique_fmpz() if shape.is_exact() else None
    if whole is not None and whole <= MOST_INVERTED:
        average = _inverse_power(_commutator(frame), theta, int(whole))
    else:
        average = _by_energies(hamiltonian(frame), energies, theta, shape)
    clicks = tuple(Averaged(average, size).carried(x) for x in still.clicks)
    asked = _times_both_sides(dagger(still.k), still.k)
    return Step(still.u, still.k, clicks, frame, average * asked)


def _inverse_power(commutator: acb_mat, theta: arb, shape: int) -> acb_mat:
    """(1 - i theta [H, .])^-s for a whole s."""
    size = commutator.nrows()
    step = (acb_mat(size, size, 1) - commutator * acb(0, theta)).inv()
    average = step
    for _ in range(shape - 1):
        average = average * step
    return average


def _by_energies(h: acb_mat, count: int | None, theta: arb, shape: arb) -> acb_mat:
    """The same for any s: X -> sum_jk (1 - i theta (E_j - E_k))^-s P_j X P_k over the different energies E_j."""
    if count is None:
        raise NotCovered("gamma intervals of this shape are summed on what the detectors reach")
    energies = _different(h, count)
    projectors = [_projector(h, energies, j) for j in range(count)]
    total = acb_mat(h.nrows() ** 2, h.nrows() ** 2)
    for e, p in zip(energies, projectors, strict=True):
        for f, q in zip(energies, projectors, strict=True):
            total = total + _times_both_sides(p, q) * acb(1, -theta * (e - f)) ** acb(-shape)
    return total


def _different(h: acb_mat, count: int) -> list[arb]:
    """The different eigenvalues of a Hermitian h: where there are as many clusters of balls, each holds one of them."""
    try:
        balls = [e.real for e in h.eig(multiple=True)]
    except ValueError as fault:
        raise NeedsPrecision("the energies are not enclosed at this precision") from fault
    clusters: list[arb] = []
    for e in balls:
        near = [c for c in clusters if c.overlaps(e)]
        clusters = [c for c in clusters if c not in near] + [reduce(lambda a, b: a.union(b), near, e)]
    if len(clusters) != count:
        raise NeedsPrecision("two energies are not told apart")
    return clusters


def _projector(h: acb_mat, energies: Sequence[arb], j: int) -> acb_mat:
    """prod_(k != j) (H - E_k)/(E_j - E_k)."""
    one = acb_mat(h.nrows(), h.nrows(), 1)
    total = one
    for k, e in enumerate(energies):
        if k != j:
            total = total * (h - one * acb(e)) * acb(1 / (energies[j] - e))
    return total


def _commutator(frame: Frame) -> acb_mat:
    """X -> H X - X H on rows written one after the other."""
    h = hamiltonian(frame)
    one = acb_mat(h.nrows(), h.nrows(), 1)
    return _times_both_sides(h, one) - _times_both_sides(one, h)


def _times_both_sides(a: acb_mat, b: acb_mat) -> acb_mat:
    """X -> a X b."""
    n = a.nrows()
    out = acb_mat(n * n, n * n)
    for i in range(n):
        for j in range(n):
            for k in range(n):
                for m in range(n):
                    out[i * n + j, k * n + m] = a[i, k] * b[m, j]
    return out


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


class Undetected(Protocol):
    """X -> (K†)^n X K^n for some n, or the average of that over random intervals."""

    def carried(self, x: acb_mat) -> acb_mat: ...

    def doubled(self) -> Undetected: ...

    def left(self) -> arb:
        """The trace of what 1 is carried to."""
        ...

    def is_bounded(self) -> bool: ...


@dataclass(frozen=True)
class Fixed:
    """The same step every time."""

    power: acb_mat

    def carried(self, x: acb_mat) -> acb_mat:
        return dagger(self.power) * x * self.power

    def doubled(self) -> Fixed:
        return Fixed(self.power * self.power)

    def left(self) -> arb:
        return (dagger(self.power) * self.power).trace().real

    def is_bounded(self) -> bool:
        return _bounded(self.power)


@dataclass(frozen=True)
class Averaged:
    """A matrix on operators, written row after row as columns of size^2 entries."""

    power: acb_mat
    size: int

    def carried(self, x: acb_mat) -> acb_mat:
        n = self.size
        return acb_mat(n, n, (self.power * acb_mat(n * n, 1, x.entries())).entries())

    def doubled(self) -> Averaged:
        return Averaged(self.power * self.power, self.size)

    def left(self) -> arb:
        return self.carried(acb_mat(self.size, self.size, 1)).trace().real

    def is_bounded(self) -> bool:
        return _bounded(self.power)


def _bounded(matrix: acb_mat) -> bool:
    return all(x.real.is_finite() and x.rad() < 1 for x in matrix.entries())


def enclose_sums(undetected: Undetected, taken: acb_mat, dark: int, highest: int, narrow: arb) -> Sums:
    """Z_0 ... Z_highest with tails below `narrow`; `dark` is the exact dimension of the dark space."""
    z, power, n = [taken] * (highest + 1), undetected, 1
    for _ in range(MOST_DOUBLINGS):
        rest = power.left() - dark
        if rest.upper() < 0:
            raise ArithmeticError("the dark space is larger than it can be")
        if rest < 1 and (tails := _tails(z, n, arb(rest.upper()).max(arb(0)))) and tails[-1] < narrow:
            return Sums(tuple(z), tuple(tails))
        z = [z[p] + power.carried(_shifted(z, p, n)) for p in range(highest + 1)]
        power, n = power.doubled(), 2 * n
        if not power.is_bounded():
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
