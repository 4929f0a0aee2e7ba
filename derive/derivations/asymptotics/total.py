"""Topic `detection` on an infinite line: the probability that a start is ever detected, as an integral over the band.

    P = sum_n |phi_n|^2 = (1/2 pi) int |phi(exp(i theta))|^2 dtheta,     phi = v/u

(Parseval).  With theta = a cos q inside the band and theta = a cosh y outside, a = 2|h| tau < pi,

    |u|^2 = [(1 + s/2)^2 + (s Y_0)^2]/s^2,     s = a sin q      |u|^2 = [w^2/4 + (1 + w Y_0)^2]/w^2,     w = a sinh y
    |v|^2 = [cos^2(k q) + (s Y_k - sin(k q))^2]/s^2             |v|^2 = (exp(-k y) + w Y_k)^2/w^2

for a start k sites away (k may be a letter), Y_k(theta) = sum_m [g_k(2 pi m + theta) - (-1)^k g_k(2 pi m - theta)]
the images (`asymptotics_images.py`).  For the return |v|^2 = |u - 1|^2, which is |u|^2 outside the band.  Integrands
are smooth.  Far away (k -> infinity) the images of v and what lies outside the band vanish, and the phase exp(-i k q)
averages out; for small tau the images are O(tau).  Derived here; checked by adding up F_n.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.images import image_pair
from derive.derivations.asymptotics.setting import band_of, clear_of, places
from derive.derivations.asymptotics.total_return import derive_return, is_special_return
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
from derive.problem.setting import Lattice, Setting, Wish
from derive.record.said import Claim, Derivation, Kind, Line, Step

HALF, TWO = number(Fraction(1, 2)), number(2)
Q, Y, A, THETA = letter("q"), letter("y"), letter("a"), letter("theta")
INFINITY = constant("infinity")
SOURCES = ("phys-rev-e-95-032141", "phys-rev-lett-120-040502")
QUANTITY = Quantity("total detection probability")


@dataclass(frozen=True)
class Start:
    """The band, and how far away the start is: a number or an integer letter."""

    size: Formula
    a: Formula
    k: Formula

    @property
    def returns(self) -> bool:
        return self.k == ZERO


def derive_total(setting: Setting, wish: Wish) -> Derivation:
    """The total probability on the line, its first terms for small tau, and its limit from far away."""
    if is_special_return(setting):
        return derive_return(setting)
    if not isinstance(setting.space, Lattice) or setting.space.name != "line":
        raise NotCovered("on an infinite lattice the total probability of detection is derived on lines and half lines")
    band = band_of(setting)
    if not band.below:
        raise NotCovered(f"the total probability on the line is derived below aliasing: assume {text(band.a)} < pi")
    start = Start(band.size, band.a, _distance(setting))
    total = ONE - _band(start) if start.returns else _band(start) + _outside(start)
    total, far = clear_of(total, setting), clear_of(_far(start), setting)
    small, remainder = _small(start)
    below = f"{text(band.a)} < pi"
    claims = [
        Claim("detection.total", "detection", QUANTITY, total, valid_for=below),
        Claim("detection.small_tau", "detection", QUANTITY, small,
              Kind("order", f"up to O(tau^{remainder})", remainder), valid_for="small tau"),
    ]
    if start.k.head == "letter":
        name = start.k.args[0]
        kind = Kind("limit", f"as {name} -> infinity", toward=((name, INFINITY),))
        claims.append(Claim("detection.far", "detection", QUANTITY, far, kind, valid_for=below))
    return Derivation("detection", tuple(claims), _steps(start, claims), (), SOURCES)


def never_seen(setting: Setting) -> Formula:
    """1 - P on the line below aliasing."""
    band = band_of(setting)
    start = Start(band.size, band.a, _distance(setting))
    return clear_of(_band(start) if start.returns else plus(ONE, -_band(start), -_outside(start)), setting)


def _distance(setting: Setting) -> Formula:
    """Steps from the detector to the start."""
    if setting.start is not None and setting.start.distance is not None:
        far = setting.start.distance
        if far.head in ("number", "letter"):
            return far
        raise NotCovered("on the line a distance is a number or a single letter")
    d, x = places(setting)
    return number(abs(d - x))


def _images(start: Start, k: Formula, theta: Formula) -> Formula:
    """Y_k(theta)."""
    return Formula("sum", ("m", ONE, INFINITY, image_pair(start.a, k, theta)))


def _times_k(k: Formula, x: Formula) -> Formula:
    return x if k == ONE else times(k, x)


def _below(start: Start) -> tuple[Formula, Formula]:
    """(s^2 |u|^2, s) inside the band."""
    s = times(start.a, call("sin", Q))
    images = _images(start, ZERO, times(start.a, call("cos", Q)))
    return power(ONE + times(HALF, s), TWO) + power(times(s, images), TWO), s


def _band(start: Start) -> Formula:
    """What the band adds to P (for the return: takes away from 1)."""
    below, s = _below(start)
    if start.returns:
        inner = times(power(call("sin", Q), TWO), power(below, MINUS_ONE))
        return times(TWO, power(start.a, TWO), power(PI, MINUS_ONE), _half_turn(inner))
    angle = _times_k(start.k, Q)
    images = _images(start, start.k, times(start.a, call("cos", Q)))
    above = power(call("cos", angle), TWO) + power(times(s, images) - call("sin", angle), TWO)
    inner = times(call("sin", Q), above, power(below, MINUS_ONE))
    return times(start.a, power(PI, MINUS_ONE), _half_turn(inner))


def _half_turn(inner: Formula) -> Formula:
    """Over a quarter of the turn: both halves of the band add the same."""
    return Formula("integral", ("q", ZERO, times(HALF, PI), inner))


def _outside(start: Start) -> Formula:
    """What the rest of the circle adds; nothing for the return, where |phi| = 1 there."""
    w, theta = times(start.a, call("sinh", Y)), times(start.a, call("cosh", Y))
    above = power(call("exp", -_times_k(start.k, Y)) + times(w, _images(start, start.k, theta)), TWO)
    quarter = times(number(Fraction(1, 4)), power(w, TWO))
    below = quarter + power(ONE + times(w, _images(start, ZERO, theta)), TWO)
    turn = times(PI, power(start.a, MINUS_ONE))
    end = call("log", turn + call("sqrt", power(turn, TWO) - ONE))
    inner = times(call("sinh", Y), above, power(below, MINUS_ONE))
    return times(start.a, power(PI, MINUS_ONE), Formula("integral", ("y", ZERO, end, inner)))


def _far(start: Start) -> Formula:
    """(a/pi) int sin q/(s^2 |u|^2) dq."""
    inner = times(call("sin", Q), power(_below(start)[0], MINUS_ONE))
    return times(start.a, power(PI, MINUS_ONE), _half_turn(inner))


def _small(start: Start) -> tuple[Formula, int]:
    """First terms in tau, and the power left out."""
    gt, k = times(start.size, TAU), start.k
    if start.returns:  # 1 - (2 a^2/pi) int sin^2 (1 - a sin q + O(a^2)) dq
        third = times(number(Fraction(32, 3)), power(gt, number(3)), power(PI, MINUS_ONE))
        return plus(ONE, times(number(-2), power(gt, TWO)), third), 4
    if k.head == "number":  # (2 g tau/pi) k^2/(k^2 - 1/4): sin^2 + cos^2 inside, exp(-2 k y) sinh y outside
        square = k.args[0] ** 2
        return times(number(8 * square / (4 * square - 1)), gt, power(PI, MINUS_ONE)), 2
    share = times(power(k, TWO), power(times(number(4), power(k, TWO)) - ONE, MINUS_ONE))
    return times(number(8), gt, share, power(PI, MINUS_ONE)), 2


def _steps(start: Start, claims: list[Claim]) -> tuple[Step, ...]:
    total, small = claims[0].value, claims[1].value
    remainder = claims[1].kind.order or 0
    if not isinstance(total, Formula) or not isinstance(small, Formula):
        raise TypeError("probabilities are formulas")
    u, v, phi, p = letter("u"), letter("v"), operator("φ"), operator("P", "det")
    square = power(call("abs", times(v, power(u, MINUS_ONE))), TWO)
    turn = Formula("integral", ("theta", times(MINUS_ONE, PI), PI, square))
    s, w = letter("s"), letter("w")
    y0, yk, k = operator("Y", 0), operator("Y", "k"), start.k
    inside = plus(power(plus(ONE, times(HALF, s)), TWO), power(times(s, y0), TWO))
    at = ", the start being the detector's own state" if start.returns else ""
    band = [Line(power(call("abs", u), TWO), times(inside, power(s, number(-2))))]
    edge = [Line(A, start.a, ":="), Line(THETA, times(A, call("cos", Q))), Line(s, times(A, call("sin", Q)), ":=")]
    lines = [*edge, *band]
    if not start.returns:
        outer = plus(times(number(Fraction(1, 4)), power(w, TWO)), power(plus(ONE, times(w, y0)), TWO))
        lines += [Line(power(call("abs", v), TWO), times(plus(
            power(call("cos", times(k, Q)), TWO),
            power(plus(times(s, yk), times(MINUS_ONE, call("sin", times(k, Q)))), TWO)), power(s, number(-2)))),
            Line(THETA, times(A, call("cosh", Y))), Line(w, times(A, call("sinh", Y)), ":="),
            Line(power(call("abs", u), TWO), times(outer, power(w, number(-2)))),
            Line(power(call("abs", v), TWO), times(
                power(plus(call("exp", times(MINUS_ONE, k, Y)), times(w, yk)), TWO), power(w, number(-2))))]
    found = Formula("sum", ("m", ONE, INFINITY, image_pair(A, start.k, THETA)))
    lines.append(Line(y0 if start.returns else yk, found, ":="))
    limit = tuple(
        Step(
            ("From far away the phase of the arriving wave averages out, and nothing comes from outside the band:",),
            (Line(p, c.value if isinstance(c.value, Formula) else None, "~"),), earns=c.id,
        )
        for c in claims[2:]
    )
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
        *limit,
    )
