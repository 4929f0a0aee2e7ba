"""The slow generator's derivation written out: reason, lines, and what each line earns."""

from __future__ import annotations

from fractions import Fraction

from derive.algebra.slow import Series
from derive.derivations.absorber import steps as absorber_steps
from derive.derivations.absorber.steps import KAPPA, K, P, Q, U, X, in_operators
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    Formula,
    call,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.record.said import Line, Matrix, Step

G, E = operator("G"), operator("E")
H, V, C, D = operator("H"), operator("V"), operator("C"), operator("D")
V_TURNED, D_TURNED = operator("V", None, True), operator("D", None, True)
TURN = call("exp", times(MINUS_ONE, I_UNIT, TAU, G))


def one_step() -> tuple[Step, ...]:
    return absorber_steps.one_step(False)


def slow_states() -> tuple[Step, ...]:
    """The invariant graph, its equation and how it is solved."""
    c = call("coth", times(number(Fraction(1, 2)), KAPPA))
    half = number(Fraction(1, 2))
    inside, across = _block("QQ"), _block("QP")
    back, on = _block("PQ"), _block("PP")
    source = times(half, plus(c, MINUS_ONE), plus(back, times(plus(on, MINUS_ONE), X)))
    rest = times(MINUS_ONE, half, plus(c, ONE), X, plus(E, MINUS_ONE))
    return (
        Step(
            ("After a few asks only slow states are left, whose part on the detector is a function of the rest:",),
            (Line(times(K, plus(Q, X)), times(plus(Q, X), TURN)),),
            where=("; ", X, " maps range(", Q, ") to the detector and vanishes with ", TAU, ", and ", G,
                   " acts off the detector. What else there was decays like exp(−", operator("n"), KAPPA, ")."),
        ),
        Step(
            ("With ", E, " for exp(−i", TAU, G, ") and ", U, " cut into blocks, the two rows of this equation are",),
            (Line(E, plus(inside, times(across, X))), Line(X, plus(source, rest))),
            where=("so that every order of ", X, " follows from lower ones. At efficiency 1 ", X, " is 0."),
        ),
        Step(("The generator is the logarithm:",), (Line(times(MINUS_ONE, I_UNIT, TAU, G), call("log", E)),)),
    )


def _block(name: str) -> Formula:
    return operator("U", name)


def in_words(words: Series) -> tuple[Step, ...]:
    """G_0, G_1, ... over A, V, V†, C."""
    lines = tuple(Line(operator("G", k), in_operators(paths, k, False)) for k, paths in enumerate(words[1:]))
    return (
        Step(
            ("With ", operator("A"), " = ", times(Q, H, Q), ", ", V, " = ", times(Q, H, D), ", ", C, " = ",
             times(D_TURNED, H, D), ", ", operator("B", "k"), " = ", times(V, power(C, letter("k")), V_TURNED),
             " the first orders are"),
            lines,
            where=("with ", P, " = ", times(D, D_TURNED), " the detector's projector."),
        ),
    )


def weak_step(rate: Formula) -> tuple[Step, ...]:
    """K and its logarithm on all sites, gamma the rate at which an amplitude on the detector is lost."""
    q, gamma, step = operator("q"), operator("gamma"), operator("K")
    lost = plus(ONE, times(MINUS_ONE, q))
    a, b = call("log", step), times(MINUS_ONE, I_UNIT, TAU, G)
    evolution = call("exp", times(MINUS_ONE, I_UNIT, operator("H"), TAU))
    return (
        Step(
            ("The efficiency vanishes with the interval: a “no” takes away little, and no state is faster than others. "
             "One interval on all sites,",),
            (Line(step, times(plus(ONE, times(MINUS_ONE, lost, P)), evolution)),
             Line(q, plus(ONE, times(MINUS_ONE, gamma, TAU), order(power(TAU, number(2))))), Line(gamma, rate)),
            where=(", with ", q, " the square root of 1 − η,"),
        ),
        Step(
            ("is close to the identity, and its logarithm is taken order by order in the products of H and ", P,
             "; all but the first order are commutators, which reach ", operator("k"), " steps from the detector:"),
            (Line(b, a),),
        ),
    )


def inserted(k: int, matrix: Matrix, first: str = "Cutting the detector out of H:") -> Step:
    reason = first if k == 0 else f"Inserted, order {k} in the site basis:"
    return Step((reason,), (Line(operator("G", k), matrix),), earns=f"generator.{k}")
