"""Survival against the repeated experiment: S_n enclosed for any number of asks (`numerics/survival.py`).

Claims up to O(tau^p) at fixed t*tau, road "trend": tau_k = tau_0/2^k with h tau_0 coth(kappa/2) <= 1/16, k = 0..4, and
at each the same values of t*tau, over three decades; e_k is the distance of claim and experiment, root mean square,
t = n tau,

    agrees      the slope of -log2 e_k, by least squares, is surely >= p - 0.1, or every e_k is below 10^-digits
    refuted     surely <= p - 0.4
    undecided   in between

What does not agree is looked at again at tau_3, ..., tau_7, nearer to the limit, before it is refuted.

Interference between levels, of order tau, swings fast; the mean over many t keeps one lucky zero from counting.  For
a density the same is done with its integral from t to the last one, the experiment's clicks in between, which is one
power of tau larger.  Claims that hold exactly, road "enclosure": both sides enclosed at a few n, at every point.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import acb, arb, ctx, fmpq

from derive.checks.seen import Seen
from derive.checks.survival.plot import survival_plot
from derive.checks.survival.run import Experiment, experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters, number, walk
from derive.numerics.decimals import rounded, spoken
from derive.numerics.evaluate import enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import digits_of, power_of_ten, upper
from derive.numerics.waves import Wave, wave_of
from derive.problem.setting import Check, Family, Finite, Setting
from derive.record.said import Claim, Finding, Plot

HALVINGS, FURTHER_IN = 5, 3
FRACTIONS = tuple(Fraction(a, 32) * 2**b for b in range(9) for a in range(8, 16))
"""Values of t*tau*coth(kappa/2) in units of 1/h^2, the coth rounded up."""
EXACT_ASKS = (1, 2, 3, 5, 8, 21, 144)
TREND_POINTS = 2
QUADRATURE_BITS = 160
LONG = 400
"""Nodes of a formula beyond which fewer integrals are taken."""


def check_survival(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Claims "up to O(...)": one finding each, road "trend", and the figure."""
    wanted = [c for c in claims if _about(c) and c.kind.name == "order"]
    return _walked(setting, wanted, effort, "trend", claims)


def check_survival_exactly(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Claims that hold exactly, road "enclosure"."""
    return _walked(setting, [c for c in claims if _about(c) and c.kind.name == "exactly"], effort, "enclosure")


def _about(claim: Claim) -> bool:
    return claim.quantity is not None and claim.quantity.name in ("survival probability", "survival density")


def _is_density(claim: Claim) -> bool:
    return claim.quantity is not None and claim.quantity.name == "survival density"


def _walked(
    setting: Setting, claims: Sequence[Claim], effort: Check, road: str, every: Sequence[Claim] = ()
) -> Seen:
    """`every` are all claims of the report: the figure shows their regimes."""
    findings: dict[str, Finding] = {}
    plots: tuple[Plot, ...] = ()
    if not isinstance(setting.space, (Finite, Family)):
        return Seen()
    for claim in claims:
        try:
            findings[claim.id], plot = _judged(setting, claim, effort, road, every)
            plots += plot if claim.id == "survival.small_tau" else ()
        except (NotCovered, OutsideValidity) as reason:
            findings[claim.id] = Finding("untested", road, evidence=f"{reason}.")
        except NeedsPrecision as reason:
            findings[claim.id] = Finding("undecided", road, evidence=f"{reason}.")
    return Seen(findings, plots=plots)


def _judged(
    setting: Setting, claim: Claim, effort: Check, road: str, every: Sequence[Claim]
) -> tuple[Finding, tuple[Plot, ...]]:
    points = sample_points(setting, effort, claim.assume)
    found: list[Finding] = []
    plots: tuple[Plot, ...] = ()
    for point in points[:TREND_POINTS] if road == "trend" else points:
        try:
            run = experiment(setting, point, effort.digits)
        except OutsideValidity:
            continue
        one = _trend(claim, run) if road == "trend" else _exactly(claim, run)
        if one.verdict == "refuted":
            return one, ()
        found.append(one)
        if road == "trend" and not plots:
            plots = (survival_plot(claim, run, every),)
    if not found:
        return Finding("untested", road, evidence="No sampled point met the assumptions."), ()
    worst = min(found, key=lambda f: ("undecided", "untested", "agrees").index(f.verdict))
    digits = [f.digits for f in found if f.digits is not None]
    return Finding(worst.verdict, road, min(digits, default=None), len(found), evidence=worst.evidence), plots


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))


# -- up to O(tau^p) at fixed t*tau


def _trend(claim: Claim, run: Experiment) -> Finding:
    if claim.kind.fixed is None:
        raise NotCovered("survival up to O(...) is compared at fixed t*tau; add  at fixed t*tau")
    found = _slope(claim, run, 0)
    return found if found.verdict == "agrees" else _slope(claim, run, FURTHER_IN)


def _slope(claim: Claim, run: Experiment, first: int) -> Finding:
    """The verdict from tau_first and the intervals after it."""
    if claim.kind.order is None or not isinstance(claim.value, Formula):
        raise NotCovered("survival is claimed by a formula")
    density = _is_density(claim)
    wanted = claim.kind.order - density
    errors = [_error(claim.value, run, k, density) for k in range(first, first + HALVINGS)]
    small = power_of_ten(-run.digits)
    if all(e < small for e in errors):
        return Finding("agrees", "trend", evidence=f"The errors are below 10^-{run.digits} at every interval.")
    shown = ", ".join(rounded(e, 3) for e in errors)
    if not all(e > 0 for e in errors):
        raise NeedsPrecision("an error that is not told from zero")
    slope = -_least_squares([e.log() / arb(2).log() for e in errors])
    where = "tau, tau/2, ..., tau/16" if not first else f"tau/{2**first}, ..., tau/{2 ** (first + HALVINGS - 1)}"
    said = f"errors at {where}: {shown}; power {rounded(slope, 3)}, claimed {wanted}"
    if slope > _ball(wanted - Fraction(1, 10)):
        return Finding("agrees", "trend", points=1, evidence=said)
    if slope < _ball(wanted - Fraction(2, 5)):
        return Finding("refuted", "trend", points=1, point=run.point.without("tau").text(), evidence=said)
    return Finding("undecided", "trend", points=1, evidence=said)


def _least_squares(y: Sequence[arb]) -> arb:
    """Slope of y_0 ... y_4 against their number."""
    middle = len(y) // 2
    weights = range(-middle, len(y) - middle)
    total = arb(0)
    for w, v in zip(weights, y, strict=True):
        total += w * v
    return total / sum(w * w for w in weights)


def _error(claimed: Formula, run: Experiment, k: int, density: bool) -> arb:
    """Distance, root mean square, at tau_0/2^k, t*tau over the same values at every k."""
    tau = run.first_interval() / 2**k
    asks = [int(256 * 4**k * m * run.slowed) for m in FRACTIONS]
    measured = run.survival(tau, asks)
    with ctx.workprec(200 + 8 * run.digits):
        wave = None if "n" in free_letters(claimed) else wave_of(claimed, "t", run.values(tau, None))
        if density:
            return _clicks_missed(claimed, run, tau, list(zip(asks, measured, strict=True)), wave)
        square = arb(0)
        for n, s in zip(asks, measured, strict=True):
            said = enclose(claimed, run.values(tau, n)) if wave is None else wave.at(acb(_ball(n * tau)))
            square += (said.real - s) ** 2
    return (square / len(asks)).sqrt()


def _clicks_missed(
    claimed: Formula, run: Experiment, tau: Fraction, measured: list[tuple[int, arb]], wave: Wave | None
) -> arb:
    """The same for a density: its integral from every t to the last one, against the clicks in between."""
    long = wave is None and sum(1 for _ in walk(claimed)) > LONG  # such integrals take a second each
    kept = measured[:: 9 if long else 3]
    square, tail = arb(0), arb(0)
    for (n1, s1), (n2, s2) in zip(kept[-2::-1], kept[:0:-1], strict=True):
        if wave is None:
            with ctx.workprec(QUADRATURE_BITS):
                inner = Formula("integral", ("t", number(n1 * tau), number(n2 * tau), claimed))
                clicks = enclose(inner, run.values(tau, None))
        else:
            clicks = wave.integral(acb(_ball(n1 * tau)), acb(_ball(n2 * tau)))
        tail += clicks.real - (s1 - s2)
        square += tail**2
    return (square / (len(kept) - 1)).sqrt()


# -- exactly


def _exactly(claim: Claim, run: Experiment) -> Finding:
    if not isinstance(claim.value, Formula):
        raise NotCovered("survival is claimed by a formula")
    if _is_density(claim):
        raise NotCovered("a density is claimed up to O(...) at fixed t*tau")
    tau = run.point.mapping()["tau"]
    if tau.head != "number":
        raise NotCovered(f"the interval {text(tau)} is no rational number here")
    asks = list(EXACT_ASKS) if {"n", "t"} & free_letters(claim.value) else [1]
    digits: list[int] = []
    for n, seen in zip(asks, run.survival(tau.args[0], asks), strict=True):
        with ctx.workprec(200 + 8 * run.digits):
            said = enclose(claim.value, run.values(tau.args[0], n))
        gap = said - seen
        if not gap.contains(0):
            evidence = f"S after {n} asks: claimed {spoken(said)}, measured {spoken(acb(seen))}"
            return Finding("refuted", "enclosure", points=1, point=run.point.text(), evidence=evidence)
        width = upper(acb(gap.real.rad())) + upper(acb(gap.imag.rad()))
        if not width <= power_of_ten(-run.digits):
            raise NeedsPrecision("balls stay too wide")
        shared = digits_of(width, arb(1))
        digits += [] if shared is None else [shared]
    return Finding("agrees", "enclosure", min(digits, default=None), 1)
