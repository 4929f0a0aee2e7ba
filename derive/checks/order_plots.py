"""Figures of the order check: state error against the interval, and survival by both roads."""

from __future__ import annotations

from fractions import Fraction

from flint import arb, fmpq

from derive.checks.trend_run import Plan, Run
from derive.numerics.decimals import rounded
from derive.problem.points import Point
from derive.record.said import Curve, Plot

DIGITS = 6


def order_plots(falls: list[str], found: Run, plan: Plan, point: Point) -> tuple[Plot, ...]:
    """Error against tau, one curve an order (orders without an error are left out), and survival against asks."""
    return (_error_plot(falls, found, plan, point), _survival_plot(found, plan, point))


def _at(point: Point) -> str:
    return "".join(f", {name} = {value}" for name, value in point.text())


def _error_plot(falls: list[str], found: Run, plan: Plan, point: Point) -> Plot:
    x = tuple(_fraction(tau) for tau in plan.taus)
    curves = tuple(
        Curve(f"order {k}: {falls[k]}", "measured", x, tuple(rounded(e, DIGITS) for e in errors))
        for k, errors in enumerate(found.errors)
        if all(e > 0 for e in errors)
    )
    return Plot(
        "generator.error",
        f"Halving the interval at fixed time t = {plan.time} divides the state error of the generator truncated at "
        f"order k by 2^(k+1){_at(point)}.",
        r"interval $\tau$ (inverse energy)",
        r"state error $\Vert (QU)^n\psi - e^{-itG}\psi\Vert$",
        curves,
        "log",
        "log",
    )


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
