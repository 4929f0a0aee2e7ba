"""What has not clicked after many asks, on the line: what never will, and how the rest comes in.

    S_n = S_inf + sum_(k>n) F_k,     S_inf = 1 - P_det

With the edge's law (`asymptotics_band.py`), phi_n = Re[C_1 exp(-i a n) n^(-3/2) (1 + c/n + ...)], a = 2|h| tau < pi,

    |C_1|^2 = (2 a/pi) (p^2 + q^2),     C_1^2 = -i (2 a/pi) (p + i q)^2,     Re c = -3 a Im(h_1/h_0)

and sum_(k>n) k^-3 = 1/(2 n^2) - 1/(2 n^3) + O(n^-4), sum_(k>n) exp(-2 i a k) k^-3 = exp(-i a (2n+1))/(2 i n^3 sin a)
+ O(n^-4), the smooth part of F_k leaves n^-2, and its oscillation, a power later, n^-3:

    S_n = S_inf + (a/(2 pi)) (p^2 + q^2)/n^2 - (a/(2 pi n^3)) { (p^2 + q^2) [1 + 4 a Im(h_1/h_0)]
          + [(p^2 - q^2) cos(a (2n+1)) + 2 p q sin(a (2n+1))]/sin a } + O(n^-4).

Derived here; checked by adding up the measured F_n.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from fractions import Fraction

from derive.derivations.asymptotics.band import EdgeLaw, edge_law
from derive.derivations.asymptotics.images import edge_rest
from derive.derivations.asymptotics.setting import Watch, clear_of
from derive.derivations.asymptotics.total import never_seen
from derive.exact.field import Element
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    ZERO,
    Formula,
    call,
    constant,
    free_letters,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    replace,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import Claim, Kind, Line, Step

N, HALF, INFINITY = letter("n"), number(Fraction(1, 2)), constant("infinity")
Neat = Callable[[Formula, Iterable[str]], Formula]
"""A formula multiplied out, the letters named being real."""


def survival_law(setting: Setting, seen: Watch, terms: int, neat: Neat) -> tuple[tuple[Claim, ...], tuple[Step, ...]]:
    """S_n to one power of 1/n beyond S_inf, to two for more `terms`; nothing where S_inf has no closed form here."""
    if seen.name != "line" or seen.meets is not None or not seen.below:
        return (), ()
    powers = 2 if terms > 1 else 1
    left, tail = never_seen(setting), clear_of(_tail(seen, powers, neat), setting)
    shown = f"n^-{powers + 2}"
    error = order(power(N, number(-powers - 2)))
    kind = Kind("limit", f"as n -> infinity, error O({shown})", toward=(("n", INFINITY),), error=error)
    claim = Claim("asymptotics.survival", "asymptotics", Quantity("survival probability"), plus(left, tail), kind,
                  valid_for=f"{text(seen.a)} < pi")
    return (claim,), _steps(left, tail, error)


def _tail(seen: Watch, powers: int, neat: Neat) -> Formula:
    """sum_(k>n) F_k to `powers` powers, n^-2 and n^-3."""
    law = edge_law(seen.pair, 2, False)
    front = times(HALF, seen.a, power(PI, MINUS_ONE))
    p, q = law.p[0], law.q[0]
    size = _shown(law, p * p + q * q, seen, neat)
    found = [times(front, size, power(N, number(-2)))]
    if powers > 1:
        bend = _imaginary(law, law.h[1] / law.h[0])
        smooth = times(size, plus(ONE, times(number(4), seen.a, _shown(law, bend, seen, neat))))
        wave = times(_wave(law, seen, neat), power(call("sin", seen.a), MINUS_ONE))
        found.append(times(MINUS_ONE, front, plus(smooth, wave), power(N, number(-3))))
    return plus(*found)


def _wave(law: EdgeLaw, seen: Watch, neat: Neat) -> Formula:
    """(p^2 - q^2) cos(a (2n+1)) + 2 p q sin(a (2n+1))."""
    p, q = law.p[0], law.q[0]
    angle = times(seen.a, plus(times(number(2), N), ONE))
    parts = ((p * p - q * q, "cos"), ((p * q).scaled(Fraction(2)), "sin"))
    shown = [(_shown(law, c, seen, neat), name) for c, name in parts]
    return plus(*(times(c, call(name, angle)) for c, name in shown if c != ZERO))


def _imaginary(law: EdgeLaw, x: Element) -> Element:
    return ((x - law.field.conjugate(x)) * law.field.element(-I_UNIT)).scaled(Fraction(1, 2))


def _shown(law: EdgeLaw, x: Element, seen: Watch, neat: Neat) -> Formula:
    """A real element in the user's letters, the rests as sums over images."""
    f = law.field.formula(x)
    rests = {n: edge_rest(seen.a, r.wave, r.j) for n, r in law.rests.items() if n in free_letters(f)}
    return replace(neat(replace(f, {"a": seen.a}), rests), rests)


def _steps(left: Formula, tail: Formula, error: Formula) -> tuple[Step, ...]:
    survived, never, clicks = operator("S", "n"), operator("S", "∞"), operator("F", "k")
    rest = Formula("sum", ("k", plus(N, ONE), INFINITY, clicks))
    return (
        Step(
            ("What has not clicked after ", N, " asks either never will or still comes; what never will is 1 less the "
             "total probability, an integral over the band:"),
            (Line(survived, plus(never, rest)), Line(never, left)),
        ),
        Step(
            ("Added up, the smooth part of ", clicks, " leaves one power of ", N, " more, and its oscillation, summed "
             "like a geometric series, none:"),
            (Line(survived, plus(never, tail, error)),), earns="asymptotics.survival",
        ),
    )
