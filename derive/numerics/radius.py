"""The radius of convergence of G(tau) = sum_k tau^k G_k, certified, and of which kind.

The germ of log K at 0 is singular exactly at the nearest of

    zero      f = det (exp(i H tau))_PP = 0, where K has no inverse
    meeting   two eigenvalues of K meet on different branches of the continued logarithm (`meetings.py`)

Every zero of f is a singularity.  Both lists are certified complete up to the answer: discs that hold what they say
(Pellet), and as many zeros inside a circle just beyond the answer as the discs hold together (argument principle).
K splits into sectors that do not know of one another; the radius is the least of theirs.

Zeros and eigenvalues at -conj(z) mirror those at z, so branches are told for Re z >= 0 only.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision
from derive.numerics.bright import Sector, detector_states, return_determinant
from derive.numerics.evolution import apply_rows, shifted_rows
from derive.numerics.meetings import bound_discriminant, discriminant, is_harmful
from derive.numerics.precision import BITS_PER_DIGIT, upper
from derive.numerics.system import System
from derive.numerics.zeros import Cluster, Entire, clusters, count_inside, enclose_taylor

ZERO, MEETING = "zero", "meeting"
DISCS = (3.3, 5.0, 8.0, 12.0, 16.0)
"""|z| = h |tau| within which the nearest singularity is looked for, one after the other; a weakly coupled detector
meets at about pi."""

GAP = 0.02
INNER = ("0.6", "0.65", "0.55", "0.5")
"""Circles below log 2, inside which whatever meets is harmless."""

SPARE_DIGITS = 3
GUARD_BITS = 90
MULTIPLE = 2
"""Zeros of this multiplicity are isolated at the first precision already."""


@dataclass(frozen=True)
class Radius:
    """|tau| of the nearest singularity and its kinds, ("zero",), ("meeting",) or both at once."""

    value: arb
    kinds: tuple[str, ...]


def bits_for_radius(digits: int) -> int:
    """Working precision at which `enclose_radius` usually succeeds."""
    return int(BITS_PER_DIGIT * MULTIPLE * (digits + SPARE_DIGITS)) + 90


def enclose_radius(sectors: Sequence[Sector], digits: int, bits: int) -> Radius | None:
    """The radius with about `digits` digits; None where no sector is coupled and the series ends with G_0.

    The sectors' matrices should be known to more bits than `bits`, the working precision, the more so the larger
    they are.  `NeedsPrecision` where either did not suffice.
    """
    with ctx.workprec(bits + GUARD_BITS):
        found = [_of_sector(s, digits, bits) for s in sectors if s.bright]
    if not found:
        return None
    least = found[0].value
    for r in found[1:]:
        least = least.min(r.value)
    near = [r for r in found if not r.value > least]
    return Radius(least, _in_order({k for r in near for k in r.kinds}))


def _in_order(kinds: set[str]) -> tuple[str, ...]:
    return tuple(k for k in (ZERO, MEETING) if k in kinds)


def _of_sector(s: Sector, digits: int, bits: int) -> Radius:
    """The nearest singularity in the first disc that shows one."""
    for rho in DISCS:
        f = enclose_taylor(lambda z: return_determinant(s, z), lambda x: (x * s.rank).exp(), arb(rho), bits)
        zeros = clusters(f, digits + SPARE_DIGITS)
        reach = arb(zeros[0].modulus.upper()) * arb("1.1") if zeros else arb(rho)
        meeting = _first_meeting(s, zeros, reach, digits, bits) if s.bright > 1 else None
        if zeros or meeting is not None:
            return _nearer(s, f, zeros, meeting)
    raise NeedsPrecision(f"no singularity within h*tau = {DISCS[-1]}")


def _nearer(s: Sector, f: Entire, zeros: Sequence[Cluster], meeting: arb | None) -> Radius:
    first = zeros[0].modulus if zeros else None
    if meeting is None or (first is not None and not meeting < first):
        if first is None:
            raise TypeError("neither a zero nor a meeting")
        _complete(f, zeros, first)
        return Radius(first / s.h, (ZERO,) if meeting is None else (ZERO, MEETING))
    _complete(f, zeros, meeting)
    return Radius(meeting / s.h, (MEETING,))


def _first_meeting(s: Sector, zeros: Sequence[Cluster], reach: arb, digits: int, bits: int) -> arb | None:
    """|z| of the nearest harmful meeting with |z| < reach, not beyond the first zero."""
    small = _smallness(s)
    with ctx.workprec(bits + small + GUARD_BITS):
        g = enclose_taylor(
            lambda z: discriminant(s, z), lambda size: bound_discriminant(s, size), reach, bits + small
        )
        return _nearest_harmful(s, g, zeros, digits)


def _smallness(s: Sector) -> int:
    """Bits by which the discriminant is small near 0: with many levels it is, and the error must be smaller."""
    with ctx.workprec(4 * ctx.prec):
        size = abs(discriminant(s, acb("0.3")))
    return max(0, -int(float(size.log().mid() / arb(2).log().mid())))


def _nearest_harmful(s: Sector, g: Entire, zeros: Sequence[Cluster], digits: int) -> arb | None:
    last = zeros[0].modulus if zeros else g.rho * arb("0.98")
    met = clusters(g, digits + SPARE_DIGITS)
    for meeting in met:
        if meeting.modulus > last:
            break
        if meeting.centre.real < -upper(meeting.radius):
            continue
        if any(z.ball.overlaps(meeting.ball) for z in zeros) or is_harmful(s, meeting):
            _complete(g, met, meeting.modulus)
            return meeting.modulus
    _complete(g, met, last)
    return None


def _complete(g: Entire, found: Sequence[Cluster], answer: arb) -> None:
    """`NeedsPrecision` unless the discs hold all zeros with log 2 < |z| <= answer."""
    outer, inner = _outer(g, found, answer), _inner(g, found)
    held = sum(c.count for c in found if inner < c.modulus and c.modulus < outer)
    if count_inside(g, outer) - count_inside(g, inner) != held:
        raise NeedsPrecision("some zeros were not found")


def _outer(g: Entire, found: Sequence[Cluster], answer: arb) -> arb:
    """A circle beyond the answer, in the first gap of width `GAP` between discs, or else in the widest one."""
    inside = [arb(answer.upper()), *(arb(c.modulus.upper()) for c in found if not c.modulus <= answer)]
    sizes = sorted(inside, key=lambda x: float(x.mid()))
    ends = [*sizes[1:], g.rho * arb("0.995")]
    gaps = [(float((b - a).mid()), ((a + b) / 2).mid()) for a, b in zip(sizes, ends, strict=True)]
    wide = next((middle for width, middle in gaps if width > GAP), None)
    return max(gaps, key=lambda pair: pair[0])[1] if wide is None else wide


def _inner(g: Entire, found: Sequence[Cluster]) -> arb:
    """A circle below log 2 that keeps away from every disc."""
    for text in INNER:
        circle = arb(text).mid()
        if all(abs(c.modulus - circle) > arb("0.01") for c in found):
            return circle
    raise NeedsPrecision("zeros crowd below h*tau = log 2")


def bound_radius(s: System, digits: int, bits: int) -> tuple[arb, arb]:
    """(low, high) with low <= radius <= high for any bright dimension: log 2/h, and the first zero of f.

    f comes from the moments (H'^n)_PP alone.  Where no zero shows, high is infinite.
    """
    moments, rank = _moments(s, int(DISCS[-1] * 4 + bits)), len(s.detector)
    low = arb((arb(2).log() / s.h).lower())
    for rho in DISCS:
        f = enclose_taylor(lambda z: _from_moments(moments, z, bits), lambda x: (x * rank).exp(), arb(rho), bits)
        zeros = clusters(f, digits + SPARE_DIGITS)
        if zeros:
            _complete(f, zeros, zeros[0].modulus)
            return low, arb((zeros[0].modulus / s.h).upper())
    return low, arb("inf")


def _moments(s: System, count: int) -> list[acb_mat]:
    """(H'^n)_PP/n! for n = 0 ... count, H' = (H - E0)/h."""
    rows, rank = shifted_rows(s, acb(1 / s.h)), len(s.detector)
    columns, found = detector_states(s), []
    for n in range(count + 1):
        if n:
            columns = [[a / n for a in apply_rows(rows, v)] for v in columns]
        entries = []
        for vector in s.detector:
            for v in columns:
                total = acb(0)
                for x, a in vector:
                    total += a.conjugate() * v[x]
                entries.append(total)
        found.append(acb_mat(rank, rank, entries))
    return found


def _from_moments(moments: Sequence[acb_mat], z: acb, bits: int) -> acb:
    """f(z) = det sum_n (i z)^n (H'^n)_PP/n!, the rest of the series in the balls."""
    rank, size = moments[0].nrows(), upper(z)
    total, factor, left = acb_mat(rank, rank), acb(1), arb(1)
    for n, moment in enumerate(moments):
        total = total + moment * factor
        factor = factor * z * acb(0, 1)
        left = left * size / (n + 1)
        if n > 2 * size and left < arb(2) ** (-bits - 40):
            break
    around = arb(0, (2 * left).upper())
    return (total + acb_mat(rank, rank, [acb(around, around)] * (rank * rank))).det()
