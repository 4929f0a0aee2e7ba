"""Road "trend" for survivals claimed in a limit, n or t -> infinity at fixed tau: the experiment at doubled asks.

n = 2^6, 2^7, ..., 2^20;  e = |claim/S_n - 1|.  Agrees where the last three doublings each leave 0.8 of e or less, or
e falls below 10^-digits; refuted where e no longer falls (0.95 of itself or more, three times) and is above 1/1000.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import arb, ctx

from derive.checks.seen import Seen
from derive.checks.survival.run import Experiment, experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.text import text
from derive.formula.tree import Formula, constant
from derive.numerics.decimals import rounded
from derive.numerics.evaluate import enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import power_of_ten
from derive.problem.setting import Check, Family, Finite, Setting
from derive.record.said import Claim, Finding

ASKS = tuple(2**k for k in range(6, 21))
INFINITY = constant("infinity")


def check_survival_limit(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about the survival probability that holds in a limit."""
    found: dict[str, Finding] = {}
    if not isinstance(setting.space, (Finite, Family)):
        return Seen()
    for claim in claims:
        if claim.quantity is not None and claim.quantity.name == "survival probability" and claim.kind.name == "limit":
            try:
                found[claim.id] = _judged(setting, claim, effort)
            except (NotCovered, OutsideValidity) as reason:
                found[claim.id] = Finding("untested", "trend", evidence=f"{reason}.")
            except NeedsPrecision as reason:
                found[claim.id] = Finding("undecided", "trend", evidence=f"{reason}.")
    return Seen(found)


def _judged(setting: Setting, claim: Claim, effort: Check) -> Finding:
    names = [name for name, to in claim.kind.toward if to == INFINITY]
    plain = claim.kind.error is None and claim.kind.within is None and not claim.kind.smooth
    if names not in (["n"], ["t"]) or len(claim.kind.toward) != 1 or not plain or not isinstance(claim.value, Formula):
        raise NotCovered("a survival is compared as n -> infinity or as t -> infinity, tau fixed")
    for point in sample_points(setting, effort, claim.assume):
        run = experiment(setting, point, effort.digits)
        return _compared(claim.value, run)
    raise NotCovered("no sampled point met the assumptions")


def _compared(claimed: Formula, run: Experiment) -> Finding:
    tau = run.point.mapping()["tau"]
    if tau.head != "number":
        raise NotCovered(f"the interval {text(tau)} is no rational number here")
    errors = _errors(claimed, run, tau.args[0])
    said = f"|claim/S - 1| at n = 2^6, ..., 2^20: {', '.join(rounded(e, 3) for e in errors)}"
    if errors[-1] < power_of_ten(-run.digits):
        return Finding("agrees", "trend", points=1, evidence=said)
    ratios = [b / a for a, b in zip(errors[-4:], errors[-3:], strict=False)]
    if all(r < arb(4) / 5 for r in ratios):
        return Finding("agrees", "trend", points=1, evidence=said)
    if all(r > arb(19) / 20 for r in ratios) and errors[-1] > arb(1) / 1000:
        return Finding("refuted", "trend", points=1, point=run.point.text(), evidence=said)
    return Finding("undecided", "trend", points=1, evidence=said)


def _errors(claimed: Formula, run: Experiment, tau: Fraction) -> list[arb]:
    found = []
    with ctx.workprec(200 + 8 * run.digits):
        for n, seen in zip(ASKS, run.survival(tau, ASKS), strict=True):
            if not seen > 0:
                raise NeedsPrecision("a survival that is not told from zero")
            found.append(abs(enclose(claimed, run.values(tau, n)).real / seen - 1))
    return found
