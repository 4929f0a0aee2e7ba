"""Figures of the order check: state error against the interval, and survival by both roads."""

from __future__ import annotations

from fractions import Fraction

from flint import arb, fmpq

from derive.checks.generator.trend_run import Plan, Run
from derive.numerics.decimals import rounded
from derive.problem.points import Point
from derive.record.said import Curve, Plot

DIGITS = 6


def order_plots(falls: list[str], found: Run, plan: Plan, point: Point) -> tuple[Plot, ...]:
    """Error against tau, rings and a line an order (orders without an error are left out), and survival."""
    return (_error_plot(falls, found, plan, point), _survival_plot(found, plan, point))


def _at(point: Point) -> str:
    return "".join(f", {name} = {value}" for name, value in point.text())


def _error_plot(falls: list[str], found: Run, plan: Plan, point: Point) -> Plot:
    x = tuple(_fraction(tau) for tau in plan.taus)
    curves: list[Curve] = []
    for k, errors in enumerate(found.errors):
        if all(e > 0 for e in errors):
            curves.append(_law(k, errors[-1], plan, x))
            curves.append(Curve(_rings(k, falls[k], errors), "measured", x, _decimals(errors)))
    return Plot(
        "generator.error",
        f"Halving the interval at fixed time t = {plan.time} divides the state error of the generator truncated at "
        f"order k by 2^(k+1){_at(point)}; lines of that slope are put through the last rings.",
        r"interval $\tau$ (inverse energy)",
        r"state error $\Vert (QU)^n\psi - e^{-itG}\psi\Vert$",
        tuple(curves),
        "log",
        "log",
    )


def _rings(k: int, fall: str, errors: tuple[arb, ...]) -> str:
    """The line names its rings, unless they fall otherwise than it does: an order may do better than it must."""
    due = 2 ** (k + 1)
    as_due = abs(errors[-2] / errors[-1] - due) < arb(due) / 10
    return f"order {k}" if as_due else f"order {k}, measured: {fall}"


def _law(k: int, last: arb, plan: Plan, x: tuple[str, ...]) -> Curve:
    """The line e (tau/tau_last)^(k+1) through the ring of the smallest interval."""
    y = tuple(last * arb(fmpq(*(tau / plan.taus[-1]).as_integer_ratio())) ** (k + 1) for tau in plan.taus)
    return Curve(f"order {k}: {2 ** (k + 1)}x per halving", "derived", x, _decimals(y))


def _survival_plot(found: Run, plan: Plan, point: Point) -> Plot:
    asks = tuple(str(n) for n in range(len(found.measured)))
    order = len(found.errors) - 1
    return Plot(
        "generator.survival",
        f"Survival after n asks at tau = {plan.taus[0]}: the experiment, and the generator truncated at order "
        f"{order}{_at(point)}.",
        r"asks $n$",
        r"survival $S_n$",
        (
            Curve(f"truncated generator, order {order}", "derived", asks, _decimals(found.derived)),
            Curve("experiment", "measured", asks, _decimals(found.measured)),
        ),
    )


def _decimals(balls: tuple[arb, ...]) -> tuple[str, ...]:
    return tuple(rounded(b, DIGITS) for b in balls)


def _fraction(q: Fraction) -> str:
    return rounded(arb(fmpq(q.numerator, q.denominator)), DIGITS)
