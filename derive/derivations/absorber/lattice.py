"""Topic `absorber` on the line: the plain absorber's own laws, in closed form, beside those of the measured detector.

A potential -i Gamma, Gamma = 2/tau, on one site of an infinite line, a start k sites away, a = 2|h|, w = -i h/|h|,
R = sqrt(s^2 + a^2).  The amplitude on the absorber has the Laplace transform

    f(s) = w^k ((R - s)/a)^k/(R + Gamma)

(for the return 1/(sqrt(s^2 + 4 g^2) + Gamma)).  With 1/(R + Gamma) = 1/R - Gamma int exp(-(Gamma + R) u) du/R and
((R - s)/a)^k exp(-u R)/R <-> ((t - u)/(t + u))^(k/2) J_k(a sqrt(t^2 - u^2)) for t > u (tables of transforms; checked),
u = t cos q:

    f(t) = w^k [ J_k(a t) - Gamma t int_0^(pi/2) exp(-Gamma t cos q) tan(q/2)^k J_k(a t sin q) sin q dq ]

The square roots of f(s) at s = +-i a give its tail, psi = a t + pi/4 - k pi/2,

    f(t) ~ w^k sqrt(2 a/pi) t^(-3/2) [cos(psi)/Gamma^2 + k sin(psi)/(a Gamma)],

and Parseval's theorem, with s = -i a sin q' inside the band and outside it, the absorbed fraction

    2 Gamma int |f|^2 dt = (2 g tau/pi) [ int_0^(pi/2) sin q/(1 + g tau sin q)^2 dq
                                          + int_0^infinity exp(-2 k y) sinh y/(1 + (g tau sinh y)^2) dy ],   g = |h|.

For the return the measured tail F_n ~ (4 g tau/pi) cos^2(a t + pi/4)/n^3 is 4 times 2 Gamma tau |f(n tau)|^2, at every
interval below aliasing.  Derived here; checked by evolving the line itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.images import i_power
from derive.derivations.asymptotics.setting import Band, band_of, clear_of, places
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
from derive.problem.setting import Lattice, Setting, Wish
from derive.record.said import EXACTLY, Claim, Derivation, Kind, Line, Step

T, S, Q, Y, U, GAMMA = (letter(name) for name in ("t", "s", "q", "y", "u", "Gamma"))
TWO, HALF, INFINITY = number(2), number(Fraction(1, 2)), constant("infinity")
STRENGTH = times(TWO, power(TAU, MINUS_ONE))
ERROR = order(power(T, number(Fraction(-5, 2))))
TAIL = Kind("limit", "as t -> infinity, error O(t^(-5/2))", toward=(("t", INFINITY),), error=ERROR)
SOURCES = ("phys-rev-a-102-012218", "phys-rev-e-95-032141")


@dataclass(frozen=True)
class Trap:
    """|h|, sites between start and absorber, and w^k."""

    g: Formula
    k: int
    phase: Formula

    @property
    def a(self) -> Formula:
        return times(TWO, self.g)


def derive_absorber_lattice(setting: Setting, wish: Wish) -> Derivation:
    """Amplitude, tail and absorbed fraction of the plain absorber on the line; the return's factor."""
    if not isinstance(setting.space, Lattice) or setting.space.name != "line":
        raise NotCovered("of infinite graphs the line has the absorber's own laws")
    if "t" in setting.domains():
        raise NotCovered("t is the time here: give the declared letter t another name")
    band = band_of(setting)
    d, x = places(setting)
    trap = Trap(band.size, abs(x - d), _phase(band, x - d))
    claims = [
        _claim("amplitude", "absorber amplitude", clear_of(_amplitude(trap), setting), EXACTLY),
        _claim("tail", "absorber amplitude", _tail(trap), TAIL),
        _claim("fraction", "absorbed fraction", clear_of(_fraction(trap), setting), EXACTLY),
    ]
    if not trap.k and band.below:
        claims.append(_claim("return_factor", "return factor", number(4), EXACTLY, f"late asks, {text(band.a)} < pi"))
    return Derivation("absorber", tuple(claims), _steps(trap, claims), (), SOURCES)


def _claim(name: str, about: str, value: Formula, kind: Kind, valid: str = "") -> Claim:
    return Claim(f"absorber.{name}", "absorber", Quantity(about), value, kind, valid_for=valid)


def _phase(band: Band, way: int) -> Formula:
    """w^k; towards lower numbers the hopping is conjugate."""
    k = abs(way)
    if band.unit in (ONE, MINUS_ONE):
        return i_power(k if band.unit == MINUS_ONE else -k)
    unit = band.unit if way > 0 else call("conj", band.unit)
    return power(times(MINUS_ONE, I_UNIT, unit), number(k)) if k else ONE


def _amplitude(trap: Trap) -> Formula:
    k, at = number(trap.k), times(trap.a, T)
    decay = call("exp", times(MINUS_ONE, STRENGTH, T, call("cos", Q)))
    half = call("tan", times(HALF, Q))
    share = [] if not trap.k else [half if trap.k == 1 else power(half, k)]
    inner = times(decay, *share, call("bessel_J", k, times(at, call("sin", Q))), call("sin", Q))
    held = times(STRENGTH, T, Formula("integral", ("q", ZERO, times(HALF, PI), inner)))
    return times(trap.phase, plus(call("bessel_J", k, at), -held))


def _tail(trap: Trap) -> Formula:
    """w^k (tau/2) sqrt(g/pi) t^(-3/2) [tau cos(psi) + (k/g) sin(psi)]."""
    psi = plus(times(trap.a, T), times(number(Fraction(1, 4) - Fraction(trap.k, 2)), PI))
    front = times(HALF, call("sqrt", times(trap.g, power(PI, MINUS_ONE))))
    wave = times(power(TAU, TWO), call("cos", psi))
    if trap.k:
        side = times(number(trap.k), power(trap.g, MINUS_ONE), call("sin", psi))
        wave = times(TAU, plus(times(TAU, call("cos", psi)), side))
    return times(trap.phase, front, wave, power(T, number(Fraction(-3, 2))))


def _fraction(trap: Trap) -> Formula:
    gt = times(trap.g, TAU)
    inside = times(call("sin", Q), power(ONE + times(gt, call("sin", Q)), number(-2)))
    far = [] if not trap.k else [call("exp", times(number(-2 * trap.k), Y))]
    outside = times(*far, call("sinh", Y), power(ONE + power(times(gt, call("sinh", Y)), TWO), MINUS_ONE))
    both = plus(Formula("integral", ("q", ZERO, times(HALF, PI), inside)),
                Formula("integral", ("y", ZERO, INFINITY, outside)))
    return times(TWO, gt, power(PI, MINUS_ONE), both)


def _steps(trap: Trap, claims: list[Claim]) -> tuple[Step, ...]:
    k, root = number(trap.k), letter("R")
    f_s, f_t = call("f", S), call("f", T)
    turn = times(power(times(plus(root, -S), power(trap.a, MINUS_ONE)), k) if trap.k > 1 else
                 times(plus(root, -S), power(trap.a, MINUS_ONE)) if trap.k else ONE)
    amplitude, tail, fraction = (c.value for c in claims[:3] if isinstance(c.value, Formula))
    parts = plus(power(root, MINUS_ONE), -times(GAMMA, power(root, MINUS_ONE), Formula("integral", (
        "u", ZERO, INFINITY, call("exp", times(MINUS_ONE, plus(GAMMA, root), U))))))
    taken = Formula("integral", ("t", ZERO, INFINITY, power(call("abs", f_t), TWO)))
    steps = [
        Step(
            ("In place of asking, the plain absorber puts a negative imaginary potential on the detector's site; the "
             "amplitude there has the Laplace transform",),
            (Line(GAMMA, STRENGTH), Line(f_s, times(trap.phase, turn, power(plus(root, GAMMA), MINUS_ONE))),
             Line(root, call("sqrt", plus(power(S, TWO), power(trap.a, TWO))), ":=")),
        ),
        Step(
            ("and, taken apart so that each piece has a known original,",),
            (Line(power(plus(root, GAMMA), MINUS_ONE), parts), Line(f_t, amplitude)), earns="absorber.amplitude",
        ),
        Step(
            ("Late, the square roots at both edges of the band count alone:",),
            (Line(f_t, plus(tail, ERROR)),), earns="absorber.tail",
        ),
        Step(
            ("What is absorbed in the end is a mean over all frequencies, inside the band and outside it:",),
            (Line(operator("A"), times(TWO, GAMMA, taken)), Line(operator("A"), fraction)), earns="absorber.fraction",
        ),
    ]
    if len(claims) > 3:
        steps.append(_factor(trap))
    return tuple(steps)


def _factor(trap: Trap) -> Step:
    n = letter("n")
    gt = times(trap.g, TAU)
    wave = power(call("cos", plus(times(TWO, gt, n), times(number(Fraction(1, 4)), PI))), TWO)
    per_ask = times(TWO, GAMMA, TAU, power(call("abs", call("f", times(n, TAU))), TWO))
    law = times(gt, wave, power(PI, MINUS_ONE), power(n, number(-3)))
    return Step(
        ("Interval by interval the absorber takes a quarter of what the detector sees late: a start on the detector is "
         "left behind by the first ask with another amplitude than the absorber leaves it with:",),
        (Line(per_ask, law, "~"), Line(operator("F", "n"), times(number(4), law), "~")), earns="absorber.return_factor",
    )
