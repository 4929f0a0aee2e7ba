"""The classical walk written out."""

from __future__ import annotations

from typing import Any

from derive.formula.tree import MINUS_ONE, ONE, Formula, call, inverse, letter, operator, power, times
from derive.record.said import Line, Step

T, N = letter("t"), letter("n")
P, L, W, S = operator("p"), operator("L"), operator("W"), operator("S")


def equation(discrete: bool) -> tuple[Step, ...]:
    """The walk, and its survival as a sum over modes."""
    if discrete:
        first = Step(("At each step the walker goes to one of its neighbours, all alike, and stops at the detector. "
                      "Off the detector its distribution obeys",),
                     (Line(operator("p", "n+1"), times(W, operator("p", "n"))),))
        fading = power(operator("lambda", "k"), N)
    else:
        first = Step(("The walker hops along every bond at the rate given by the hopping's size, and stops at the "
                      "detector. Off the detector its distribution obeys",),
                     (Line(times(operator("d"), P, inverse(operator("dt"))), times(MINUS_ONE, L, P)),),)
        fading = call("exp", times(MINUS_ONE, operator("lambda", "k"), T))
    total = Formula("sum", ("k", ONE, letter("M"), times(operator("w", "k"), fading)))
    return (
        first,
        Step(("Its modes fade one by one, so that what is left of the probability is",), (Line(S, total),)),
    )


def on_this_graph(polynomial: Formula, name: str) -> tuple[Step, ...]:
    return (Step(("On this graph the modes that count are the roots, in the letter ", letter(name), ", of"),
                 (Line(letter("q"), polynomial),)),)


def on_paths(theta: Formula) -> tuple[Step, ...]:
    return (Step(("On a path the modes are sines of multiples of the angle",), (Line(operator("theta", "k"), theta),)),)


def laws(walk: Any, discrete: bool) -> tuple[Step, ...]:
    what = "The mean number of steps is the sum of S:" if discrete else "The mean time is the integral of S:"
    mean = () if walk.mean is None else (Step((what,), (Line(operator("mean"), walk.mean),), earns="classical.mean"),)
    return (
        Step(("The walker is still free with the probability",), (Line(S, walk.survival),), earns="classical.survival"),
        Step(("and is caught at this rate:" if not discrete else "and is caught at step n with the probability",),
             (Line(operator("f"), walk.density),), earns="classical.density"),
        *mean,
        Step(("In the end the slowest mode is left:",), (Line(S, walk.law, "~"),), earns="classical.law"),
    )

