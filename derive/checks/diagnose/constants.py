"""A number known to many digits, told as a simple constant where it is one.

kappa is tried as u q pi^a and u sqrt(q) pi^a: u one of 1, -1, i, -i; q a rational whose numerator and denominator stay
below 10^4; a from -2 to 2.  The ball must be far narrower than such numbers lie apart, so that a match is no accident.
"""

from __future__ import annotations

from fractions import Fraction

from flint import acb, arb, fmpq

from derive.formula.tree import I_UNIT, PI, Formula, call, number, power, times

HEIGHT = 10_000
NARROW = 16  # digits that the constant must be known to


def recognised(c: acb) -> Formula | None:
    """The simple constant inside the ball c, or None."""
    for unit, turned in ((None, c), (I_UNIT, c * acb(0, -1))):
        if not turned.imag.contains(0):
            continue
        real = turned.real
        found = _zero(real) if real.contains(0) else _signed(real)
        if found is not None:
            return found if unit is None or found == number(0) else times(found, unit)
    return None


def _zero(x: arb) -> Formula | None:
    return number(0) if x.abs_upper() < arb(10) ** -NARROW else None


def _signed(x: arb) -> Formula | None:
    if not x.rad() < abs(x).lower() * arb(10) ** -NARROW:
        return None
    size, sign = abs(x), (1 if x > 0 else -1)
    for a in (0, 1, -1, 2, -2):
        scaled = size / arb.pi() ** a
        for root in (False, True):
            q = _rational(scaled * scaled if root else scaled)
            if q is not None:
                return _written(sign, q, root, a)
    return None


def _written(sign: int, q: Fraction, root: bool, a: int) -> Formula:
    factors = [number(sign), call("sqrt", number(q)) if root else number(q)]
    if a:
        factors.append(PI if a == 1 else power(PI, number(a)))
    return times(*factors)


def _rational(x: arb) -> Fraction | None:
    """The rational of small height in the ball."""
    mantissa, exponent = x.mid().man_exp()
    m, e = int(mantissa), int(exponent)
    middle = Fraction(m) * Fraction(2) ** e
    q = middle.limit_denominator(HEIGHT)
    if not 0 < q.numerator <= HEIGHT:
        return None
    return q if x.overlaps(arb(fmpq(q.numerator, q.denominator))) else None
