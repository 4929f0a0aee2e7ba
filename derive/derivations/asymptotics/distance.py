"""The late-time law on the line for a start j sites away, j a letter: one formula for every distance.

With psi = a n + pi/4 - j pi/2, a = 2|h| tau < pi, and the edge's regular parts (`asymptotics_images.py`)

    phi_n = w^j sqrt(2a/pi) n^(-3/2) [cos(psi)/2 - D sin(psi)] + O(n^(-5/2)),     D = X_j - X_0 - j/a,

X_k = sum_m [g_k(2 pi m + a) - (-1)^k g_k(2 pi m - a)].  At j = 1, 2, ... it is the numbered law.  Derived here.
"""

from __future__ import annotations

from fractions import Fraction

from derive.derivations.asymptotics.images import image_pair
from derive.derivations.asymptotics.setting import Band, clear_of, late_kind
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
from derive.record.said import Claim, Derivation, Line, Step

N, INFINITY, HALF = letter("n"), constant("infinity"), number(Fraction(1, 2))


def derive_at_distance(setting: Setting, band: Band, j: Formula, terms: int) -> Derivation:
    """phi_n and F_n to their first term, in n and j."""
    if terms > 1:
        raise NotCovered("for a distance that is a letter the late-time law is derived to its first term")
    if not band.below:
        raise NotCovered(f"for a distance that is a letter the law holds below aliasing: assume {text(band.a)} < pi")
    d = plus(_images(band.a, j), -_images(band.a, ZERO), -times(j, power(band.a, MINUS_ONE)))
    psi = plus(times(band.a, N), times(number(Fraction(1, 4)), PI), times(number(Fraction(-1, 2)), j, PI))
    wave = clear_of(plus(times(HALF, call("cos", psi)), -times(d, call("sin", psi))), setting)
    front = times(number(2), call("sqrt", times(band.size, TAU, power(PI, MINUS_ONE))))
    real = times(front, wave, power(N, number(Fraction(-3, 2))))
    amplitude = times(power(times(MINUS_ONE, I_UNIT, band.unit), j), real)
    square = times(number(4), band.size, TAU, power(wave, number(2)), power(PI, MINUS_ONE), power(N, number(-3)))
    valid = f"n large beside 1/({text(band.a)}), 1/(pi - {text(band.a)}) and {text(j)}^2/({text(band.a)})"
    claims = (
        Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), amplitude,
              late_kind(Fraction(-5, 2)), valid_for=valid),
        Claim("asymptotics.F", "asymptotics", Quantity("detection probability"), square,
              late_kind(Fraction(-4)), valid_for=valid),
    )
    notes = (("From which ask on the tail is the tail depends on ", j, "; give ", j, " a number to have it.",),)
    return Derivation("asymptotics", claims, _steps(band, j, d, amplitude, square), notes,
                      ("phys-rev-e-95-032141", "phys-rev-lett-120-040502"))


def _images(a: Formula, k: Formula) -> Formula:
    """X_k."""
    return Formula("sum", ("m", ONE, INFINITY, image_pair(a, k, a)))


def _steps(band: Band, j: Formula, d: Formula, amplitude: Formula, square: Formula) -> tuple[Step, ...]:
    u, v, phi, s = operator("u"), operator("v"), operator("φ"), letter("s")
    y, r = operator("D"), operator("X", 0)
    root = call("sqrt", plus(power(letter("a"), number(2)), -power(operator("θ"), number(2))))
    turned = times(power(I_UNIT, j), plus(power(s, MINUS_ONE), times(I_UNIT, plus(y, r))))
    return (
        Step(
            ("With ", phi, " = ", times(v, power(u, MINUS_ONE)), ", the series of the amplitudes between asks near "
             "the upper edge of the band, where ", s, " = ", root, " vanishes:"),
            (Line(u, plus(power(s, MINUS_ONE), HALF, times(I_UNIT, r))), Line(v, turned), Line(y, d, ":="),
             Line(letter("a"), band.a, ":=")),
            where=("a power of the hopping's phase stands before ", v, ".",),
        ),
        Step(
            ("the part of ", phi, " odd in ", s, " begins with"),
            (Line(phi, plus(operator("even part"), times(power(I_UNIT, j), s, plus(number(Fraction(-1, 2)), times(
                I_UNIT, y))), order(power(s, number(3))))),),
        ),
        Step(("and transfers, both edges together, to",),
             (Line(operator("φ", "n"), plus(amplitude, order(power(N, number(Fraction(-5, 2)))))),),
             earns="asymptotics.amplitude"),
        Step(("The probability is its square:",),
             (Line(operator("F", "n"), plus(square, order(power(N, number(-4))))),), earns="asymptotics.F"),
    )
