"""A refuted claim of the user's beside the derived entries of its topic: what went wrong, told in its diagnosis.

Whatever is named was judged again by the same roads, as a claim of its own.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace
from fractions import Fraction
from functools import cache

from derive.checks.diagnose.search import Diagnosis, diagnose
from derive.checks.diagnose.tables import diagnose_table
from derive.checks.far import check_far, is_far
from derive.checks.pieces import OTHERWISE, in_pieces, pieces, placed
from derive.checks.roads import ROADS
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.judging.beside import NO_ANSWER, accepted, derived_beside, topic_of
from derive.judging.limits import confirmed_law
from derive.problem.setting import Domain, Question, Setting
from derive.record.said import Cases, Claim, Derivation, Judged, Number, Table


def diagnosed(
    judged: Judged, question: Question, derivations: tuple[Derivation, ...], without: Iterable[str] = ()
) -> Judged:
    """The same verdict, with what is wrong in place of what the road saw."""
    found = diagnosis_of(judged.claim, question, derivations, without)
    words = found.words if found is not None else _counterexample(judged.claim, question, frozenset(without))
    if found is not None and isinstance(judged.claim.value, Table):
        words = f"{words} {judged.diagnosis}"  # which number, and what was measured there
    return replace(judged, diagnosis=words or judged.diagnosis)


def diagnosis_of(
    claim: Claim, question: Question, derivations: tuple[Derivation, ...], without: Iterable[str] = ()
) -> Diagnosis | None:
    """What is wrong with a claim of the user's, if a slip explains it."""
    left_out = frozenset(without)
    if isinstance(claim.value, Cases):
        return _of_a_case(claim, question, derivations, left_out)
    there = placed(question.setting, claim)
    certified = tuple(_certified_at(derivations, dict(there.put)))
    if there.put:
        claim, question, derivations = there.claim, replace(question, setting=there.setting, wishes=()), ()

    @cache
    def law() -> Claim | None:
        return confirmed_law(claim, question, derivations, (), left_out)

    def accepts(mended: Claim) -> bool:
        known = law() if is_far(mended) else None
        far = None if known is None else check_far(question.setting, mended, known, question.check)
        if far is not None:
            return far.verdict == "agrees"
        return accepted(question.setting, mended, question.check, left_out)

    if isinstance(claim.value, Table):
        return diagnose_table(claim, accepts)
    setting, derived = derived_beside(claim, question, derivations)
    return diagnose(setting, claim, (*certified, *derived), question.check, accepts)


def _certified_at(derivations: tuple[Derivation, ...], put: dict[str, Formula]) -> Iterator[Claim]:
    """Entries that are certified numbers where these letters have these values; they are put in there too."""
    for claim in (c for d in derivations for c in d.claims if put and isinstance(c.value, Number)):
        value = claim.value
        if isinstance(value, Number) and all(dict(value.at).get(n) == text(v) for n, v in put.items()):
            rest = tuple((n, v) for n, v in value.at if n not in put)
            yield replace(claim, value=replace(value, at=rest))


def _of_a_case(
    claim: Claim, question: Question, derivations: tuple[Derivation, ...], without: frozenset[str]
) -> Diagnosis | None:
    """What is wrong with the first case that is not accepted; the others stay as they are."""
    if not isinstance(claim.value, Cases):
        return None
    try:
        cut = list(pieces(question.setting, claim))
    except NotCovered:
        return None
    wrong = next((p for p in cut if not accepted(p.setting, p.claim, question.check, without)), None)
    found = None if wrong is None else diagnosis_of(wrong.claim, question, derivations, without)
    if wrong is None or found is None or found.mended is None or not isinstance(found.mended.value, Formula):
        return None
    changed = tuple((c, found.mended.value if c == wrong.where else f) for c, f in claim.value.pieces)
    mended = replace(claim, value=Cases(changed))
    if found.slip in ("case", "order") or not accepted(question.setting, mended, question.check, without):
        return None
    where = OTHERWISE if wrong.where == OTHERWISE else f"where {wrong.where}"
    return Diagnosis(f"{where}: {found.words}", mended, found.slip)


def _counterexample(claim: Claim, question: Question, without: frozenset[str]) -> str:
    """What was measured at the simplest point that refutes, if one of these few does."""
    for simple in _simple_points(question.setting):
        effort = replace(question.check, samples=0, points=(simple,))
        for name, road in ROADS[topic_of(claim)].items():
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
