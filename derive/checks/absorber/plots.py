"""Figures of the absorbers' levels: how energies and rates part from the measured ones as the interval is halved."""

from __future__ import annotations

from flint import arb, ctx

from derive.checks.absorber.runs import Run
from derive.checks.absorber.slopes import FIRST_HALVINGS
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.decimals import rounded
from derive.record.said import Curve, Plot

DIGITS = 6
KINDS = ("plain", "dressed", "ancilla", "cascade")
SAYS = {
    "energy": "The largest error of a level's energy, absorber by absorber, as the interval is halved",
    "rate": "The largest error of a level's decay rate, absorber by absorber, as the interval is halved",
}


def level_plots(run: Run, bits: int) -> tuple[Plot, ...]:
    """Two figures at a run's point, at the precision it was made with; none where levels cannot be measured."""
    try:
        with ctx.workprec(bits):
            return tuple(_plot(run, which, name) for which, name in enumerate(("energy", "rate")))
    except (NotCovered, NeedsPrecision, OutsideValidity):
        return ()


def _plot(run: Run, which: int, name: str) -> Plot:
    halvings = range(FIRST_HALVINGS + 1)
    taus = tuple(rounded(run.tau(j), DIGITS) for j in halvings)
    curves = []
    for kind in KINDS:
        if kind == "cascade" and run.m.rank != 1:
            continue
        errors = [run.errors(kind, j)[which] for j in halvings]
        if all(e > 0 for e in errors):
            title = "cascade, two sites" if kind == "cascade" else kind
            curves.append(Curve(f"{title}: {_slope(errors)}", "measured", taus, _decimals(errors)))
    at = "".join(f", {letter} = {value}" for letter, value in run.point.text())
    return Plot(
        f"absorber.{name}",
        f"{SAYS[name]}{at}.",
        r"interval $\tau$ (inverse energy)",
        r"error of energies" if name == "energy" else r"error of rates",
        tuple(curves),
        "log",
        "log",
    )


def _slope(errors: list[arb]) -> str:
    ratio = (errors[-2] / errors[-1]).mid().str(3, radius=False)
    return f"falls by {ratio} per halving"


def _decimals(errors: list[arb]) -> tuple[str, ...]:
    return tuple(rounded(e, DIGITS) for e in errors)
