"""The derivation of exceptional intervals written out."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

from derive.derivations.detection.topic import total_probability
from derive.derivations.sight import Sight
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    Formula,
    letter,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.record.said import Line, Prose, Step

TWO = number(2)


class Found(Protocol):
    """What a step needs to know of one exceptional interval."""

    @property
    def number(self) -> int: ...
    @property
    def interval(self) -> Formula: ...
    @property
    def groups(self) -> tuple[tuple[int, ...], ...]: ...
    @property
    def drop(self) -> int: ...
    @property
    def divergence(self) -> Formula: ...


def written(sight: Sight, found: Sequence[Found]) -> tuple[Step, ...]:
    """The energies seen, the condition, the divergence, and one step an interval."""
    return (_energies(sight), _condition(), _divergence(), *(s for e in found for s in _one(sight, e)))


def _energies(sight: Sight) -> Step:
    levels = sight.levels(None)
    lines = []
    for k, (e, p) in enumerate(zip(levels.energies, levels.p, strict=True), start=1):
        lines += [Line(operator("E", k), e), Line(operator("p", k), levels.field.formula(p))]
    return Step(("The detector sees these energies, with these weights:",), tuple(lines), fold=len(lines) > 8)


def _condition() -> Step:
    gap = plus(operator("E", "j"), times(MINUS_ONE, operator("E", "k")))
    return Step(
        ("Asked once every ", TAU, ", two of them cannot be told apart where their phases agree:"),
        (Line(times(gap, operator("tau", "c")), times(TWO, PI, letter("m"))),),
        where=("with ", letter("m"), " a whole number."),
    )


def _divergence() -> Step:
    h, g = operator("h(x)"), operator("g(x)")
    slope_h, slope_g = operator("h'", "j"), operator("g'", "j")
    away = power(plus(TAU, times(MINUS_ONE, operator("tau", "c"))), number(-2))
    share = times(power(slope_g, TWO), power(operator("p", "j"), MINUS_ONE), power(slope_h, number(-2)))
    total = times(TWO, Formula("sum", ("j", ONE, letter("m"), share)))
    x = letter("x")
    part = times(operator("p", "j"), power(plus(x, -operator("E", "j")), MINUS_ONE))
    ratio = Formula("sum", ("j", ONE, letter("m"), part))
    return Step(
        ("Near such an interval one eigenvalue of the undetected step for each lost phase comes within a square of the "
         "distance of the unit circle. It sits at a zero of ", g, ", and it carries the variance of the return:"),
        (Line(times(g, power(h, MINUS_ONE)), ratio), Line(operator("D", "c"), total),
         Line(operator("Var"), times(operator("D", "c"), away), "~")),
        where=("with ", h, " the product of ", plus(x, -operator("E", "j")), " over the ", letter("m"),
               " levels that merge, ", slope_h, " and ",
               slope_g, " the slopes at ", operator("E", "j"), "; several merging phases add up."),
    )


def _one(sight: Sight, e: Found) -> tuple[Step, ...]:
    name = f"exceptional.{e.number}"
    lost = sum(len(g) for g in e.groups if len(g) > 1)
    tau_c = operator("tau", f"c{e.number}")
    return (
        Step((f"Interval {e.number}:",), (Line(tau_c, e.interval),), f"{name}.interval"),
        Step((f"There {lost} levels lose their own phase: ", *_listed(sight, e), ":"),
             (Line(operator("N", "merged"), number(lost)),), f"{name}.merged"),
        Step(("The number of phases drops by",), (Line(operator("N", "lost"), number(e.drop)),), f"{name}.drop"),
        Step(("and around it the variance of the return diverges with",),
             (Line(operator("D", f"c{e.number}"), e.divergence),), f"{name}.divergence"),
    )


def _listed(sight: Sight, e: Found) -> Prose:
    out: list[str | Formula] = []
    energies = sight.energies or []
    for n, group in enumerate(g for g in e.groups if len(g) > 1):
        out.append("; " if n else "")
        for k, place in enumerate(group):
            out += [" with " if k else "", energies[place]]
    return tuple(out)


class Value(Protocol):
    """What a step needs to know of one special value of a letter."""

    @property
    def number(self) -> int: ...
    @property
    def name(self) -> str: ...
    @property
    def value(self) -> Formula: ...
    @property
    def phases(self) -> int | None: ...
    @property
    def total(self) -> Formula | None: ...


def at_values(sight: Sight, found: Sequence[Value]) -> tuple[Step, ...]:
    """Where squared lengths vanish, and one step a value."""
    if not found:
        return ()
    lines = tuple(Line(f, number(0)) for f in sight.conditions)
    j = letter("j")
    first = Step(
        ("Whatever the interval, fewer phases are seen where two seen energies coincide or one is no longer seen: "
         "there, and only there, a squared length ", operator("n", "j"), " vanishes of the vectors that ",
         operator("H"), " reaches from the detector; factors that may be zero are"),
        lines, fold=len(lines) > 6,
        where=("with ", operator("n", "j"), ", ", j, " = 0 … ", number(sight.space.size - 1),
               ", from the same recursion as for the total probability.",),
    )
    return (first, *(s for e in found for s in _value(sight, e)))


def _value(sight: Sight, e: Value) -> tuple[Step, ...]:
    name = f"exceptional.letter.{e.number}"
    out = [Step((f"Value {e.number}:",), (Line(letter(e.name), e.value),), f"{name}.value")]
    if e.phases is not None:
        reason: Prose = ("There the phases seen, ", number(sight.phases), " elsewhere, are but")
        out.append(Step(reason, (Line(letter("w"), number(e.phases)),), f"{name}.phases"))
    if e.total is not None:
        elsewhere = total_probability(sight)
        reason = ("and the total detection probability, ", elsewhere, " elsewhere, is")
        out.append(Step(reason, (Line(operator("P", "det"), e.total),), f"{name}.total"))
    return tuple(out)
