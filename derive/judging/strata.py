"""Where an accepted claim of the user's does not hold: special values that a generic answer leaves out.

Symbolic answers are generic, and so are the sampled points.  At intervals at which two seen phases merge, and at
values of letters at which a derived answer changes or is not valid, the claim is measured once more; where it is
refuted, it is said not to hold there.  The verdict stays: `cases` say what holds where.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import islice

from derive.checks.pieces import OTHERWISE, condition_of, placed
from derive.checks.roads import ROADS
from derive.derivations.registry import DERIVATIONS
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import TAU, Formula
from derive.judging.beside import NO_ANSWER, derived_beside
from derive.problem.setting import Check, Finite, Question, Relation, Setting, Wish
from derive.record.said import Cases, Claim, Derivation, Judged

TOPICS = ("detection", "moments")
"""What jumps at special values; everything else is continuous there."""
ROAD = "enclosure"
QUICK = Check(digits=15, samples=1)
INTERVALS, MOST = 3, 8
LARGEST = 16  # sites up to which merging intervals are looked for


def narrowed(judged: Judged, question: Question, derivations: tuple[Derivation, ...]) -> Judged:
    """The claim with the places where it does not hold in `valid_for`."""
    claim = judged.claim
    fits = claim.origin == "user" and claim.topic in TOPICS and claim.kind.name == "exactly"
    if not fits or judged.verdict not in ("agrees", "proved") or not isinstance(claim.value, Formula):
        return judged
    there = placed(question.setting, claim)
    if there.put:
        question, derivations = replace(question, setting=there.setting, wishes=()), ()
    asked = dict.fromkeys(_special(there.claim, question, derivations))
    wrong = [r for r in islice(asked, MOST) if _is_refuted(there.setting, there.claim, r)]
    if not wrong:
        return judged
    places = " or ".join(f"{text(r.left)} = {text(r.right)}" for r in wrong)
    return replace(judged, claim=replace(claim, valid_for=f"not where {places}"))


def _is_refuted(setting: Setting, claim: Claim, there: Relation) -> bool:
    """Whether the experiment refutes the claim at a special place."""
    meant = replace(claim, assume=(*claim.assume, there))
    try:
        finding = ROADS[claim.topic][ROAD](setting, (meant,), QUICK).findings.get(claim.id)
    except NO_ANSWER:
        return False
    return finding is not None and finding.verdict == "refuted"


def _special(claim: Claim, question: Question, derivations: tuple[Derivation, ...]) -> Iterator[Relation]:
    """Equations that a generic answer leaves out."""
    if claim.topic == "detection":
        _, derived = derived_beside(claim, question, derivations)
    else:
        derived = tuple(c for d in derivations for c in d.claims)
    for other in derived:
        if other.topic != claim.topic:
            continue
        for words, _ in other.value.pieces if isinstance(other.value, Cases) else ():
            yield from condition_of(words) if words != OTHERWISE else ()
        yield from _excluded(other.valid_for)
    yield from _merging(question.setting)


def _excluded(words: str) -> Iterator[Relation]:
    """"Delta != 0" among the words of `valid_for`, as an equation."""
    for part in words.split("; "):
        try:
            found = condition_of(part)
        except NotCovered:
            continue
        yield from (Relation(r.left, "=", r.right) for r in found if r.op == "!=")


def _merging(setting: Setting) -> Iterator[Relation]:
    """The first intervals at which phases merge."""
    small = isinstance(setting.space, Finite) and setting.space.size <= LARGEST
    if not small or setting.interval.law != "fixed" or setting.interval.length != TAU:
        return
    try:
        claims = DERIVATIONS["exceptional"](setting, Wish("exceptional", ())).claims
    except NO_ANSWER:
        return
    intervals = [c.value for c in claims if c.quantity is not None and c.quantity.name == "exceptional interval"]
    yield from (Relation(TAU, "=", f) for f in intervals[:INTERVALS] if isinstance(f, Formula))
