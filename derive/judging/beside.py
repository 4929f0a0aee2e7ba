"""The derived entries beside a claim of the user's, and whether the roads accept a claim.

Where the worksheet does not derive the topic, it is derived here for this purpose alone.
"""

from __future__ import annotations

from derive.checks.judge import InternalError, verdict_of
from derive.checks.pieces import in_pieces
from derive.checks.roads import PUBLISHED, ROADS
from derive.derivations.registry import DERIVATIONS
from derive.errors import WatchpotError
from derive.problem.setting import Check, Question, Setting, Wish
from derive.problem.specialise import at_values
from derive.record.said import Claim, Derivation, Table

ORDERED = ("generator", "levels")
"""Topics whose `order` says how many orders are derived."""
HIGHEST = 6
NO_ANSWER = (WatchpotError, ArithmeticError, ValueError)
"""A formula tried here, or a point, that a road has no answer for is passed over."""


def topic_of(claim: Claim) -> str:
    """Whose roads a claim goes."""
    return PUBLISHED if isinstance(claim.value, Table) else claim.topic


def derived_beside(
    claim: Claim, question: Question, derivations: tuple[Derivation, ...]
) -> tuple[Setting, tuple[Claim, ...]]:
    """The setting and the derived entries of the report, and those of the claim's topic if it does not go as far."""
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


def accepted(setting: Setting, claim: Claim, effort: Check, without: frozenset[str]) -> bool:
    """Whether the roads accept a claim."""
    roads = [(name, road) for name, road in ROADS[topic_of(claim)].items() if name not in without]
    try:
        seen = [in_pieces(name, road, setting, (claim,), effort) for name, road in roads]
        findings = tuple(s.findings[claim.id] for s in seen if claim.id in s.findings)
        return verdict_of(claim.id, findings) in ("agrees", "proved")
    except (InternalError, *NO_ANSWER):
        return False
