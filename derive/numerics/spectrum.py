"""The levels of the undetected step, measured: certified eigenvalues of Q U(tau) Q on the bright space, in balls.

    Q U(tau) Q phi = exp(-i eps(tau) tau) phi,      eps(tau) = sum_k e_k tau^k

The space that the detector reaches under H is spanned by an orthonormal basis, the detector's vectors first; there
H is the matrix T, U = exp(-i T tau), and Q U Q is the lower right block of U.  With Y = (Q U Q - 1)/(-i tau), taken
around E0, the levels are eps = E0 + (i/tau) log(1 - i tau y), y the roots of det(y - Y), isolated in balls.

Samples on a circle |tau| = rho give the e_k by a discrete Fourier transform.  For |tau| <= R the generator lies within
delta = (f(h R) - h R)/R of A, f(y) = -log(2 - e^y) being a majorant of the logarithm; while delta is below half the
gap between the levels of A, each level is analytic there and |e_k| R^k <= delta (k >= 1), so that the aliases
e_(k+M), e_(k+2M), ... are bounded by delta R^-k r^M/(1 - r^M), r = rho/R.  What comes back holds the e_k.
Levels that coincide at tau = 0 are taken together: the elementary symmetric functions of their eps are analytic, and
the single levels are split off those (`clusters.py`).  No perturbation theory is used.  Derived here.

Below efficiency 1 the levels are those of the slow step E on range(Q) (`slow_contour.py`, with the bounds R_0 and e
there): log E = sum_d L_d (h tau)^d, |L_d| <= -log(1 - e) R_0^-d, so that with y = h R/R_0
delta = -log(1 - e) y^2/((1 - y) R).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, comb

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered
from derive.numerics.clusters import Cluster, enclose_clusters, isolated, split
from derive.numerics.contour import phase
from derive.numerics.evolution import apply_rows, norm
from derive.numerics.nullstep import Measured, identity
from derive.numerics.precision import BITS_PER_DIGIT
from derive.numerics.slow_contour import slow_reach, slow_step
from derive.numerics.system import State, System, dagger

SHRINK = 20
"""rho = R 2^-SHRINK: few samples, more bits; any value gives enclosures."""


@dataclass(frozen=True)
class Reached:
    """T (n x n) on the space reached from the detector, its orthonormal basis, the detector's rank, and E0, h."""

    T: acb_mat
    basis: tuple[State, ...]
    rank: int
    E0: arb
    h: arb

    @property
    def bright(self) -> int:
        return int(self.T.nrows()) - self.rank


@dataclass(frozen=True)
class Levels:
    """Bright levels by energy at tau = 0: zeroth[j], and coefficients[j][k] = e_k."""

    zeroth: tuple[arb, ...]
    coefficients: tuple[tuple[acb, ...], ...]


def bits_for_levels(order: int, digits: int, size: int) -> int:
    """Working bits for a first try."""
    return ceil(digits * BITS_PER_DIGIT + (order + 2) * (SHRINK + 6) + 12 * size + 64)


def enclose_reached(s: System, pattern: Sequence[bool]) -> Reached:
    """An orthonormal basis of the space reached from the detector, in balls.

    `pattern` says, for each vector in turn (H on the basis vectors, in their order), whether it is independent of
    the ones before; that is decided exactly elsewhere, since balls cannot.
    """
    basis: list[State] = [_spread(s, v) for v in s.detector]
    images: list[State] = []
    for j, kept in enumerate(pattern):
        image = apply_rows(s.rows, basis[j])
        images.append(image)
        if kept:
            basis.append(_unit(_outside(_outside(image, basis), basis)))
    T = acb_mat(len(basis), len(basis))
    for i, u in enumerate(basis):
        for j, image in enumerate(images):
            T[i, j] = overlap(u, image)
    return Reached(T, tuple(basis), len(s.detector), s.E0, s.h)


def _spread(s: System, v: Sequence[tuple[int, acb]]) -> State:
    state = [acb(0)] * s.size
    for x, a in v:
        state[x] = a
    return state


def overlap(u: State, v: State) -> acb:
    """<u|v>."""
    total = acb(0)
    for a, b in zip(u, v, strict=True):
        if not b.is_zero():
            total += a.conjugate() * b
    return total


def _outside(v: State, basis: Sequence[State]) -> State:
    rest = list(v)
    for u in basis:
        c = overlap(u, rest)
        rest = [a - c * b for a, b in zip(rest, u, strict=True)]
    return rest


def _unit(v: State) -> State:
    length = norm(v)
    if not length > 0:
        raise NeedsPrecision("a vector that is not zero cannot be told from zero")
    return [a / length for a in v]


def enclose_levels(reached: Reached, order: int, digits: int, q: acb | None = None) -> Levels:
    """Every bright level's e_0, ..., e_order, by energy, then rate; `NeedsPrecision` where levels are not isolated.

    q = sqrt(1 - eta), None for a perfect detector.
    """
    clusters = enclose_clusters(_block(reached.T, reached.rank))
    most = max(m for _, m in clusters)
    gap = _gap([e for e, _ in clusters], reached.h)
    R, delta = _disc(gap, reached.h) if q is None else _slow_disc(gap, reached.h, q)
    if not 2 * delta < gap:
        raise NeedsPrecision("levels closer than their enclosures")
    M = ceil((digits * BITS_PER_DIGIT + 8) / SHRINK) + most * (order + 1)
    rho = R * arb(2) ** (-SHRINK)
    samples = [_at(reached, phase(j, M) * rho, clusters, gap, q) for j in range(M)]
    found: list[tuple[arb, tuple[acb, ...]]] = []
    for n, (e0, m) in enumerate(clusters):
        sums = [
            _taylor([_symmetric(values[n], e0)[s - 1] for values in samples], s + m * order, R,
                    delta ** s * comb(m, s))  # so many, should the cluster split at the last order only
            for s in range(1, m + 1)
        ]
        lines = [(e0, (acb(e0), *line)) for line in split([c[s:] for s, c in enumerate(sums, start=1)], order)]
        found += sorted(lines, key=lambda line: [-float(c.imag.mid()) for c in line[1][1::2]])
    return Levels(tuple(e for e, _ in found), tuple(line for _, line in found))


def _disc(gap: arb, h: arb) -> tuple[arb, arb]:
    """R, and delta on it."""
    R = (gap / (8 * h * h)).lower()
    y = h * R
    return R, (-(2 - y.exp()).log() - y) / R


def _slow_disc(gap: arb, h: arb, q: acb) -> tuple[arb, arb]:
    """The same for a detector that misses."""
    reach, e = slow_reach(arb(q.abs_upper()))
    top = -(1 - e).log()
    R = (gap * reach * reach / (8 * top * h * h)).min(reach / (2 * h)).lower()
    y = h * R / reach
    return R, top * y * y / ((1 - y) * R)


def _symmetric(values: Sequence[acb], e0: arb) -> list[acb]:
    """Elementary symmetric functions of eps_j - e0, the first to the last."""
    sums = [acb(1)] + [acb(0)] * len(values)
    for n, eps in enumerate(values, start=1):
        for s in range(n, 0, -1):
            sums[s] += sums[s - 1] * (eps - e0)
    return sums[1:]


def _taylor(samples: Sequence[acb], count: int, R: arb, bound: arb) -> list[acb]:
    """Coefficients of tau^0 ... tau^(count-1) from samples at |tau| = R 2^-SHRINK of a function within `bound` on R."""
    M, rho = len(samples), R * arb(2) ** (-SHRINK)
    alias = 2 * bound * arb(2) ** (-SHRINK * M)
    found = []
    for k in range(count):
        total = acb(0)
        for j, value in enumerate(samples):
            total += value * phase(j, M) ** (-k)
        spread = arb(0, (alias / R**k).upper())
        found.append(total / M / rho**k + acb(spread, spread))
    return found


def _block(matrix: acb_mat, first: int) -> acb_mat:
    n = int(matrix.nrows()) - first
    return acb_mat(n, n, [matrix[first + i, first + j] for i in range(n) for j in range(n)])


def _gap(zeroth: Sequence[arb], h: arb) -> arb:
    gaps = [b - a for a, b in zip(zeroth, zeroth[1:], strict=False)]
    least = 2 * h
    for g in gaps:
        least = least.min(g)
    return arb(least.lower())


def _at(reached: Reached, tau: acb, clusters: Sequence[Cluster], gap: arb, q: acb | None) -> list[list[acb]]:
    """The eps(tau) that belong to each cluster."""
    Y = _moved(reached, tau, q) * (acb(0, 1) / tau)
    found: list[list[acb]] = [[] for _ in clusters]
    for y in isolated(Y.charpoly()):
        eps = reached.E0 + (acb(0, -1) * tau * y).log1p() * acb(0, 1) / tau
        near = [k for k, (e, _) in enumerate(clusters) if 2 * abs(eps - acb(e)) < gap]
        if len(near) != 1:
            raise NeedsPrecision("a level that belongs to no disc, or to two")
        found[near[0]].append(eps)
    if [len(f) for f in found] != [m for _, m in clusters]:
        raise NeedsPrecision("levels that change places")
    return found


def _moved(reached: Reached, tau: acb, q: acb | None) -> acb_mat:
    """Q U Q - 1, or the slow step less 1, on the bright space; energies from E0 on."""
    n, r = int(reached.T.nrows()), reached.rank
    turn = reached.T * (acb(0, -1) * tau)
    for x in range(n):
        turn[x, x] = turn[x, x] + acb(0, 1) * tau * reached.E0
    minus = turn.exp() - identity(n)
    if q is None:
        return _block(minus, r)
    d = acb_mat([[1 if x == a else 0 for a in range(r)] for x in range(n)])
    measured = Measured(turn, d, identity(n) - d * dagger(d), reached.h)
    return _block(slow_step(measured, minus, q), r)


def enclose_weights(reached: Reached, zeroth: Sequence[arb], psi: State) -> list[arb]:
    """|<v_j|psi>|^2 for the normalised eigenvectors v_j of A on the bright space, by Lagrange's projectors."""
    A = _block(reached.T, reached.rank)
    n = reached.bright
    if any(a.overlaps(b) for a, b in zip(zeroth, zeroth[1:], strict=False)):
        raise NotCovered("weights are measured where no two bright levels coincide")
    start = acb_mat(n, 1, [overlap(u, psi) for u in reached.basis[reached.rank:]])
    weights = []
    for j, e in enumerate(zeroth):
        v = start
        for k, other in enumerate(zeroth):
            if k != j:
                v = (A * v - v * acb(other)) * acb(1 / (e - other))
        total = arb(0)
        for x in range(n):
            a = v[x, 0]
            total += (a * a.conjugate()).real  # a power of a ball around 0 may come out as nan
        weights.append(total)
    return weights


def enclose_secular(reached: Reached, E: arb, order: int, digits: int, q: acb | None = None) -> list[acb]:
    """Coefficients of tau^0 .. tau^order of (tau/2) <d|cot((H - E) tau/2)|d> + i c tau/2, rank one, |E - E0| >= 3 h.

    c = (1 + q)/(1 - q), q = sqrt(1 - eta), 1 for a perfect detector.

    With x the eigenvalues of H - E, 2h <= |x| <= 2|E - E0|, and |z cot z| <= 2 for |z| <= 1, the function is at
    most 1/h + c R/2 on |tau| <= R = 1/|E - E0|, which bounds the aliases.
    """
    far = abs(E - reached.E0)
    if not far >= 3 * reached.h * (1 - arb(2) ** -20):
        raise NeedsPrecision("the secular function is measured well outside the spectrum")
    R = (1 / far).lower()
    M = order + 2 + ceil((digits * BITS_PER_DIGIT + 8) / SHRINK)
    rho = R * arb(2) ** (-SHRINK)
    c = acb(1) if q is None else (1 + q) / (1 - q)
    samples = [_secular_at(reached, E, phase(j, M) * rho, c) for j in range(M)]
    return _taylor(samples, order + 1, R, 1 / reached.h + R * c.abs_upper() / 2)


def _secular_at(reached: Reached, E: arb, tau: acb, c: acb) -> acb:
    """(tau/2) i <d|(1 + u)(1 - u)^(-1)|d> + i c tau/2, u = exp(-i (H - E) tau)."""
    n = int(reached.T.nrows())
    turn = reached.T * (acb(0, -1) * tau)
    for x in range(n):
        turn[x, x] = turn[x, x] + acb(0, 1) * tau * E
    u = turn.exp()
    one = acb_mat(n, n, [acb(1 if i == j else 0) for i in range(n) for j in range(n)])
    column = acb_mat(n, 1, [acb(1 if i == 0 else 0) for i in range(n)])
    try:
        solved = (one - u).solve(column)
    except ZeroDivisionError as fault:
        raise NeedsPrecision("a matrix that may be singular") from fault
    value = ((one + u) * solved)[0, 0]
    return value * acb(0, 1) * tau / 2 + acb(0, 1) * c * tau / 2

