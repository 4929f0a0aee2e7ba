"""Late asks on the square lattice: the smooth part of the law, with every power of the logarithm.

    u_n = J_0(a n)^2,   v_n = w^d J_m(a n) J_k(a n),   a = 2|h| tau,   d = m + k,   u = (1/(pi a)) (L + c_0) + O(x),

x = log(1/z), L = log(1/x), at the middle of the band, where the density of states is logarithmic; the start stands m
and k sites away along the axes.  The half-line transform of J_0^2 is 2 K(4 a^2/(x^2 + 4 a^2))/(pi sqrt(x^2 + 4 a^2)),
which gives log(8 a); the half of u_0 gives pi a/2; images cancel in pairs as long as 2 a < 2 pi.  So
c_0 = log(8 a) + pi a/2.  For v, s = (-1)^((m-k)/2):

    d even   v = w^d s (1/(pi a)) (L + log(8 a) - 2 h),    h = H((m+k)/2) + H(|m-k|/2),    H(j) = sum_(i=1)^j 1/(2i-1)
             by the finite part of int J_m J_k t^-l dt at l -> 0 (DLMF 10.22.57), images cancelling as for u
    d odd    v = w^d c,    c = sum_n J_m(a n) J_k(a n) = (-1)^((|m-k|-1)/2)/(2 a)
                               + (4/pi) (-1)^((d+1)/2) int_0^(pi/2) cos((m-k) q) sum_j g_d(2 pi j; 2 a cos q) dq
             by J_m J_k as an integral over one Bessel function (DLMF 10.9.26) and Poisson's summation
             (`asymptotics_images.py`)

and phi = v/u (less 1 for the return) is A/(L + c_0) but for regular terms.  Hankel's integral of it is exact in all
powers of 1/L:

    phi_n = -(A/n) int_0^infinity exp(-x) dx/((log n + c_0 - log x)^2 + pi^2) + O(n^-2)     (smooth part),
    A = -pi a for the return,   -w^d s (pi a/2 + 2 h) for even d,   w^d c pi a for odd d.

The band's edges add terms of the same size that oscillate like exp(+-2 i a n).  Derived here; checked by the windowed
mean of the measured amplitudes.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.images import i_power
from derive.derivations.asymptotics.setting import Band, band_of, clear_of
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import Claim, Derivation, Kind, Line, Step

N, X, A, Q, J = (letter(name) for name in ("n", "x", "a", "q", "j"))
TWO, INFINITY = number(2), constant("infinity")
C0, C, L, U, V = (letter(name) for name in ("c_0", "c", "L", "u", "v"))


@dataclass(frozen=True)
class Away:
    """How far the start is along the axes, and w^d, the phase of that way."""

    m: int
    k: int
    phase: Formula

    @property
    def steps(self) -> int:
        return self.m + self.k


def derive_square(setting: Setting, terms: int) -> Derivation:
    """The smooth part of phi_n for a photon that starts on a site."""
    band = band_of(setting)
    if terms > 1:
        raise NotCovered("on the square lattice the law is derived to its first power of 1/n, all logarithms in it")
    away = _away(setting, band)
    if not band.below:
        raise NotCovered(f"the law on the square lattice is derived below aliasing: assume {text(band.a)} < pi")
    gt = times(band.size, TAU)
    c0 = call("log", times(number(16), gt)) + times(PI, gt)
    share = _share(away, band.a, gt)
    law = clear_of(times(share, power(N, MINUS_ONE), _hankel(c0)), setting)
    error = order(power(N, number(-2)))
    phrase = "as n -> infinity, error O(n^-2), smooth part"
    kind = Kind("limit", phrase, toward=(("n", INFINITY),), error=error, smooth=True)
    claim = Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), law, kind,
                  valid_for=f"{text(band.a)} < pi")
    notes = (
        ("The edges of the band add terms of the same size that oscillate; the law of ", operator("F", "n"),
         " and the ask from which the tail is the tail are therefore not stated.",),
    )
    sources = ("phys-rev-a-97-062105",)
    return Derivation("asymptotics", (claim,), _steps(band.a, c0, away, law), notes, sources)


def _away(setting: Setting, band: Band) -> Away:
    start, d = setting.start, setting.detectors[0].place
    if start is None or not isinstance(start.place, str) or not isinstance(d, str):
        raise NotCovered("on the square lattice the late-time law is derived for a start on one site")
    x, y = (int(b) - int(a) for a, b in zip(d.split(","), start.place.split(","), strict=True))
    ahead, behind = (sum(max(0, s * c) for c in (x, y)) for s in (1, -1))
    if band.unit in (ONE, MINUS_ONE):
        return Away(abs(x), abs(y), i_power((ahead + behind) * (1 if band.unit == MINUS_ONE else -1)))
    parts = [_turned(band.unit, ahead), _turned(call("conj", band.unit), behind)]
    return Away(abs(x), abs(y), times(*parts))


def _turned(unit: Formula, count: int) -> Formula:
    return power(times(MINUS_ONE, I_UNIT, unit), number(count)) if count else ONE


def _share(away: Away, a: Formula, gt: Formula) -> Formula:
    """-A."""
    if not away.steps:
        return times(TWO, PI, gt)
    if away.steps % 2 == 0:
        sign = number((-1) ** ((away.m - away.k) // 2))
        return times(sign, away.phase, plus(times(PI, gt), number(2 * _odd_inverses(away))))
    return times(MINUS_ONE, TWO, PI, gt, away.phase, _sum_of_products(away, a))


def _odd_inverses(away: Away) -> Fraction:
    """h."""
    ends = (away.steps // 2, abs(away.m - away.k) // 2)
    return sum((Fraction(1, 2 * i - 1) for end in ends for i in range(1, end + 1)), Fraction(0))


def _sum_of_products(away: Away, a: Formula) -> Formula:
    """c."""
    d, apart = away.steps, abs(away.m - away.k)
    wide = times(TWO, a, call("cos", Q))
    images = Formula("sum", ("j", ONE, INFINITY, _image(d, times(TWO, PI, J), wide)))
    over = Formula("integral", ("q", ZERO, times(number(Fraction(1, 2)), PI), times(_cosine(apart), images)))
    first = times(number(Fraction((-1) ** ((apart - 1) // 2), 2)), power(a, MINUS_ONE))
    return plus(first, times(number(4 * (-1) ** ((d + 1) // 2)), over, power(PI, MINUS_ONE)))


def _cosine(apart: int) -> Formula:
    return call("cos", Q if apart == 1 else times(number(apart), Q))


def _image(d: int, y: Formula, b: Formula) -> Formula:
    """g_d(y) = b^d/(w (y + w)^d), w = sqrt(y^2 - b^2)."""
    w = call("sqrt", power(y, TWO) - power(b, TWO))
    share = times(b, power(plus(y, w), MINUS_ONE))
    return times(share if d == 1 else power(share, number(d)), power(w, MINUS_ONE))


def _hankel(c: Formula) -> Formula:
    """int_0^infinity exp(-x)/((log n + c - log x)^2 + pi^2) dx."""
    inside = plus(call("log", N), c, -call("log", X))
    below = power(inside, TWO) + power(PI, TWO)
    return Formula("integral", ("x", ZERO, INFINITY, times(call("exp", -X), power(below, MINUS_ONE))))


def _steps(a: Formula, c0: Formula, away: Away, law: Formula) -> tuple[Step, ...]:
    u, phi = U, operator("φ")
    front = times(PI, A)
    wide = power(X, TWO) + times(number(4), power(A, TWO))
    transform = times(TWO, call("elliptic_K", times(number(4), power(A, TWO), power(wide, MINUS_ONE))),
                      power(times(PI, call("sqrt", wide)), MINUS_ONE))
    return (
        _opening(a, away),
        Step(
            ("At the middle of the band, ", X, " = log(1/z) → 0, the sum is its transform and half of the first term; "
             "images cancel in pairs:"),
            (Line(u, plus(transform, number(Fraction(1, 2)), order(X))),
             Line(u, plus(times(power(front, MINUS_ONE), plus(L, C0)), order(X))), Line(C0, c0)),
            where=("with ", L, " = log(1/", X, ").",),
        ),
        *_off_the_detector(away),
        Step(
            ("so that ", phi, " is singular like an inverse logarithm, and Hankel's integral along its cut takes all "
             "powers of ", L, " at once:"),
            (Line(phi, plus(operator("regular"), _singular(away), order(X))),
             Line(operator("φ", "n"), plus(law, order(power(N, number(-2)))))),
            earns="asymptotics.amplitude",
        ),
    )


def _opening(a: Formula, away: Away) -> Step:
    def wave(order_: int) -> Formula:
        return call("bessel_J", number(order_), times(A, N))

    u, v, phi = U, V, operator("φ")
    back = (Line(operator("u", "n"), power(wave(0), TWO)), Line(A, a, ":="))
    if not away.steps:
        return Step(
            ("The lattice is the product of two lines, and the start is the detector's own state:",),
            (*back, Line(phi, plus(ONE, times(MINUS_ONE, power(u, MINUS_ONE))))),
        )
    product = power(wave(away.m), TWO) if away.m == away.k else times(wave(away.m), wave(away.k))
    return Step(
        ("The lattice is the product of two lines:",),
        (*back, Line(operator("v", "n"), times(away.phase, product)), Line(phi, times(v, power(u, MINUS_ONE)))),
    )


def _off_the_detector(away: Away) -> tuple[Step, ...]:
    """v near the middle of the band."""
    v, d = V, away.steps
    if not d:
        return ()
    if d % 2 == 0:
        sign = number((-1) ** ((away.m - away.k) // 2))
        inside = plus(L, call("log", times(number(8), A)), number(-2 * _odd_inverses(away)))
        body = times(sign, away.phase, power(times(PI, A), MINUS_ONE), inside)
        said = "An even number of steps away the logarithm is there too, and the constant beside it is rational:"
        return (Step((said,), (Line(v, plus(body, order(X))),)),)
    closed = _sum_of_products(away, A)
    said = ("An odd number of steps away there is no logarithm; what is left is a sum, by Bessel's product as an "
            "integral and Poisson's summation:")
    return (Step((said,), (Line(v, plus(times(away.phase, C), order(times(X, L)))), Line(C, closed))),)


def _singular(away: Away) -> Formula:
    """A/(L + c_0)."""
    below, front = power(plus(L, C0), MINUS_ONE), times(PI, A)
    if not away.steps:
        return times(MINUS_ONE, front, below)
    if away.steps % 2:
        return times(away.phase, front, C, below)
    sign = number(-((-1) ** ((away.m - away.k) // 2)))
    return times(sign, away.phase, plus(times(number(Fraction(1, 2)), front), number(2 * _odd_inverses(away))), below)
