"""Claims of the user's that no road settles, looked at once more where nothing can be measured.

A law for n -> infinity: what is measured reaches n of some 10^4.  Where the trend over those n leaves a claim open, or
calls a bare limit flat although it may fall like an inverse logarithm, the derived law decides, far out, if the
experiment has confirmed it.  A series in tau: with a pole, a root or a logarithm at tau = 0 it has no coefficients to
compare, and is refuted for that.  A formula that is not real where the quantity is: there is nothing to compare either.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

from derive.checks.branch import check_branch, is_series
from derive.checks.far import check_far, is_far
from derive.checks.judge import judged as judge
from derive.checks.plainly import check_plainly, may_move
from derive.checks.trend import ROAD
from derive.judging.beside import accepted, derived_beside
from derive.problem.setting import Question
from derive.record.said import Claim, Derivation, Finding, Judged

PASSES = ("agrees", "proved")


def settled(
    judged: Judged,
    question: Question,
    derivations: tuple[Derivation, ...],
    others: Sequence[Judged] = (),
    without: Iterable[str] = (),
) -> Judged:
    """The claim with what is seen far out or close to 0 in place of the trend, where that decides; else as it was."""
    claim = judged.claim
    if claim.origin != "user" or not (_is_open(judged) or may_move(claim)) or ROAD in without:
        return judged
    if not is_far(claim):
        return _plainly(judged, question)
    law = confirmed_law(claim, question, derivations, others, without)
    far = None if law is None else check_far(question.setting, claim, law, question.check)
    if far is None:
        return judged
    findings = tuple(f for f in judged.findings if f.road != ROAD)
    return judge(claim, (*findings, _joined(far, judged)), judged.numbers)


def _is_open(judged: Judged) -> bool:
    """Left open by all roads, or a bare limit that the trend alone refutes."""
    if judged.verdict in ("undecided", "untested"):
        return True
    refuting = {f.road for f in judged.findings if f.verdict == "refuted"}
    return judged.verdict == "refuted" and judged.claim.kind.error is None and refuting == {ROAD}


def _plainly(judged: Judged, question: Question) -> Judged:
    """What can be said of the formula by itself."""
    look = check_branch if is_series(judged.claim) else check_plainly
    found = look(question.setting, judged.claim, question.check)
    return judged if found is None else judge(judged.claim, (*judged.findings, found), judged.numbers)


def confirmed_law(
    claim: Claim,
    question: Question,
    derivations: tuple[Derivation, ...],
    others: Sequence[Judged] = (),
    without: Iterable[str] = (),
) -> Claim | None:
    """The derived law about the same quantity in the same limit, if the experiment has confirmed it."""
    if claim.kind.name != "limit":
        return None
    setting, derived = derived_beside(claim, question, derivations)
    law = next((c for c in derived if _same_law(c, claim)), None)
    if law is None:
        return None
    known = next((j.verdict for j in others if j.claim == law), None)
    confirmed = known in PASSES if known else accepted(setting, law, question.check, frozenset(without))
    return law if confirmed else None


def _same_law(law: Claim, claim: Claim) -> bool:
    """About the same quantity in the same limit, smooth or not."""
    if law.quantity != claim.quantity or law.kind.name != "limit":
        return False
    return law.kind.toward == claim.kind.toward and law.kind.smooth == claim.kind.smooth


def _joined(far: Finding, judged: Judged) -> Finding:
    """The far verdict, with how far off the claim is where it was measured."""
    near = next((f.evidence for f in judged.findings if f.road == ROAD and f.evidence), "")
    if far.verdict != "agrees" or not near or judged.claim.kind.error is not None:
        return far
    return replace(far, evidence=f"in the limit only: {near}; {far.evidence}")
