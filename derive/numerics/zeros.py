"""All zeros of an entire function in a disc, certified: Taylor coefficients in balls, a tail, and counts.

    g(z) = sum_{k<n} c_k z^k + t(z),     |t(z)| <= tail   for |z| <= rho

The coefficients come from samples on |z| = rho; what is aliased and what is cut off are bounded by Cauchy's
inequality |c_k| <= B(s)/s^k, B(s) a bound on |g| for |z| <= s, at the s > rho that needs the fewest samples.

cluster  a disc of centre c and radius eps that holds exactly m zeros: with g(c + w) = sum_k a_k w^k + t,
         |a_m| eps^m > sum_{k != m} |a_k| eps^k + tail   (Pellet's theorem; a double zero is one cluster)
count    the zeros inside a circle, by the argument of g along arcs on which g surely does not vanish

Guess cheaply, then certify: the centres are roots of the midpoint polynomial and promise nothing.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from math import ceil, inf

from flint import acb, acb_poly, arb, ctx

from derive.errors import NeedsPrecision
from derive.numerics.precision import power_of_ten, retry, upper

Growth = Callable[[arb], arb]
REACHES = (1.5, 2, 3, 4, 6, 8, 12, 16, 24)
FIRST_ARCS = 16
ROUGH_BITS = 140
ROUGHLY_SAME = 2.0**-30
MOST_TERMS = 1500
"""Roots of longer polynomials take minutes."""

POLISHES = 4
SMALLEST_ARC = 2.0**-16


@dataclass(frozen=True)
class Entire:
    """g near 0: `coefficients` of the polynomial, and `tail`, a bound on what it leaves out for |z| <= rho."""

    coefficients: tuple[acb, ...]
    rho: arb
    tail: arb

    @property
    def polynomial(self) -> acb_poly:
        return acb_poly(list(self.coefficients))


@dataclass(frozen=True)
class Cluster:
    """A disc with exactly `count` zeros in it, counted with multiplicity; `centre` is exact."""

    centre: acb
    radius: arb
    count: int

    @property
    def ball(self) -> acb:
        around = arb(0, self.radius.upper())
        return self.centre + acb(around, around)

    @property
    def modulus(self) -> arb:
        """|z| of every zero in the disc."""
        return abs(self.centre) + arb(0, self.radius.upper())


def enclose_taylor(values: Callable[[acb], acb], growth: Growth, rho: arb, bits: int) -> Entire:
    """g from samples of it, its error about 2^-bits in absolute size for |z| <= rho; `growth` is B."""
    rho = arb(rho.upper())  # exact: a ball's width would grow through every sample
    reach, n = _choose_reach(growth, rho, bits)
    if n > MOST_TERMS:
        raise NeedsPrecision(f"more than {MOST_TERMS} Taylor coefficients would be needed")
    first = bits + max(0, ceil(_log2(growth(rho)))) + 40
    return retry(lambda working: _sampled(values, growth(reach), reach, n, rho, bits), first, 4 * first)


def _sampled(values: Callable[[acb], acb], beyond: arb, reach: arb, n: int, rho: arb, bits: int) -> Entire:
    q = rho / reach
    points = [acb(arb(2 * j) / n).exp_pi_i() for j in range(n)]
    samples = [values(p * rho) for p in points]
    goal = arb(2) ** (-bits)
    if not all(x.rad() < goal for x in samples):
        raise NeedsPrecision("samples too wide")
    aliased = (beyond * q**n / (1 - q**n)).upper()
    found = [_blurred(_harmonic(samples, points, k), aliased * q**k) / rho**k for k in range(n)]
    return Entire(tuple(found), rho, arb((beyond * q**n / (1 - q)).upper()))


def _harmonic(samples: Sequence[acb], points: Sequence[acb], k: int) -> acb:
    """1/n sum_j x_j w^(-jk), term by term: Horner's rule would turn the balls, and turned balls grow."""
    n, total = len(samples), acb(0)
    for j, x in enumerate(samples):
        total += x * points[-j * k % n]
    return total / n


def _choose_reach(growth: Growth, rho: arb, bits: int) -> tuple[arb, int]:
    """The s and the number of samples that reach 2^-bits with least work."""
    best: tuple[float, arb, int] = (inf, rho, 0)
    for factor in REACHES:
        s = rho * arb(factor)
        n = ceil((_log2(growth(s)) + bits) / _log2(arb(factor))) + 2
        if n < best[0]:
            best = (n, s, n)
    return best[1], best[2]


def _log2(x: arb) -> float:
    return float((x.upper().log() / arb(2).log()).mid())


def _blurred(x: acb, by: arb) -> acb:
    around = arb(0, upper(by))
    return x + acb(around, around)


def clusters(g: Entire, digits: int) -> list[Cluster]:
    """Discs of radius 10^-digits round the zeros with |z| < rho, ascending in modulus; `count_inside` tells
    whether they are all.  `NeedsPrecision` where a disc cannot be certified.

    Rough guesses are polished by Newton's steps; only where that fails are guesses made at full precision.
    """
    eps = power_of_ten(-digits)
    try:
        with ctx.workprec(min(ROUGH_BITS, ctx.prec)):
            centres = _guesses(_rough(g), arb(2) ** (-ROUGH_BITS // 3))
        found = [_certified(g, group, eps) for group in _gathered(centres, arb(ROUGHLY_SAME))]
    except NeedsPrecision:
        found = [_certified(g, group, eps) for group in _gathered(_guesses(g, eps * arb(2) ** -10), eps)]
    return sorted(found, key=lambda c: (float(abs(c.centre).mid()), -float(c.centre.real.mid())))


def _rough(g: Entire) -> Entire:
    """The same function with the last coefficients in the tail."""
    kept, tail, most = list(g.coefficients), g.tail, arb(2) ** -ROUGH_BITS
    while kept:
        more = tail + upper(kept[-1]) * g.rho ** (len(kept) - 1)
        if not more < most:
            break
        tail = arb(more.upper())
        kept.pop()
    return Entire(tuple(kept), g.rho, tail)


def _guesses(g: Entire, tolerance: arb) -> list[acb]:
    """Roots of the midpoint polynomial with |z| < rho, zeros at the origin left out."""
    middle = [_exactly(c) for c in g.coefficients]
    low = next((k for k, c in enumerate(g.coefficients) if not c.contains(0)), len(middle))
    while middle and middle[-1].is_zero():
        middle.pop()
    if len(middle) - low < 2:
        return []
    exact = acb_poly([_exactly(c * g.rho ** (k + low)) for k, c in enumerate(middle[low:])])
    try:
        roots = exact.roots(tol=tolerance, maxprec=8 * ctx.prec)
    except ValueError as fault:
        raise NeedsPrecision("zeros too close to be told apart") from fault
    return [_exactly(r) * g.rho for r in roots if abs(r) < arb("0.999")]


def _gathered(centres: Sequence[acb], eps: arb) -> Iterator[list[acb]]:
    """Centres in groups that one disc of radius eps may hold."""
    left = sorted(centres, key=lambda c: (float(abs(c).mid()), float(c.imag.mid())))
    while left:
        first = left[0]
        group = [c for c in left if abs(c - first) < eps]
        left = [c for c in left if not abs(c - first) < eps]
        yield group


def _certified(g: Entire, group: list[acb], eps: arb) -> Cluster:
    m, centre = len(group), acb(0)
    for c in group:
        centre += c / len(group)
    for _ in range(POLISHES):
        centre = _exactly(centre)
        a = shifted(g, centre)
        if m < len(a) and _is_isolated(a, m, eps, g.tail):
            return Cluster(centre, eps, m)
        if m >= len(a) or a[m].contains(0):
            break
        centre = centre - a[m - 1] / (m * a[m])  # Newton's step on the derivative of order m - 1
    raise NeedsPrecision("a zero is not isolated at this precision")


def _is_isolated(a: Sequence[acb], m: int, eps: arb, tail: arb) -> bool:
    rest = tail
    for k, c in enumerate(a):
        if k != m:
            rest += upper(c) * eps**k
    return bool(a[m].abs_lower() * eps**m > rest)


def _exactly(z: acb) -> acb:
    return acb(z.real.mid(), z.imag.mid())


def shifted(g: Entire, centre: acb) -> list[acb]:
    """a_k with g(centre + w) = sum_k a_k w^k, the tail left out."""
    return [acb(c) for c in g.polynomial(acb_poly([centre, 1])).coeffs()]


def count_inside(g: Entire, radius: arb) -> int:
    """The number of zeros with |z| < radius < rho, by the argument principle.

    `NeedsPrecision` where g comes too close to 0 on the circle.  A count bears rough balls: few bits are tried first.
    """
    try:
        with ctx.workprec(min(ROUGH_BITS, ctx.prec)):
            return _counted(_rough(g), radius)
    except NeedsPrecision:
        return _counted(g, radius)


def _counted(g: Entire, radius: arb) -> int:
    turn = arb(0)
    arcs = [(arb(j) / FIRST_ARCS, 1.0 / FIRST_ARCS) for j in reversed(range(FIRST_ARCS))]
    while arcs:
        begin, width = arcs.pop()
        change = _turned(g, radius, begin, arb(width))
        if change is not None:
            turn += change
        elif width < SMALLEST_ARC:
            raise NeedsPrecision("a zero lies too close to the circle")
        else:
            arcs += [(begin + arb(width) / 2, width / 2), (begin, width / 2)]
    whole = (turn / (2 * arb.pi())).unique_fmpz()
    if whole is None:
        raise NeedsPrecision("the argument along the circle is not known well enough")
    return int(whole)


def _turned(g: Entire, radius: arb, begin: arb, width: arb) -> arb | None:
    """The change of arg g along an arc (fractions of a turn); None where g may vanish in the disc round it."""
    first, middle, last = (acb(2 * t).exp_pi_i() * radius for t in (begin, begin + width / 2, begin + width))
    reach = upper(radius * arb.pi() * width)
    a = shifted(g, middle)
    rest, power = g.tail, arb(1)
    for c in a[1:]:
        power *= reach
        rest += upper(c) * power
    if not a[0].abs_lower() > rest:
        return None
    p = g.polynomial
    ends = [_blurred(p(z), g.tail) / _blurred(a[0], g.tail) for z in (first, last)]
    return ends[1].arg() - ends[0].arg()
