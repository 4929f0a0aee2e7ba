"""Figure: error of the truncated generator at a fixed time, its bound, and the radius of convergence, against tau."""

from __future__ import annotations

from flint import arb

from derive.numerics.decimals import rounded
from derive.numerics.promise import Experiment
from derive.problem.points import Point
from derive.record.said import Curve, Plot

DIGITS = 6
ASKS = (2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256, 384)
"""n at which the error is measured, tau = t/n."""


def error_plot(
    experiment: Experiment, time: arb, bound: list[tuple[arb, arb]], radius: arb | None, goal: arb, point: Point
) -> Plot:
    """`bound` is (tau, s(tau)) where s has a value."""
    measured = []
    for n in ASKS:
        tau = arb((time / n).mid())
        error = experiment.error(tau, n).low
        if error > arb("1e-18"):
            measured.append((tau, error))
    curves = [_curve("measured", "measured", measured), _curve("bound", "bound", bound)]
    heights = [e for _, e in (*measured, *bound)]
    if radius is not None and heights:
        low, high = _least(heights), _most(heights)
        curves.append(_curve("radius of convergence", "derived", [(radius, low), (radius, high)]))
    where = "".join(f", {name} = {value}" for name, value in point.text())
    return Plot(
        "validity.error",
        f"The error of the generator truncated at order {experiment.order}, at t = {rounded(time, 4)}, stays below its "
        f"bound; the tolerance is {rounded(goal, 3)}{where}.",
        r"interval $\tau$ (inverse energy)",
        r"$\Vert K^n - e^{-itG}\Vert$",
        tuple(c for c in curves if c.x),
        "log",
        "log",
    )


def _curve(label: str, role: str, places: list[tuple[arb, arb]]) -> Curve:
    ordered = sorted(places, key=lambda p: float(p[0].mid()))
    xs, ys = (tuple(rounded(p[k], DIGITS) for p in ordered) for k in (0, 1))
    return Curve(label, role, xs, ys)


def _least(values: list[arb]) -> arb:
    found = values[0]
    for v in values[1:]:
        found = found.min(v)
    return found


def _most(values: list[arb]) -> arb:
    found = values[0]
    for v in values[1:]:
        found = found.max(v)
    return found
