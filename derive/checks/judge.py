"""From findings to a verdict.

Any refuted finding refutes.  *Proved* needs an exact zero and at least one independent road that agrees.  A claim
that only one road could see is *untested*, unless that road measured it: then it agrees.  An exact zero against
disjoint balls cannot be: it is a defect of ours, and said so.
"""

from __future__ import annotations

from derive.record.said import Claim, Finding, Judged, Number


class InternalError(RuntimeError):
    """Two roads that cannot both be right: an exact zero against disjoint enclosures."""


def judged(claim: Claim, findings: tuple[Finding, ...], numbers: tuple[Number, ...] = ()) -> Judged:
    """The claim with its verdict; the findings in the order of their roads."""
    return Judged(claim, verdict_of(claim.id, findings), findings, numbers, diagnosis(findings))


def verdict_of(name: str, findings: tuple[Finding, ...]) -> str:
    """The verdict that the findings earn together."""
    exact = [f.verdict for f in findings if f.road == "exact"]
    measured = [f.verdict for f in findings if f.road != "exact"]
    if "proved" in exact and "refuted" in measured:
        raise InternalError(f"{name}: an exact zero against disjoint enclosures; this is a defect of watchpot")
    if "refuted" in exact + measured:
        return "refuted"
    if "undecided" in measured:
        return "undecided"
    if "agrees" in measured:
        return "proved" if "proved" in exact else "agrees"
    return "undecided" if "undecided" in exact else "untested"


def diagnosis(findings: tuple[Finding, ...]) -> str:
    """What the refuting road saw, in one sentence."""
    return next((f.evidence for f in findings if f.verdict == "refuted"), "")
