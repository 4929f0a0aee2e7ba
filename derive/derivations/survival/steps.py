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

T, N, J, q = letter("t"), letter("n"), letter("j"), letter("q")
S = operator("S")
PSI, P, Q, U = operator("|psi>"), operator("P"), operator("Q"), operator("U")
LEFT = plus(ONE, times(MINUS_ONE, q))
MISSED = plus(ONE, times(MINUS_ONE, LEFT, P))


def opening(perfect: bool = True) -> tuple[Step, ...]:
    """From the measured state to the sum over levels."""
    fading = call("exp", times(MINUS_ONE, operator("Gamma", "j"), T))
    step, slow = (times(Q, U), times(Q, U, Q)) if perfect else (times(MISSED, U), times(MISSED, U))
    told = ("and its squared length is the survival probability ", S, ".") if perfect else (
        "with ", q, " = ", call("sqrt", plus(ONE, times(MINUS_ONE, letter("eta")))),
        ", and its squared length is the survival probability ", S, ".")
    return (
        Step(
            ("After ", N, " asks without a click the state is"),
            (Line(operator("|psi_n>"), times(power(step, N), PSI)),),
            where=told,
        ),
        Step(
            ("The step ", slow, " has the ", "" if perfect else "slow ", "levels ", operator("epsilon", "j"),
             "; a level's amplitude turns with its energy and fades at half its rate ", operator("Gamma", "j"), ":"),
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
    perfect = spectrum.efficiency.is_perfect
    steps = [*opening(perfect)]
    if spectrum.rank > 1:
        steps.append(_of_higher_rank())
    if returned:
        steps.append(_returned(perfect))
    return (*steps, Step((reason,), tuple(lines), fold=len(lines) > 6))


def _of_higher_rank() -> Step:
    """Levels of one energy, told apart by the detector."""
    v, pi = operator("V"), operator("Pi")
    return Step(
        ("With ", pi, " the projector on the level of ", operator("A"), " at one energy, the rates are the eigenvalues "
         "other than 0 of"),
        (Line(operator("M"), times(operator("V", None, True), pi, v)),),
        where=("times ", TAU, " (and ", letter("c"), ", see below, where the detector misses): a level of ",
               operator("A"), " that the detector reaches along several directions fades along each at its own rate.",),
    )


def _returned(perfect: bool) -> Step:
    leaving = times(MINUS_ONE, I_UNIT, TAU, operator("V"), operator("a"))
    rest = order(power(TAU, number(2)))
    if perfect:
        return Step(
            ("The start is on the detector, with amplitudes ", operator("a"), " there. The first ask leaves, "
             "undetected,"),
            (Line(times(Q, U, PSI), plus(leaving, rest)),),
            where=("which the levels share as their weights.",),
        )
    return Step(
        ("The start is on the detector, with amplitudes ", operator("a"), " there. Every ask that misses it lets "
         "some of it out, in all"),
        (Line(plus(times(leaving, power(LEFT, MINUS_ONE)), rest)),),
        where=("which the levels share as their weights.",),
    )


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


def _interference(odd: bool) -> tuple[Line, ...]:
    """What a pair adds, D the gap; the second line is 0 where all is real."""
    d, z = operator("D"), operator("z")
    rates = (operator("Gamma", "j"), operator("Gamma", "k"))
    mean = call("exp", times(number(Fraction(-1, 2)), plus(*rates), T))
    front = times(number(-2), letter("c"), TAU, inverse(d))
    lines = [Line(times(front, call("Re", z), call("sin", times(d, T)), mean), None)]
    if odd:
        each = [times(number(Fraction(1, 2)), call("exp", times(MINUS_ONE, rate, T))) for rate in rates]
        inner = plus(*each, times(MINUS_ONE, call("cos", times(d, T)), mean))
        lines.append(Line(times(front, call("Im", z), inner), None))
    return tuple(lines)


def _pairs(law: Any) -> Step:
    s, gap = operator("s", "j"), plus(operator("E", "k"), times(MINUS_ONE, operator("E", "j")))
    odd = any(p.odd != ZERO for p in law.pairs)
    return Step(
        ("Two levels' states overlap by terms of order ", TAU, ", which lets them interfere. With ", s, " = ",
         times(operator("V", None, True), operator("P", "j"), PSI), ", ", operator("P", "j"),
         " the projector on level ", J, ", ", operator("z"), " = ",
         times(operator("s", "j", True), operator("s", "k")), " and ", operator("D"), " = ", gap,
         " every pair adds"),
        _interference(odd),
        where=("with ", letter("c"), " = 1 for a detector that never misses, else ",
               times(plus(ONE, q), power(LEFT, MINUS_ONE)), ".",),
    )


def _shifts() -> Step:
    amount = times(number(2), TAU, call("Im", times(operator("s", "j", True), operator("a"))), power(LEFT, MINUS_ONE),
                   call("exp", times(MINUS_ONE, operator("Gamma", "j"), T)))
    return Step(
        ("What the start has on the detector, ", operator("a"), ", leaks into the levels in the first asks and adds to "
         "each, with ", q, " = 0 for a detector that never misses,"),
        (Line(amount, None),),
    )


def laws(law: Any) -> tuple[Step, ...]:
    """The claims."""
    rest = order(power(TAU, number(law.order)) if law.order > 1 else TAU)
    out = []
    if law.pairs:
        out.append(_pairs(law))
    if law.shifts:
        out.append(_shifts())
    if law.exact is not None:
        out.append(Step(("Only one state is ever seen, so that each step multiplies it by one number:",),
                        (Line(S, law.exact),), earns="survival.exact"))
    out.append(Step(("Together, at fixed ", times(T, TAU), ":"), (Line(S, plus(law.survival(), rest)),),
                    earns="survival.small_tau"))
    out.append(Step(("The density of the first click, averaged over the oscillations between levels, is minus its "
                     "derivative:",), (Line(operator("f"), law.density()),), earns="survival.density"))
    return tuple(out)
