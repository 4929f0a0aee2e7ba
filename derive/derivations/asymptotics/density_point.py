"""A singular point of a local density of states, and the value of u there where the density vanishes.

    u_k = 1/2 - (i/2) int rho(E) cot((E - E_k) tau/2) dE

for E_k the end of a band and all bands within 2 pi/tau.  A band from a to b, W = b - a, of powers p at the end E_k (or
at a) and r at the other, is taken along x: the distance from that end is W x^m/(1 + x^m), so that

    rho dE = W^(p+r+1) m x^(m(p+1)-1) (1 + x^m)^(-p-r-2) factor dx,    0 < x < infinity,

and nothing cancels near either end.  Any m will do; with m = STEEP or more the integrand falls fast.  Derived here.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from math import ceil, isqrt, prod

from derive.derivations.asymptotics.setting import rational_part
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    ONE,
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    free_letters,
    inverse,
    is_number,
    letter,
    number,
    plus,
    power,
    replace,
    times,
    walk,
)
from derive.problem.setting import Band, Domain, Lattice, Setting

X, ENERGY = letter("x"), "E"
INFINITY, HALF = constant("infinity"), number(Fraction(1, 2))
REAL = Domain("real", "real")
STEEP = 4


@dataclass(frozen=True)
class Side:
    """rho ~ amplitude |E - energy|^power, above or below the energy."""

    energy: Formula
    power: Fraction
    amplitude: Formula
    above: bool


def neat(f: Formula, setting: Setting) -> Formula:
    """f multiplied out, where an exact field holds it."""
    try:
        field = Field.of([f], setting.domains())
        return field.formula(field.element(f))
    except (NotCovered, ZeroDivisionError):
        return f


def as_root(size: Formula, setting: Setting) -> Formula:
    """A positive size as the root of its square, where that is shorter: sqrt(g*tau/pi)."""
    square = squared(size, setting)
    if any(_is_root(f) for f in walk(square)):
        return size
    front = Fraction(square.args[0].args[0]) if square.head == "times" and is_number(square.args[0]) else Fraction(1)
    up, down = isqrt(abs(front.numerator)), isqrt(front.denominator)
    inside = neat(times(square, number(1 / Fraction(up * up, down * down))), setting)
    root = times(number(Fraction(up, down)), call("sqrt", inside))
    return min(root, size, key=lambda f: len(text(f)))


def squared(f: Formula, setting: Setting) -> Formula:
    """f^2, roots taken off factor by factor."""
    return neat(times(*(_without_root(x) for x in (f.args if f.head == "times" else (f,)))), setting)


def _without_root(f: Formula) -> Formula:
    """f^2."""
    if is_number(f):
        return number(Fraction(f.args[0]) ** 2)
    if f.head == "power" and is_number(f.args[1]):
        inner = f.args[0]
        if inner.head == "call" and inner.args[0] == "sqrt":
            return power(inner.args[1], f.args[1])
        return power(inner, times(number(2), f.args[1]))
    return f.args[1] if f.head == "call" and f.args[0] == "sqrt" else power(f, number(2))


def _is_root(f: Formula) -> bool:
    by_power = f.head == "power" and is_number(f.args[1]) and f.args[1].args[0].denominator > 1
    return by_power or (f.head == "call" and f.args[0] != "Gamma")


def gamma(x: Fraction) -> Formula:
    """Gamma(x), x > 0; at halves in sqrt(pi)."""
    if x.denominator != 2:
        return call("Gamma", number(x))
    k = int(x - Fraction(1, 2))
    return times(number(Fraction(prod(range(1, 2 * k, 2)), 2**k)), call("sqrt", PI))


def total(sides: Iterable[Side], e: Fraction, setting: Setting) -> tuple[Formula, Fraction, bool]:
    """sum of A exp(-+ i pi e/2), - above, as size exp(i pi angle), and whether the size is real."""
    found = list(sides)
    above, below = (plus(*(s.amplitude for s in found if s.above == up)) for up in (True, False))
    if below == ZERO:
        return above, -e / 2, True
    if above == ZERO:
        return below, e / 2, True
    if _vanishes(setting, plus(above, -below)):
        return times(number(2), above, call("cos", times(number(e / 2), PI))), Fraction(0), True
    return plus(times(above, turned(-e / 2)), times(below, turned(e / 2))), Fraction(0), False


def turned(angle: Fraction) -> Formula:
    """exp(i pi angle)."""
    return ONE if angle == 0 else call("exp", times(I_UNIT, number(angle), PI))


def constant_at(setting: Setting, energy: Formula) -> Formula:
    """u_k; `NotCovered` where the bands are not surely narrower than a turn."""
    bands = setting.space.bands if isinstance(setting.space, Lattice) else ()
    _check_turn(setting, bands)
    over = (times(number(Fraction(-1, 2)), I_UNIT, _band(setting, b, energy)) for b in bands)
    return plus(HALF, *over)


def _check_turn(setting: Setting, bands: tuple[Band, ...]) -> None:
    width = plus(bands[-1].high, -bands[0].low)
    if not _below_a_turn(setting, width):
        said = text(neat(width, setting))
        raise NotCovered(f"the law's constant is derived below aliasing: assume ({said})*tau < 2*pi")


def _below_a_turn(setting: Setting, width: Formula) -> bool:
    """width tau < 2 pi, by number or because a relation says so."""
    exact = times(width, setting.interval.length)
    turns = rational_part(times(exact, inverse(times(number(2), PI))), setting)
    if turns is not None:
        return turns < 1
    room = plus(times(number(2), PI), -exact)
    for r in setting.assume:
        if r.op in ("<", ">"):
            gap = r.right - r.left if r.op == "<" else r.left - r.right
            share = rational_part(gap * inverse(room), setting)
            if share is not None and share > 0:
                return True
    return False


def _band(setting: Setting, b: Band, energy: Formula) -> Formula:
    """int rho(E) cot((E - energy) tau/2) dE over a band."""
    p, r = (Fraction(f.args[0]) for f in (b.low_power, b.high_power))
    if _same(setting, b.high, energy):
        return -_along(setting, b, _Way(b.high, -1, r, p, ZERO))
    away = ZERO if _same(setting, b.low, energy) else neat(plus(b.low, -energy), setting)
    return _along(setting, b, _Way(b.low, 1, p, r, away))


@dataclass(frozen=True)
class _Way:
    """From an end of a band to the other: upwards (sign 1) or downwards, the powers at both, how far from E_k it is."""

    end: Formula
    sign: int
    own: Fraction
    other: Fraction
    away: Formula


def _along(setting: Setting, b: Band, way: _Way) -> Formula:
    """int rho cot((away + distance) tau/2) along x."""
    m = max(STEEP, ceil(1 / way.own)) if way.own > 0 else STEEP
    width = neat(plus(b.high, -b.low), setting)
    raised = power(X, number(m))
    far = plus(ONE, raised)
    distance = times(width, raised, inverse(far))
    factor = replace(b.factor, {ENERGY: plus(way.end, times(number(way.sign), distance))})
    shared, own = (ONE, factor) if ENERGY in free_letters(b.factor) else (factor, ONE)
    kernel = call("cot", times(HALF, TAU, plus(way.away, distance) if way.away != ZERO else distance))
    steep = times(power(X, number(m * (way.own + 1) - 1)), power(far, number(-way.own - way.other - 2)))
    front = neat(times(number(m), power(width, number(way.own + way.other + 1)), shared), setting)
    return times(front, Formula("integral", ("x", ZERO, INFINITY, times(steep, own, kernel))))


def _same(setting: Setting, a: Formula, b: Formula) -> bool:
    return a == b or _vanishes(setting, plus(a, -b))


def _vanishes(setting: Setting, f: Formula) -> bool:
    return vanishes(f, setting.domains()) is True


def mirrored(setting: Setting, a: Formula, b: Formula) -> bool:
    """Whether the density surely is its own mirror image about the middle of two energies."""
    bands = setting.space.bands if isinstance(setting.space, Lattice) else ()
    pairs = zip(bands, reversed(bands), strict=True)
    return bool(bands) and all(_is_image(setting, x, y, plus(a, b)) for x, y in pairs)


def _is_image(setting: Setting, x: Band, y: Band, double: Formula) -> bool:
    """y is x under E -> double - E."""
    domains = {**setting.domains(), ENERGY: REAL}
    turned = replace(x.factor, {ENERGY: plus(double, -letter(ENERGY))})
    gaps = (plus(y.low, x.high, -double), plus(y.high, x.low, -double), plus(turned, -y.factor))
    same = (x.low_power, x.high_power) == (y.high_power, y.low_power)
    return same and all(f == ZERO or vanishes(f, domains) is True for f in gaps)
