"""Road "trend" for survival laws on infinite lattices: S_n = 1 - F_1 - ... - F_n, measured, beside the claim.

F_n comes from the lattice by division of series (`road.py`); no integral over the band and no tail is
used.  Two claims that differ by a power of 1/n beyond a constant are told apart by the error they state: a bare "as n
-> infinity" is a matter of the limit alone where that is not 0.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial

from flint import arb, ctx

from derive.checks.asymptotics.road import (
    MOST_ASKS,
    RAISED,
    Experiment,
    experiment,
    in_n,
    late_points,
    over_points,
    real_part,
    settled_scale,
)
from derive.checks.seen import Seen
from derive.checks.trend import follow, last_ask, verdict_of
from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula, constant
from derive.numerics.evaluate import Values
from derive.numerics.precision import bits_for, retry
from derive.problem.setting import Check, Lattice, Setting
from derive.record.said import Claim, Finding

DIGITS = 30
FIRST_BITS, MOST_BITS = 64, 256
"""Of the claim: the gap at the last scale, some n^-4, to one part in a thousand."""


def check_late_survival(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about survival as n -> infinity on an infinite lattice."""
    if not isinstance(setting.space, Lattice):
        return Seen()

    def finding(claim: Claim) -> Finding:
        return over_points(lambda: late_points(setting, effort, claim.assume),
                           lambda point: _at_point(experiment(setting, point, DIGITS), claim))

    return Seen({c.id: finding(c) for c in claims if _is_mine(c)})


def _is_mine(claim: Claim) -> bool:
    about = claim.quantity is not None and claim.quantity.name == "survival probability"
    return about and claim.kind.name == "limit" and claim.kind.toward == (("n", constant("infinity")),)


def _at_point(run: Experiment, claim: Claim) -> tuple[str, str]:
    value = claim.value
    if not isinstance(value, Formula) or claim.kind.smooth or claim.kind.phase:
        raise NotCovered("a survival is claimed by a formula, whole")
    first, verdict, evidence = settled_scale(run), "undecided", ""
    for _ in range(RAISED + 1):
        try:
            verdict, evidence = retry(partial(_followed, run, claim, value, first), FIRST_BITS, MOST_BITS)
        except NeedsPrecision as reason:
            verdict, evidence = "undecided", str(reason)
        if verdict != "undecided" or last_ask(2 * first) > MOST_ASKS:
            break
        first *= 2
    return verdict, evidence


def _followed(run: Experiment, claim: Claim, value: Formula, first: int, bits: int) -> tuple[str, str]:
    left, claimed = _survival(run, last_ask(first)), in_n(value, Values.at(run.point.mapping()))
    return verdict_of(follow(lambda n: real_part(claimed(n)), lambda n: left[n], first), claim.kind)


def _survival(run: Experiment, count: int) -> list[arb]:
    """S_0 ... S_count."""
    left, found = arb(1), [arb(1)]
    phi = run.up_to(count)
    with ctx.workprec(bits_for(DIGITS)):
        for c in phi[1 : count + 1]:
            left -= abs(c) * abs(c)
            found.append(left)
    return found

