"""Sums over m = m_0, m_0 + 1, ... without end, enclosed: direct terms, then a tail summed power by power.

For m >= N a term is written in y = 1/(rho m), rho = 8/N, on the disc |y| <= 1, where it is analytic:

    f(m) = y^s ( c_0 + c_1 y + ... + c_(K-1) y^(K-1) + y^K E(y) ),     sum of |coefficients of E| <= e
    sum_{m>=N} f(m) = sum_k c_k rho^-(k+s) zeta(k+s, N)  +-  e rho^-(K+s) zeta(K+s, N)

c_k are balls, zeta(s, N) Hurwitz' function; on the tail y <= 1/8, so the last term falls like 8^-K.  Series of this
kind add, multiply, and have inverses, powers, logarithms and exponentials as long as c_0 outweighs the rest of the
series on the disc; where it does not, N is doubled.  Principal branches for real m, as everywhere.

A sum is taken at its word that it converges: a coefficient of m^-1 or above whose ball holds 0 is 0 then, and one
whose ball does not is refused.  Derived here; the tests compare with zeta values and with mpmath.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache, reduce
from itertools import zip_longest
from math import ceil

from flint import acb, acb_poly, acb_series, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters
from derive.numerics.precision import upper

INSIDE = 8
"""1/y at the first term of the tail."""
FIRST_START, LAST_START = 16, 4096
Scalar = Callable[[Formula], acb]
"""A formula without the summed letter, as a ball."""


@dataclass(frozen=True, slots=True)
class Disc:
    """y^start (sum_k coefficients[k] y^k + y^K E), K = len(coefficients), E of l1 norm at most `rest`."""

    start: Fraction
    coefficients: tuple[acb, ...]
    rest: arb


def enclose_infinite_sum(
    term: Formula, name: str, first: int, scalar: Scalar, at: Callable[[int], acb]
) -> acb:
    """sum of `term` over name = first, first + 1, ...; `at(m)` is one term, `scalar` a part that has no m in it.

    Valid where the sum converges and its terms are algebraic, logarithmic or exponential in 1/m for large m.
    """
    disc, start = _expanded(term, name, first, scalar)
    head = acb(0)
    for m in range(first, start):
        head += at(m)
    return head + _tail(disc, start)


def _expanded(term: Formula, name: str, first: int, scalar: Scalar) -> tuple[Disc, int]:
    """The term on the disc, and the m at which the tail begins: as early as the expansion allows."""
    start = FIRST_START + max(first, 0)
    last = LAST_START + 4 * max(first, 0)
    before, ctx.cap = ctx.cap, max(ctx.cap, length_for(ctx.prec))
    try:
        while True:
            try:
                return _Walk(name, start, scalar).disc(term), start
            except NeedsPrecision:
                if start >= last:
                    raise
                start *= 2
    finally:
        ctx.cap = before


def _tail(disc: Disc, start: int) -> acb:
    """sum over m >= start."""
    total = acb(0)
    spread = arb(0, disc.rest.upper())
    for k, c in enumerate((*disc.coefficients, None)):
        power = disc.start + k
        if power <= 1:
            _must_vanish(c)
            continue
        weight = _weight(power, start, ctx.prec)
        total += weight * (c if c is not None else acb(spread, spread))
    return total


@lru_cache(maxsize=4096)
def _weight(power: Fraction, start: int, bits: int) -> acb:
    """rho^-s zeta(s, start): the sum of (rho m)^-s over m >= start, at the working precision `bits`."""
    s = arb(power.numerator) / power.denominator
    return acb(s).zeta(acb(start)) * acb(arb(INSIDE) / start).pow(acb(-s))


def _must_vanish(c: acb | None) -> None:
    if c is None or not c.contains(0):
        raise OutsideValidity("a sum without end does not converge")


def _norm(coefficients: Iterable[acb]) -> arb:
    total = arb(0)
    for c in coefficients:
        total += c.abs_upper()
    return total


class _Walk:
    """One term, walked through with m = 1/(rho y)."""

    def __init__(self, name: str, start: int, scalar: Scalar):
        self.name = name
        self.scalar = scalar
        self.length = length_for(ctx.prec)
        self.rho = arb(INSIDE) / start

    def disc(self, f: Formula) -> Disc:
        if not depends(f, self.name):
            return self._exactly(0, self.scalar(f))
        if f.head == "letter":
            return self._exactly(-1, acb(1 / self.rho))
        if f.head in ("plus", "times"):
            return reduce(_add if f.head == "plus" else _multiply, (self.disc(a) for a in f.args))
        if f.head == "power" and not depends(f.args[1], self.name):
            return _power(self.disc(f.args[0]), self._exponent(f.args[1]))
        if f.head == "call" and f.args[0] == "sqrt":
            return _power(self.disc(f.args[1]), Fraction(1, 2))
        if f.head == "call" and f.args[0] in _PLAIN:
            return _plain(f.args[0], self.disc(f.args[1]))
        raise NotCovered(f"a sum without end over terms with {f.args[0] if f.head == 'call' else f.head} in them")

    def _exponent(self, f: Formula) -> Fraction:
        """A rational exponent, or a whole one given by letters."""
        if f.head == "number":
            return Fraction(f.args[0])
        ball = self.scalar(f)
        whole = ball.unique_fmpz() if ball.is_exact() else None
        if whole is None:
            raise NotCovered("a sum without end over terms with a power that is no rational number")
        return Fraction(int(whole))

    def _exactly(self, start: int, c: acb) -> Disc:
        return Disc(Fraction(start), (c, *[acb(0)] * (self.length - 1)), arb(0))


@lru_cache(maxsize=4096)
def depends(f: Formula, name: str) -> bool:
    """Whether a letter stands free in f; asked again and again of the same terms."""
    return name in free_letters(f)


def length_for(bits: int) -> int:
    """K with 8^-K below 2^-bits."""
    return max(8, ceil(bits / 3) + 4)


def _cut(start: Fraction, found: list[acb], length: int, rest: arb) -> Disc:
    """At most `length` coefficients; what stands beyond goes into the rest."""
    kept = found[:length] + [acb(0)] * (length - len(found))
    return Disc(start, tuple(kept), rest + _norm(found[length:]))


def _add(a: Disc, b: Disc) -> Disc:
    start = min(a.start, b.start)
    gaps = [d.start - start for d in (a, b)]
    if any(gap.denominator != 1 for gap in gaps):
        raise NotCovered("a sum without end whose terms mix whole and fractional powers")
    left, right = ([acb(0)] * int(gap) + list(d.coefficients) for gap, d in zip(gaps, (a, b), strict=True))
    total = [x + y for x, y in zip_longest(left, right, fillvalue=acb(0))]
    return _cut(start, total, min(len(left), len(right)), a.rest + b.rest)


def _multiply(a: Disc, b: Disc) -> Disc:
    product = acb_poly(list(a.coefficients)) * acb_poly(list(b.coefficients))
    rest = _norm(a.coefficients) * b.rest + _norm(b.coefficients) * a.rest + a.rest * b.rest
    length = min(len(a.coefficients), len(b.coefficients))
    return _cut(a.start + b.start, [acb(c) for c in product.coeffs()], length, rest)


def _power(d: Disc, q: Fraction) -> Disc:
    """d^q; the coefficients of (1 + delta)^q are majorised by those of (1 - |delta|)^-|q|."""
    if q.denominator == 1 and 0 < q <= 8:
        return reduce(_multiply, [d] * int(q))
    lead, delta, start = _led(d)
    front = lead**q.numerator if q.denominator == 1 else _root(lead, q)
    exponent = arb(q.numerator) / q.denominator
    body = (_series(delta).log() * acb(exponent)).exp()
    rest = _rest(delta, lambda t: (1 - t) ** -abs(exponent))
    return Disc(start * q, tuple(c * front for c in _filled(body, delta)), upper(rest * front.abs_upper()))


def _root(lead: acb, q: Fraction) -> acb:
    """Principal, on the cut from above."""
    if not lead.imag.is_zero() and lead.imag.contains(0) and not lead.real > 0:
        raise NeedsPrecision("a leading term touches a branch cut")
    return lead.sqrt() ** q.numerator if q.denominator == 2 else lead.pow(acb(arb(q.numerator) / q.denominator))


def _plain(name: str, d: Disc) -> Disc:
    """log of a term that tends to a constant; entire functions of a term that stays bounded."""
    if name == "log":
        lead, delta, start = _led(d)
        if start:
            raise NotCovered("a sum without end over terms that grow like a logarithm")
        body = _series(delta).log() + lead.log()
        return Disc(Fraction(0), _filled(body, delta), _rest(delta, lambda t: -(1 - t).log()))
    if d.start < 0 or d.start.denominator != 1:
        raise NotCovered("a sum without end over a function of a growing term")
    flat = _cut(Fraction(0), [acb(0)] * int(d.start) + list(d.coefficients), len(d.coefficients), d.rest)
    body = getattr(_series(flat), name)()
    constant, moving = flat.coefficients[0].abs_upper(), Disc(flat.start, (acb(1), *flat.coefficients[1:]), flat.rest)
    return Disc(Fraction(0), _filled(body, flat), upper(_rest(moving, lambda t: (constant + t).exp())))


_PLAIN = ("log", "exp", "sin", "cos")


def _led(d: Disc) -> tuple[acb, Disc, Fraction]:
    """d = lead y^start (1 + delta), lead surely not 0."""
    skip = next((k for k, c in enumerate(d.coefficients) if not c.is_zero()), None)
    if skip is None or d.coefficients[skip].contains(0):
        raise NeedsPrecision("a leading term may vanish")
    lead = d.coefficients[skip]
    scaled = (acb(1), *(c / lead for c in d.coefficients[skip + 1 :]))
    return lead, Disc(Fraction(0), scaled, d.rest / lead.abs_lower()), d.start + skip


def _rest(delta: Disc, majorant: Callable[[arb], arb]) -> arb:
    """Bound on the rest of a function of 1 + P + y^K E, whose majorant in ||delta|| is given.

    What E adds is at most majorant(t + e) - majorant(t), t = ||P||, e = ||E||; what the function makes of P beyond
    y^(K-1) is at most 2^-K majorant(t_2), t_2 the norm of P on the disc of twice the radius.
    """
    t, twice = arb(0), arb(0)
    for k, c in enumerate(delta.coefficients[1:], start=1):
        t += c.abs_upper()
        twice += c.abs_upper() * arb(2) ** k
    if not twice < arb(7) / 8 or not t + delta.rest < arb(7) / 8:
        raise NeedsPrecision("the tail of a sum begins too early")
    grown = majorant(t + delta.rest) - majorant(t) + majorant(twice) * arb(2) ** -len(delta.coefficients)
    return upper(grown)


def _series(d: Disc) -> acb_series:
    return acb_series(list(d.coefficients), prec=len(d.coefficients))


def _filled(body: acb_series, like: Disc) -> tuple[acb, ...]:
    found = [acb(c) for c in body.coeffs()]
    return (*found, *[acb(0)] * (len(like.coefficients) - len(found)))
