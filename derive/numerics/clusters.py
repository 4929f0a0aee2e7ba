"""Eigenvalues that may coincide: clusters with their multiplicities, and how a cluster splits with tau.

A Hermitian matrix in an approximate eigenbasis is diagonal up to small balls; Gershgorin's discs that overlap form a
cluster, which holds as many eigenvalues as it has discs (a standard theorem).  Eigenvalues closer together than the
working precision shows are taken as one level: balls cannot prove that they coincide, and do not have to refute it.

A cluster of m moves as P(z, tau) = prod_j (z - y_j(tau)), eps_j = e_0 + tau y_j.  Simple roots of P(z, 0) are followed
order by order; where all of them coincide once more the same is done with (y_j - y_0)/tau.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import comb

from flint import acb, acb_mat, acb_poly, arb, ctx

from derive.errors import NeedsPrecision

Cluster = tuple[arb, int]
Line = list[acb]


def enclose_clusters(A: acb_mat) -> list[Cluster]:
    """(ball, multiplicity) of each level of a Hermitian matrix, ascending."""
    try:
        return [(x.real, 1) for x in _told_apart(isolated(A.charpoly()))]
    except NeedsPrecision:
        return _merged(_discs(A))


def isolated(p: acb_poly) -> list[acb]:
    """All roots, one ball each; `NeedsPrecision` where they cannot be told apart."""
    for bits in (ctx.prec // 2, ctx.prec // 4, 64, 16):  # as narrow as the coefficients' own balls allow
        try:
            return list(p.roots(tol=arb(2) ** -bits, maxprec=2 * ctx.prec))
        except ValueError:
            continue
    raise NeedsPrecision("levels that cannot be told apart")


def _told_apart(roots: list[acb]) -> list[acb]:
    """Real roots, ascending."""
    found = sorted(roots, key=lambda x: float(x.real.mid()))
    for a, b in zip(found, found[1:], strict=False):
        if not a.real < b.real:
            raise NeedsPrecision("levels that cannot be told apart")
    return found


def _discs(A: acb_mat) -> list[tuple[arb, arb]]:
    """(centre, radius) of Gershgorin's discs of V^-1 A V, V an approximate eigenbasis."""
    V = _approximate_eigenbasis(A)
    try:
        B = V.solve(A * V)
    except ZeroDivisionError as fault:
        raise NeedsPrecision("no eigenbasis at this precision") from fault
    n = int(A.nrows())
    out = []
    for i in range(n):
        reach = arb(0)
        for j in range(n):
            if i != j:
                reach += B[i, j].abs_upper()
        middle = B[i, i]
        out.append((arb(middle.real.mid()), (reach + middle.real.rad() + middle.imag.abs_upper()).upper()))
    return sorted(out, key=lambda d: float(d[0]))


def _approximate_eigenbasis(A: acb_mat) -> acb_mat:
    import mpmath

    n = int(A.nrows())
    with mpmath.workprec(ctx.prec):
        rows = [[mpmath.mpc(_float(A[i, j].real), _float(A[i, j].imag)) for j in range(n)] for i in range(n)]
        _, V = mpmath.eighe(mpmath.matrix(rows))
        return acb_mat(n, n, [acb(arb(V[i, j].real), arb(V[i, j].imag)) for i in range(n) for j in range(n)])


def _float(x: arb) -> object:
    """The midpoint as an mpmath number, exactly."""
    import mpmath

    mantissa, exponent = x.mid().man_exp()
    return mpmath.ldexp(int(mantissa), int(exponent))


def _merged(discs: list[tuple[arb, arb]]) -> list[Cluster]:
    """Overlapping discs as one ball each."""
    out: list[tuple[arb, arb, int]] = []  # low, high, count
    for centre, radius in discs:
        low, high = (centre - radius).lower(), (centre + radius).upper()
        if out and not low > out[-1][1]:
            last = out.pop()
            out.append((last[0].min(low), last[1].max(high), last[2] + 1))
        else:
            out.append((low, high, 1))
    return [(low.union(high), count) for low, high, count in out]


# -- splitting


def split(sums: Sequence[Line], length: int) -> list[Line]:
    """The m series y_j, coefficients of tau^0 ... tau^(length-1), from the symmetric functions' series."""
    m = len(sums)
    if m == 1:
        return [sums[0][:length]]
    if length == 0:
        return [[] for _ in sums]
    p = acb_poly([(-1) ** (m - k) * sums[m - k - 1][0] if k < m else acb(1) for k in range(m + 1)])
    try:
        slopes = isolated(p)
    except NeedsPrecision:
        return _together(sums, length)
    return [_followed(sums, y, p.derivative()(y), length) for y in slopes]


def _together(sums: Sequence[Line], length: int) -> list[Line]:
    """All y_j start at the same y: prod (z - (y_j - y)/tau) is split in its turn."""
    m = len(sums)
    y = sums[0][0] / m
    for s in range(1, m + 1):
        if not sums[s - 1][0].overlaps(comb(m, s) * y**s):
            raise NeedsPrecision("levels that cannot be told apart")
    shifted = []
    for s in range(1, m + 1):
        total = [acb(0)] * len(sums[s - 1])
        for j in range(s + 1):  # e_s(y_j - y) = sum_j binomial(m - j, s - j) (-y)^(s-j) e_j
            front = comb(m - j, s - j) * (-y) ** (s - j)
            line = sums[j - 1] if j else [acb(1)] + [acb(0)] * len(total)
            total = [a + front * b for a, b in zip(total, line, strict=False)]
        shifted.append(total[s:])
    return [[y, *line] for line in split(shifted, length - 1)]


def _followed(sums: Sequence[Line], y: acb, slope: acb, length: int) -> Line:
    """One simple root of P(z, 0), order by order."""
    line = [y]
    for k in range(1, length):
        line.append(-_residual(sums, line, k) / slope)
    return line


def _residual(sums: Sequence[Line], line: Line, k: int) -> acb:
    """Coefficient of tau^k in P(y(tau), tau), y known below tau^k."""
    m = len(sums)
    padded = [*line, *[acb(0)] * (k + 1 - len(line))]
    raised = [acb(1), *[acb(0)] * k]
    total = acb(0)
    for power in range(m + 1):
        s = m - power
        coefficients = sums[s - 1] if s else [acb(1)] + [acb(0)] * k
        for j in range(k + 1):
            total += (-1) ** s * coefficients[j] * raised[k - j]
        raised = [_dot(raised, padded, n) for n in range(k + 1)]
    return total


def _dot(a: Line, b: Line, n: int) -> acb:
    total = acb(0)
    for j in range(n + 1):
        total += a[j] * b[n - j]
    return total
