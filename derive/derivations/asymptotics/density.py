"""The return at late asks where only a local density of states is known: its singular points decide.

    u_n = int rho(E) exp(-i E tau n) dE,    u(z) = int rho(E) dE/(1 - z exp(-i E tau)),    phi = 1 - 1/u

Next to a singular energy, z = exp(i E_k tau - x), a one-sided rho ~ A |E - E_k|^alpha leaves, beside a power series,

    u = C x^alpha,   C = Gamma(-alpha) Gamma(1+alpha) A (+-i tau)^(-alpha-1)        (+ where rho lies above E_k)

and points that fall on one point of the circle add.  With p = |alpha| the singular part of phi begins with

    alpha = -p < 0:   -x^p/C                    alpha = p > 0:   C x^p/u_k^2,     u_k = u(exp(i E_k tau))

so phi_n ~ n^(-1-p): the point with the smallest |alpha| = |d_s - 2|/2 wins, equal ones interfere.  For alpha < 0 the
constant needs A alone.  For alpha > 0 it needs u_k, which the whole density decides: bands have to be given.
x^p transfers to exp(-i E_k tau n) n^(-1-p)/Gamma(-p).  Sources: phys-rev-a-97-062105 for the exponents; constants and
remainders are derived here.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics import density_steps as steps
from derive.derivations.asymptotics.density_point import (
    Side,
    as_root,
    constant_at,
    gamma,
    mirrored,
    neat,
    squared,
    total,
)
from derive.derivations.asymptotics.setting import clear_of, rational_part
from derive.errors import NotCovered
from derive.exact.zero import vanishes
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
    inverse,
    letter,
    number,
    order,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Lattice, Setting
from derive.record.said import Claim, Derivation, Kind

N, INFINITY, TWO = letter("n"), constant("infinity"), number(2)
SOURCES = ("phys-rev-a-97-062105", "siam-j-discrete-math-3-216")
APART = "no two singular energies a multiple of 2 pi/tau apart, n large beside one over the phases between them"
LOGARITHMS = "at the singular energy {0} the density goes like a whole power or a logarithm; laws with inverse " \
    "logarithms need the constant beside the logarithm, and are derived on the square lattice alone"


@dataclass(frozen=True)
class Place:
    """One point of the unit circle: an energy that falls there and the sides of the density that meet there."""

    energy: Formula
    sides: tuple[Side, ...]

    @property
    def power(self) -> Fraction:
        return min(s.power for s in self.sides)

    @property
    def ruling(self) -> tuple[Side, ...]:
        return tuple(s for s in self.sides if s.power == self.power)


@dataclass(frozen=True)
class Term:
    """size exp(i (pi angle - E tau n))/u_k^2; `value` is u_k, None where it plays no part."""

    energy: Formula
    size: Formula
    real: bool
    angle: Fraction
    value: Formula | None


@dataclass(frozen=True)
class Wave:
    """exp(-i middle tau n) body, two terms whose body is real; or one term alone, middle None, complex.

    `square` is its absolute square.
    """

    middle: Formula | None
    body: Formula
    square: Formula


@dataclass(frozen=True)
class DensityLaw:
    """phi_n and F_n to first order, p = |alpha|, and q: phi_n is known up to n^(-1-q)."""

    setting: Setting
    places: tuple[Place, ...]
    ruling: tuple[Place, ...]
    terms: tuple[Term, ...]
    p: Fraction
    q: Fraction
    amplitude: Formula
    square: Formula


def derive_density(setting: Setting, terms: int) -> Derivation:
    """The law of the return, phi_n and F_n, to its first term."""
    if terms > 1:
        raise NotCovered("for a local density of states the late-time law is derived to its first term")
    law = density_law(setting)
    valid = APART if len(law.places) > 1 else "n large"
    claims = (
        Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), law.amplitude,
              _late(-1 - law.q), valid_for=valid),
        Claim("asymptotics.F", "asymptotics", Quantity("detection probability"), law.square,
              _late(-2 - law.p - law.q), valid_for=valid),
    )
    note = ("The ask from which the tail is the tail needs the next term, which the singular points do not decide; it "
            "is left out.",)
    return Derivation("asymptotics", claims, steps.written(law), (note,), SOURCES)


def density_law(setting: Setting) -> DensityLaw:
    """Which points decide, and what they add up to."""
    space = _space(setting)
    places = _places(_sides(space), setting)
    p = min(abs(place.power) for place in places)
    ruling = tuple(place for place in places if abs(place.power) == p)
    found = tuple(_term(setting, place) for place in ruling)
    waves = _waves(setting, found)
    amplitude = clear_of(plus(*(times(_with_phase(w), power(N, number(-1 - p))) for w in waves)), setting)
    square = clear_of(times(_square(waves), power(N, number(-2 - 2 * p))), setting)
    return DensityLaw(setting, places, ruling, found, p, _next(places, p), amplitude, square)


def _late(left_out: Fraction) -> Kind:
    """As n -> infinity, with the error that the next term makes."""
    shown = f"n^{left_out}" if left_out.denominator == 1 else f"n^({left_out})"
    error = order(power(N, number(left_out)))
    return Kind("limit", f"as n -> infinity, error O({shown})", toward=(("n", INFINITY),), error=error)


# -- what is there


def _space(setting: Setting) -> Lattice:
    """The density, watched where the start is by one perfect detector at fixed intervals."""
    space = setting.space
    if not isinstance(space, Lattice) or not space.singular:
        raise NotCovered("no local density of states is given")
    if len(setting.detectors) != 1 or setting.detectors[0].efficiency != ONE or setting.interval.law != "fixed":
        raise NotCovered("for a local density of states one perfect detector and fixed intervals are derived")
    if setting.start is None or setting.start.place is None or setting.start.place != setting.detectors[0].place:
        raise NotCovered('a local density of states says what returns to the detector: write  start.at = "detector"')
    return space


def _sides(space: Lattice) -> list[Side]:
    found = []
    for s in space.singular:
        if s.power.head != "number":
            raise NotCovered("which singular point decides is told for powers that are numbers")
        alpha = Fraction(s.power.args[0])
        if alpha == 0 or s.logs != ZERO:
            raise NotCovered(LOGARITHMS.format(text(s.energy)))
        sides = {"above": (True,), "below": (False,), "both": (False, True)}[s.side]
        found += [Side(s.energy, alpha, s.amplitude, above) for above in sides]
    return found


def _places(sides: Iterable[Side], setting: Setting) -> tuple[Place, ...]:
    """Sides by the point of the circle that they fall on."""
    found: list[Place] = []
    for side in sides:
        k = next((k for k, place in enumerate(found) if _on_one_point(place.energy, side.energy, setting)), None)
        if k is None:
            found.append(Place(side.energy, (side,)))
        else:
            found[k] = Place(found[k].energy, (*found[k].sides, side))
    return tuple(found)


def _on_one_point(a: Formula, b: Formula, setting: Setting) -> bool:
    """Whether (a - b) tau is surely a multiple of 2 pi."""
    gap = plus(a, -b)
    if a == b or vanishes(gap, setting.domains()) is True:
        return True
    turns = rational_part(times(gap, setting.interval.length, inverse(times(TWO, PI))), setting)
    return turns is not None and turns.denominator == 1


def _next(places: Iterable[Place], p: Fraction) -> Fraction:
    """The next power of x, after p, that the singular part of phi may hold."""
    found = [min(q for j in range(1, 4) for i in range(2) if (q := j * p + i) > p and q.denominator > 1)]
    for place in places:
        alpha = place.power
        if abs(alpha) > p:
            found.append(abs(alpha))
        else:
            found += [s.power + (2 * p if alpha < 0 else 0) for s in place.sides if s.power > alpha]
    return min(found)


# -- the coefficients


def _term(setting: Setting, place: Place) -> Term:
    p = abs(place.power)
    if p.denominator == 1:
        raise NotCovered(LOGARITHMS.format(text(place.energy)))
    if place.power < 0:
        size, angle, real = total(place.ruling, 1 - p, setting)
        front = times(power(TAU, number(1 - p)), inverse(size))
        return Term(place.energy, _fronted(_inverse_gammas(p), front, setting), real, -angle, None)
    if not isinstance(setting.space, Lattice) or not setting.space.bands:
        raise NotCovered(
            f"at {text(place.energy)} the density vanishes, and the law's constant depends on the whole of it: "
            "add its bands, [[graph.band]] with from, to and factor")
    size, angle, real = total(place.ruling, 1 + p, setting)
    front = times(power(TAU, number(-1 - p)), size)
    value = constant_at(setting, place.energy)
    return Term(place.energy, _fronted(gamma(1 + p), front, setting), real, angle, value)


def _inverse_gammas(p: Fraction) -> Formula:
    """-1/(Gamma(-p) Gamma(p) Gamma(1-p)) = p/(Gamma(p) Gamma(1-p)^2)."""
    return times(number(p), inverse(gamma(p)), power(gamma(1 - p), number(-2)))


def _fronted(gammas: Formula, rest: Formula, setting: Setting) -> Formula:
    return neat(times(neat(gammas, setting), neat(rest, setting)), setting)


def _waves(setting: Setting, terms: tuple[Term, ...]) -> list[Wave]:
    """The terms, conjugate ones put together."""
    left, found = list(terms), []
    while left:
        first = left.pop(0)
        partner = next((t for t in left if _conjugate(setting, first, t)), None)
        if partner is not None:
            left.remove(partner)
        found.append(_alone(first, setting) if partner is None else _pair(first, partner, setting))
    return found


def _conjugate(setting: Setting, a: Term, b: Term) -> bool:
    """Whether the coefficients are surely each other's conjugates."""
    if (a.value is None) != (b.value is None) or (a.angle + b.angle) % 2 or not (a.real and b.real):
        return False
    if a.value is not None and not mirrored(setting, a.energy, b.energy):
        return False
    return a.size == b.size or vanishes(plus(a.size, -b.size), setting.domains()) is True


def _alone(t: Term, setting: Setting) -> Wave:
    size = as_root(t.size, setting) if t.real else t.size
    square = squared(t.size, setting) if t.real else power(call("abs", t.size), TWO)
    phase = -times(t.energy, TAU, N)
    turn = call("exp", times(I_UNIT, plus(phase, times(number(t.angle), PI)) if t.angle else phase))
    if t.value is None:
        return Wave(None, times(size, turn), square)
    below = power(call("abs", t.value), number(-4))
    return Wave(None, times(size, turn, power(t.value, number(-2))), times(square, below))


def _pair(a: Term, b: Term, setting: Setting) -> Wave:
    """2 size cos(h tau n + pi angle), h = (E_b - E_a)/2; or twice the real part of what goes over u_k^2."""
    half = number(Fraction(1, 2))
    middle = neat(times(half, plus(a.energy, b.energy)), setting)
    gap = neat(times(half, plus(b.energy, -a.energy)), setting)
    phase = plus(times(gap, TAU, N), times(number(a.angle), PI))
    if a.value is None:
        wave = call("cos", phase)
    else:
        wave = call("Re", times(call("exp", times(I_UNIT, phase)), power(a.value, number(-2))))
    square = neat(times(number(4), squared(a.size, setting)), setting)
    return Wave(middle, times(TWO, as_root(a.size, setting), wave), times(square, power(wave, TWO)))


def _with_phase(w: Wave) -> Formula:
    if w.middle is None or w.middle == ZERO:
        return w.body
    return times(call("exp", times(MINUS_ONE, I_UNIT, w.middle, TAU, N)), w.body)


def _square(waves: list[Wave]) -> Formula:
    """|phi_n|^2 without its power of n."""
    if len(waves) == 1:
        return waves[0].square
    if all(w.middle is not None and w.middle == waves[0].middle for w in waves):
        return power(plus(*(w.body for w in waves)), TWO)
    return power(call("abs", plus(*(_with_phase(w) for w in waves))), TWO)
