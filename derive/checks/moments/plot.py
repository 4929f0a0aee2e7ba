"""The figure of moments: mean and variance of the number of asks against the interval, derived and measured."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

from flint import arb, ctx

from derive.checks.asked import name_of
from derive.checks.summed import MEASURED, WHOLE_UP_TO, Experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, number, walk
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import Values, enclose
from derive.numerics.frame import whole_frame
from derive.numerics.points import sample_points
from derive.numerics.precision import power_of_ten
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Interval, Setting
from derive.problem.specialise import at_values
from derive.record.said import Claim, Curve, Plot

FINE, COARSE = 160, 16
"""Intervals at which the derived curves and the measured points are drawn."""
BITS = 128
LABELS = {"mean": "mean", "variance": "variance given a click"}


def plot_moments(setting: Setting, claims: Sequence[Claim], effort: Check) -> tuple[Plot, ...]:
    """One figure for a free fixed interval on a small graph; none elsewhere."""
    shown = {c.quantity.name: c for c in claims if c.quantity is not None and c.id.startswith("moments.")}
    free = setting.interval == Interval() and isinstance(setting.space, Finite)
    if not free or not isinstance(setting.space, Finite) or setting.space.size > WHOLE_UP_TO:
        return ()
    points = sample_points(setting, replace(effort, samples=1, points=()))
    if not points:
        return ()
    with ctx.workprec(BITS):
        longest = _longest(setting, points[0])
        curves = [c for name in LABELS if name in shown for c in _curves(setting, shown[name], points[0], longest)]
    where = ", ".join(f"{name} = {value}" for name, value in points[0].without("tau").text())
    at = f" at {where}" if where else ""
    says = f"Mean and variance of the number of asks against the interval{at}; they diverge where phases merge."
    return (Plot("moments.interval", says, "interval $\\tau$", "asks", tuple(curves), y_scale="log"),) if curves else ()


def _longest(setting: Setting, point: Point) -> Fraction:
    """Two turns of a phase over the whole width 2 h of H."""
    frame = whole_frame(setting, Values.at(point.mapping()))
    width = float((2 * frame.system.h).mid()) or 1.0
    return Fraction(12.6 / width).limit_denominator(1000)


def _curves(setting: Setting, claim: Claim, point: Point, longest: Fraction) -> list[Curve]:
    label = LABELS[name_of(claim)]
    derived = [] if _is_nested(claim) else [(t, _derived(claim, point, t)) for t in _grid(longest, FINE)]
    measured = [(t, _measured(setting, claim, point, t)) for t in _grid(longest, COARSE)]
    return [
        Curve(name, role, tuple(rounded(_ball(t)) for t, _ in kept), tuple(rounded(y) for _, y in kept))
        for name, role, found in ((label, "derived", derived), (f"{label}, measured", "measured", measured))
        if (kept := [(t, y) for t, y in found if y is not None and y > 0])
    ]


def _is_nested(claim: Claim) -> bool:
    """Sums over roots within sums over roots: too slow for a curve, which the measured points draw as well."""
    found = [f for f in walk(claim.value) if f.head == "rootsum"] if isinstance(claim.value, Formula) else []
    return any(inner.head == "rootsum" for f in found for inner in walk(f) if inner is not f)


def _grid(longest: Fraction, count: int) -> list[Fraction]:
    """Rational intervals, none of them exceptional."""
    return [longest * (2 * k + 1) / (2 * count) for k in range(count)]


def _ball(q: Fraction) -> arb:
    return arb(q.numerator) / q.denominator


def _derived(claim: Claim, point: Point, tau: Fraction) -> arb | None:
    try:
        at = Values.at({**point.mapping(), "tau": number(tau)})
        return enclose(claim.value, at).real if isinstance(claim.value, Formula) else None
    except (NeedsPrecision, OutsideValidity, NotCovered):
        return None


def _measured(setting: Setting, claim: Claim, point: Point, tau: Fraction) -> arb | None:
    length = number(tau)
    at = at_values(setting, {k: v for k, v in point.mapping().items() if k != "tau"})
    experiment = Experiment(replace(at, interval=Interval(length)), length, 2, power_of_ten(-12))
    try:
        return MEASURED[name_of(claim)](experiment, claim)
    except (NeedsPrecision, OutsideValidity, NotCovered):
        return None
