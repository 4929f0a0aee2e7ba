"""The validity of the series written out: reason, lines, and what each line earns."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.derivations.watched import Watched
from derive.errors import NotCovered
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    Formula,
    call,
    constant,
    letter,
    negate,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.problem.setting import Setting
from derive.record.said import Line, Step

if TYPE_CHECKING:
    from derive.derivations.validity.norm_bound import NormBound
    from derive.derivations.validity.topic import Asked, Bounds

H, P, Q, U, G, K, D = (operator(name) for name in ("H", "P", "Q", "U", "G", "K", "D"))
D_DAGGER = operator("D", None, True)
h, y, r, t, n = (operator(name) for name in ("h", "y", "r", "t", "n"))
R, F, DELTA = operator("R"), operator("f"), operator("delta")
TERMS_SHOWN = 6


def written(setting: Setting, asked: Asked, bounds: Bounds) -> tuple[Step, ...]:
    return (
        *where_it_ends(setting),
        *majorised(bounds.whole),
        *remainder(asked, bounds),
        *states(asked, bounds),
        *promise(asked, bounds),
    )


def where_it_ends(setting: Setting) -> tuple[Step, ...]:
    """The two kinds of singularity, and f on this graph for a rank-one detector."""
    back = call("exp", times(I_UNIT, H, TAU))
    trace = call("exp", times(MINUS_ONE, I_UNIT, TAU, call("tr", H)))
    i, j, m = operator("lambda", "i"), operator("lambda", "j"), letter("m")
    return (
        Step(
            ("The series is the logarithm of the undetected step, expanded at ", TAU, " = 0; it converges up to the "
             "nearest point where that logarithm is singular. The step has no inverse where, by complementary minors "
             "of a unitary,"),
            (Line(F, call("det", times(D_DAGGER, back, D)), ":="),
             Line(call("det", times(Q, U, Q)), times(trace, F)),
             *_on_this_graph(setting)),
            where=("a zero of ", F, " is a singularity of the first kind (\"zero\").",),
        ),
        Step(
            ("Where the step has an inverse, only a meeting of two eigenvalues can be singular, and it is one exactly "
             "if their logarithms, continued from ", TAU, " = 0, differ and the step is not diagonalisable there:"),
            (Line(i, j), Line(plus(call("log", i), negate(call("log", j))), times(number(2), PI, I_UNIT, m))),
            where=("with ", m, " ≠ 0 (\"meeting\"); a meeting on one branch, or of states that no power of ", H,
                   " connects, is harmless.",),
        ),
        Step(
            ("The radius is the least ", call("abs", TAU), " of either kind. It is found and certified in ball "
             "arithmetic: all zeros of ", F, " and of the discriminant of the step in a disc, counted, and the "
             "logarithms followed to each meeting:"),
            (Line(R, call("min", call("abs", TAU))),),
            earns="validity.radius",
        ),
    )


def _on_this_graph(setting: Setting) -> tuple[Line, ...]:
    """f = sum_n (i tau)^n <d|H^n|d>/n!, the first terms."""
    if setting.detectors[0].rank > 1:
        return ()
    try:
        watched = Watched(setting, TERMS_SHOWN)
        moments = watched.moments(watched.krylov(TERMS_SHOWN), TERMS_SHOWN)
        returns = [block[0][0] for block in moments.returns(TERMS_SHOWN)]
    except (NotCovered, ZeroDivisionError):
        return ()
    terms, scale = [], Fraction(1)
    for k, value in enumerate(returns):
        scale = scale / k if k else scale
        sign = Fraction((-1) ** (k // 2)) * scale
        if value:
            inner = watched.field.formula(value.scaled(sign))
            letters = (*((I_UNIT,) if k % 2 else ()), *((power(TAU, number(k)) if k > 1 else TAU,) if k else ()))
            terms.append(times(inner, *letters))
    return (Line(F, plus(*terms, order(power(TAU, number(TERMS_SHOWN + 1))))),)


def majorised(whole: NormBound) -> tuple[Step, ...]:
    m = letter("m")
    size = Formula("sum", ("m", ONE, constant("infinity"), times(
        power(call("factorial", m), MINUS_ONE), power(y, m))))
    log = negate(call("log", plus(number(2), negate(call("exp", y)))))
    centred = call("abs", plus(H, negate(operator("E", 0))))
    return (
        Step(
            ("A shift of ", H, " by a number changes only a phase. On this graph, by Gershgorin's discs,"),
            (Line(operator("E", 0), whole.E0, ":="), Line(centred, whole.h, "<=")),
            where=("this bound is ", h, ", for the whole graph: the tail runs over all orders, and a far site of high "
                   "energy counts.",),
        ),
        Step(
            ("Coefficient by coefficient in ", TAU, " the step differs from 1 by no more than the exponential series, "
             "and its logarithm is majorised likewise, all coefficients being positive:"),
            (Line(size, plus(call("exp", y), MINUS_ONE)), Line(log, plus(
                y, power(y, number(2)), power(y, number(3)), times(number(Fraction(13, 12)), power(y, number(4))),
                order(power(y, number(5)))))),
            where=("with ", y, " = ", times(h, TAU), " < ", call("log", number(2)), ".",),
        ),
    )


def remainder(asked: Asked, bounds: Bounds) -> tuple[Step, ...]:
    reason = f"Without the orders beyond {asked.order}, the tail of this series bounds the rest"
    if bounds.near:
        reason += "; the first omitted orders see only sites near the detector, and take the norm there"
    locally = tuple(Line(operator("h", d), bound.h, ":=") for d, bound in bounds.near)
    gap = call("abs", plus(times(TAU, G), negate(times(TAU, operator(f"G^{{({asked.order})}}")))))
    return (Step((reason + ":",), (*locally, Line(gap, bounds.remainder, "<=")), earns="validity.remainder"),)


def states(asked: Asked, bounds: Bounds) -> tuple[Step, ...]:
    below = plus(number(2), negate(call("exp", times(h, TAU))))
    x = operator("x")
    return (
        Step(
            ("One step and its truncation then differ by at most",),
            (Line(DELTA, times(r, power(below, MINUS_ONE)), ":="),),
            where=("with ", r, " the bound just found, since both logarithms are at most ",
                   negate(call("log", below)), " in norm.",),
        ),
        Step(
            ("The step is a contraction, the truncated one nearly so; in the telescoping sum over ", n, " = ",
             times(t, power(TAU, MINUS_ONE)), " steps each difference is met once:"),
            (Line(times(n, DELTA, power(plus(ONE, DELTA), plus(n, MINUS_ONE))), times(x, call("exp", x)), "<="),
             Line(x, times(t, DELTA, power(TAU, MINUS_ONE)), ":=")),
        ),
        Step(("Written out, for ", t, " = ", asked.time, ":"), (Line(operator("s"), bounds.state, ":="),),
             earns="validity.state"),
        Step(
            ("At each ask the detector takes at most the share ", power(times(h, TAU), number(2)),
             " of the probability, so the surviving norm is bounded from below, and relative to it the error is at "
             "most",),
            (Line(operator("s", "r"), bounds.relative, ":="),), earns="validity.state.relative",
        ),
    )


def promise(asked: Asked, bounds: Bounds) -> tuple[Step, ...]:
    tau_s, tau_r = operator("tau", "s"), operator("tau", "r")
    return (
        Step(
            ("Both bounds grow with ", TAU, ", so one equation gives the largest interval, and every smaller one "
             "keeps the promise:"),
            (Line(call("s", tau_s), asked.tolerance),),
            earns="validity.interval",
            where=("solved for ", tau_s, " in ball arithmetic; ", tau_r, " is the same for the relative error.",),
        ),
    )
