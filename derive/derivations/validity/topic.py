"""Topic `validity`: how small tau must be.

    G = sum_k tau^k G_k,     exp(-i tau G) = Q U(tau) Q on range(Q),     G^(K) its terms up to tau^K

radius     |tau| of the nearest singularity of log(Q U Q), given by equations: det (exp(i H tau))_PP = 0, or two
           eigenvalues that meet on different branches.  The checks find and certify the number.
remainder  ||tau (G - G^(K))|| <= r(tau) for h tau < log 2, h >= ||H - E0||, by the majorant -log(2 - e^y); orders
           that see only a part of the graph take that part's own h.
state      ||(Q U Q)^n - exp(-i t G^(K))|| <= s(tau) = x e^x at t = n tau, x = t r/(tau (2 - e^(h tau)))
interval   the largest tau with s(tau) <= tolerance; s grows with tau, so every smaller interval keeps the promise

Source: derived here.  For a perfect detector of any rank on a finite graph.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.majorant import majorant_coefficients
from derive.derivations.validity import steps
from derive.derivations.validity.norm_bound import NormBound, bound_norm, on_sites
from derive.errors import NotCovered
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    formula,
    negate,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.problem.balls import ball
from derive.problem.quantities import Quantity
from derive.problem.setting import Finite, Setting, Wish
from derive.record.said import Claim, Derivation, Kind, Prose

DEFAULT_ORDER = 3
DEFAULT_TOLERANCE = number(Fraction(1, 100))
TIME_SCALE = number(10)  # times 1/h
FARTHEST = 6  # orders beyond the first omitted one that get an h of their own
UPPER = Kind("upper", "as an upper bound")


@dataclass(frozen=True)
class Asked:
    """Order of the truncation, error allowed in state norm, and the time until which."""

    order: int
    tolerance: Formula
    time: Formula


@dataclass(frozen=True)
class Bounds:
    """h of the whole graph, (d, h_d) for the orders that see less, and the two bounds as functions of tau."""

    whole: NormBound
    near: tuple[tuple[int, NormBound], ...]
    coefficients: tuple[Fraction, ...]
    remainder: Formula
    state: Formula
    relative: Formula


def derive_validity(setting: Setting, wish: Wish) -> Derivation:
    """Radius, remainder, state bound and largest interval, with their steps."""
    space = setting.space
    if not isinstance(space, Finite) or len(setting.detectors) != 1:
        raise NotCovered("validity is derived for a finite graph with one detector")
    if setting.detectors[0].efficiency != ONE:
        raise NotCovered("validity is derived for a perfect detector")
    whole = bound_norm(space.rows, setting.domains())
    if whole.h == ZERO:
        raise NotCovered("H is a constant here: nothing moves, and every interval will do")
    asked = _asked(wish, whole.h)
    bounds = _bounds(setting, space, whole, asked)
    return Derivation(
        "validity", _claims(asked, bounds), steps.written(setting, asked, bounds), notes=(_note(whole.h),)
    )


def _asked(wish: Wish, h: Formula) -> Asked:
    order = wish.option("order", DEFAULT_ORDER)
    tolerance, time = wish.option("tolerance"), wish.option("time")
    return Asked(
        order if isinstance(order, int) else DEFAULT_ORDER,
        formula(tolerance) if isinstance(tolerance, (Formula, int, Fraction)) else DEFAULT_TOLERANCE,
        formula(time) if isinstance(time, (Formula, int, Fraction)) else TIME_SCALE / h,
    )


def _bounds(setting: Setting, space: Finite, whole: NormBound, asked: Asked) -> Bounds:
    near = _near(setting, space, whole, asked.order)
    coefficients = tuple(majorant_coefficients(asked.order + 1 + len(near)))
    remainder = _remainder(whole.h, near, coefficients)
    state = _state(remainder, whole.h, asked.time)
    return Bounds(whole, near, coefficients, remainder, state, _relative(state, whole.h, asked.time))


def _near(setting: Setting, space: Finite, whole: NormBound, order: int) -> tuple[tuple[int, NormBound], ...]:
    """(d, bound) for d = K + 2, K + 3, ...: G_(d-1) sees the graph within d - 1 steps of the detector only.

    None where the first of them needs the whole graph's h already.
    """
    support = sorted({x for v in setting.detectors[0].vectors for x, _ in v})
    found = []
    for d in range(order + 2, order + 2 + FARTHEST):
        sites = ball(space.rows, support, d - 1)
        bound = bound_norm(on_sites(space.rows, sites), setting.domains())
        if len(sites) == space.size or bound.h == whole.h:
            break
        found.append((d, bound))
    return tuple(found)


def _remainder(h: Formula, near: tuple[tuple[int, NormBound], ...], c: tuple[Fraction, ...]) -> Formula:
    """sum_near c_d (h_d tau)^d - log(2 - e^(h tau)) - sum_{d <= D} c_d (h tau)^d."""
    own = [times(number(c[d - 1]), power(times(bound.h, TAU), number(d))) for d, bound in near]
    y = times(h, TAU)
    log = negate(call("log", plus(number(2), negate(call("exp", y)))))
    less = [times(number(-q), power(y, number(d)) if d > 1 else y) for d, q in enumerate(c, start=1)]
    return plus(*own, log, *less)


def _state(remainder: Formula, h: Formula, time: Formula) -> Formula:
    """x e^x."""
    below = times(TAU, plus(number(2), negate(call("exp", times(h, TAU)))))
    x = times(time, remainder, power(below, MINUS_ONE))
    return times(x, call("exp", x))


def _relative(state: Formula, h: Formula, time: Formula) -> Formula:
    """s (1 - h^2 tau^2)^(-t/(2 tau))."""
    left = plus(ONE, negate(power(times(h, TAU), number(2))))
    exponent = times(number(Fraction(-1, 2)), time, power(TAU, MINUS_ONE))
    return times(state, call("exp", times(exponent, call("log", left))))


def _claims(asked: Asked, bounds: Bounds) -> tuple[Claim, ...]:
    order = ("order", asked.order)
    promise = (order, ("tolerance", asked.tolerance), ("time", asked.time))
    small = "h*tau < log(2)"
    everywhere = "|tau| below it: the series converges; beyond it, it does not"
    return (
        Claim("validity.radius", "validity", Quantity("radius of convergence"), operator("R"), valid_for=everywhere),
        Claim("validity.radius_kind", "validity", None, operator("kind"), valid_for=everywhere),
        Claim("validity.remainder", "validity", Quantity("remainder bound", (order,)), bounds.remainder, UPPER,
              valid_for=small),
        Claim("validity.state", "validity", Quantity("state error bound", (order, ("time", asked.time))),
              bounds.state, UPPER, valid_for=small),
        Claim("validity.interval", "validity", Quantity("largest interval", promise), operator("tau", "s"),
              valid_for="this interval and every smaller one, for every start off the detector"),
        Claim("validity.state.relative", "validity", Quantity("relative state error bound", (order, promise[2])),
              bounds.relative, UPPER, valid_for=small),
        Claim("validity.interval.relative", "validity", None, operator("tau", "r"),
              valid_for="error relative to the surviving norm"),
        Claim("validity.interval.measured", "validity", None, operator("tau", "*"),
              valid_for="measured, not bounded: the first interval at which the error passes the tolerance"),
    )


def _note(h: Formula) -> Prose:
    return ("The bound ", h, " serves for h, at least half the width of the spectrum; a time left out is ten "
            "over this h.")
