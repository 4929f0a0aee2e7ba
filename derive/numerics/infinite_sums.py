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

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from flint import acb, acb_series, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters

INSIDE = 8
"""1/y at the first term of the tail."""
FIRST_START, LAST_START = 32, 4096
Scalar = Callable[[Formula], acb]
"""A formula without the summed letter, as a ball."""


@dataclass(frozen=True, slots=True)
class Disc:
    """y^start (sum_k coefficients[k] y^k + y^K E), K = len(coefficients), E of l1 norm at most `rest`."""

    start: Fraction
    coefficients: tuple[acb, ...]
    rest: arb

    def norm(self) -> arb:
        """Bound on sum_k |c_k| + |E|."""
        return _norm(self.coefficients) + self.rest


def enclose_infinite_sum(
    term: Formula, name: str, first: int, scalar: Scalar, at: Callable[[int], acb]
) -> acb:
    """sum of `term` over name = first, first + 1, ...; `at(m)` is one term, `scalar` a part that has no m in it.

    Valid where the sum converges and its terms are algebraic, logarithmic or exponential in 1/m for large m.
    """
    start = FIRST_START
    while start < first + FIRST_START // 2:
        start *= 2
    while True:
        try:
            disc = _Walk(name, start, scalar).disc(term)
            break
        except NeedsPrecision:
            if start >= max(LAST_START, 4 * first):
                raise
            start *= 2
    head = acb(0)
    for m in range(first, start):
        head += at(m)
    return head + _tail(disc, start)


def _tail(disc: Disc, start: int) -> acb:
    """sum over m >= start."""
    total = acb(0)
    rho = arb(INSIDE) / start
    for k, c in enumerate((*disc.coefficients, None)):
        power = disc.start + k
        if power <= 1:
            _must_vanish(c)
            continue
        s = arb(power.numerator) / power.denominator
        weight = acb(s).zeta(acb(start)) * acb(rho).pow(-s)
        total += weight * c if c is not None else acb(_spread(disc.rest), _spread(disc.rest)) * weight
    return total


def _must_vanish(c: acb | None) -> None:
    if c is None or not c.contains(0):
        raise OutsideValidity("a sum without end does not converge")


def _spread(rest: arb) -> arb:
    return arb(0, rest.upper())


def _norm(coefficients: tuple[acb, ...]) -> arb:
    total = arb(0)
    for c in coefficients:
        total += c.abs_upper()
    return total


class _Walk:
    """One term, walked through with m = 1/(rho y)."""

    def __init__(self, name: str, start: int, scalar: Scalar):
        self.name = name
        self.scalar = scalar
        self.length = max(8, ceil(ctx.prec / 3) + 4)
        self.rho = arb(INSIDE) / start

    def disc(self, f: Formula) -> Disc:
        if self.name not in free_letters(f):
            return self._padded(Fraction(0), [self.scalar(f)], arb(0))
        if f.head == "letter":
            return self._padded(Fraction(-1), [acb(1 / self.rho)], arb(0))
        if f.head in ("plus", "times"):
            total = self.disc(f.args[0])
            for a in f.args[1:]:
                total = (self._add if f.head == "plus" else self._multiply)(total, self.disc(a))
            return total
        if f.head == "power" and f.args[1].head == "number":
            return self._power(self.disc(f.args[0]), f.args[1].args[0])
        if f.head == "call" and f.args[0] == "sqrt":
            return self._power(self.disc(f.args[1]), Fraction(1, 2))
        if f.head == "call" and f.args[0] in _PLAIN:
            return self._plain(f.args[0], self.disc(f.args[1]))
        raise NotCovered(f"a sum without end over terms with {f.args[0] if f.head == 'call' else f.head} in them")

    def _padded(self, start: Fraction, found: list[acb], rest: arb) -> Disc:
        """Exactly `length` coefficients; what stands beyond goes into the rest."""
        over = _norm(tuple(found[self.length :]))
        found = found[: self.length] + [acb(0)] * (self.length - len(found))
        return Disc(start, tuple(found), rest + over)

    def _shifted(self, d: Disc, start: Fraction) -> list[acb]:
        gap = d.start - start
        if gap.denominator != 1:
            raise NotCovered("a sum without end whose terms mix whole and fractional powers")
        return [acb(0)] * int(gap) + list(d.coefficients)

    def _add(self, a: Disc, b: Disc) -> Disc:
        start = min(a.start, b.start)
        left, right = self._shifted(a, start), self._shifted(b, start)
        longest = max(len(left), len(right))
        left, right = (x + [acb(0)] * (longest - len(x)) for x in (left, right))
        return self._padded(start, [x + y for x, y in zip(left, right, strict=True)], a.rest + b.rest)

    def _multiply(self, a: Disc, b: Disc) -> Disc:
        product = _product(a.coefficients, b.coefficients)
        rest = _norm(a.coefficients) * b.rest + _norm(b.coefficients) * a.rest + a.rest * b.rest
        return self._padded(a.start + b.start, product, rest)

    def _power(self, d: Disc, q: Fraction) -> Disc:
        """c^q y^(sq) (1 + delta)^q; its coefficients are majorised by those of (1 - |delta|)^-|q|."""
        from derive.numerics.evaluate import rational, square_root

        lead, delta, start = self._led(d)
        grown = _series(delta.coefficients).log() if hasattr(acb_series, "log") else None
        body = (grown * rational(q)).exp() if grown is not None else None
        if body is None:
            raise NotCovered("powers need series logarithms")
        front = square_root(lead) ** q.numerator if q.denominator == 2 else lead.pow(rational(q))
        if q.denominator == 1:
            front = lead**q.numerator
        rest = (1 - self._inside(delta)) ** (-abs(arb(q.numerator) / q.denominator))
        return self._scaled(Disc(start * q, self._filled(body), arb(rest.upper())), front)

    def _plain(self, name: str, d: Disc) -> Disc:
        """log and the entire functions, of a term that stays bounded (log: up to its leading power)."""
        if name == "log":
            lead, delta, start = self._led(d)
            if start:
                raise NotCovered("a sum without end over terms with log m in them")
            body = _series(delta.coefficients).log() + lead.log()
            rest = -(1 - self._inside(delta)).log()
            return Disc(Fraction(0), self._filled(body), arb(rest.upper()))
        if d.start < 0 or d.start.denominator != 1:
            raise NotCovered("a sum without end over a function of a growing term")
        flat = self._padded(Fraction(0), self._shifted(d, Fraction(0)), d.rest)
        body = getattr(_series(flat.coefficients), name)()
        return Disc(Fraction(0), self._filled(body), arb(flat.norm().exp().upper()))

    def _led(self, d: Disc) -> tuple[acb, Disc, Fraction]:
        """d = lead y^start (1 + delta), lead surely not 0."""
        found = list(d.coefficients)
        skip = next((k for k, c in enumerate(found) if not c.is_zero()), len(found))
        if skip == len(found) or found[skip].contains(0):
            raise NeedsPrecision("a leading term may vanish")
        lead = found[skip]
        scaled = [c / lead for c in found[skip:]]
        scaled[0] = acb(1)
        rest = d.rest / lead.abs_lower()
        short = self.length - len(scaled)
        if short and not d.rest.is_zero():  # y^K E with K smaller than the length: give the room back
            raise NeedsPrecision("leading terms cancelled")
        return lead, self._padded(Fraction(0), scaled, rest), d.start + skip

    def _inside(self, delta: Disc) -> arb:
        """||delta - 1||, surely below 3/4."""
        reach = delta.norm() - 1
        if not reach < arb(3) / 4:
            raise NeedsPrecision("the tail of a sum begins too early")
        return arb(reach.upper()).max(arb(0))

    def _filled(self, body: acb_series) -> tuple[acb, ...]:
        found = [acb(c) for c in body.coeffs()][: self.length]
        return tuple(found + [acb(0)] * (self.length - len(found)))

    def _scaled(self, d: Disc, factor: acb) -> Disc:
        return Disc(d.start, tuple(c * factor for c in d.coefficients), d.rest * factor.abs_upper())


_PLAIN = ("log", "exp", "sin", "cos")


def _series(coefficients: tuple[acb, ...]) -> acb_series:
    ctx.cap = max(ctx.cap, len(coefficients))
    return acb_series(list(coefficients), len(coefficients))


def _product(a: tuple[acb, ...], b: tuple[acb, ...]) -> list[acb]:
    from flint import acb_poly

    return [acb(c) for c in (acb_poly(list(a)) * acb_poly(list(b))).coeffs()]
