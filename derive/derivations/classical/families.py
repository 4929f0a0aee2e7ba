"""Classical walks on families of symbolic size: images of sines, watched anywhere on a chain, at a star's centre, or on
a ring.

A path of L sites, the first one joined to the absorbing site, its other end free:

    continuous   lambda_k = 4 g sin^2(theta_k/2),   theta_k = pi (2k-1)/(2L+1),   mean j (2L+1-j)/(2g)
    discrete     lambda_k = cos(theta_k),           theta_k = pi (2k-1)/(2L),     mean j (2L-j)

S = a sum_k cot(theta_k/2) sin(j theta_k) (fading)_k with a = 2/(2L+1) or 1/L; a ring of N sites is a path, both ends
absorbing: theta_k = pi (2k-1)/N, a = 2/N, k up to N/2, means j (N-j)/(2g) and j (N-j).  Arms of a star, like the halves
of a chain watched in its middle, do not know of one another.  The means are the gambler's ruin (textbook).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from derive.derivations.classical import steps
from derive.derivations.families import Paths, Unequal, seen_from_detector
from derive.derivations.levels.arms import arms_of, begin_of
from derive.derivations.levels.families import path_sizes
from derive.derivations.survival.interference import simple
from derive.errors import NotCovered
from derive.formula.tree import (
    ONE,
    PI,
    ZERO,
    Formula,
    call,
    inverse,
    letter,
    negate,
    number,
    plus,
    power,
    times,
)
from derive.problem.setting import Relation, Setting

T, N, K = letter("t"), letter("n"), letter("k")


@dataclass(frozen=True)
class Walk:
    """What is claimed: survival, its density, the mean, and the law that is left in the end."""

    survival: Formula
    density: Formula
    mean: Formula | None
    law: Formula
    assume: tuple[Relation, ...] = ()


def family_walk(setting: Setting, discrete: bool) -> tuple[Walk, tuple[steps.Step, ...], str]:
    """The walk's formulas in the size, the steps, and the letter of the size."""
    paths, start, assume = _begun(setting)
    walk, theta = _walk(setting, paths, start, discrete)
    return replace(walk, assume=assume), steps.on_paths(theta), path_sizes(setting)


def _begun(setting: Setting) -> tuple[Paths, Formula, tuple[Relation, ...]]:
    """The paths, the start's distance, and what is assumed; of unequal arms only the start's own matters."""
    seen = seen_from_detector(setting)
    start = setting.start.distance if setting.start else None
    if isinstance(seen, Unequal):
        begin = begin_of(setting, arms_of(setting, seen))
        if begin is not None:
            length = simple(plus(begin.arm.bundle.M, number(-1)), setting)
            return Paths(ONE, length, seen.T, seen.C), begin.distance, begin.assume
    elif not isinstance(seen, Paths):
        raise NotCovered("the classical walk on this family has no closed form in its size here; give a number for it")
    elif start is not None:
        return seen, start, ()
    raise NotCovered("where the size is a letter, a start is given by its distance from the detector")


def _walk(setting: Setting, paths: Paths, j: Formula, discrete: bool) -> tuple[Walk, Formula]:
    L = paths.length
    around = simple(plus(L, ONE), setting) if paths.closed else None
    if around is not None:
        width, front, upto = around, times(number(2), inverse(around)), call("floor", times(around, inverse(number(2))))
    else:
        width = simple(plus(times(number(2), L), ZERO if discrete else ONE), setting)
        front, upto = (inverse(L) if discrete else times(number(2), inverse(width))), L
    theta = times(PI, plus(times(number(2), K), number(-1)), inverse(width))
    weight, rate, fading = _mode(paths, j, front, theta, discrete)
    leaving = times(plus(ONE, negate(rate)), power(rate, plus(N, number(-1)))) if discrete else times(rate, fading)
    mean = times(j, plus(width, negate(j)))
    if not discrete:
        mean = times(mean, inverse(times(number(2), paths.T)))
    last = _last(paths, j, front, times(PI, inverse(width)), discrete)
    return Walk(_over_k(upto, times(weight, fading)), _over_k(upto, times(weight, leaving)), mean, last), theta


def _mode(
    paths: Paths, j: Formula, front: Formula, theta: Formula, discrete: bool
) -> tuple[Formula, Formula, Formula]:
    """Weight, rate (or factor a step), and how the mode fades."""
    half = times(number(Fraction(1, 2)), theta)
    weight = times(front, call("cot", half), call("sin", times(j, theta)))
    rate = call("cos", theta) if discrete else times(number(4), paths.T, power(call("sin", half), number(2)))
    return weight, rate, power(rate, N) if discrete else call("exp", times(number(-1), rate, T))


def _last(paths: Paths, j: Formula, front: Formula, theta: Formula, discrete: bool) -> Formula:
    """The slowest mode; step by step, where sites have two colours, its mirror image of factor -cos(theta) too."""
    weight, _, fading = _mode(paths, j, front, theta, discrete)
    if not discrete:
        return times(weight, fading)
    half = times(number(Fraction(1, 2)), theta)
    mirror = times(power(number(-1), plus(N, j, ONE)), call("tan", half))
    if paths.closed:
        even = times(number(Fraction(1, 2)), plus(ONE, power(number(-1), plus(paths.length, ONE))))
        mirror = times(even, mirror)
    return times(front, call("sin", times(j, theta)), fading, plus(call("cot", half), mirror))


def _over_k(upto: Formula, body: Formula) -> Formula:
    return Formula("sum", ("k", ONE, upto, body))
