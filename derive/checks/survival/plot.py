"""The figure of survival: the experiment repeated, and the law at small tau, on two logarithmic axes."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import arb, ctx, fmpq

from derive.checks.survival.run import Experiment
from derive.formula.tree import Formula
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import enclose
from derive.problem.points import Point
from derive.record.said import Claim, Curve, Plot

DIGITS = 6
LEAST = 1e-12
STEPS = 40
"""Points a curve, evenly spaced in log n up to 10^6 asks."""


REGIMES = {1: r"$t^{-1/2}$", 2: r"$t^{-3/2}$", 3: "exponential"}
"""How the bright part falls on equal paths, by the number of the regime."""
RATES = {1: "mean rate", 2: "slowest rate"}
"""The same on an explicit graph: the first one from the first ask on."""


def survival_plot(claim: Claim, run: Experiment, claims: Sequence[Claim] = ()) -> Plot:
    """S against t = n tau, n from 1 to 10^6, at half the first interval of the trend.

    `claims` are all that is said of the setting: its crossover times bound the regimes along the top.
    """
    tau = run.first_interval() / 2
    asks = sorted({round(10 ** (6 * k / STEPS)) for k in range(STEPS + 1)})
    measured = run.survival(tau, asks)
    derived, seen, times = [], [], []
    for n, s in zip(asks, measured, strict=True):
        with ctx.workprec(128):
            law = enclose(_formula(claim), run.values(tau, n)).real
        if s > LEAST and law > LEAST:
            times.append(rounded(_number(n * tau), DIGITS))
            derived.append(rounded(law, DIGITS))
            seen.append(rounded(s, DIGITS))
    return Plot(
        "survival.small_tau",
        f"Survival up to t = n tau at tau = {tau}: the experiment repeated up to a million times, and the law at small "
        f"tau{_at(run.point)}.",
        r"time $t$ (inverse energy)",
        r"survival $S$",
        (Curve("law at small tau", "derived", tuple(times), tuple(derived)),
         Curve("experiment", "measured", tuple(times), tuple(seen))),
        "log",
        "log",
        tuple(_regimes(claims, run, tau, times)),
    )


def _regimes(claims: Sequence[Claim], run: Experiment, tau: Fraction, times: list[str]) -> list[tuple[str, str, str]]:
    """(label, from, to); the last one goes on to the end.  A window that is empty at this point is left out."""
    ends = {c.id.removeprefix("survival.regimes."): _time(c, run, tau) for c in claims
            if c.quantity is not None and c.quantity.name == "crossover time" and c.origin == "derived"}
    out = []
    listed = any(c.id == "survival.regimes.3.law" for c in claims)
    if not listed and times and ends:
        ends["1.from"] = arb(times[0])
    for i, label in (REGIMES if listed else RATES).items():
        low, high = ends.get(f"{i}.from"), ends.get(f"{i}.to")
        if low is not None and times and (high is None or low < high):
            out.append((label, rounded(low, DIGITS), rounded(high, DIGITS) if high is not None else times[-1]))
    return out


def _time(claim: Claim, run: Experiment, tau: Fraction) -> arb:
    with ctx.workprec(128):
        return enclose(_formula(claim), run.values(tau, None)).real


def _number(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))


def _at(point: Point) -> str:
    return "".join(f", {name} = {value}" for name, value in point.without("tau").text())


def _formula(claim: Claim) -> Formula:
    if not isinstance(claim.value, Formula):
        raise TypeError("a law is a formula")
    return claim.value
