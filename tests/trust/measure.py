"""Formulas that the worksheets derive, changed, judged as claims; the verdicts against mpmath's.

A formula counts once for each entry of the ledger, and a matrix by its different entries.  Left out, and counted: forms
that a claim cannot be written in (cases, one formula for all roots), orders of errors, bounds, and formulas with
infinite sums or integrals, whose values mpmath is too slow for.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from random import Random

import derive.pipeline as pipeline
from derive.checks.diagnose import Diagnosis
from derive.checks.judge import InternalError
from derive.diagnosing import diagnosis_of
from derive.errors import WatchpotError
from derive.formula.tree import TAU, Formula, number, plus, power, times, walk
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Own, Question
from derive.record.own import own_claim
from derive.record.said import Claim, Derivation, Expansion, Judged, Matrix
from derive.worksheet import read
from tests.trust.mutants import Given, Mutant, mutants, nodes
from tests.trust.outside import Unknown, differs, points

ROOT = Path(__file__).parent.parent.parent
LARGEST = 150  # nodes
ENTRIES = 2  # of one matrix
DIAGNOSED = ("factor", "sign", "index", "power")
BROUGHT = {"k": "whole", "n": "whole", "z": "complex"}
BROKEN = "broke the run"
PASSES = ("agrees", "proved")


@dataclass(frozen=True)
class Subject:
    """A derived formula and the claim's other keys."""

    claim: Claim
    formula: Formula
    entry: tuple[int, int] | None = None


@dataclass
class Case:
    """A mutant, whether it differs, and what came of it."""

    sheet: str
    subject: Subject
    mutant: Mutant
    differs: bool
    verdict: str = ""
    words: str = ""
    mended: Claim | None = None
    cured: bool | None = None


@dataclass
class Trust:
    """What was measured."""

    cases: list[Case] = field(default_factory=list)
    left_out: Counter[str] = field(default_factory=Counter)

    def wrong(self, differs_: bool, *verdicts: str) -> list[Case]:
        return [c for c in self.cases if c.differs is differs_ and c.verdict in verdicts]

    @property
    def false_passes(self) -> list[Case]:
        return self.wrong(True, *PASSES)

    @property
    def false_refutations(self) -> list[Case]:
        return self.wrong(False, "refuted")

    @property
    def broken(self) -> list[Case]:
        return [c for c in self.cases if c.verdict == BROKEN]

    @property
    def open(self) -> list[Case]:
        return [c for c in self.cases if c.verdict in ("undecided", "untested")]

    def diagnosed(self) -> tuple[int, int]:
        """(rightly, of how many) refuted mutants of the four kinds that a slip explains."""
        asked = [c for c in self.cases if c.differs and c.mutant.kind in DIAGNOSED and c.verdict == "refuted"]
        return sum(c.cured is True for c in asked), len(asked)

    def table(self) -> list[str]:
        kinds = sorted({c.mutant.kind for c in self.cases})
        heads = ("kind", "differs", "refuted", "passes", "open", "same", "refuted", "passes", "open", "mended")
        lines = [_row(heads)]
        for kind in kinds:
            mine = [c for c in self.cases if c.mutant.kind == kind]
            row: list[object] = [kind]
            for d in (True, False):
                some = [c for c in mine if c.differs is d]
                row += [len(some), _count(some, "refuted"), _count(some, *PASSES)]
                row.append(_count(some, "undecided", "untested"))
            lines.append(_row((*row, sum(c.cured is True for c in mine))))
        right, asked = self.diagnosed()
        lines += [
            f"{len(self.cases)} mutants of {len({(c.sheet, c.subject.claim.id, c.subject.entry) for c in self.cases})} "
            f"formulas; {len(self.false_passes)} false passes, {len(self.false_refutations)} false refutations, "
            f"{len(self.broken)} broke the run, "
            f"{len(self.open)} open ({100 * len(self.open) / max(1, len(self.cases)):.1f} %)",
            f"diagnosed rightly: {right} of {asked} ({100 * right / max(1, asked):.1f} %)",
            "left out: " + ", ".join(f"{n} {why}" for why, n in sorted(self.left_out.items())),
        ]
        return lines


def _row(cells: tuple[object, ...]) -> str:
    first, *rest = cells
    return f"{first!s:10}" + "".join(f"{c!s:>9}" for c in rest)


def _count(cases: list[Case], *verdicts: str) -> int:
    return sum(c.verdict in verdicts for c in cases)


def measure(sheets: list[str], each: int, seed: int, most: int = 10**9, say: object = None) -> Trust:
    """`each` mutants of every formula of the worksheets named, `most` formulas a worksheet."""
    trust = Trust()
    for name in sheets:
        question = read(ROOT / "worksheets" / f"{name}.toml")
        subjects = list(_subjects(question, trust))
        Random(f"{seed} {name}").shuffle(subjects)
        cases = [c for s in subjects[:most] for c in _cases(name, question, s, each, seed, trust)]
        _judge(question, cases)
        trust.cases += cases
        if callable(say):
            say(f"{name}: {len(cases)} mutants")
    return trust


# -- subjects


def _subjects(question: Question, trust: Trust) -> Iterator[Subject]:
    for derivation in pipeline._derive(question, lambda words: None):
        wish = next(w for w in question.wishes if w.topic == derivation.topic)
        for claim in derivation.claims:
            why = "at given values" if wish.set else _unfit(claim)
            if why:
                trust.left_out[why] += 1
                continue
            for subject in _formulas(claim):
                if nodes(subject.formula) > LARGEST:
                    trust.left_out[f"of more than {LARGEST} nodes"] += 1
                else:
                    yield subject


def _unfit(claim: Claim) -> str:
    if claim.quantity is None or claim.quantity.name not in QUANTITIES:
        return "without a quantity"
    if not isinstance(claim.value, (Formula, Expansion, Matrix)):
        return f"of form {type(claim.value).__name__}"
    if claim.kind.name not in ("exactly", "order"):
        return "bounds and limits"
    spec = QUANTITIES[claim.quantity.name]
    if any(k not in (spec.which, "side") for k, _ in claim.quantity.keys):
        return "with keys of their own"
    if isinstance(claim.value, Formula):
        heads = {n.head for n in walk(claim.value)}
        if heads & {"order", "integral", "root", "rootsum", "operator"}:
            return "orders, integrals, roots"
        if any(n.head == "sum" and n.args[2].head == "constant" for n in walk(claim.value)):
            return "infinite sums"
    return "" if claim.topic != "validity" else "certified numbers"


def _formulas(claim: Claim) -> Iterator[Subject]:
    value = claim.value
    if isinstance(value, Formula):
        yield Subject(claim, value)
    elif isinstance(value, Expansion):
        parts = [(k, t) for k, t in zip(value.powers, value.terms, strict=True) if isinstance(t, Formula)]
        if parts:
            yield Subject(claim, plus(*(times(t, power(TAU, number(k))) if k > 1 else times(t, TAU) if k else t
                                        for k, t in parts)))
    elif isinstance(value, Matrix) and claim.quantity is not None and claim.quantity.name == "generator":
        seen: dict[Formula, tuple[int, int]] = {}
        for x, y, f in value.entries():
            seen.setdefault(f, (x, y))
        chosen = list(seen.items())
        Random(claim.id).shuffle(chosen)
        for f, place in chosen[:ENTRIES]:
            yield Subject(claim, f, place)


# -- cases


def _cases(
    name: str, question: Question, subject: Subject, each: int, seed: int, trust: Trust
) -> Iterator[Case]:
    claim, setting = subject.claim, question.setting
    spec = QUANTITIES[claim.quantity.name] if claim.quantity else None
    single = claim.quantity.key(spec.which) not in (None, "k") if claim.quantity and spec and spec.which else False
    brings = {} if spec is None or single else {b: BROUGHT.get(b, "real") for b in spec.brings}
    domains = setting.domains()
    order = claim.kind.order if claim.kind.name == "order" else None
    at_fixed = claim.kind.fixed is not None
    counters = [b for b, k in brings.items() if k == "whole"]
    whole = (*(n for n, d in domains.items() if d.kind == "integer"), *counters)
    names = (*(n for n in domains if n != "tau"), *brings)
    where = points(domains, brings, (*setting.assume, *claim.assume), seed)
    chance = Random(f"{seed} {name} {claim.id} {subject.entry}")
    for mutant in mutants(Given(subject.formula, names, whole, order, chance), each):
        try:
            answer = differs(subject.formula, mutant.formula, order, at_fixed, where)
        except Unknown as part:
            trust.left_out[f"mutants with {part}"] += 1
            continue
        if answer is None:
            trust.left_out["mutants without a value"] += 1
        else:
            yield Case(name, subject, mutant, answer)


def _own(n: int, case: Case) -> Own:
    claim = case.subject.claim
    keys = dict(claim.quantity.keys) if claim.quantity else {}
    spec = QUANTITIES[claim.quantity.name]  # type: ignore[union-attr]
    which = keys.get(spec.which) if spec.which else None
    return Own(
        f"m{n}", claim.quantity.name, claim.kind.phrase,  # type: ignore[union-attr]
        which if isinstance(which, (int, str)) else None, case.subject.entry, keys.get("side"),  # type: ignore[arg-type]
        case.mutant.formula, assume=claim.assume,
    )


def _judge(question: Question, cases: list[Case]) -> None:
    """All mutants of a worksheet at once; what the diagnosis mends is laid beside the formula by mpmath."""
    if not cases:
        return
    found: dict[str, Diagnosis | None] = {}

    def recorded(judged: Judged, q: Question, derivations: tuple[Derivation, ...], without: object = ()) -> Judged:
        found[judged.claim.id] = diagnosis_of(judged.claim, q, derivations)
        words = found[judged.claim.id]
        return replace(judged, diagnosis=words.words if words else judged.diagnosis)

    kept = pipeline.diagnosed
    pipeline.diagnosed = recorded  # type: ignore[assignment]
    try:
        judged = _answers(question, cases)
    finally:
        pipeline.diagnosed = kept
    for n, case in enumerate(cases):
        mine = judged[f"claim.m{n}"]
        case.verdict, case.words = mine.verdict, mine.diagnosis
        diagnosis = found.get(f"claim.m{n}")
        if diagnosis is not None and diagnosis.mended is not None:
            case.mended = diagnosis.mended
            case.cured = _cured(question, case, diagnosis)


def _answers(question: Question, cases: list[Case]) -> dict[str, Judged]:
    """Verdicts by claim; where one mutant breaks the run, the halves are judged apart until it stands alone."""
    return _apart(question, [(n, _own(n, case)) for n, case in enumerate(cases)])


def _apart(question: Question, claims: list[tuple[int, Own]]) -> dict[str, Judged]:
    asked = replace(question, claims=tuple(own for _, own in claims))
    try:
        return {j.claim.id: j for j in pipeline.answer(asked).judged}
    except (WatchpotError, InternalError, ArithmeticError, ValueError, TypeError) as broken:
        if len(claims) == 1:
            claim = own_claim(claims[0][1], question.setting)
            return {claim.id: Judged(claim, BROKEN, (), diagnosis=f"{type(broken).__name__}: {broken}")}
    half = len(claims) // 2
    return {**_apart(question, claims[:half]), **_apart(question, claims[half:])}


def _cured(question: Question, case: Case, diagnosis: Diagnosis) -> bool:
    """Whether the mended formula is the right one, by mpmath; a narrower claim counts where it was accepted."""
    mended = diagnosis.mended
    if mended is None or not isinstance(mended.value, Formula):
        return False
    claim, domains = case.subject.claim, question.setting.domains()
    spec = QUANTITIES[claim.quantity.name]  # type: ignore[union-attr]
    order = mended.kind.order if mended.kind.name == "order" else None
    brings = {b: BROUGHT.get(b, "real") for b in spec.brings}
    where = points(domains, brings, (*question.setting.assume, *mended.assume), 77)
    try:
        return differs(case.subject.formula, mended.value, order, claim.kind.fixed is not None, where) is False
    except Unknown:
        return True


