"""Levels of families whose size is a letter: rates and weights as formulas in the size and the level's number k.

Paths of L sites at a watched site (`families.py`): with E = -2 T cos(theta) and M = L + 1,

    <d|(H-E)^(-1)|d> = sin(M theta)/D,   D = (C - E) sin(M theta) - T [m sin(L theta) + 2 cos(Phi) sin(theta)]

(the last term on a ring only).  The levels start at theta_k = pi k/M.  There, with theta = theta_k + u,
u = v sin(theta_k), s and c for sin(theta_k) and cos(theta_k)
and S = sin^2(theta_k), the secular equation of `levels.py` is a power series in v and x = -i tau over Q(M)[cos, S]:

    sin(M u) = Y [(C - E) sin(M u) - T (m (c sin(L u) - s cos(L u)) + 2 p (s cos(u) + c sin(u)))],   p = (-1)^k cos(Phi)

solved order by order; no size is put in.  Complete and complete bipartite graphs reach a chain of two or three
states, whose levels `levels.py` derives with the size as a letter.  Derived here; order tau^4 and beyond would need
moments that know small sizes apart.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace as changed
from fractions import Fraction
from math import factorial

from derive.derivations import levels as finite
from derive.derivations import levels_steps as steps
from derive.derivations.families import Layers, Paths, seen_from_detector
from derive.derivations.families_secular import secular_alone, secular_claim
from derive.derivations.spectrum import refuse
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field
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
    inverse,
    letter,
    number,
    operator,
    plus,
    power,
    replace,
    times,
)
from derive.formula.tree import (
    order as big_o,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Domain, Family, Setting
from derive.record.said import EXACTLY, Claim, Derivation, Expansion, Kind, Line, Step, Value

HIGHEST_ORDER = 3
K = letter("k")
LEVEL = (("level", "k"),)
COS, SQUARE, PHASE = "cosine of theta_k", "square of sine", "phase around the ring"
"""Names of generators; no worksheet can declare them."""

Series = list[Element]


def derive_family_levels(setting: Setting, order: int) -> Derivation:
    """The levels of a family of symbolic size."""
    refuse(setting)
    seen = seen_from_detector(setting)
    if isinstance(seen, Layers):
        return _of_layers(setting, seen, order)
    if order > HIGHEST_ORDER:
        raise NotCovered(f"where the size is a letter, levels are derived to order {HIGHEST_ORDER}")
    if not isinstance(seen, Paths):
        return secular_alone(setting, seen, order, path_sizes(setting))
    return _of_paths(setting, seen, order)


# -- layers


def _of_layers(setting: Setting, layers: Layers, order: int) -> Derivation:
    """The short chain's levels, and the dark ones in closed form."""
    inner = finite.finite_levels(layers.setting, order)
    every = path_sizes(setting)
    claims = [_for_every(c, every) for c in inner.claims]
    dark = [c for n, (e, m) in enumerate(layers.dark, start=1) for c in _dark(n, e, m, every)]
    opening = Step(("From the watched site only ", layers.says, " is reached. In the basis of these layers:"),
                   (Line(operator("H"), finite.matrix_of(layers.setting)),))
    return Derivation("levels", (*claims, *dark), (opening, *inner.steps, *steps.dark(dark)))


def path_sizes(setting: Setting) -> str:
    """The letter that a proof runs over: the first size letter."""
    family = setting.space
    if not isinstance(family, Family):
        raise TypeError("a family of symbolic size is needed here")
    names = [x.name for x in setting.letters if any(x.name in free_letters(f) for _, f in family.sizes)]
    return names[0] if names else ""


def _for_every(claim: Claim, every: str) -> Claim:
    if not every:
        return claim
    phrase = claim.kind.phrase + f", for every {every}"
    return changed(claim, kind=changed(claim.kind, phrase=phrase, every=every))


def _dark(name: int | str, energy: Formula, count: Formula, every: str) -> list[Claim]:
    key = ("level", name)
    pieces: list[tuple[str, str, Value]] = [
        ("energy", "dark level energy", energy), ("multiplicity", "dark level multiplicity", count)]
    return [
        _for_every(Claim(f"levels.dark.{name}.{part}", "levels", Quantity(quantity, (key,)), value,
                         valid_for="every tau; sizes at which it is there"), every)
        for part, quantity, value in pieces
    ]


# -- paths


def _of_paths(setting: Setting, paths: Paths, order: int) -> Derivation:
    every = path_sizes(setting)
    theta = angle(paths)
    energy, rate = in_k(setting, paths, order)
    even = order + 2 if order % 2 == 0 else order + 1
    odd = order + 1 if order % 2 == 0 else order + 2
    claims = [
        _claim("energy", "level energy", _expansion(energy, even), even, every),
        _for_every(Claim("levels.k.multiplicity", "levels", Quantity("level multiplicity", LEVEL), ONE), every),
        _claim("rate", "decay rate", _expansion(rate, odd), odd, every),
    ]
    weight = weight_in_k(setting, paths)
    if weight is not None:
        claims.append(_for_every(
            Claim("levels.k.weight", "levels", Quantity("level weight", LEVEL), weight, EXACTLY), every))
    if not any(x.name == "E" for x in setting.letters):  # E is the quantity's own letter
        claims.append(secular_claim(setting, paths, order, every))
    dark = _dark_of_paths(paths, theta, every)
    return Derivation("levels", (*claims, *dark), _steps(paths, theta, energy, rate, weight, claims, dark))


def _claim(part: str, quantity: str, value: Value, remainder: int, every: str) -> Claim:
    kind = Kind("order", f"up to O(tau^{remainder})", remainder)
    return _for_every(
        Claim(f"levels.k.{part}", "levels", Quantity(quantity, LEVEL), value, kind,
              valid_for="small tau; every k from 1 to the number of bright levels"), every)


def _expansion(terms: dict[int, Formula], remainder: int) -> Expansion:
    powers = tuple(sorted(terms))
    return Expansion("tau", powers, tuple(terms[k] for k in powers), remainder)


def angle(paths: Paths) -> Formula:
    """theta_k = pi k/(L+1); on a ring without flux only odd multiples of pi/N are bright."""
    front = plus(times(number(2), K), MINUS_ONE) if paths.closed and paths.flux is None else K
    return times(PI, front, inverse(arms_size(paths)))


def arms_size(paths: Paths) -> Formula:
    """M = L + 1."""
    domains = {name: Domain("integer", "integer >= 1", ONE) for name in free_letters(paths.length)}
    field = Field.of([paths.length], domains)
    return field.formula(field.element(paths.length) + field.one)


def sine_of_distance(setting: Setting, paths: Paths) -> Formula | None:
    """sin(j theta_k) for a start j steps from the detector, None where no such start is given."""
    start = setting.start
    if start is None or start.distance is None:
        return None
    return call("sin", times(start.distance, angle(paths)))


def weight_in_k(setting: Setting, paths: Paths) -> Formula | None:
    """(2/(m M)) sin^2(j theta_k): the start's part in the equal superposition of the arms; one path on a ring."""
    sine = sine_of_distance(setting, paths)
    if sine is None:
        return None
    shared = () if paths.closed else (inverse(paths.count),)
    return times(number(2), power(sine, number(2)), *shared, inverse(arms_size(paths)))


def _dark_of_paths(paths: Paths, theta: Formula, every: str) -> list[Claim]:
    """m - 1 partners a level that vanish at the watched site; on a ring without flux the even multiples."""
    if paths.closed:
        if paths.flux is not None:
            return []
        theta = times(number(2), PI, K, inverse(arms_size(paths)))
        return _dark("k", _energy(paths, theta), ONE, every)
    left = paths.count - 1
    if paths.count == ONE:
        return []
    count = number(paths.count.args[0] - 1) if paths.count.head == "number" else left
    return _dark("k", _energy(paths, theta), count, every)


def _energy(paths: Paths, theta: Formula) -> Formula:
    return times(number(-2), paths.T, call("cos", theta))


# -- the secular equation at theta_k


def in_k(setting: Setting, paths: Paths, order: int) -> tuple[dict[int, Formula], dict[int, Formula]]:
    """Coefficients of tau^n in energy and rate, formulas in k and the size."""
    near = Near(setting, paths, order)
    moved = near.energy_series()
    energy: dict[int, Formula] = {0: _energy(paths, angle(paths))}
    rate: dict[int, Formula] = {}
    for n in range(1, order + 1):
        sign = Fraction((-1) ** (n // 2) * (2 if n % 2 else 1))
        if moved[n]:
            (rate if n % 2 else energy)[n] = near.written(moved[n].scaled(sign))
    return energy, rate


class Near:
    """The secular equation around theta_k, as a series in v and x."""

    def __init__(self, setting: Setting, paths: Paths, order: int):
        self.paths, self.order = paths, order
        domains = {**setting.domains(), SQUARE: Domain("positive", ""), PHASE: Domain("real", "")}
        formulas = [paths.count, paths.length, paths.T, paths.C, letter(SQUARE), letter(PHASE)]
        base = Field.of(formulas, domains)
        square = base.element(letter(SQUARE))
        self.field = WithRoot(base, COS, [square - base.one, base.zero])
        self.S, self.c = self.field.lift(square), self.field.root
        self.L, self.T, self.C = (self.field.element(f) for f in (paths.length, paths.T, paths.C))
        self.M = self.L + self.field.one
        self.count = self.field.element(paths.count)
        self.p = self._phase()

    def _phase(self) -> Element:
        if not self.paths.closed:
            return self.field.zero
        return self.field.element(letter(PHASE)) if self.paths.flux is not None else -self.field.one

    def written(self, x: Element) -> Formula:
        """Back to k: the generators replaced by what they stand for."""
        theta = angle(self.paths)
        meaning = {
            COS: call("cos", theta), SQUARE: power(call("sin", theta), number(2)),
            PHASE: _around(self.paths),
        }
        return replace(self.field.formula(x), meaning)

    def energy_series(self) -> Series:
        """E as a series in x: -2 T (c cos(u) - s sin(u))."""
        v = self._solved()
        even, odd = self._circular(v, self.field.one)
        return [(self.S * b - self.c * a).scaled(Fraction(2)) * self.T for a, b in zip(even, odd, strict=True)]

    def _solved(self) -> Series:
        """v with the secular equation met to x^order."""
        v = [self.field.zero] * (self.order + 1)
        for _ in range(self.order):
            off = self._off(v)
            v = [a - b / self.M for a, b in zip(v, off, strict=True)]
        return v

    def _off(self, v: Series) -> Series:
        """sin(M u)/s - Y [...]/s."""
        f = self.field
        even, odd = self._circular(v, f.one)
        energy = [(self.S * b - self.c * a).scaled(Fraction(2)) * self.T for a, b in zip(even, odd, strict=True)]
        _, wide = self._circular(v, self.M)
        cosine, sine = self._circular(v, self.L)
        gap = [-e for e in energy]
        gap[0] = gap[0] + self.C
        ends = [self.count * (self.c * b - a) for a, b in zip(cosine, sine, strict=True)]
        if self.p:
            twice = self.p.scaled(Fraction(2))
            ends = [e + twice * (a + self.c * b) for e, a, b in zip(ends, even, odd, strict=True)]
        inner = [a - self.T * b for a, b in zip(self._times(gap, wide), ends, strict=True)]
        pushed = self._times(self._y(gap), inner)
        return [a - b for a, b in zip(wide, pushed, strict=True)]

    def _y(self, gap: Series) -> Series:
        """Y = x/2 - x^2 (C - E)/12 + O(x^4)."""
        out = [self.field.zero] * (self.order + 1)
        if self.order >= 1:
            out[1] = self.field.rational(Fraction(1, 2))
        for k in range(self.order - 1):
            out[k + 2] = out[k + 2] - gap[k].scaled(Fraction(1, 12))
        return out

    def _circular(self, v: Series, a: Element) -> tuple[Series, Series]:
        """cos(a s v) and sin(a s v)/s: series in S a^2 v^2."""
        f, length = self.field, self.order + 1
        even, odd = [f.zero] * length, [f.zero] * length
        power_of_v = [f.one, *[f.zero] * self.order]
        scale = f.one
        for n in range(length):
            sign = Fraction((-1) ** (n // 2), factorial(n))
            target = odd if n % 2 else even
            for k in range(length):
                target[k] = target[k] + (scale * power_of_v[k]).scaled(sign)
            power_of_v = self._times(power_of_v, v)
            scale = scale * a * (f.one if n % 2 == 0 else self.S)
        return even, odd

    def _times(self, a: Series, b: Series) -> Series:
        out = [self.field.zero] * len(a)
        for i, x in enumerate(a):
            if x:
                for j in range(len(a) - i):
                    if b[j]:
                        out[i + j] = out[i + j] + x * b[j]
        return out


def _around(paths: Paths) -> Formula:
    """(-1)^k cos(Phi), the hopping's own sign around the ring included."""
    cosine = call("cos", paths.flux if paths.flux is not None else ZERO)
    exponent = plus(K, paths.length, ONE) if paths.turned else K
    return times(power(MINUS_ONE, exponent), cosine)


# -- steps


def _secular_step(secular: Value | None) -> tuple[Step, ...]:
    if not isinstance(secular, Formula):
        return ()
    reason = "so that the secular equation reads, everything on one side,"
    return (Step((reason,), (Line(letter("F"), secular),), earns="levels.secular"),)


def _steps(
    paths: Paths, theta: Formula, energy: dict[int, Formula], rate: dict[int, Formula], weight: Formula | None,
    said: Sequence[Claim], dark: Sequence[Claim],
) -> tuple[Step, ...]:
    E, at = letter("E"), letter("theta")
    secular = next((c.value for c in said if c.id == "levels.secular"), None)
    big = arms_size(paths)
    ends = times(paths.count, call("sin", times(paths.length, at)))
    if paths.closed:
        cosine = call("cos", paths.flux) if paths.flux is not None else ONE
        ends = plus(ends, times(number(2), cosine, call("sin", at)))
    inside = call("sin", times(big, at))
    resolvent = times(inside, power(plus(
        times(plus(paths.C, times(MINUS_ONE, E)), inside), times(MINUS_ONE, paths.T, ends)), MINUS_ONE))
    what = "The ring is one path, joined to the watched site by both ends" if paths.closed else (
        f"What is left of the graph is {text(paths.count)} equal path{'' if paths.count == ONE else 's'}")
    out = [
        *steps.secular_equation(),
        Step((what + ". On a path the energy is written with an angle,",),
             (Line(E, times(number(-2), paths.T, call("cos", at))),)),
        Step(("its states are sines, and the watched site's resolvent is closed:",),
             (Line(times(steps.BRA, power(plus(steps.H, times(MINUS_ONE, E)), MINUS_ONE), steps.KET), resolvent),)),
        *_secular_step(secular),
        Step(("At ", TAU, " = 0 it vanishes, which gives the levels' angles"), (Line(operator("theta", "k"), theta),)),
        Step(("Inserting ", plus(at, times(MINUS_ONE, operator("theta", "k"))), " as a series in ", times(I_UNIT, TAU),
              " and solving order by order, the size left as it is: the energy,"),
             (Line(call("Re", steps.EPS), plus(finite.in_tau(energy), big_o(power(TAU, number(max(energy) + 2))))),),
             earns="levels.k.energy"),
        Step(("and the rate:",),
             (Line(times(number(-2), call("Im", steps.EPS)),
                   plus(finite.in_tau(rate), big_o(power(TAU, number(max(rate, default=0) + 2))))),),
             earns="levels.k.rate"),
    ]
    if weight is not None:
        out.append(Step(("The start's weight on level ", K, ":"), (Line(operator("w", "k"), weight),),
                        earns="levels.k.weight"))
    return (*out, *steps.dark(dark))
