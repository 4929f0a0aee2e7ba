"""Topic `asymptotics` on a line or half line where one site has an energy of its own, or at the end of a uniform one.

At both edges of the band, theta = +-a, a = 2|h| tau, only s h of phi = v/u is singular (`asymptotics_scattering.py`),
and Hankel's integral takes s = sqrt(a^2 - theta^2) to n^(-3/2), s^3 to n^(-5/2):

    phi_n = w^k sqrt(a/(2 pi)) n^(-3/2) sum_(+-) exp(-+i (a n + pi/4 - k pi/2)) [C_1 + C_2/n]_(+-) + O(n^(-7/2))

    C_1 = -h_0,    C_2 = -3 i (a h_1 - h_0/(8 a)),    h = h_0 + h_1 sigma + ...

at the upper edge; at the lower one complex conjugates with the energy turned round.  For the return to an impurity on
the line C_1 = 1/(1 + i e R)^2: its power n^(-3) in F_n is the uniform lattice's, its size and phase are not.  Away
from the detector the impurity is a mirror, and what it holds back leaks out in exponentials.  With e = 0 the two edges
are complex conjugates, and on the half line, where the end is the mirror, this form of the law is the shortest.

A bound state is a pole of u on the circle and a point where phi = v/u is regular.  On the line it is always there,
E_b = eps sqrt(1 + 4 h^2/eps^2); at the end of a half line for |eps| > |h|, E_b = eps + h^2/eps (textbook).
Valid below aliasing, a < pi, with the bound state's phase on no edge of the band.  Derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

from derive.derivations.asymptotics import impurity_steps as steps
from derive.derivations.asymptotics.bound import Bound, bound_state
from derive.derivations.asymptotics.impurity_images import edge_images
from derive.derivations.asymptotics.scattering import Edge, Place, scattering_edge
from derive.derivations.asymptotics.setting import (
    Band,
    Watch,
    band_of,
    clear_of,
    late_kind,
    places,
    sizes_hidden,
    watch,
)
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.grammar import parse
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
    free_letters,
    letter,
    number,
    plus,
    power,
    replace,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import POSITIVE, Domain, Lattice, Setting
from derive.record.said import Claim, Derivation, Prose

N, A, TWO = letter("n"), letter("a"), number(2)
REAL = Domain("real", "real")
HIGHEST_ORDER = 2
TAIL = 100
"""The tail begins where the second term is this many times smaller than the first."""
LONGEST_START, LONGEST_LAW = 3_500, 9_000
SOURCES = ("phys-rev-e-95-032141",)


@dataclass(frozen=True)
class Side:
    """One edge of the band: C_1 = top/below^2 and C_2, in the user's letters.  At the lower one `sign` is -1."""

    sign: int
    edge: Edge
    place: Place
    a: Formula
    e: Formula

    @cached_property
    def images(self) -> tuple[tuple[Formula, Formula], tuple[Formula, Formula]]:
        """(Y, dY/dtheta) of the detector's own function and of the start's: R_u = 1/2 + i Y_u, R_v = i Y_v."""
        there = Place(self.place.ends, self.place.detector, self.place.detector, self.place.impurity)
        return edge_images(there, self.a, self.turned), edge_images(self.place, self.a, self.turned)

    @property
    def turned(self) -> Formula:
        """e as this edge sees it."""
        return self.e if self.sign > 0 or self.e == ZERO else -self.e

    @cached_property
    def unit(self) -> Element:
        """What d is multiplied by, so that n_even = 1 - ...: 1 on the line, a/(2 i (d + 1)) on the half line."""
        field = self.edge.field
        if not self.place.ends:
            return field.one
        turned = field.element(I_UNIT).scaled(Fraction(2 * self.place.detector + 2))
        return field.element(A) * field.invert(turned)

    @cached_property
    def top(self) -> Formula:
        """-h_0 d_0^2, times unit^2."""
        return -self._numerator(0)

    @cached_property
    def below(self) -> Formula:
        """d_0 = n_even + R_u k_even, times the unit."""
        return self._linear(self.unit, self.edge.n_even[0], self.edge.k_even[0])

    def over(self, top: Formula) -> Formula:
        """top/d_0^2."""
        return _times(top, _power(self.below, number(-2)))

    def first(self) -> Formula:
        """C_1."""
        return self.over(self.top)

    @cached_property
    def next(self) -> Formula:
        """C_2 d_0^2 = 3 i [X_0/(8 a) - a X_1 + a X_0 (2 d_1/d_0 - (d_o/d_0)^2)], X the numerator of h."""
        edge, x0 = self.edge, self._numerator(0)
        straight = self._linear(self.unit, edge.n_even[1], edge.k_even[1])
        grown = _plus(straight, self._grown(self.unit * edge.k_even[0], 0))
        odd = self._linear(self.unit, edge.n_odd[0], edge.k_odd[0])
        bent = plus(_times(TWO, grown, _power(self.below, MINUS_ONE)),
                    _times(MINUS_ONE, power(odd, TWO), _power(self.below, number(-2))))
        eighth = times(number(Fraction(1, 8)), x0, power(self.a, MINUS_ONE))
        inner = _plus(eighth, _times(MINUS_ONE, self.a, self._numerator(1)), _times(self.a, x0, bent))
        return _times(number(3 * self.sign), I_UNIT, inner)

    def _numerator(self, j: int) -> Formula:
        """X_j of X = free + in_u R_u + in_v R_v, times unit^2."""
        edge, unit = self.edge, self.unit * self.unit
        found = self._linear(unit, edge.free[j], edge.in_u[j], edge.in_v[j])
        grown = (self._grown(unit * x[0], which) for which, x in enumerate((edge.in_u, edge.in_v)))
        return found if j == 0 else _plus(found, *grown)

    def _linear(self, unit: Element, free: Element, in_u: Element, in_v: Element | None = None) -> Formula:
        """free + in_u/2 + i in_u Y_u + i in_v Y_v, times the unit."""
        i, (u, v) = self.edge.field.element(I_UNIT), self.images
        parts = [(free, ONE), (in_u.scaled(Fraction(1, 2)), ONE), (i * in_u, u[0])]
        parts += [] if in_v is None else [(i * in_v, v[0])]
        return _plus(*(_times(self._shown(unit * x), f) for x, f in parts if x))

    def _grown(self, x: Element, which: int) -> Formula:
        """x times the coefficient of sigma in R: i dY/dtheta (theta - a), theta - a = -sigma/(2 a) + ..."""
        field = self.edge.field
        share = x * field.element(I_UNIT) * field.invert(field.element(A)).scaled(Fraction(-1, 2))
        return _times(self._shown(share), self.images[which][1]) if x else ZERO

    def _shown(self, x: Element) -> Formula:
        """x in the user's letters, fractions in them reduced."""
        field = self.edge.field
        f = field.formula(x if self.sign > 0 else field.conjugate(x))
        return reduced(replace(f, {"a": self.a, "e": self.turned}), self.e)


def _plus(*terms: Formula) -> Formula:
    kept = [f for f in terms if f != ZERO]
    return plus(*kept) if kept else ZERO


def _power(f: Formula, n: Formula) -> Formula:
    return ONE if f == ONE else power(f, n)


def _times(*factors: Formula) -> Formula:
    return ZERO if ZERO in factors else times(*(f for f in factors if f != ONE))


def reduced(f: Formula, e: Formula) -> Formula:
    """f with its fractions reduced, where an exact field holds it; the letters of e may have either sign."""
    either = free_letters(e) - {"tau"}
    bare, sizes = sizes_hidden(f)
    domains = {name: REAL if name in either else POSITIVE for name in sorted(free_letters(bare))}
    try:
        field = Field.of([bare], domains)
        return replace(field.formula(field.element(bare)), sizes)
    except (NotCovered, ZeroDivisionError):
        return f


@dataclass(frozen=True)
class ImpurityLaw:
    """The law to the order asked, where its tail begins, and all that its steps speak of."""

    seen: Watch
    place: Place
    energy: Formula
    sides: tuple[Side, ...]
    terms: int
    amplitude: Formula
    square: Formula
    start: Formula | None
    valid: str

    @property
    def impure(self) -> bool:
        return self.energy != ZERO


def derive_impurity(setting: Setting, terms: int) -> Derivation:
    """phi_n and F_n to `order` terms, the ask from which the tail is the tail, and the bound state."""
    if terms > HIGHEST_ORDER:
        raise NotCovered(f"with an impurity late-time laws are derived to {HIGHEST_ORDER} terms, not to {terms}")
    law = _law(setting, terms)
    bound = bound_state(setting, law.place, law.seen.size, law.energy) if law.impure else Bound((), ())
    claims = (*_claims(law), *bound.claims)
    if any(len(text(c.value)) > LONGEST_LAW for c in claims[:2] if isinstance(c.value, Formula)):
        raise NotCovered(f"the law to {terms} terms is too long to be printed here; ask for fewer")
    return Derivation("asymptotics", claims, steps.written(law, bound), _notes(law, bound), SOURCES)


def is_edge_law(seen: Watch, terms: int) -> bool:
    """Whether a uniform lattice's law is shorter in this form: a half line below aliasing, to two terms."""
    return seen.name == "half line" and seen.below and terms <= HIGHEST_ORDER


def impurity_of(setting: Setting) -> tuple[Band, Place, Formula]:
    """The band, the sites, and the impurity's energy, 0 where there is none; `NotCovered` where the band aliases."""
    band, space = band_of(setting, impurities=1), setting.space
    if not isinstance(space, Lattice) or space.name not in ("line", "half line"):
        raise NotCovered("an impurity is derived on the line and on the half line")
    if not band.below:
        raise NotCovered(f"with an impurity the law is derived below aliasing: assume {text(band.a)} < pi")
    d, x = places(setting)
    site, energy = space.energies[0] if space.energies else (str(d), ZERO)
    at = parse(site)
    if at.head != "number" or at.args[0].denominator != 1:
        raise NotCovered("an impurity is derived on a numbered site")
    return band, Place(space.name == "half line", d, x, int(at.args[0])), energy


def _law(setting: Setting, terms: int) -> ImpurityLaw:
    band, place, energy = impurity_of(setting)
    seen, impure = watch(setting, impurities=1), energy != ZERO
    e = times(energy, TAU) if impure else ZERO
    edge = scattering_edge(place)
    sides = tuple(Side(sign, edge, place, band.a, e) for sign in ((1, -1) if impure else (1,)))
    tops = {side.top for side in sides}
    share = sides[0].top if terms == 1 and len(tops) == 1 and sides[0].top.head == "number" else ONE
    whole = share if impure else times(share, TWO)  # without an impurity the edges are complex conjugates
    front = times(whole, call("sqrt", times(band.size, TAU, power(PI, MINUS_ONE))), power(N, number(Fraction(-3, 2))))
    wave = clear_of(_wave(sides, terms, share), setting)
    chance = power(call("abs", wave) if impure else wave, TWO)
    square = times(number(whole.args[0] ** 2), band.size, TAU, power(PI, MINUS_ONE), chance, power(N, number(-3)))
    start = clear_of(_start(sides), setting) if not is_mirrored(place) else None
    if start is not None and len(text(start)) > LONGEST_START:
        start = None
    valid = _valid(place, band, e)
    return ImpurityLaw(seen, place, energy, sides, terms, times(seen.phase, front, wave), square, start, valid)


def is_mirrored(place: Place) -> bool:
    """Whether sites lie between the detector and a mirror, the end or the impurity: they leak out slowly."""
    return place.detector != place.impurity or place.ends and place.detector > 0


def angle(a: Formula, k: int) -> Formula:
    """a n + pi/4 - k pi/2."""
    return plus(times(a, N), times(number(Fraction(1 - 2 * k, 4)), PI))


def _wave(sides: tuple[Side, ...], terms: int, share: Formula) -> Formula:
    """sum over the edges of exp(-+i psi) (C_1 + C_2/n), over a number that both share; of one edge the real part."""
    parts = []
    for side in sides:
        psi = angle(side.a, side.place.k)
        turning = call("exp", times(number(-side.sign), I_UNIT, psi))
        top = side.top if share == ONE else ONE
        top = top if terms == 1 else plus(top, times(side.next, power(N, MINUS_ONE)))
        parts.append(_times(side.over(top), turning))
    return plus(*parts) if len(parts) > 1 else call("Re", parts[0])


def _start(sides: tuple[Side, ...]) -> Formula:
    """TAIL (|C_2| + |C_2'|)/(|C_1| + |C_1'|): the envelopes of the second term and of the first."""
    if len(sides) == 1:
        return times(number(TAIL), call("abs", sides[0].next), power(call("abs", sides[0].top), MINUS_ONE))
    first, second = (_plus(*(call("abs", f) for f in found))
                     for found in ([s.first() for s in sides], [s.over(s.next) for s in sides]))
    return times(number(TAIL), second, power(first, MINUS_ONE))


def _valid(place: Place, band: Band, e: Formula) -> str:
    edges = f"n large beside 1/({text(band.a)}) and 1/(pi - {text(band.a)})"
    if e == ZERO:
        return edges
    if place.ends:
        return edges + ", no bound state's phase on an edge of the band"
    bound = call("sqrt", plus(power(band.a, TWO), power(e, TWO)))
    return f"{edges}, {text(bound)} + {text(band.a)} no multiple of 2*pi"


def _claims(law: ImpurityLaw) -> tuple[Claim, ...]:
    left_out = -law.terms - Fraction(3, 2)
    laws = (
        Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), law.amplitude,
              late_kind(left_out), valid_for=law.valid),
        Claim("asymptotics.F", "asymptotics", Quantity("detection probability"), law.square,
              late_kind(left_out - Fraction(3, 2)), valid_for=law.valid),
    )
    if law.start is None:
        return laws
    return (*laws, Claim("asymptotics.from", "asymptotics", Quantity("tail start"), law.start, valid_for=law.valid))


def _mirror(law: ImpurityLaw) -> str:
    """What throws back what the detector has not seen."""
    if law.place.detector == law.place.impurity:
        return "the end"
    return "the impurity or the end" if law.place.ends else "the impurity"


def _notes(law: ImpurityLaw, bound: Bound) -> tuple[Prose, ...]:
    notes: list[Prose] = list(bound.notes)
    if is_mirrored(law.place):
        notes.append((
            f"What is held between the detector and {_mirror(law)} leaks out slowly, in exponentials that hide the law "
            "until they have faded; from which ask on the tail is the tail is therefore not stated.",))
    elif law.start is None:
        notes.append(("The ask from which the tail is the tail has a formula too long to be of use; it is left out.",))
    return tuple(notes)
