"""The figure that shows both laws: the classical walk and the repeatedly measured quantum system on the same graph."""

from __future__ import annotations

from fractions import Fraction

from flint import arb, ctx, fmpq

from derive.checks.survival.run import experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.decimals import rounded
from derive.problem.points import Point
from derive.problem.setting import Setting
from derive.record.said import Curve, Plot

DIGITS = 6
STEPS = 40
LEAST = 1e-12


def classical_plot(setting: Setting, point: Point, classical: dict[Fraction, arb], digits: int) -> tuple[Plot, ...]:
    """S against t for the walk (`classical`), and for the quantum system asked every tau, up to 10^6 asks."""
    try:
        run = experiment(setting, point, digits)
    except (NotCovered, OutsideValidity, NeedsPrecision):
        return ()
    tau = run.first_interval()
    asks = sorted({round(10 ** (6 * k / STEPS)) for k in range(STEPS + 1)})
    quantum = {n * tau: s for n, s in zip(asks, run.survival(tau, asks), strict=True)}
    with ctx.workprec(128):
        curves = (_curve("classical walk", "derived", classical),
                  _curve(f"quantum, asked every {tau}", "measured", quantum))
    return (Plot(
        "classical.survival",
        f"Not caught until t: hopping without coherence, and the quantum system asked every tau = {tau}{_at(point)}.",
        r"time $t$ (inverse energy)",
        r"survival $S$",
        curves,
        "log",
        "log",
    ),)


def plot_times(speed: Fraction) -> list[Fraction]:
    """Times for the classical curve, evenly spaced in log t around 1/speed."""
    return [Fraction(round(1000 * 10 ** (5 * k / STEPS)), 100_000) / speed * 10 for k in range(STEPS + 1)]


def _curve(label: str, role: str, values: dict[Fraction, arb]) -> Curve:
    kept = [(t, s) for t, s in sorted(values.items()) if s > LEAST]
    x = tuple(rounded(arb(fmpq(t.numerator, t.denominator)), DIGITS) for t, _ in kept)
    return Curve(label, role, x, tuple(rounded(s, DIGITS) for _, s in kept))


def _at(point: Point) -> str:
    return "".join(f", {name} = {value}" for name, value in point.without("tau").text())
