"""A refuted claim of the user's beside the derived entries of its topic: what went wrong, told in its diagnosis.

Where the worksheet does not derive the topic, it is derived here for this purpose alone.  Whatever is named was judged
again by the same roads, as a claim of its own.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace
from fractions import Fraction

from derive.checks.diagnose import Diagnosis, diagnose
from derive.checks.judge import InternalError, verdict_of
from derive.checks.pieces import in_pieces
from derive.checks.roads import PUBLISHED, ROADS
from derive.derivations.registry import DERIVATIONS
from derive.errors import WatchpotError
from derive.formula.tree import Formula, number
from derive.problem.setting import Check, Domain, Question, Setting, Wish
from derive.problem.specialise import at_values
from derive.record.said import Claim, Derivation, Judged, Table

ORDERED = ("generator", "levels")
"""Topics whose `order` says how many orders are derived."""
HIGHEST = 6
NO_ANSWER = (WatchpotError, ArithmeticError, ValueError)
"""A formula tried here, or a point, that a road has no answer for is passed over."""


def diagnosed(
    judged: Judged, question: Question, derivations: tuple[Derivation, ...], without: Iterable[str] = ()
) -> Judged:
    """The same verdict, with what is wrong in place of what the road saw."""
    found = diagnosis_of(judged.claim, question, derivations, without)
    words = found.words if found is not None else _counterexample(judged.claim, question, frozenset(without))
    return replace(judged, diagnosis=words or judged.diagnosis)


def diagnosis_of(
    claim: Claim, question: Question, derivations: tuple[Derivation, ...], without: Iterable[str] = ()
) -> Diagnosis | None:
    """What is wrong with a claim of the user's, if a slip explains it."""
    setting, derived = _right(claim, question, derivations)
    left_out = frozenset(without)

    def accepts(mended: Claim) -> bool:
        return _passes(setting, mended, question.check, left_out)

    return diagnose(setting, claim, derived, question.check, accepts)


def _counterexample(claim: Claim, question: Question, without: frozenset[str]) -> str:
    """What was measured at the simplest point that refutes, if one of these few does."""
    for simple in _simple_points(question.setting):
        effort = replace(question.check, samples=0, points=(simple,))
        for name, road in ROADS[_topic(claim)].items():
            if name in without or name == "exact":
                continue
            try:
                seen = in_pieces(name, road, question.setting, (claim,), effort).findings.get(claim.id)
            except NO_ANSWER:
                continue
            if seen is not None and seen.verdict == "refuted" and seen.point:
                return f"at {', '.join(f'{n} = {v}' for n, v in seen.point)}: {seen.evidence}"
    return ""


def _simple_points(setting: Setting) -> Iterator[tuple[tuple[str, Formula], ...]]:
    """Letters at 0 where that is allowed, at 1, and at 1, 2, 3, ... so that they differ; tau an eighth."""
    known = setting.domains()
    for kind in range(3):
        yield tuple((name, _simple(name, d, kind, k)) for k, (name, d) in enumerate(known.items()) if name != "tau") + (
            ("tau", number(Fraction(1, 8))),
        )


def _simple(name: str, domain: Domain, kind: int, k: int) -> Formula:
    if domain.kind == "integer":
        low = domain.low.args[0] if domain.low is not None and domain.low.head == "number" else 1
        return number(low + (kind == 2))
    if domain.kind == "interval" and domain.low is not None and domain.high is not None:
        return (domain.low + domain.high) * Fraction(1, 2)
    if kind == 0 and domain.kind in ("real", "complex", "nonnegative"):
        return number(0)
    return number(1 if kind < 2 else k + 1)


def _topic(claim: Claim) -> str:
    return PUBLISHED if isinstance(claim.value, Table) else claim.topic


def _right(
    claim: Claim, question: Question, derivations: tuple[Derivation, ...]
) -> tuple[Setting, tuple[Claim, ...]]:
    """The derived entries of the report, and those of the claim's topic if the report does not go as far."""
    found: list[Claim] = []
    reached = False
    for wish, derivation in zip(question.wishes, derivations, strict=True):
        if not wish.set:
            found += derivation.claims
            reached = reached or (wish.topic == claim.topic and _reaches(wish, claim))
    topic = "asymptotics" if claim.kind.name == "limit" and claim.topic == "renewal" else claim.topic
    if reached or topic not in DERIVATIONS or any(c.quantity == claim.quantity for c in found):
        return question.setting, tuple(found)
    options = (("order", _needed(claim)),) if topic in ORDERED else ()
    try:
        more = DERIVATIONS[topic](at_values(question.setting, {}), Wish(topic, options)).claims
    except NO_ANSWER:
        more = ()
    return question.setting, (*more, *found)


def _needed(claim: Claim) -> int:
    """Orders that must be derived for a claim."""
    which = claim.quantity.key("order") if claim.quantity else None
    return min(max(which if isinstance(which, int) else 0, claim.kind.order or 0, 3), HIGHEST)


def _reaches(wish: Wish, claim: Claim) -> bool:
    order = wish.option("order")
    return claim.topic not in ORDERED or not isinstance(order, int) or order >= _needed(claim)


def _passes(setting: Setting, claim: Claim, effort: Check, without: frozenset[str]) -> bool:
    """Whether the roads accept a claim."""
    roads = [(name, road) for name, road in ROADS[claim.topic].items() if name not in without]
    try:
        seen = [in_pieces(name, road, setting, (claim,), effort) for name, road in roads]
        findings = tuple(s.findings[claim.id] for s in seen if claim.id in s.findings)
        return verdict_of(claim.id, findings) in ("agrees", "proved")
    except (InternalError, *NO_ANSWER):
        return False
