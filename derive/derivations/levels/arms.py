"""Levels of unequal paths at a watched site, sizes left as letters: arm by arm, and where arms share a level.

A chain watched anywhere, a star with arms of different lengths.  Arm a has M_a - 1 sites; arms of one length go
together.  Its levels start at theta_k = pi k/M_a, k = 1 ... M_a - 1, and arm b has the level of number k as well where
k M_b/M_a is whole:

    sin(pi k M_b/M_a) != 0      the level is arm a's alone;  rate (2 m_a/M_a) T^2 tau sin^2(theta_k) + O(tau^3)
    sin(pi k M_b/M_a) = 0       the arms S that share it have one bright superposition, amplitudes ~ 1/sqrt(M_b) at
                                each end;  rate 2 T^2 tau sin^2(theta_k) sum_S m_b/M_b + O(tau^3),  the rest is dark

A start j steps out on arm a0 has the weight (2/M_a0) sin^2(j theta_k) (1/M_a0)/sum_S m_b/M_b on it, none where a0 is
not in S.  How the levels move is told in `levels_angles.py`.  Derived here.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations

from derive.derivations.families import Unequal
from derive.derivations.families_secular import deep_enough, returns_of, secular_alone, secular_claim
from derive.derivations.levels import steps
from derive.derivations.levels import topic as finite
from derive.derivations.levels.angles import Bundle, Joint, moved
from derive.derivations.levels.families import K, expansion, for_every, left_out, path_sizes
from derive.derivations.survival.interference import simple
from derive.exact.arguments import is_nonnegative, is_positive
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
    inverse,
    letter,
    negate,
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
from derive.problem.setting import Family, Relation, Setting
from derive.record.said import Claim, Derivation, Kind, Line, Prose, Step, Value

MOST_LENGTHS = 3
"""Different lengths up to which every way of sharing a level is told; beyond, only the secular function is."""
ALWAYS, NEVER, SOMETIMES = "always", "never", "sometimes"


@dataclass(frozen=True)
class Arm:
    """Arms of one length, by the number of the first of them, counted from 1."""

    first: int
    bundle: Bundle


@dataclass(frozen=True)
class Meeting:
    """Arms that share a level, those that are apart from it, and what k must meet for that.

    `number` is the level's on the first of the arms: k, or where only lengths in numbers decide, that number.
    """

    shared: tuple[Arm, ...]
    apart: tuple[Arm, ...]
    assume: tuple[Relation, ...]
    number: Formula = K

    @property
    def name(self) -> str:
        numbers = ".".join(str(a.first) for a in self.shared)
        return f"{text(self.number)}.{'arm' if len(self.shared) == 1 else 'arms'}.{numbers}"

    @property
    def angle(self) -> Formula:
        return times(PI, self.number, inverse(self.shared[0].bundle.M))

    @property
    def keys(self) -> tuple[tuple[str, object], ...]:
        level: object = "k" if self.number == K else int(self.number.args[0])
        return ("level", level), ("arm", self.shared[0].first)


@dataclass(frozen=True)
class Begin:
    """A start `distance` steps out on an arm, and what must be assumed for it to stand there."""

    arm: Arm
    distance: Formula
    assume: tuple[Relation, ...]


@dataclass(frozen=True)
class Found:
    """A meeting's level: coefficients of its energy and rate in tau, the start's weight, how many are dark."""

    meeting: Meeting
    energy: dict[int, Formula]
    rate: dict[int, Formula]
    weight: Formula | None
    dark: int


def derive_arm_levels(setting: Setting, seen: Unequal, order: int) -> Derivation:
    """Every arm's levels, alone and shared, and the secular function."""
    every = path_sizes(setting)
    arms = arms_of(setting, seen)
    if len(arms) > MOST_LENGTHS:
        return secular_alone(setting, seen, order, every)
    begin = begin_of(setting, arms)
    moments = returns_of(seen, order)
    found = [_found(setting, seen, moments, m, begin, order) for m in meetings(setting, arms)]
    deep = deep_enough(setting, seen, order)
    claims = [c for f in found for c in _claims(f, order, deep, begin, every)]
    secular = () if any(x.name == "E" for x in setting.letters) else (secular_claim(setting, seen, order, every),)
    dark = [c for f in found for c in _dark(f, every)]
    out = _steps(seen, arms, found, secular, order)
    return Derivation("levels", (*claims, *secular, *dark), (*out, *steps.dark(dark)), notes=_notes(setting))


# -- which arms, and which of them meet


def arms_of(setting: Setting, seen: Unequal) -> tuple[Arm, ...]:
    """The arms by length, in the order in which each length comes first."""
    lengths = [simple(plus(f, ONE), setting) for f in seen.lengths if f != ZERO]
    found: dict[Formula, list[int]] = {}
    for n, size in enumerate(lengths, start=1):
        found.setdefault(size, []).append(n)
    return tuple(Arm(ns[0], Bundle(number(len(ns)), size)) for size, ns in found.items())


def meetings(setting: Setting, arms: tuple[Arm, ...]) -> list[Meeting]:
    """Every set of arms that can share a level: single ones first."""
    found = []
    for size in range(1, len(arms) + 1):
        for shared in combinations(arms, size):
            apart = tuple(a for a in arms if a not in shared)
            for k in _numbers(shared):
                assume = _conditions(setting, shared, apart, k)
                if assume is not None:
                    found.append(Meeting(shared, apart, assume, k))
    return found


def _numbers(shared: tuple[Arm, ...]) -> list[Formula]:
    """Numbers of levels: k, or each one by itself where two of the lengths are numbers."""
    known = [a.bundle.M for a in shared if a.bundle.M.head == "number"]
    if len(known) < 2 or shared[0].bundle.M.head != "number":
        return [K]
    return [number(k) for k in range(1, int(known[0].args[0]))]


def _conditions(
    setting: Setting, shared: tuple[Arm, ...], apart: tuple[Arm, ...], k: Formula
) -> tuple[Relation, ...] | None:
    """What k must meet; None where no k can."""
    first, out = shared[0], []
    for arm, op, never in (*((a, "=", NEVER) for a in shared[1:]), *((a, "!=", ALWAYS) for a in apart)):
        how = sharing(setting, first, arm, k)
        if how == never:
            return None
        if how == SOMETIMES:
            out.append(Relation(call("sin", turn(setting, first, arm, k)), op, ZERO))
    return tuple(out)


def sharing(setting: Setting, first: Arm, other: Arm, k: Formula) -> str:
    """Whether the other arm has the first one's levels, or its level of a given number."""
    ratio = _ratio(setting, first, other)
    if ratio.head != "number":
        return SOMETIMES
    least = Fraction(ratio.args[0]).denominator
    if k != K:
        return ALWAYS if int(k.args[0]) % least == 0 else NEVER
    if least == 1:
        return ALWAYS
    return NEVER if number(least) == first.bundle.M else SOMETIMES


def _ratio(setting: Setting, first: Arm, other: Arm) -> Formula:
    ratio = simple(times(other.bundle.M, inverse(first.bundle.M)), setting)
    return ratio if ratio.head == "number" else times(other.bundle.M, inverse(first.bundle.M))


def turn(setting: Setting, first: Arm, other: Arm, k: Formula) -> Formula:
    """M_b theta_k = pi k M_b/M_a: a multiple of pi where arm b has the level too."""
    turned = times(PI, k, _ratio(setting, first, other))
    return turned if k == K else simple(turned, setting)


# -- the start


def begin_of(setting: Setting, arms: tuple[Arm, ...]) -> Begin | None:
    """The start on its arm: so many steps from the detector, on the lowest-numbered site there is, or at a site."""
    start = setting.start
    if start is None:
        return None
    if start.distance is not None:
        return _at_distance(setting, arms, start.distance)
    if isinstance(start.place, Formula):
        return _at_site(setting, arms, start.place)
    return None


def _at_distance(setting: Setting, arms: tuple[Arm, ...], j: Formula) -> Begin | None:
    for arm in arms:
        room = simple(plus(arm.bundle.M, MINUS_ONE, negate(j)), setting)
        if room.head == "number" and room.args[0] < 0:
            continue
        fits = is_nonnegative(room, setting.domains())
        length = simple(plus(arm.bundle.M, MINUS_ONE), setting)
        return Begin(arm, j, () if fits else (Relation(j, "<=", length),))
    return None


def _at_site(setting: Setting, arms: tuple[Arm, ...], site: Formula) -> Begin | None:
    """On a chain, below or above the watched site."""
    family, place = setting.space, setting.detectors[0].place
    if not isinstance(family, Family) or family.name != "chain" or not isinstance(place, Formula):
        return None
    below = simple(plus(place, negate(site)), setting)
    above = simple(negate(below), setting)
    if is_positive(below, setting.domains()):
        return Begin(arms[0], below, ())
    return Begin(arms[-1], above, ()) if is_positive(above, setting.domains()) else None


# -- one level


def _found(
    setting: Setting, seen: Unequal, moments: tuple[Formula, ...], meeting: Meeting, begin: Begin | None, order: int
) -> Found:
    shared, apart = (tuple(a.bundle for a in arms) for arms in (meeting.shared, meeting.apart))
    turns = tuple(turn(setting, meeting.shared[0], a, meeting.number) for a in meeting.apart)
    joint = Joint(shared, apart, seen.T, seen.C, meeting.angle, moments, turns=turns)
    energy, rate = (_tidied(setting, meeting, terms) for terms in moved(setting, joint, order))
    count = sum(int(a.bundle.count.args[0]) for a in meeting.shared)
    weight = None if begin is None else _weight(setting, meeting, begin)
    return Found(meeting, energy, rate, weight, count - 1)


def _tidied(setting: Setting, meeting: Meeting, terms: dict[int, Formula]) -> dict[int, Formula]:
    """Cosines of a number worked out."""
    if meeting.number == K:
        return terms
    worked = {n: simple(f, setting) for n, f in terms.items()}
    return {n: f for n, f in worked.items() if n == 0 or f != ZERO}


def _weight(setting: Setting, meeting: Meeting, begin: Begin) -> Formula:
    """(2/M_a0) sin^2(j theta_k) times arm a0's share of the bright superposition."""
    if begin.arm not in meeting.shared:
        return ZERO
    sine = power(call("sin", times(begin.distance, meeting.angle)), number(2))
    weight = times(number(2), sine, inverse(begin.arm.bundle.M), share(setting, meeting, begin.arm))
    return weight if meeting.number == K else simple(weight, setting)


def share(setting: Setting, meeting: Meeting, arm: Arm) -> Formula:
    """(1/M_a)/sum_S m_b/M_b: one path's part of the bright superposition."""
    total = plus(*(times(a.bundle.count, inverse(a.bundle.M)) for a in meeting.shared))
    return simple(inverse(times(arm.bundle.M, total)), setting)


# -- claims


def _claims(
    found: Found, order: int, deep: tuple[Relation, ...], begin: Begin | None, every: str
) -> Iterator[Claim]:
    even, odd = left_out(order)
    yield _moving(found, "energy", "level energy", found.energy, even, deep, every)
    yield _still(found, "multiplicity", "level multiplicity", ONE, (), every)
    yield _moving(found, "rate", "decay rate", found.rate, odd, deep, every)
    if found.weight is not None and begin is not None:
        yield _still(found, "weight", "level weight", found.weight, begin.assume, every)


def _moving(
    found: Found, part: str, quantity: str, terms: dict[int, Formula], remainder: int, deep: tuple[Relation, ...],
    every: str,
) -> Claim:
    kind = Kind("order", f"up to O(tau^{remainder})", remainder)
    return _claim(found, part, quantity, expansion(terms, remainder), kind, deep, every)


def _still(
    found: Found, part: str, quantity: str, value: Formula, assume: tuple[Relation, ...], every: str
) -> Claim:
    return _claim(found, part, quantity, value, Kind(), assume, every)


def _claim(
    found: Found, part: str, quantity: str, value: Value, kind: Kind, assume: tuple[Relation, ...], every: str
) -> Claim:
    meeting = found.meeting
    return for_every(
        Claim(f"levels.{meeting.name}.{part}", "levels", Quantity(quantity, meeting.keys), value, kind,
              (*assume, *meeting.assume), valid_for=f"small tau{_range(meeting)}"), every)


def _range(meeting: Meeting) -> str:
    return "; every such k from 1 to the arm's length" if meeting.number == K else ""


def _dark(found: Found, every: str) -> list[Claim]:
    """What is left of the ends of arms that share a level."""
    if not found.dark:
        return []
    meeting = found.meeting
    energy = found.energy[0]
    pieces = (("energy", "dark level energy", energy), ("multiplicity", "dark level multiplicity", number(found.dark)))
    return [
        for_every(Claim(f"levels.dark.{meeting.name}.{part}", "levels", Quantity(quantity, meeting.keys), value,
                        assume=meeting.assume, valid_for=f"every tau{_range(meeting)}"), every)
        for part, quantity, value in pieces
    ]


# -- steps


def _notes(setting: Setting) -> tuple[Prose, ...]:
    family = setting.space
    if isinstance(family, Family) and family.name == "chain":
        return (("Arm 1 is the part of the chain below the watched site, arm 2 the part above it; ", K,
                 " counts an arm's levels from below."),)
    return (("Arms are counted from 1 in the order given; arms of one length go by the first of them, and ", K,
             " counts an arm's levels from below."),)


def _steps(
    seen: Unequal, arms: Sequence[Arm], found: Sequence[Found], secular: Sequence[Claim], order: int
) -> tuple[Step, ...]:
    E, at = letter("E"), letter("theta")
    ends = [times(a.bundle.count, call("sin", times(plus(a.bundle.M, MINUS_ONE), at)),
                  inverse(call("sin", times(a.bundle.M, at)))) for a in arms]
    own = () if seen.C == ZERO else (seen.C,)
    resolvent = power(plus(*own, times(MINUS_ONE, E), *(times(MINUS_ONE, seen.T, f) for f in ends)), MINUS_ONE)
    out = [
        *steps.secular_equation(),
        Step(("What is left of the graph is paths. On a path the energy is written with an angle,",),
             (Line(E, times(number(-2), seen.T, call("cos", at))),)),
        Step(("its states are sines, and in the watched site's resolvent the paths' ends add up:",),
             (Line(times(steps.BRA, power(plus(steps.H, times(MINUS_ONE, E)), MINUS_ONE), steps.KET), resolvent),)),
    ]
    for claim in secular:
        if isinstance(claim.value, Formula):
            out.append(Step(("so that the secular equation reads, everything on one side,",),
                            (Line(letter("F"), claim.value),), earns=claim.id))
    for f in found:
        out += _level_steps(f, order)
    return tuple(out)


def _level_steps(found: Found, order: int) -> list[Step]:
    meeting = found.meeting
    even, odd = left_out(order)
    angle = operator("theta", "k")
    out = [
        Step(_opening(meeting), (Line(angle, meeting.angle),)),
        Step(("Inserting ", plus(letter("theta"), times(MINUS_ONE, angle)), " as a series in ", times(I_UNIT, TAU),
              " and solving order by order, every size left as it is: the energy,"),
             (Line(call("Re", steps.EPS), plus(finite.in_tau(found.energy), _rest(even))),),
             earns=f"levels.{meeting.name}.energy"),
        Step(("and the rate:",),
             (Line(times(number(-2), call("Im", steps.EPS)), plus(finite.in_tau(found.rate), _rest(odd))),),
             earns=f"levels.{meeting.name}.rate"),
    ]
    if found.weight is not None:
        line = Line(operator("w", "k"), found.weight)
        out.append(Step(("The start's weight on level ", meeting.number, ":"), (line,),
                        earns=f"levels.{meeting.name}.weight"))
    return out


def _rest(remainder: int) -> Formula:
    return big_o(power(TAU, number(remainder)))


def _opening(meeting: Meeting) -> Prose:
    """Whose levels these are."""
    which = "a level" if meeting.number == K else f"level {text(meeting.number)} of arm {meeting.shared[0].first}"
    numbers = [str(a.first) for a in meeting.shared]
    lone = [r.left for r in meeting.assume if r.op == "!="]
    met = [r.left for r in meeting.assume if r.op == "="]
    words: list[str | Formula] = [f"Arm {numbers[0]} alone has {which}"] if len(numbers) == 1 else [
        f"Arms {', '.join(numbers[:-1])} and {numbers[-1]} share {which}, which one superposition of their ends shows"]
    for fs, said in ((met, " is 0"), (lone, " is not 0")):
        for f in fs:
            words += [", where " if len(words) == 1 else " and ", f, said]
    return (*words, ", at the angles:" if meeting.number == K else ", at the angle:")
