"""Formulas that the worksheets derive, changed, judged as claims; the verdicts against mpmath's.

What is changed stands in `subjects.py`, how in `mutants.py`, the outside road in `outside.py`.  Counted as left out:
entries without a formula of their own, and changes of which mpmath cannot say whether they matter.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from random import Random
from typing import Any

import derive.pipeline as pipeline
from derive.checks.diagnose.search import Diagnosis
from derive.checks.judge import InternalError
from derive.errors import WatchpotError
from derive.formula.tree import Formula, number
from derive.judging.diagnosis import diagnosis_of
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Own, Question, Relation
from derive.record.own import own_claim
from derive.record.said import Cases, Claim, Derivation, Judged, Matrix, PerRoot, Value
from derive.worksheet import read
from derive.worksheet.claims import brought
from tests.trust.mutants import Given, Mutant, mutants
from tests.trust.outside import Meant, Unknown, differs, points
from tests.trust.subjects import Subject, subjects

ROOT = Path(__file__).parent.parent.parent
COSTLY = 12  # changes of a formula that is judged slowly
DIAGNOSED = ("factor", "sign", "index", "power")
BROUGHT = {"k": "whole", "n": "whole", "z": "complex"}
BROKEN = "broke the run"
PASSES = ("agrees", "proved")


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
            f"{len(self.cases)} mutants of {len({(c.sheet, c.subject.name) for c in self.cases})} "
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
        found = list(subjects(question, trust.left_out))
        Random(f"{seed} {name}").shuffle(found)
        cases = [c for s in found[:most] for c in _cases(name, question, s, each, seed, trust)]
        _judge(question, cases)
        trust.cases += cases
        if callable(say):
            say(f"{name}: {len(cases)} mutants")
    return trust


# -- cases


def _cases(
    name: str, question: Question, subject: Subject, each: int, seed: int, trust: Trust
) -> Iterator[Case]:
    claim, setting = subject.claim, question.setting
    domains = setting.domains()
    where = _points(question, subject, (*claim.assume, *subject.besides), seed)
    brings = _brought(subject)
    counters = [b for b, k in brings.items() if k == "whole"]
    whole = (*(n for n, d in domains.items() if d.kind == "integer"), *counters)
    names = (*(n for n in domains if n != "tau"), *brings)
    order = claim.kind.order if claim.kind.name == "order" else None
    chance = Random(f"{seed} {name} {subject.name}")
    most = min(each, COSTLY) if subject.is_costly else each
    for mutant in mutants(Given(subject.formula, names, whole, order, chance), most):
        try:
            answer = differs(subject.formula, mutant.formula, _meant(subject, claim), where)
        except Unknown as part:
            trust.left_out[f"changes with {part}"] += 1
            continue
        if answer is None:
            trust.left_out["changes of which mpmath does not know whether they matter"] += 1
        else:
            yield Case(name, subject, mutant, answer)


def _meant(subject: Subject, claim: Claim) -> Meant:
    return Meant(claim.kind, subject.radius, subject.root, subject.window)


def _brought(subject: Subject) -> dict[str, str]:
    claim = subject.claim
    spec = QUANTITIES[claim.quantity.name] if claim.quantity else None
    if claim.quantity is None or spec is None:
        return {}
    which = claim.quantity.key(spec.which) if spec.which else None
    return {b: BROUGHT.get(b, "real") for b in brought(spec, which if isinstance(which, (int, str)) else None)}


def _points(question: Question, subject: Subject, assume: tuple[Relation, ...], seed: int) -> list[Any]:
    setting = question.setting
    return points(setting.domains(), _brought(subject), (*setting.assume, *assume), seed)


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
    return _apart(question, [(n, case.subject.own(f"m{n}", case.mutant.formula)) for n, case in enumerate(cases)])


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
    f = None if mended is None else _same_part(case.subject, mended.value)
    if mended is None or f is None:
        return False
    where = _points(question, case.subject, (*mended.assume, *case.subject.besides), 77)
    try:
        return differs(case.subject.formula, f, _meant(case.subject, mended), where) is False
    except Unknown:
        return True


def _same_part(subject: Subject, value: Value) -> Formula | None:
    """The mended formula that stands in the changed one's place."""
    if isinstance(value, Cases):
        return dict(value.pieces).get(subject.part)
    if isinstance(value, PerRoot):
        return value.formula
    if isinstance(value, Matrix):
        return next((f for x, y, f in value.entries() if str((x, y)) == subject.part), number(0))
    return value if isinstance(value, Formula) else None
