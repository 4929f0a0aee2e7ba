"""Eigenvalues of the undetected step and what a start has of each, in balls: the poles of the first click's series.

    phi_n = sqrt(eta) <d|U K^(n-1)|psi> = sum_j c_j lambda_j^(n-1),     c_j = sqrt(eta) <d|U|r_j> <l_j|psi>

K the undetected step on what H reaches from the detector, r_j its right eigenvectors and l_j the dual ones.  A perfect
detector adds the eigenvalue 0, which plays no part; phases that coincide leave eigenvalues of modulus 1, as many as
the caller knows to be dark.  Certified where eigenvalues are isolated (`acb_mat.eig`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, OutsideValidity

SHARE = 100
"""The tail begins where all other poles together are this many times smaller than the nearest ones."""


@dataclass(frozen=True)
class Modulus:
    """The eigenvalues of one modulus, one or a conjugate pair, and their c, empty for a mixed start."""

    eigenvalues: tuple[acb, ...]
    shares: tuple[acb, ...]

    @property
    def size(self) -> arb:
        """|lambda|."""
        return arb(abs(self.eigenvalues[0]))

    @property
    def angle(self) -> arb:
        """|arg lambda|, between 0 and pi; of the pole too, up to conjugation."""
        x = self.eigenvalues[0]
        along, across = x.real, abs(x.imag)
        if along > 0:
            return abs((across / along).atan())
        if along < 0:
            return arb.pi() - abs((across / along).atan())
        return arb.pi() / 2 - (along / across).atan()

    @property
    def envelope(self) -> arb:
        """sum |c|."""
        return sum((arb(abs(c)) for c in self.shares), arb(0))


def enclose_moduli(k: acb_mat, row: acb_mat, starts: Sequence[acb_mat], perfect: bool, dark: int) -> list[Modulus]:
    """Largest modulus first.  `row` is sqrt(eta) <d|U; shares are filled in for a single start."""
    try:
        found, right = k.eig(right=True)
    except ValueError as fault:
        raise NeedsPrecision("eigenvalues of the undetected step that this precision does not isolate") from fault
    shares = _shares(right, row, starts[0]) if len(starts) == 1 else [None] * len(found)
    ordered = sorted(zip(found, shares, strict=True), key=lambda x: -float(abs(x[0]).mid()))
    zeros = 1 if perfect else 0
    lost, kept = ordered[:dark], ordered[dark : len(ordered) - zeros]
    if not all(abs(x) < 1 for x, _ in kept) or any(abs(x) < 1 for x, _ in lost):
        raise NeedsPrecision("eigenvalues of the undetected step that are not told from the unit circle")
    if not all(abs(x) > abs(y) for x, _ in kept[-1:] for y, _ in ordered[len(ordered) - zeros :]):
        raise OutsideValidity("a pole has gone to infinity here")
    return _grouped(kept)


def _shares(right: acb_mat, row: acb_mat, psi: acb_mat) -> list[acb | None]:
    try:
        within = right.inv() * psi
    except ZeroDivisionError as fault:
        raise NeedsPrecision("eigenvectors of the undetected step that are not told from dependent ones") from fault
    onto = row * right
    return [onto[0, j] * within[j, 0] for j in range(int(right.nrows()))]


def _grouped(kept: list[tuple[acb, acb | None]]) -> list[Modulus]:
    groups: list[list[tuple[acb, acb | None]]] = []
    for x, c in kept:
        if groups and abs(groups[-1][-1][0]).overlaps(abs(x)):
            if len(groups[-1]) > 1 or not groups[-1][0][0].overlaps(x.conjugate()):
                raise NeedsPrecision("poles of one modulus, or nearly so, that are no conjugate pair")
            groups[-1].append((x, c))
        else:
            groups.append([(x, c)])
    return [Modulus(tuple(x for x, _ in g), tuple(c for _, c in g if c is not None)) for g in groups]


def enclose_tail_start(moduli: Sequence[Modulus], digits: int) -> arb:
    """The n >= 1 with SHARE sum_(j>1) C_j |lambda_j|^(n-1) = C_1 |lambda_1|^(n-1), C the envelopes, by bisection."""
    lead = moduli[0]
    if not lead.envelope > 0:
        raise NeedsPrecision("whether the start has anything of the nearest pole is not decided")
    rest = [(m.envelope / lead.envelope, (m.size / lead.size).log()) for m in moduli[1:]]

    def share(n: arb) -> arb:
        return sum((c * (slope * (n - 1)).exp() for c, slope in rest), arb(0)) * SHARE

    low, high = arb(1), arb(2)
    if share(low) < 1:
        return low
    while not share(high) < 1:
        high = 2 * high
    while high - low > high * arb(10) ** (-digits - 4):
        middle = arb(((low + high) / 2).mid())
        s = share(middle)
        if s.overlaps(arb(1)):
            raise NeedsPrecision("the beginning of the tail is not told to that many digits")
        low, high = (middle, high) if s > 1 else (low, middle)
    return (low + high) / 2 + arb(0, ((high - low) / 2).upper())
