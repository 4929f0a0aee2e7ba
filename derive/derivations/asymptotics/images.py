"""Images of the band under aliasing: what other turns of the circle add to a generating function at a band edge.

With z = exp(i theta), Poisson's summation turns sum_n J_k(a n) z^n into the half-line transforms at theta + 2 pi m,

    f_k(theta) = ((s + i theta)/a)^k / s,   s = sqrt(a^2 - theta^2)        inside the band (DLMF 10.22.57's kin)
               = i^(k+1) g_k(theta),        g_k(y) = a^k/(w (y + w)^k),   w = sqrt(y^2 - a^2),   theta > a
               = the conjugate at -theta    for theta < -a.

The image m = 0 carries the edge's singularity.  This module writes the others and their Taylor coefficients at
theta = a as formulas in m: sums without end, of terms like 1/m^2 or smaller.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from itertools import zip_longest
from math import factorial

from derive.formula.tree import I_UNIT, ONE, PI, Formula, call, constant, letter, number, plus, power, times

M = letter("m")
INFINITY = constant("infinity")
Wave = tuple[tuple[int, int], ...]
Monomials = dict[tuple[int, int], tuple[Fraction, int]]
"""(alpha, beta) -> (c, u): c i^u y^alpha w^-beta."""


def i_power(k: int) -> Formula:
    """i^k, written out."""
    return (ONE, I_UNIT, number(-1), times(number(-1), I_UNIT))[k % 4]


def edge_rest(a: Formula, wave: Wave, j: int) -> Formula:
    """Below aliasing (a < pi): the real number Y_j with R = 1/2 [k = 0] + i^(k+1) sum_j Y_j (theta - a)^j.

    Y_j = sum over the wave of +-(X_kj - U_(k-1)^(j)(1)/(j! a^(j+1))), and of X_kj see `_above_and_below`.
    """
    first = min(k for _, k in wave)
    parts = []
    for sign, k in wave:
        signed = number(sign * (-1) ** ((k - first) // 2))
        parts.append(times(signed, _above_and_below(a, k, j)))
        if slope(k, j):
            parts.append(times(signed, number(-slope(k, j)), power(a, number(-j - 1))))
    return plus(*parts)


def _above_and_below(a: Formula, k: int, j: int) -> Formula:
    """X_kj = (1/j!) (d/dtheta)^j sum_(m>=1) [g_k(2 pi m + theta) - (-1)^k g_k(2 pi m - theta)] at theta = a."""
    above, below = _beside(a, k, j, a), _beside(a, k, j, -a)
    mirrored = -below if (k + j) % 2 == 0 else below
    return _shared(_total(above + mirrored), j)


def aliased_rest(a: Formula, wave: Wave, j: int) -> Formula:
    """For every a but the multiples of pi: the complex Z_j with R = 1/2 [k = 0] + sum_j Z_j (theta - a)^j."""
    parts = []
    for sign, k in wave:
        above = times(i_power(k + 1), _beside(a, k, j, a))
        below = _inside(a, k, j, a - times(number(2), PI, M), _root(a - PI * M))
        parts.append(times(number(sign), _shared(_total(above + below), j)))
        if slope(k, j):
            parts.append(times(number(-sign * slope(k, j)), i_power(k + 1), power(a, number(-j - 1))))
    return plus(*parts)


def meeting_rest(turns: int, wave: Wave, j: int) -> Formula:
    """At a = turns*pi, theta = a + i x: the real W_j with R = 1/2 [k = 0] + sum_j W_j x^j."""
    a = times(number(turns), PI)
    parts: list[Formula] = []
    for sign, k in wave:
        parts += [times(number(sign), _on_the_way(a, k, j, turns - 2 * m)) for m in range(1, turns)]
        if (k + 1 + j) % 2 == 0:  # 2 Re of i^(k+1+j) times a real number
            turn = times(number(sign), number(2), i_power(k + 1 + j))
            y, w = times(PI, number(2) * M + number(turns)), times(number(2), PI, call("sqrt", M * (M + number(turns))))
            roots = call("sqrt", PI) * (call("sqrt", M) + call("sqrt", M + number(turns)))
            parts.append(times(turn, _shared(_total(_outside(a, k, j, y, w, roots)), j)))
            if slope(k, j):
                parts.append(times(turn, number(-slope(k, j)), power(a, number(-j - 1))))
    return plus(*parts)


def slope(k: int, j: int) -> Fraction:
    """U_(k-1)^(j)(1)/j!: coefficient of y^j in U_(k-1)(1 + y); of U_(-1) = 0 none."""
    if k == 0:
        return Fraction(0)
    last, this = [Fraction(0)], [Fraction(1)]
    for _ in range(k - 1):  # U_(n+1) = 2 (1 + y) U_n - U_(n-1)
        shifted = [Fraction(0), *this]
        raised = [2 * (x + y) for x, y in zip([*this, Fraction(0)], shifted, strict=True)]
        last, this = this, [x - y for x, y in zip_longest(raised, last, fillvalue=Fraction(0))]
    return this[j] if j < len(this) else Fraction(0)


def image_pair(a: Formula, k: Formula, theta: Formula) -> Formula:
    """g_k(2 pi m + theta) - (-1)^k g_k(2 pi m - theta), one term of the sum over m, for any |theta| < 2 pi - a.

    k may be a letter.
    """
    above, below = (_plain(a, k, times(number(2), PI, M) + side) for side in (theta, -theta))
    if k.head != "number":
        return above - times(power(number(-1), k), below)
    return above + below if k.args[0] % 2 else above - below


def _plain(a: Formula, k: Formula, y: Formula) -> Formula:
    w = call("sqrt", power(y, number(2)) - power(a, number(2)))
    if k == number(0):
        return power(w, number(-1))
    share = power(times(a, power(y + w, number(-1))), k) if k != ONE else times(a, power(y + w, number(-1)))
    return times(share, power(w, number(-1)))


def _on_the_way(a: Formula, k: int, j: int, place: int) -> Formula:
    """One image at theta = place*pi inside the band: Re of i^j f_k^(j)/j!."""
    turns = a.args[0].args[0] if a.head == "times" else 1
    s = times(PI, call("sqrt", number(turns**2 - place**2)))
    found = times(i_power(j), _inside(a, k, j, times(number(place), PI), s))
    return _shared(found if k == j == 0 else call("Re", found), j)


def _beside(a: Formula, k: int, j: int, shift: Formula) -> Formula:
    """g_k^(j) at y = 2 pi m + shift, shift = +-a, where y + w = (sqrt(pi m) + sqrt(pi m + shift))^2."""
    roots = call("sqrt", PI * M) + call("sqrt", PI * M + shift)
    return _outside(a, k, j, times(number(2), PI, M) + shift, _root(PI * M + shift), roots)


def _root(other: Formula) -> Formula:
    """2 sqrt(pi m other)."""
    return times(number(2), call("sqrt", times(PI, M, other)))


def _total(body: Formula) -> Formula:
    return Formula("sum", ("m", ONE, INFINITY, body))


def _shared(f: Formula, j: int) -> Formula:
    return times(number(Fraction(1, factorial(j))), f)


def _outside(a: Formula, k: int, j: int, y: Formula, w: Formula, roots: Formula) -> Formula:
    """(d/dy)^j g_k(y); g' = -g (y/w^2 + k/w).  y + w = roots^2."""

    def next_ones(c: Fraction, u: int, alpha: int, beta: int) -> Terms:
        own = (alpha - 1, beta, c * alpha, u)
        return [(alpha + 1, beta + 2, -c * (beta + 1), u), (alpha, beta + 1, -c * k, u), own]

    front = times(_whole(a, k), power(roots, number(-2 * k))) if k else ONE
    return _written(_differentiated(next_ones, j), front, y, w)


def _inside(a: Formula, k: int, j: int, theta: Formula, s: Formula) -> Formula:
    """(d/dtheta)^j f_k(theta); f' = f (theta/s^2 + i k/s)."""

    def next_ones(c: Fraction, u: int, alpha: int, beta: int) -> Terms:
        own = (alpha - 1, beta, c * alpha, u)
        return [(alpha + 1, beta + 2, c * (beta + 1), u), (alpha, beta + 1, c * k, u + 1), own]

    front = times(_whole(s + times(I_UNIT, theta), k), power(a, number(-k))) if k else ONE
    return _written(_differentiated(next_ones, j), front, theta, s)


def _whole(f: Formula, k: int) -> Formula:
    return ONE if k == 0 else f if k == 1 else power(f, number(k))


Terms = list[tuple[int, int, Fraction, int]]
Slope = Callable[[Fraction, int, int, int], Terms]


def _differentiated(next_ones: Slope, j: int) -> Monomials:
    """The factor beside w f after j derivatives, from the one before."""
    found: Monomials = {(0, 0): (Fraction(1), 0)}
    for _ in range(j):
        following: Monomials = {}
        for (alpha, beta), (c, u) in found.items():
            for a1, b1, c1, u1 in next_ones(c, u, alpha, beta):
                signed = -c1 if u1 > 1 else c1  # i^2
                known = following.get((a1, b1), (Fraction(0), 0))[0]
                following[a1, b1] = (known + signed, u1 % 2)
        found = {place: value for place, value in following.items() if value[0]}
    return found


def _written(found: Monomials, front: Formula, y: Formula, w: Formula) -> Formula:
    terms = []
    for (alpha, beta), (c, u) in sorted(found.items()):
        factors = [number(c), i_power(u), front]
        factors += [power(y, number(alpha))] if alpha > 1 else [y] if alpha else []
        terms.append(times(*factors, power(w, number(-beta - 1))))
    return plus(*terms)
