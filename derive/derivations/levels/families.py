"""Levels of families whose size is a letter: rates and weights as formulas in the size and the level's number k.

Paths of L sites at a watched site (`families.py`): with E = -2 T cos(theta) and M = L + 1,

    <d|(H-E)^(-1)|d> = sin(M theta)/D,   D = (C - E) sin(M theta) - T [m sin(L theta) + 2 cos(Phi) sin(theta)]

(the last term on a ring only).  The levels start at theta_k = pi k/M and move as `levels_angles.py` tells; paths of
different lengths are the subject of `levels_arms.py`.  Complete and complete bipartite graphs reach a chain of two or
three states, whose levels `levels.py` derives with the size as a letter.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace as changed

from derive.derivations.families import Cube, Layers, Paths, Unequal, at_least, seen_from_detector
from derive.derivations.families_secular import deep_enough, returns_of, secular_claim
from derive.derivations.levels import steps
from derive.derivations.levels import topic as finite
from derive.derivations.levels.angles import Bundle, Joint, moved
from derive.derivations.spectrum import refuse
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    Formula,
    call,
    free_letters,
    inverse,
    letter,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.formula.tree import (
    order as big_o,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Domain, Family, Relation, Setting
from derive.record.said import EXACTLY, Claim, Derivation, Expansion, Kind, Line, Step, Value

HIGHEST_ORDER = 5
K = letter("k")
LEVEL = (("level", "k"),)

def derive_family_levels(setting: Setting, order: int) -> Derivation:
    """The levels of a family of symbolic size."""
    refuse(setting)
    seen = seen_from_detector(setting)
    if isinstance(seen, Layers):
        return _of_layers(setting, seen, order)
    if order > HIGHEST_ORDER:
        raise NotCovered(f"where the size is a letter, levels are derived to order {HIGHEST_ORDER}")
    if isinstance(seen, Unequal):
        from derive.derivations.levels.arms import derive_arm_levels  # it builds on this module

        return derive_arm_levels(setting, seen, order)
    if isinstance(seen, Cube):
        from derive.derivations.levels.cube import derive_cube_levels  # it builds on this module

        return derive_cube_levels(setting, seen, order)
    return _of_paths(setting, seen, order)


# -- layers


def _of_layers(setting: Setting, layers: Layers, order: int) -> Derivation:
    """The short chain's levels, and the dark ones in closed form."""
    inner = finite.finite_levels(layers.setting, order)
    every = path_sizes(setting)
    claims = [for_every(changed(c, assume=(*c.assume, *layers.assume)), every) for c in inner.claims]
    dark = [
        changed(c, assume=(*layers.assume, *at_least(m, 1, setting)))
        for n, (e, m) in enumerate(layers.dark, start=1) for c in _dark(n, e, m, every)
    ]
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


def for_every(claim: Claim, every: str) -> Claim:
    if not every:
        return claim
    phrase = claim.kind.phrase + f", for every {every}"
    return changed(claim, kind=changed(claim.kind, phrase=phrase, every=every))


def _dark(name: int | str, energy: Formula, count: Formula, every: str) -> list[Claim]:
    key = ("level", name)
    pieces: list[tuple[str, str, Value]] = [
        ("energy", "dark level energy", energy), ("multiplicity", "dark level multiplicity", count)]
    return [
        for_every(Claim(f"levels.dark.{name}.{part}", "levels", Quantity(quantity, (key,)), value,
                         valid_for="every tau; sizes at which it is there"), every)
        for part, quantity, value in pieces
    ]


# -- paths


def _of_paths(setting: Setting, paths: Paths, order: int) -> Derivation:
    every = path_sizes(setting)
    theta = angle(paths)
    energy, rate = in_k(setting, paths, order)
    even, odd = left_out(order)
    deep = deep_enough(setting, paths, order)
    claims = [
        _claim("energy", "level energy", expansion(energy, even), even, every, deep),
        for_every(Claim("levels.k.multiplicity", "levels", Quantity("level multiplicity", LEVEL), ONE), every),
        _claim("rate", "decay rate", expansion(rate, odd), odd, every, deep),
    ]
    weight = weight_in_k(setting, paths)
    if weight is not None:
        claims.append(for_every(
            Claim("levels.k.weight", "levels", Quantity("level weight", LEVEL), weight, EXACTLY), every))
    if not any(x.name == "E" for x in setting.letters):  # E is the quantity's own letter
        claims.append(secular_claim(setting, paths, order, every))
    dark = _dark_of_paths(paths, theta, every)
    return Derivation("levels", (*claims, *dark), _steps(paths, theta, energy, rate, weight, claims, dark))


def _claim(
    part: str, quantity: str, value: Value, remainder: int, every: str, assume: tuple[Relation, ...]
) -> Claim:
    kind = Kind("order", f"up to O(tau^{remainder})", remainder)
    return for_every(
        Claim(f"levels.k.{part}", "levels", Quantity(quantity, LEVEL), value, kind, assume,
              valid_for="small tau; every k from 1 to the number of bright levels"), every)


def left_out(order: int) -> tuple[int, int]:
    """The first powers of tau that are left out of an energy and of a rate."""
    return (order + 1, order + 2) if order % 2 else (order + 2, order + 1)


def expansion(terms: dict[int, Formula], remainder: int) -> Expansion:
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
    bundle = Bundle(paths.count, arms_size(paths))
    joint = Joint((bundle,), (), paths.T, paths.C, angle(paths), returns_of(paths, order), _phase(paths))
    return moved(setting, joint, order)


def _phase(paths: Paths) -> tuple[Formula, ...] | None:
    """(-1)^k cos(Phi) by its factors, the hopping's own sign around the ring included; -1 on a ring without flux."""
    if not paths.closed:
        return None
    if paths.flux is None:
        return ()
    exponent = plus(K, paths.length, ONE) if paths.turned else K
    return power(MINUS_ONE, exponent), call("cos", paths.flux)


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
