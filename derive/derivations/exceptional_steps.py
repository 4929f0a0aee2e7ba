"""The derivation of exceptional intervals written out."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

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

