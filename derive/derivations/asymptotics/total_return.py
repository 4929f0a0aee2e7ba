"""Topic `detection` on infinite lattices: the probability of a return beside an impurity, or to the end of a half line.

    P = 1 - (1/2 pi) int (2 Re u - 1)/|u|^2 dtheta      over the band, since |phi| = |1 - 1/u| = 1 off it

With theta = a cos q, s = a sin q, a = 2|h| tau < pi, e = eps tau and the images Y (`asymptotics_impurity_images.py`),

    line, impurity watched    u = 1/(s + i c) + 1/2 + i Y,     c = e
    half line, its end        u = 2/(s + i c) + 1/2 + i Y,     c = 2 e - theta

and with b = 1 or 2 the numerator of u,

    P = 1 - (b a^2/pi) int_0^pi sin(q)^2 dq/[(b + s/2 - c Y)^2 + (c/2 + s Y)^2]
      = 1 - 2 (g tau)^2/b + 32 (g tau)^3/(3 pi b^2) + O(tau^4):

to this order an impurity is not seen.  Valid below aliasing, as long as the bound state does not alias into the band
(there Y has a pole, and the integrand a zero).  Derived here; checked by adding up F_n.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.impurity_images import images
from derive.derivations.asymptotics.scattering import Place
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
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Lattice, Relation, Setting
from derive.record.said import Claim, Derivation, Kind, Line, Step

HALF, TWO, Q, A, E, S, C = number(Fraction(1, 2)), number(2), *map(letter, "qaesc")
THETA, U, Y = operator("θ"), operator("u"), operator("Y")
QUANTITY = Quantity("total detection probability")
REMAINDER = 4
SOURCES = ("phys-rev-e-95-032141",)


@dataclass(frozen=True)
class Return:
    """The band, the watched site and what stands on it: u = b/(s + i c) + 1/2 + i Y."""

    band: Band
    ends: bool
    energy: Formula

    @property
    def b(self) -> Formula:
        return TWO if self.ends else ONE

    @property
    def e(self) -> Formula:
        return ZERO if self.energy == ZERO else times(self.energy, TAU)


def is_special_return(setting: Setting) -> bool:
    """Whether the lattice is one of those of this file: a half line, or a line with an impurity."""
    space = setting.space
    return isinstance(space, Lattice) and (space.name == "half line" or space.name == "line" and bool(space.energies))


def derive_return(setting: Setting) -> Derivation:
    """The probability of a return, and its first terms for small tau."""
    found = _return_of(setting)
    below, assume = _validity(found)
    total = clear_of(_total(found), setting)
    claims = (
        Claim("detection.total", "detection", QUANTITY, total, assume=assume, valid_for=below),
        Claim("detection.small_tau", "detection", QUANTITY, _small(found),
              Kind("order", f"up to O(tau^{REMAINDER})", REMAINDER), valid_for="small tau"),
    )
    return Derivation("detection", claims, _steps(found, total), (), SOURCES)


def _return_of(setting: Setting) -> Return:
    band, space = band_of(setting, impurities=1), setting.space
    if not isinstance(space, Lattice):
        raise NotCovered("this is a lattice's return")
    if not band.below:
        raise NotCovered(f"the total probability is derived below aliasing: assume {text(band.a)} < pi")
    (d, x), ends = places(setting), space.name == "half line"
    sites = {d, x, *((0,) if ends else ())}
    site, energy = space.energies[0] if space.energies else (str(d), ZERO)
    if sites != {d} or site != str(d):
        where = "to the end of a half line, an impurity on it or not" if ends else "to the impurity itself"
        raise NotCovered(f"on a {space.name} {'' if ends else 'with an impurity '}the total probability is derived for "
                         f"a return {where}")
    return Return(band, ends, energy)


def _validity(found: Return) -> tuple[str, tuple[Relation, ...]]:
    """The bound state's phase and half the band's width stay below one turn."""
    a, e = found.band.a, found.e
    below = f"{text(a)} < pi"
    if e == ZERO:
        return below, ()
    if found.ends:  # |e| + a^2/(4|e|) < |e| + a/2 where a state is bound
        reach = plus(call("abs", e), times(number(Fraction(3, 2)), a))
    else:
        reach = plus(call("sqrt", plus(power(a, TWO), power(e, TWO))), a)
    relation = Relation(reach, "<", times(TWO, PI))
    return f"{below}, {text(reach)} < 2*pi", (relation,)


def _c(found: Return, e: Formula, theta: Formula) -> Formula:
    if not found.ends:
        return e
    return times(MINUS_ONE, theta) if e == ZERO else plus(times(TWO, e), times(MINUS_ONE, theta))


def _total(found: Return) -> Formula:
    a, b = found.band.a, found.b
    theta, s = times(a, call("cos", Q)), times(a, call("sin", Q))
    y = images(Place(found.ends, 0, 0, 0), a, found.e, theta)
    below = _below(b, s, _c(found, found.e, theta), y)
    inner = times(power(call("sin", Q), TWO), power(below, MINUS_ONE))
    gt = times(found.band.size, TAU)
    front = times(number(8 if found.ends else 4), power(gt, TWO), power(PI, MINUS_ONE))
    return ONE - times(front, Formula("integral", ("q", ZERO, PI, inner)))


def _below(b: Formula, s: Formula, c: Formula, y: Formula) -> Formula:
    """(b + s/2 - c Y)^2 + (c/2 + s Y)^2."""
    real = plus(b, times(HALF, s), times(MINUS_ONE, c, y))
    return plus(power(real, TWO), power(plus(times(HALF, c), times(s, y)), TWO))


def _small(found: Return) -> Formula:
    gt = times(found.band.size, TAU)
    shares = (MINUS_ONE, number(Fraction(8, 3))) if found.ends else (number(-2), number(Fraction(32, 3)))
    return plus(ONE, times(shares[0], power(gt, TWO)), times(shares[1], power(gt, number(3)), power(PI, MINUS_ONE)))


def _steps(found: Return, total: Formula) -> tuple[Step, ...]:
    phi, p = operator("φ"), operator("P", "det")
    over = power(call("abs", U), number(-2))
    real = plus(times(TWO, operator("Re u")), MINUS_ONE)
    mean = times(HALF, power(PI, MINUS_ONE), Formula("integral", ("θ", times(MINUS_ONE, A), A, times(real, over))))
    site = "the end of the half line" if found.ends else "the impurity"
    lines = [Line(A, found.band.a, ":=")]
    lines += [] if found.e == ZERO else [Line(E, found.e, ":=")]
    lines += [Line(THETA, times(A, call("cos", Q))), Line(S, times(A, call("sin", Q)), ":="),
              Line(C, _c(found, ZERO if found.e == ZERO else E, THETA), ":="),
              Line(U, plus(times(found.b, power(plus(S, times(I_UNIT, C)), MINUS_ONE)), HALF, times(I_UNIT, Y))),
              Line(Y, images(Place(found.ends, 0, 0, 0), A, ZERO if found.e == ZERO else E, THETA), ":=")]
    return (
        Step(
            ("For a return the amplitudes are the coefficients of ", phi, " = ", ONE - power(U, MINUS_ONE),
             ". On the unit circle ", operator("Re u"), " = 1/2 off the band, so that |", phi, "| = 1 there, and the "
             "squares add up to"),
            (Line(p, ONE - mean),),
        ),
        Step(
            ("Poisson's summation gives ", U, f" for {site}, ", Y, " being what the images add:"),
            tuple(lines),
        ),
        Step(("Put together:",), (Line(p, total),), earns="detection.total"),
        Step(
            ("For small intervals the images are of order ", TAU, " and the integral can be expanded",
             *((":",) if found.e == ZERO else ("; to this order the impurity is not seen:",))),
            (Line(p, plus(_small(found), order(power(TAU, number(REMAINDER))))),), earns="detection.small_tau",
        ),
    )
