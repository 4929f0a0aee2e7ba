"""Images of a band with an impurity under aliasing: what other turns of the circle add at its upper edge.

Outside the band, theta = y > a, w = sqrt(y^2 - a^2), l = a/(y + w), a generating function is i^(k+1) g(y; e),

    g = [c_dx + e c_dp c_px/(w - e c_pp)]/w,     c_xy = l^|x-y| on the line,  l^|x-y| - l^(x+y+2) on the half line,

and below the band its conjugate at -theta with e turned round.  So the sum over the other turns is i^(k+1) times

    Y(theta) = sum_(m>=1) [g(2 pi m + theta; e) - (-1)^k g(2 pi m - theta; -e)],

real, with one pole: the bound state, where w = e c_pp.  Valid while its phase lies on no edge of the band.
Here Y and its slope at theta = a are written as formulas in m.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.images import INFINITY, M
from derive.derivations.asymptotics.scattering import Place
from derive.formula.tree import MINUS_ONE, ONE, PI, ZERO, Formula, call, number, plus, power, times


def edge_images(place: Place, a: Formula, e: Formula) -> tuple[Formula, Formula]:
    """(Y, dY/dtheta) at theta = a."""
    sign = number((-1) ** (place.k + 1))
    above, below = _seen(place, e, _near(a, a)), _seen(place, _turned(e), _near(a, -a))
    slope = plus(above.slope, times(number(-1), sign, below.slope))
    return _total(plus(above.value, times(sign, below.value))), _total(slope)


def images(place: Place, a: Formula, e: Formula, theta: Formula) -> Formula:
    """Y at any theta that keeps the turns apart."""
    sign = number((-1) ** (place.k + 1))
    above, below = _seen(place, e, _anywhere(a, theta)), _seen(place, _turned(e), _anywhere(a, -theta))
    return _total(plus(above.value, times(sign, below.value)))


def _turned(e: Formula) -> Formula:
    return e if e == ZERO else -e


def _total(body: Formula) -> Formula:
    return Formula("sum", ("m", ONE, INFINITY, body))


HALF = number(Fraction(1, 2))


@dataclass(frozen=True)
class Moving:
    """A formula and its derivative in y."""

    value: Formula
    slope: Formula

    def __add__(self, other: Moving) -> Moving:
        return Moving(plus(self.value, other.value), _plus(self.slope, other.slope))

    def __mul__(self, other: Moving) -> Moving:
        slope = _plus(_times(self.slope, other.value), _times(self.value, other.slope))
        return Moving(times(self.value, other.value), slope)

    def inverse(self) -> Moving:
        return Moving(power(self.value, MINUS_ONE), _times(MINUS_ONE, self.slope, power(self.value, number(-2))))

    def scaled(self, c: Formula) -> Moving:
        return Moving(times(c, self.value), _times(c, self.slope))


def _times(*factors: Formula) -> Formula:
    return ZERO if ZERO in factors else times(*factors)


def _plus(*terms: Formula) -> Formula:
    kept = [f for f in terms if f != ZERO]
    return plus(*kept) if kept else ZERO


FIXED = Moving(ONE, ZERO)


@dataclass(frozen=True)
class Outside:
    """y, w and l = a/(y + w) at one y; y + w = base^exponent."""

    a: Formula
    half: Formula
    """y/2."""
    w: Moving
    base: Formula
    exponent: int

    @property
    def middle(self) -> Moving:
        """(y + w)/2."""
        return Moving(plus(self.half, times(HALF, self.w.value)), times(HALF, plus(ONE, self.w.slope)))

    def falling(self, n: int) -> Moving:
        """l^n; its derivative is -n l^n/w."""
        if n == 0:
            return FIXED
        f = times(self.a if n == 1 else power(self.a, number(n)), power(self.base, number(-n * self.exponent)))
        return Moving(f, times(number(-n), f, power(self.w.value, MINUS_ONE)))


def _near(a: Formula, shift: Formula) -> Outside:
    """At y = 2 pi m + shift, shift = +-a, where y + w = (sqrt(pi m) + sqrt(pi m + shift))^2."""
    far = PI * M + shift
    w = times(number(2), call("sqrt", times(PI, M, far)))
    return _outside(a, shift, w, call("sqrt", PI * M) + call("sqrt", far), 2)


def _anywhere(a: Formula, shift: Formula) -> Outside:
    """At y = 2 pi m + shift."""
    y = times(number(2), PI, M) + shift
    w = call("sqrt", power(y, number(2)) - power(a, number(2)))
    return _outside(a, shift, w, plus(y, w), 1)


def _outside(a: Formula, shift: Formula, w: Formula, base: Formula, exponent: int) -> Outside:
    y = times(number(2), PI, M) + shift
    half = PI * M + times(HALF, shift)
    return Outside(a, half, Moving(w, times(y, power(w, MINUS_ONE))), base, exponent)


def _seen(place: Place, e: Formula, at: Outside) -> Moving:
    """g; where detector or start stand on the impurity it is c_dx/(w - e c_pp)."""
    d, x, p = place.detector, place.start, place.impurity
    if place.ends and p == 0 and p in (d, x):  # c_pp and w share the factor 1 - l^2
        below = at.middle if e == ZERO else at.middle + Moving(times(MINUS_ONE, e), ZERO)
        return below.inverse() if place.k == 0 else at.falling(place.k) * below.inverse()
    below = at.w if e == ZERO else at.w + _free(place, at, p, p).scaled(-e)
    if p in (d, x):
        return _free(place, at, d, x) * below.inverse()
    over = _free(place, at, d, p) * _free(place, at, p, x) if place.ends else at.falling(place.detour)
    turned = over * below.inverse()
    return (_free(place, at, d, x) + turned.scaled(e)) * at.w.inverse()


def _free(place: Place, at: Outside, x: int, y: int) -> Moving:
    """c_xy."""
    straight = at.falling(abs(x - y))
    return straight + at.falling(x + y + 2).scaled(MINUS_ONE) if place.ends else straight
