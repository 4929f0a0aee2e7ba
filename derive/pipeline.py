"""The data's way: a question becomes derivations, derivations become judged claims, all of it one report.

Nothing is printed or written here.  Worksheet and Python face both come through `answer`.
"""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Executor, ProcessPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, replace
from multiprocessing import get_context

from derive import __version__
from derive.checks.judge import judged
from derive.checks.numbers.asked import numbers_asked
from derive.checks.numbers.clocks import Wants
from derive.checks.pieces import at_assumed, in_pieces
from derive.checks.roads import PUBLISHED, ROADS
from derive.checks.seen import Seen
from derive.derivations.registry import DERIVATIONS
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.tree import Formula, letter
from derive.judging.diagnosis import diagnosed
from derive.judging.limits import settled
from derive.judging.strata import narrowed
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Check, Question, Relation, Setting
from derive.problem.specialise import at_values
from derive.record.own import own_claim
from derive.record.said import Claim, Derivation, Finding, Judged, Number, Report, Value

Progress = Callable[[str], None]
NUMBERS = "numbers"
"""Walked like a road where a topic was asked for numbers at asks or times."""


@dataclass(frozen=True)
class Group:
    """Claims of one topic in one setting: the roads take them together, so that measured things are shared."""

    topic: str
    setting: Setting
    claims: tuple[Claim, ...]
    wants: Wants = Wants()

    def roads(self) -> tuple[str, ...]:
        return (*ROADS[self.topic], *((NUMBERS,) if self.wants else ()))


def answer(
    question: Question,
    jobs: int = 1,
    progress: Progress | None = None,
    without: Iterable[str] = (),
) -> Report:
    """The whole report on a question.

    `jobs` processes share the checking (1: none but this one); `progress` is told in words what begins; roads named
    in `without` are left out, which only tests ask for: fewer roads can only lower a verdict.
    """
    say = progress or (lambda words: None)
    derivations = _derive(question, say)
    groups = _groups(question, derivations)
    seen = _check(groups, question.check, jobs, frozenset(without), say)
    everything = [claim for group in groups for claim in _all_of(group, seen)]
    certified = _certified(seen)
    found = [_judge(certified(claim), seen) for claim in _in_report_order(everything)]
    found = [settled(j, question, derivations, found, without) for j in found]
    known = tuple(replace(d, claims=tuple(certified(c) for c in d.claims)) for d in derivations)
    found = [_diagnosed(j, question, known, without, say) for j in found]
    judged_claims = [narrowed(j, question, derivations) for j in found]
    held = _held_at(question)
    return Report(
        question,
        tuple(replace(d, claims=tuple(held(certified(c)) for c in _all_of(d, seen))) for d in derivations),
        tuple(replace(j, claim=held(j.claim)) for j in judged_claims),
        tuple(plot for s in seen for plot in s.plots),
        tuple(note for s in seen for note in s.notes),
        __version__,
        tuple(row for s in seen for row in s.rows),
    )


def _all_of(given: Group | Derivation, seen: list[Seen]) -> tuple[Claim, ...]:
    """A topic's entries, behind those with formulas the numbers that were asked for."""
    asked = (c for s in seen for c in s.claims if c.topic == given.topic)
    return (*given.claims, *asked) if isinstance(given, Derivation) or given.wants else given.claims


def certified_value(
    question: Question, entry: str, point: tuple[tuple[str, Formula], ...], digits: int
) -> Value | None:
    """What a road certifies, at a point, for an entry whose derivation states an equation; None where none does."""
    effort = Check(digits, 0, question.check.seed, (point,))
    for group in _groups(question, _derive(question, lambda words: None)):
        if any(c.id == entry for c in group.claims):
            for road in ROADS[group.topic]:
                values = walked(group, road, effort).values
                if entry in values:
                    return values[entry]
    return next((c.value for c in numbers_of(question, effort) if c.id == entry), None)


def numbers_of(question: Question, effort: Check | None = None) -> tuple[Claim, ...]:
    """Entries that are numbers at asks, measured."""
    groups = (g for g in _groups(question, _derive(question, lambda words: None)) if g.wants)
    return tuple(c for g in groups for c in walked(g, NUMBERS, effort or question.check).claims)


def _derive(question: Question, say: Progress) -> tuple[Derivation, ...]:
    found = []
    setting, _ = at_assumed(question.setting)
    for wish in question.wishes:
        say(f"deriving {wish.topic}")
        try:
            found.append(DERIVATIONS[wish.topic](at_values(setting, dict(wish.set)), wish))
        except NotCovered as why:
            raise NotCovered(f"derive.{wish.topic}: {why}") from None
    return tuple(found)


def _groups(question: Question, derivations: tuple[Derivation, ...]) -> list[Group]:
    """Derived claims by topic, the user's own beside those of the same topic and setting."""
    own: dict[str, list[Claim]] = {}
    for said in question.claims:
        topic = PUBLISHED if said.values else QUANTITIES[said.about].topic
        own.setdefault(topic, []).append(own_claim(said, question.setting))
    groups = []
    assumed, put = at_assumed(question.setting)
    for wish, derivation in zip(question.wishes, derivations, strict=True):
        setting = at_values(assumed, dict(wish.set))
        mine = own.pop(wish.topic, []) if not wish.set and not put else []
        groups.append(Group(wish.topic, setting, (*derivation.claims, *mine), Wants.of(wish)))
    groups += [Group(topic, question.setting, tuple(claims)) for topic, claims in own.items()]
    return groups


def _check(groups: list[Group], effort: Check, jobs: int, without: frozenset[str], say: Progress) -> list[Seen]:
    """Every road over every group, in a fixed order, in this process or in several."""
    tasks = [(g, road) for g in groups for road in g.roads() if road not in without]
    if jobs <= 1 or len(tasks) <= 1:
        return [_walk(group, road, effort, say) for group, road in tasks]
    workers = min(jobs, len(tasks))
    pool = ProcessPoolExecutor(workers, mp_context=get_context("spawn"), initializer=_die_quietly)
    try:
        return _share(pool, tasks, effort, say)
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


@contextmanager
def _held_back() -> Iterator[None]:
    """Workers that start here keep ^C waiting until `_die_quietly`, so that none is caught among its imports."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _die_quietly() -> None:
    """A worker ends at ^C without a word; the process that asked says what there is to say."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)
    if hasattr(signal, "pthread_sigmask"):
        signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGINT})


def _share(pool: Executor, tasks: list[tuple[Group, str]], effort: Check, say: Progress) -> list[Seen]:
    with _held_back():
        waiting = [pool.submit(walked, group, road, effort) for group, road in tasks]
    found = []
    for (group, road), future in zip(tasks, waiting, strict=True):
        say(f"checking {group.topic}, road {road}")
        found.append(future.result())
    return found


def _walk(group: Group, road: str, effort: Check, say: Progress) -> Seen:
    say(f"checking {group.topic}, road {road}")
    return walked(group, road, effort)


def walked(group: Group, road: str, effort: Check) -> Seen:
    """One road over one group; at module level, with plain records in and out, so that any executor can run it."""
    if road == NUMBERS:
        return numbers_asked(group.topic, group.setting, group.claims, group.wants, effort)
    return in_pieces(road, ROADS[group.topic][road], group.setting, group.claims, effort)


def _judge(claim: Claim, seen: list[Seen]) -> Judged:
    findings: list[Finding] = [s.findings[claim.id] for s in seen if claim.id in s.findings]
    numbers: list[Number] = [n for s in seen for n in s.numbers.get(claim.id, ())]
    return judged(claim, tuple(findings), tuple(numbers))


def _certified(seen: list[Seen]) -> Callable[[Claim], Claim]:
    """Where a derivation states an equation only, the claim takes the value that a road certified, and where."""
    values = {name: value for s in seen for name, value in s.values.items()}

    def certified(claim: Claim) -> Claim:
        if claim.id not in values:
            return claim
        value = values[claim.id]
        at = value.at if isinstance(value, Number) else ()
        there = tuple(Relation(letter(name), "=", parse(where)) for name, where in at)
        return replace(claim, value=value, assume=(*claim.assume, *there))

    return certified


def _diagnosed(
    found: Judged, question: Question, derivations: tuple[Derivation, ...], without: Iterable[str], say: Progress
) -> Judged:
    """A refuted formula of the user's is told where it goes wrong."""
    if found.verdict != "refuted" or found.claim.origin != "user":
        return found
    say(f"looking for what is wrong in {found.claim.id}")
    return diagnosed(found, question, derivations, without)


def _held_at(question: Question) -> Callable[[Claim], Claim]:
    """What was derived at given values says so: `set`, and letters whose value is assumed, once the checks are done."""
    _, assumed = at_assumed(question.setting)
    put = {w.topic: tuple(Relation(letter(n), "=", v) for n, v in (*assumed, *w.set)) for w in question.wishes}

    def held(claim: Claim) -> Claim:
        more = put.get(claim.topic, ()) if claim.origin == "derived" else ()
        return replace(claim, assume=(*claim.assume, *more)) if more else claim

    return held


def _in_report_order(claims: list[Claim]) -> list[Claim]:
    """Derived entries first, topic by topic, then the user's own."""
    return [c for c in claims if c.origin == "derived"] + [c for c in claims if c.origin != "derived"]


def with_digits(question: Question, digits: int | None) -> Question:
    """The question with another number of digits, as the command line may ask."""
    return question if digits is None else replace(question, check=replace(question.check, digits=digits))
