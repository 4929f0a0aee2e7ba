"""Survival at small tau on unequal paths, sizes left as letters: a finite sum over the levels of the start's arm.

The start is j steps out on an arm of M_0 - 1 sites.  Of level k, theta_k = pi k/M_0, arm b has a part where k M_b/M_0
is whole, which d_b(k) = 1 + floor(x) + floor(-x), x = k M_b/M_0, says by 1 and 0.  Then

    Gamma_k = 2 T^2 tau sin^2(theta_k) sum_b d_b(k)/M_b,        share_k = (1/M_0)/sum_b d_b(k)/M_b
    S = sum_k (2/M_0) sin^2(j theta_k) [1 - share_k + share_k exp(-Gamma_k t)] + O(tau)

for all sizes, whatever levels the arms have in common (`levels_arms.py`).  Derived here.
"""

from __future__ import annotations

from derive.derivations.families import Unequal
from derive.derivations.levels.arms import ALWAYS, NEVER, Arm, Begin, arms_of, begin_of, sharing
from derive.derivations.levels.families import K
from derive.derivations.survival import steps
from derive.derivations.survival.interference import simple
from derive.derivations.survival.topic import Decay, Law
from derive.errors import NotCovered
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    PI,
    TAU,
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
    walk,
)
from derive.problem.setting import Setting
from derive.record.said import Line, Step


def arms_law(setting: Setting, seen: Unequal) -> tuple[Law, tuple[Step, ...]]:
    """The levels of the start's arm, each with its share of the bright superposition."""
    arms = arms_of(setting, seen)
    begin = begin_of(setting, arms)
    if begin is None:
        raise NotCovered("where the size is a letter, a start is given by its distance from the detector")
    width = begin.arm.bundle.M
    theta = times(PI, K, inverse(width))
    ends = simple(plus(*_ends(setting, begin, arms)), setting)
    share = simple(inverse(times(width, ends)), setting)
    held = times(number(2), power(call("sin", times(begin.distance, theta)), number(2)), inverse(width))
    rate = times(number(2), power(seen.T, number(2)), TAU, power(call("sin", theta), number(2)), ends)
    count = simple(plus(width, MINUS_ONE), setting)
    hidden = plus(ONE, negate(share))
    dark = Formula("sum", ("k", ONE, count, times(held, hidden))) if K in walk(share) else simple(hidden, setting)
    decay = Decay(times(held, share), rate, None, count)
    return Law(dark, (decay,), assume=begin.assume), (*steps.opening(), *_arm_steps(begin, theta, share, rate))


def _ends(setting: Setting, begin: Begin, arms: tuple[Arm, ...]) -> list[Formula]:
    """m_b d_b(k)/M_b for every arm."""
    found = []
    for arm in arms:
        how = sharing(setting, begin.arm, arm, K)
        if how == NEVER:
            continue
        x = times(K, arm.bundle.M, inverse(begin.arm.bundle.M))
        whole = ONE if how == ALWAYS else plus(ONE, call("floor", x), call("floor", negate(x)))
        found.append(times(arm.bundle.count, whole, inverse(arm.bundle.M)))
    return found


def _arm_steps(begin: Begin, theta: Formula, share: Formula, rate: Formula) -> tuple[Step, ...]:
    x = letter("x")
    whole = plus(ONE, call("floor", x), call("floor", negate(x)))
    return (
        Step(("The start is ", begin.distance, " steps from the watched site on an arm whose states are sines of the "
              "angle",), (Line(operator("theta", "k"), theta),)),
        Step(("Another arm has the same level where the number ", x, " of its half waves in it is whole, which is said "
              "by",), (Line(whole, None),),
             where=("being 1 there and 0 elsewhere.",)),
        Step(("Of the arms that share a level one superposition is seen. The start's arm has this part in it, and its "
              "rate is",), (Line(operator("s", "k"), share), Line(operator("Gamma", "k"), rate))),
    )
