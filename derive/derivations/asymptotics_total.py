"""Topic `detection` on an infinite line: the probability that a start is ever detected, as an integral over the band.

    P = sum_n |phi_n|^2 = (1/2 pi) int |phi(exp(i theta))|^2 dtheta,     phi = v/u

(Parseval).  With theta = a cos q inside the band and theta = a cosh y outside, a = 2|h| tau < pi,

    |u|^2 = [(1 + s/2)^2 + (s Y_0)^2]/s^2,     s = a sin q      |u|^2 = [w^2/4 + (1 + w Y_0)^2]/w^2,     w = a sinh y
    |v|^2 = [cos^2(k q) + (s Y_k - sin(k q))^2]/s^2             |v|^2 = (exp(-k y) + w Y_k)^2/w^2

for a start k sites away, Y_k(theta) = sum_m [g_k(2 pi m + theta) - (-1)^k g_k(2 pi m - theta)] the images
(`asymptotics_images.py`).  For the return |v|^2 = |u - 1|^2, which is |u|^2 outside the band.  Integrands are smooth.
Small tau: the images are O(tau).  Derived here; checked by adding up F_n.
"""

from __future__ import annotations

from fractions import Fraction

from derive.derivations.asymptotics_images import image_pair
from derive.derivations.asymptotics_setting import Watch, clear_of, watch
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import (
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
from derive.problem.setting import Setting, Wish
from derive.record.said import Claim, Derivation, Kind, Line, Step

HALF, TWO = number(Fraction(1, 2)), number(2)
Q, Y, THETA = letter("q"), letter("y"), operator("θ")
SOURCES = ("phys-rev-e-95-032141", "phys-rev-lett-120-040502")
QUANTITY = Quantity("total detection probability")


def derive_total(setting: Setting, wish: Wish) -> Derivation:
    """The total probability on the line, and its first terms for small tau."""
    seen = watch(setting)
    if seen.name != "line":
        raise NotCovered("on an infinite lattice the total probability of detection is derived on the line")
    if not seen.below:
        raise NotCovered(f"the total probability on the line is derived below aliasing: assume {text(seen.a)} < pi")
    band, outside = _band(seen), _outside(seen)
    total = plus(band, outside) if outside is not None else plus(ONE, -band)
    total = clear_of(total, setting)
    small, remainder = _small(seen)
    claims = (
        Claim("detection.total", "detection", QUANTITY, total, valid_for=f"{text(seen.a)} < pi"),
        Claim("detection.small_tau", "detection", QUANTITY, small,
              Kind("order", f"up to O(tau^{remainder})", remainder), valid_for="small tau"),
    )
    return Derivation("detection", claims, _steps(seen, total, small, remainder), (), SOURCES)


def _images(seen: Watch, k: int, theta: Formula) -> Formula:
    """Y_k(theta)."""
    return Formula("sum", ("m", ONE, constant("infinity"), image_pair(seen.a, k, theta)))


def _band(seen: Watch) -> Formula:
    """What the band adds to P (for the return: takes away from 1)."""
    k, s = seen.distance, times(seen.a, call("sin", Q))
    theta = times(seen.a, call("cos", Q))
    below = power(ONE + times(HALF, s), TWO) + power(times(s, _images(seen, 0, theta)), TWO)
    if k == 0:
        inner = times(power(call("sin", Q), TWO), power(below, MINUS_ONE))
        return times(TWO, power(seen.a, TWO), power(PI, MINUS_ONE), _half_turn(inner))
    angle = times(number(k), Q) if k > 1 else Q
    above = power(call("cos", angle), TWO) + power(
        times(s, _images(seen, k, theta)) - call("sin", angle), TWO)
    inner = times(call("sin", Q), above, power(below, MINUS_ONE))
    return times(seen.a, power(PI, MINUS_ONE), _half_turn(inner))


def _half_turn(inner: Formula) -> Formula:
    """Over a quarter of the turn: both halves of the band add the same."""
    return Formula("integral", ("q", ZERO, times(HALF, PI), inner))


def _outside(seen: Watch) -> Formula | None:
    """What the rest of the circle adds; None for the return, where |phi| = 1 there."""
    k = seen.distance
    if k == 0:
        return None
    w, theta = times(seen.a, call("sinh", Y)), times(seen.a, call("cosh", Y))
    above = power(call("exp", times(number(-k), Y)) + times(w, _images(seen, k, theta)), TWO)
    below = times(number(Fraction(1, 4)), power(w, TWO)) + power(ONE + times(w, _images(seen, 0, theta)), TWO)
    turn = times(PI, power(seen.a, MINUS_ONE))
    end = call("log", turn + call("sqrt", power(turn, TWO) - ONE))
    inner = times(call("sinh", Y), above, power(below, MINUS_ONE))
    return times(seen.a, power(PI, MINUS_ONE), Formula("integral", ("y", ZERO, end, inner)))


def _small(seen: Watch) -> tuple[Formula, int]:
    """First terms in tau, and the power left out."""
    gt = times(seen.size, TAU)
    k = seen.distance
    if k == 0:  # 1 - (2 a^2/pi) int sin^2 (1 - a sin q + O(a^2)) dq
        third = times(number(Fraction(32, 3)), power(gt, number(3)), power(PI, MINUS_ONE))
        return plus(ONE, times(number(-2), power(gt, TWO)), third), 4
    share = Fraction(8 * k * k, 4 * k * k - 1)  # 2 k^2/(k^2 - 1/4), by int J_k(x)^2 dx/x^0 in time (DLMF 10.22.57)
    return times(number(share), gt, power(PI, MINUS_ONE)), 2


def _steps(seen: Watch, total: Formula, small: Formula, remainder: int) -> tuple[Step, ...]:
    u, v, phi, p = operator("u"), operator("v"), operator("φ"), operator("P")
    turn = Formula("integral", ("θ", times(MINUS_ONE, PI), PI, power(call("abs", times(v, power(u, MINUS_ONE))), TWO)))
    s, w = letter("s"), letter("w")
    y0, yk, k = operator("Y", 0), operator("Y", "k"), number(seen.distance)
    inside = plus(power(plus(ONE, times(HALF, s)), TWO), power(times(s, y0), TWO))
    at = "" if seen.distance else ", the start being the detector's own state"
    band = [Line(power(call("abs", u), TWO), times(inside, power(s, number(-2))))]
    lines = [Line(THETA, times(seen.a, call("cos", Q))), Line(s, times(seen.a, call("sin", Q)), ":="), *band]
    if seen.distance:
        outer = plus(times(number(Fraction(1, 4)), power(w, TWO)), power(plus(ONE, times(w, y0)), TWO))
        lines += [Line(power(call("abs", v), TWO), times(plus(
            power(call("cos", times(k, Q)), TWO),
            power(plus(times(s, yk), times(MINUS_ONE, call("sin", times(k, Q)))), TWO)), power(s, number(-2)))),
            Line(THETA, times(seen.a, call("cosh", Y))), Line(w, times(seen.a, call("sinh", Y)), ":="),
            Line(power(call("abs", u), TWO), times(outer, power(w, number(-2)))),
            Line(power(call("abs", v), TWO), times(
                power(plus(call("exp", times(MINUS_ONE, k, Y)), times(w, yk)), TWO), power(w, number(-2))))]
    found = Formula("sum", ("m", ONE, constant("infinity"), image_pair(letter("a"), seen.distance, THETA)))
    lines.append(Line(yk if seen.distance else y0, found, ":="))
    return (
        Step(
            ("The amplitudes are the coefficients of ", phi, " = ", times(v, power(u, MINUS_ONE)),
             f", so their squares add up to the mean over the unit circle{at}:"),
            (Line(p, times(HALF, power(PI, MINUS_ONE), turn)),),
        ),
        Step(
            ("Poisson's summation gives both moduli on the circle, inside the band and outside it, ",
             operator("Y"), " being what the images add:"),
            tuple(lines),
        ),
        Step(("Put together, both halves of the circle being equal:",), (Line(p, total),), earns="detection.total"),
        Step(
            ("For small intervals the images are of order ", TAU, " and the integrals can be expanded:"),
            (Line(p, plus(small, order(power(TAU, number(remainder))))),), earns="detection.small_tau",
        ),
    )
