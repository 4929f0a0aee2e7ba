"""The survival law written out: reason, lines, and what each line earns."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

from derive.algebra.polynomial import polynomial_formula
from derive.derivations.spectrum import Spectrum
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    inverse,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.record.said import Line, Step

T, N, J = letter("t"), letter("n"), letter("j")
S = operator("S")
PSI, Q, U = operator("|psi>"), operator("Q"), operator("U")


def opening() -> tuple[Step, ...]:
    """From the measured state to the sum over levels."""
    fading = call("exp", times(MINUS_ONE, operator("Gamma", "j"), T))
    return (
        Step(
            ("After ", N, " asks without a click the state is"),
            (Line(operator("|psi_n>"), times(power(times(Q, U), N), PSI)),),
            where=("and its squared length is the survival probability ", S, "."),
        ),
        Step(
            ("The step ", times(Q, U, Q), " has the levels ", operator("epsilon", "j"), "; a level's amplitude turns "
             "with its energy and fades at half its rate ", operator("Gamma", "j"), ":"),
            (Line(call("exp", times(MINUS_ONE, I_UNIT, operator("epsilon", "j"), T)), None),),
        ),
        Step(
            ("At fixed ", times(T, TAU), " the levels' states are orthogonal up to terms of order ", TAU,
             ", so that interference drops out and every level keeps its weight ", operator("w", "j"), ":"),
            (Line(S, plus(operator("w", "dark"), Formula("sum", ("j", ONE, letter("M"), times(
                operator("w", "j"), fading))), order(TAU))),),
        ),
    )


def from_levels(spectrum: Spectrum, levels: Sequence[Any], returned: bool) -> tuple[Step, ...]:
    """Rates and weights on an explicit graph."""
    lines = []
    for level in levels:
        if level.place.polynomial is not None:
            lines.append(Line(polynomial_formula(level.place.polynomial, level.place.letter), ZERO))
        else:
            lines.append(Line(operator("E", "j"), level.zeroth))
        lines.append(Line(operator("Gamma", "j"), times(level.rate[1], TAU)))
        if level.weight is not None and not returned:
            lines.append(Line(operator("w", "j"), level.weight))
    reason = "The bright levels on this graph, their rates to leading order and the start's weights:"
    steps = [*opening()]
    if returned:
        steps.append(Step(
            ("The start is on the detector. The first ask leaves, undetected,",),
            (Line(times(Q, U, PSI), plus(times(MINUS_ONE, I_UNIT, TAU, operator("V")), order(power(TAU, number(2))))),),
            where=("whose weight on level ", J, " is ", times(TAU, operator("Gamma", "j")), "."),
        ))
    return (*steps, Step((reason,), tuple(lines), fold=len(lines) > 6))


def from_paths(setting: Any, paths: Any, theta: Formula) -> tuple[Step, ...]:
    """Rates and weights of equal paths."""
    start = setting.start.distance
    return (
        *opening(),
        Step(
            ("The paths left over by the watched site have states that are sines of the angle",),
            (Line(operator("theta", "k"), theta),),
            where=("and the start is ", start, " steps from the watched site, on one of them.",),
        ),
    )


def _interference() -> Formula:
    gap = plus(operator("E", "k"), times(MINUS_ONE, operator("E", "j")))
    mean = times(number(Fraction(-1, 2)), plus(operator("Gamma", "j"), operator("Gamma", "k")), T)
    return times(operator("c", "j"), operator("c", "k"), call("sin", times(gap, T)), inverse(gap), call("exp", mean))


def laws(law: Any) -> tuple[Step, ...]:
    """The claims."""
    rest = order(power(TAU, number(law.order)) if law.order > 1 else TAU)
    out = []
    if law.pairs:
        out.append(Step(
            ("Two levels' states overlap by terms of order ", TAU, ", which lets them interfere; with ",
             operator("c", "j"), " the product of the start's and the detector's amplitudes on level ", J,
             " they add"),
            (Line(times(number(-2), TAU, Formula("sum", ("j<k", ONE, letter("M"), _interference()))), None),),
        ))
    if law.exact is not None:
        out.append(Step(("Only one state is ever seen, so that each step multiplies it by one number:",),
                        (Line(S, law.exact),), earns="survival.exact"))
    out.append(Step(("Together, at fixed ", times(T, TAU), ":"), (Line(S, plus(law.survival(), rest)),),
                    earns="survival.small_tau"))
    out.append(Step(("The density of the first click, averaged over the oscillations between levels, is minus its "
                     "derivative:",), (Line(operator("f"), law.density()),), earns="survival.density"))
    return tuple(out)
