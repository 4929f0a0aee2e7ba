"""How often a number is an eigenvalue of A = QHQ on range(Q), from det(E - A) in balls.

The first derivative of the characteristic polynomial that is surely not zero at E gives an upper bound.  Where all
lower ones are enclosed around 0 within 10^-digits of their scale the bound is taken for the multiplicity: balls
cannot prove a zero.  QHQ in the full basis has `rank` eigenvalues 0 more; they are taken off where E is 0.
"""

from __future__ import annotations

from flint import acb, acb_poly, arb

from derive.errors import NeedsPrecision
from derive.numerics.clusters import Cluster, enclose_clusters
from derive.numerics.precision import power_of_ten, upper
from derive.numerics.system import System, dense, projector


def multiplicities(s: System, e0: acb, digits: int) -> tuple[int, int]:
    """(lower, upper) for the multiplicity of e0; equal where it is settled."""
    Q = projector(s)
    p: acb_poly = (Q * dense(s) * Q).charpoly()
    extra = len(s.detector) if e0.contains(0) else 0
    scale = upper(acb(s.h)) + upper(acb(s.E0)) + 1
    for j in range(int(p.degree()) + 1):
        value = p(e0)
        if not value.contains(0):
            return max(j - extra, 0), max(j - extra, 0)
        if not upper(value) < power_of_ten(-digits) * scale ** (int(p.degree()) - j + 1):
            raise NeedsPrecision("a characteristic polynomial too wide to count a root")
        p = p.derivative()
    raise NeedsPrecision("a root of every derivative")


def enclose_spectrum(s: System) -> list[Cluster]:
    """(ball, multiplicity) of every level of A on range(Q), ascending; the detector's states are moved far off."""
    Q = projector(s)
    far = 4 * (s.h + abs(s.E0) + 1)
    A = Q * dense(s) * Q
    for x in range(s.size):
        for y in range(s.size):
            A[x, y] = A[x, y] - Q[x, y] * acb(far)
        A[x, x] = A[x, x] + acb(far)
    found = [(e, m) for e, m in enclose_clusters(A) if not e > far / 2]
    return [(arb(e), m) for e, m in found]
