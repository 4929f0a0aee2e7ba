"""Where two eigenvalues of the undetected step meet, and on which branches of the logarithm.

    g(z) = discriminant of M(z) = (K(z) - 1)/z,      K as in `bright.py`, b x b

is entire and vanishes exactly where two eigenvalues of K coincide (z = 0 apart, where all of them are 1).  For
|z| < log 2 the logarithm of K is the principal one and analytic, whatever meets there.  A meeting further out is
harmless where the two logarithms, continued from there inside the disc in which log K is analytic, agree; it is a
singularity of log K where they differ by a non-zero multiple of 2 pi i and K has a Jordan block.  (Where K stays
diagonalisable both projectors are analytic and nothing happens; balls cannot tell, and it is left open.)

Eigenvalues are followed by Gershgorin's discs in the basis of nearby eigenvectors X: on a segment of half length s
round m, X^-1 K X = X^-1 K(m) X + E with ||E|| <= |X||X^-1| e^(|Im m|) (e^s - 1).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision
from derive.numerics.bright import Sector, undetected
from derive.numerics.precision import upper
from derive.numerics.zeros import Cluster

PRINCIPAL = "0.6"
"""|z| at which logarithms are still principal: below log 2 = 0.693..."""

FOLLOWING_BITS = 192
SMALLEST_STEP = 2.0**-40
MOST_STEPS = 4000
"""Segments tried on one leg; an end-watched chain of eight sites takes about 200, a far site of energy 100 over 800."""

CLOSEST = 2.0**-40
DETOURS = (0.0, 0.35, -0.35, 0.8, -0.8)
"""Angles of a first leg, in case a harmless meeting lies on the straight way."""


def discriminant(s: Sector, z: acb) -> acb:
    """g(z), as the determinant of the power sums tr M^(i+j), i, j < b."""
    b = s.bright
    M = (undetected(s, z) - _identity(b)) * (1 / z)
    powers = [_identity(b)]
    while len(powers) < b:
        powers.append(powers[-1] * M)
    sums = {i + j: (powers[i] * powers[j]).trace() for i in range(b) for j in (i, i + 1) if j < b}
    return acb_mat(b, b, [sums[i + j] for i in range(b) for j in range(b)]).det()


def bound_discriminant(s: Sector, size: arb) -> arb:
    """A bound on |g| for |z| <= size: ||M|| <= (e^|z| - 1)/|z|."""
    pairs = s.bright * (s.bright - 1)
    return (2 * size.expm1() / size) ** pairs


def _identity(n: int) -> acb_mat:
    return acb_mat(n, n, [acb(int(x == y)) for x in range(n) for y in range(n)])


@dataclass(frozen=True)
class Followed:
    """Eigenvalues at a point, simple and enclosed, with the logarithms that continuation gives them."""

    z: acb
    values: tuple[acb, ...]
    logs: tuple[acb, ...]


def is_harmful(s: Sector, meeting: Cluster) -> bool:
    """Whether log K, analytic for |z| < |meeting|, is singular there: True or False are certain.

    `NeedsPrecision` where neither could be shown.
    """
    if meeting.modulus < arb(2).log():
        return False
    reason = NeedsPrecision("the branches at a meeting could not be told")
    for angle in DETOURS:
        try:
            with ctx.workprec(min(FOLLOWING_BITS, ctx.prec)):
                return _at_end_of(s, meeting, angle)
        except NeedsPrecision as failed:
            reason = failed
    raise reason


def _at_end_of(s: Sector, meeting: Cluster, angle: float) -> bool:
    """Follow the eigenvalues to the meeting, closer and closer until its branches can be told."""
    goal, radial = meeting.centre, meeting.centre / abs(meeting.centre)
    turn = (acb(0, 1) * arb(angle)).exp()
    away = arb(1) / 16
    start = _principal(s, radial * turn * arb(PRINCIPAL))
    corner = radial * turn * (abs(goal) * arb("0.9")) if angle else start.z
    here = _along(s, start, corner)
    while away > CLOSEST:
        here = _along(s, here, goal * (1 - away))
        verdict = _judged(s, here, meeting)
        if verdict is not None:
            return verdict
        away = away / 4
    raise NeedsPrecision("the branches at a meeting could not be told")


def _principal(s: Sector, z: acb) -> Followed:
    values = _eigenvalues(s, z)
    return Followed(z, values, tuple(x.log() for x in values))


def _eigenvalues(s: Sector, z: acb) -> tuple[acb, ...]:
    """Simple eigenvalues of K(z) in disjoint balls."""
    try:
        return tuple(undetected(s, z).eig())
    except ValueError as fault:
        raise NeedsPrecision("eigenvalues too close to be told apart") from fault


def _along(s: Sector, here: Followed, goal: acb) -> Followed:
    """Continue the logarithms on the straight way to `goal`."""
    step, tried = 1.0, 0
    while not (here.z - goal).contains(0) and here.z != goal:
        following = None
        while following is None:
            tried += 1
            if step < SMALLEST_STEP or tried > MOST_STEPS:
                raise NeedsPrecision("eigenvalues too close to be followed")
            target = _exactly(here.z + (goal - here.z) * arb(step)) if step < 1 else goal
            following = _stepped(s, here, target)
            step = step / 2 if following is None else min(1.0, step * 4)
        here = following
    return here


def _exactly(z: acb) -> acb:
    return acb(z.real.mid(), z.imag.mid())


def _stepped(s: Sector, here: Followed, target: acb) -> Followed | None:
    """One segment, or None where its discs touch one another or 0."""
    discs = _discs(s, here.z, target)
    if discs is None or len(_groups(discs)) < len(discs) or any(d.contains(0) for d in discs):
        return None
    values = _eigenvalues(s, target)
    logs: dict[int, acb] = {}
    for before, log in zip(here.values, here.logs, strict=True):
        inside = [d for d in discs if d.overlaps(before)]
        after = [n for n, x in enumerate(values) if len(inside) == 1 and inside[0].overlaps(x)]
        if len(after) != 1:
            return None
        logs[after[0]] = log + (values[after[0]] / before).log()
    if len(logs) < len(values):
        return None
    return Followed(target, values, tuple(logs[n] for n in range(len(values))))


def _discs(s: Sector, a: acb, b: acb) -> list[acb] | None:
    """Squares round Gershgorin's discs of K on the segment from a to b (None: no basis was found)."""
    middle, half = _exactly((a + b) / 2), upper((b - a) / 2)
    K = undetected(s, middle)
    try:
        X = _unit_columns(K.eig(right=True, algorithm="approx")[1])
        Y = X.inv()
    except (ValueError, ZeroDivisionError):
        return None
    T = Y * K * X
    n = T.nrows()
    spread = (_frobenius(X) * _frobenius(Y) * upper(middle.imag).exp() * half.expm1() * arb(n).sqrt()).upper()
    found = []
    for x in range(n):
        reach = spread
        for y in range(n):
            if y != x:
                reach += upper(T[x, y])
        around = arb(0, reach.upper())
        found.append(T[x, x] + acb(around, around))
    return found if all(d.is_finite() for d in found) else None


def _unit_columns(m: acb_mat) -> acb_mat:
    """The columns at length about 1, exact; |X||X^-1| grows with uneven lengths."""
    lengths = [_frobenius(acb_mat(m.nrows(), 1, [m[x, y] for x in range(m.nrows())])) for y in range(m.ncols())]
    entries = [_exactly(m[x, y] / n) for x in range(m.nrows()) for y, n in enumerate(lengths)]
    return acb_mat(m.nrows(), m.ncols(), entries)


def _frobenius(m: acb_mat) -> arb:
    total = arb(0)
    for x in m.entries():
        total += upper(x) ** 2
    return arb(total.sqrt().upper())


def _groups(discs: Sequence[acb]) -> list[list[int]]:
    """Discs that touch, directly or through others."""
    groups: list[list[int]] = []
    for n, d in enumerate(discs):
        near = [g for g in groups if any(discs[k].overlaps(d) for k in g)]
        groups = [g for g in groups if g not in near] + [[*(k for g in near for k in g), n]]
    return groups


def _judged(s: Sector, here: Followed, meeting: Cluster) -> bool | None:
    """Harmful or not, seen from `here`; None where a closer look is needed."""
    discs = _discs(s, here.z, meeting.centre + (meeting.centre - here.z) * meeting.radius)
    if discs is None:
        return None
    verdicts = set()
    for group in _groups(discs):
        if len(group) > 1:
            verdicts.add(_branches(s, here, [discs[n] for n in group], meeting))
    return verdicts.pop() if len(verdicts) == 1 else None


def _branches(s: Sector, here: Followed, discs: list[acb], meeting: Cluster) -> bool | None:
    """False: all on one branch; True: all on different ones, and surely not diagonalisable; None: unknown."""
    hull = discs[0]
    for d in discs[1:]:
        hull = hull.union(d)
    members = [n for n, x in enumerate(here.values) if hull.overlaps(x)]
    if len(members) != len(discs) or hull.contains(0):
        return None
    turns = [_whole_turns(here, members[0], n, hull) for n in members]
    if None in turns:
        return None
    if len(set(turns)) == 1:
        return False
    if len(members) == 2 and (meeting.count == 1 or _has_jordan_block(s, meeting, hull)):
        return True
    return None


def _whole_turns(here: Followed, first: int, n: int, hull: acb) -> int | None:
    """(log_n - log_first - Log_hull(value_n/value_first))/(2 pi i), the last on the branch continuous on the hull."""
    centre = _exactly(hull)
    inner = (here.values[n] / centre).log() - (here.values[first] / centre).log()
    turned = (here.logs[n] - here.logs[first] - inner) / acb(0, 2 * arb.pi())
    whole = turned.real.unique_fmpz()
    return None if whole is None else int(whole)


def _has_jordan_block(s: Sector, meeting: Cluster, hull: acb) -> bool:
    """K - value has rank b - 1 at every meeting in the cluster: some minor of size b - 1 surely differs from 0.

    A double eigenvalue is a root of the derivative of the characteristic polynomial; Newton's step on it, in balls,
    narrows the hull.
    """
    K = undetected(s, meeting.ball)
    p = K.charpoly().derivative()
    value = hull
    for _ in range(8):
        centre, slope = _exactly(value), p.derivative()(value)
        if slope.contains(0):
            return False
        value = centre - p(centre) / slope
    b = K.nrows()
    shifted = K - _identity(b) * value
    return any(not m.contains(0) for m in _minors(shifted))


def _minors(m: acb_mat) -> Iterator[acb]:
    n = m.nrows()
    for x in range(n):
        for y in range(n):
            rows, columns = [i for i in range(n) if i != x], [j for j in range(n) if j != y]
            yield acb_mat(n - 1, n - 1, [m[i, j] for i in rows for j in columns]).det()
