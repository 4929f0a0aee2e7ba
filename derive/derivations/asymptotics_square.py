"""The return on the square lattice at late asks: its smooth part, with every power of the logarithm.

    u_n = J_0(a n)^2,   a = 2|h| tau,     u = (1/(pi a)) (L + c_0) + O(x),   x = log(1/z),  L = log(1/x)

at the middle of the band, where the density of states is logarithmic.  The half-line transform of J_0^2 is
2 K(4 a^2/(x^2 + 4 a^2))/(pi sqrt(x^2 + 4 a^2)), which gives log(8 a); the half of u_0 gives pi a/2; images cancel in
pairs as long as 2 a < 2 pi.  So c_0 = log(8 a) + pi a/2, and Hankel's integral of -1/u is exact in all powers of 1/L:

    phi_n = (pi a/n) int_0^infinity exp(-x) dx/((log n + c_0 - log x)^2 + pi^2) + O(n^-2)     (smooth part).

The band's edges add terms of the same size that oscillate like exp(+-2 i a n).  Derived here; checked by the windowed
mean of the measured amplitudes.
"""

from __future__ import annotations

from fractions import Fraction

from derive.derivations.asymptotics_setting import band_of, clear_of
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import (
    MINUS_ONE,
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

N, X, A = letter("n"), letter("x"), letter("a")
TWO, INFINITY = number(2), constant("infinity")
C0, L = operator("c", 0), letter("L")


def derive_square(setting: Setting, terms: int) -> Derivation:
    """The smooth part of phi_n for a photon that starts where it is looked for."""
    band = band_of(setting)
    if terms > 1:
        raise NotCovered("on the square lattice the law is derived to its first power of 1/n, all logarithms in it")
    if setting.start is None or setting.start.place != setting.detectors[0].place or setting.start.place is None:
        raise NotCovered("on the square lattice the late-time law is derived for a start on the detector")
    if not band.below:
        raise NotCovered(f"the law on the square lattice is derived below aliasing: assume {text(band.a)} < pi")
    gt = times(band.size, TAU)
    c0 = call("log", times(number(16), gt)) + times(PI, gt)
    law = clear_of(times(TWO, PI, gt, power(N, MINUS_ONE), _hankel(c0)), setting)
    error = order(power(N, number(-2)))
    phrase = "as n -> infinity, error O(n^-2), smooth part"
    kind = Kind("limit", phrase, toward=(("n", INFINITY),), error=error, smooth=True)
    claim = Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), law, kind,
                  valid_for=f"{text(band.a)} < pi")
    notes = (
        ("The edges of the band add terms of the same size that oscillate; the law of ", operator("F", "n"),
         " and the ask from which the tail is the tail are therefore not stated.",),
    )
    return Derivation("asymptotics", (claim,), _steps(band.a, c0, law), notes, ("phys-rev-a-97-062105",))


def _hankel(c: Formula) -> Formula:
    """int_0^infinity exp(-x)/((log n + c - log x)^2 + pi^2) dx."""
    inside = plus(call("log", N), c, -call("log", X))
    below = power(inside, TWO) + power(PI, TWO)
    return Formula("integral", ("x", ZERO, INFINITY, times(call("exp", -X), power(below, MINUS_ONE))))


def _steps(a: Formula, c0: Formula, law: Formula) -> tuple[Step, ...]:
    u, phi = operator("u"), operator("φ")
    front = times(PI, A)
    wide = power(X, TWO) + times(number(4), power(A, TWO))
    transform = times(TWO, call("elliptic_K", times(number(4), power(A, TWO), power(wide, MINUS_ONE))),
                      power(times(PI, call("sqrt", wide)), MINUS_ONE))
    return (
        Step(
            ("The lattice is the product of two lines, and the start is the detector's own state:",),
            (Line(operator("u", "n"), power(call("bessel_J", ZERO, times(A, N)), TWO)), Line(A, a, ":="),
             Line(phi, plus(number(1), times(MINUS_ONE, power(u, MINUS_ONE))))),
        ),
        Step(
            ("At the middle of the band, ", X, " = log(1/z) → 0, the sum is its transform and half of the first term; "
             "images cancel in pairs:"),
            (Line(u, plus(transform, number(Fraction(1, 2)), order(X))),
             Line(u, plus(times(power(front, MINUS_ONE), plus(L, C0)), order(X))), Line(C0, c0)),
            where=("with ", L, " = log(1/", X, ").",),
        ),
        Step(
            ("so that ", phi, " is singular like an inverse logarithm, and Hankel's integral along its cut takes all "
             "powers of ", L, " at once:"),
            (Line(phi, plus(number(1), times(MINUS_ONE, front, power(plus(L, C0), MINUS_ONE)), order(X))),
             Line(operator("φ", "n"), plus(law, order(power(N, number(-2)))))),
            earns="asymptotics.amplitude",
        ),
    )
