"""Integrals up to infinity: graded pieces towards both ends, each enclosed, and the rest bounded by the last of them.

    int_a^infinity f = sum_k int over [a + 2^-(k+1), a + 2^-k]  +  sum_k int over [a + 2^k, a + 2^(k+1)]

Every piece is Petras' algorithm on a range where the integrand is analytic.  Pieces are added until one is below
2^-bits of the sum; what lies beyond is taken to be no larger than that piece, blown up by SAFETY.  So an integral is
taken at its word that it converges, and that its integrand goes on falling as it fell (towards infinity faster than
1/x^2, towards a no slower than it did over the last pieces); a range in which that is not seen is refused.
Common practice, no source; the tests compare with closed forms.
"""

from __future__ import annotations

from collections.abc import Callable

from flint import acb, arb, ctx

from derive.errors import NeedsPrecision

Integrand = Callable[[acb, bool], acb]
SAFETY = 8
OUTWARDS = 200
"""Doublings towards infinity."""


def enclose_improper(f: Integrand, low: acb) -> acb:
    """int_low^infinity f(x) dx, low real."""

    def from_low(t: acb, analytic: bool) -> acb:
        return f(low + t, analytic)

    inner, rest_inner = _pieces(from_low, [-(k + 1) for k in range(ctx.prec + 8)])
    outer, rest_outer = _pieces(from_low, list(range(OUTWARDS)))
    spread = arb(0, ((rest_inner + rest_outer) * SAFETY).upper())
    return inner + outer + acb(spread, spread)


def _pieces(f: Integrand, exponents: list[int]) -> tuple[acb, arb]:
    """The sum over [2^k, 2^(k+1)] for the exponents in turn, and the size of the last piece."""
    total, small = acb(0), arb(2) ** -ctx.prec
    for k in exponents:
        piece = acb.integral(f, acb(arb(2) ** k), acb(arb(2) ** (k + 1)))
        if not piece.is_finite():
            raise NeedsPrecision("a piece of an integral up to infinity did not settle")
        total += piece
        size = piece.abs_upper()
        if size < small * (1 + total.abs_lower()):
            return total, size
    raise NeedsPrecision("an integral up to infinity does not seem to converge")
