"""What is said: steps, claims, findings and the report.  Frozen records; they compute nothing.

A derived formula and a user's own are the same record, `Claim`, keyed by the same `Quantity`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from derive.formula.tree import Formula
from derive.problem.quantities import Quantity
from derive.problem.setting import Question, Relation, Row

Prose = tuple[str | Formula, ...]
"""Words with mathematics in between: strings and formulas in reading order."""


@dataclass(frozen=True, slots=True)
class Matrix:
    """An N x N matrix by its non-zero entries; an absent entry is claimed to be zero.

    Rows are `base` (shared with whoever made it) except where `patch` has another: a large matrix that differs
    from the Hamiltonian in a few rows costs only those rows.
    """

    size: int
    base: tuple[Row, ...] = ()
    patch: tuple[tuple[int, Row], ...] = ()

    def entries(self) -> Iterator[tuple[int, int, Formula]]:
        """(x, y, value), rows then columns ascending."""
        changed = dict(self.patch)
        rows = range(self.size) if self.base else sorted(changed)
        for x in rows:
            for y, value in changed.get(x, self.base[x] if self.base else ()):
                yield x, y, value


@dataclass(frozen=True, slots=True)
class Expansion:
    """A truncated series: `terms[k]` multiplies letter^powers[k]; the remainder is O(letter^remainder).

    A truncation without a remainder cannot be written down.
    """

    letter: str
    powers: tuple[int, ...]
    terms: tuple[Formula | Matrix, ...]
    remainder: int


@dataclass(frozen=True, slots=True)
class PerRoot:
    """One formula for all roots of an irreducible polynomial in `letter`."""

    polynomial: Formula
    letter: str
    formula: Formula


@dataclass(frozen=True, slots=True)
class Cases:
    """Formulas by condition, in words or relations."""

    pieces: tuple[tuple[str, Formula], ...]


@dataclass(frozen=True, slots=True)
class Number:
    """A certified decimal: value, radius, and where (letter, exact text) pairs put it."""

    value: str
    radius: str
    at: tuple[tuple[str, str], ...] = ()
    road: str = "enclosure"


@dataclass(frozen=True, slots=True)
class Table:
    """Published numbers, (n, value) as they were printed; each stands for whatever rounds to it."""

    rows: tuple[tuple[str, str], ...]


Value = Formula | Matrix | Expansion | PerRoot | Cases | Number | Table


@dataclass(frozen=True, slots=True)
class Kind:
    """The `holds` phrase: name is exactly, order, limit, upper or lower.

    `phrase` is the worksheet's own wording; `order` the power of tau in "up to O(tau^order)".  The rest belongs to
    limits (`toward`: letter and where it goes, outermost last), but `every`: the size a proof is asked for.
    """

    name: str = "exactly"
    phrase: str = "exactly"
    order: int | None = None
    fixed: Formula | None = None
    toward: tuple[tuple[str, Formula], ...] = ()
    error: Formula | None = None
    within: Formula | None = None
    phase: bool = False
    smooth: bool = False
    every: str | None = None


EXACTLY = Kind()


@dataclass(frozen=True, slots=True)
class Claim:
    """Somebody says that a quantity equals a value.  `quantity` is None for the graph-free universal words."""

    id: str
    topic: str
    quantity: Quantity | None
    value: Value
    kind: Kind = EXACTLY
    assume: tuple[Relation, ...] = ()
    valid_for: str = ""
    source: str = "derived here"
    origin: str = "derived"


@dataclass(frozen=True, slots=True)
class Line:
    """left = right, or left alone.  `right` may be a formula or a matrix; `relation` is =, <=, ~ or :=."""

    left: Formula
    right: Formula | Matrix | None = None
    relation: str = "="


@dataclass(frozen=True, slots=True)
class Step:
    """A reason that ends in a colon, the lines it buys, and the id of the claim that is earned by it, if any.

    `where` explains letters on first use, after the lines.  Lines marked `fold` are a long chain's middle.
    """

    reason: Prose
    lines: tuple[Line, ...] = ()
    earns: str | None = None
    where: Prose = ()
    fold: bool = False


@dataclass(frozen=True, slots=True)
class Derivation:
    """One topic's answer: what is claimed, how it was found, what was left out, what it rests on."""

    topic: str
    claims: tuple[Claim, ...]
    steps: tuple[Step, ...]
    notes: tuple[Prose, ...] = ()
    sources: tuple[str, ...] = ()


VERDICTS = ("refuted", "undecided", "untested", "agrees", "proved")
"""Worst first."""


@dataclass(frozen=True, slots=True)
class Finding:
    """What one road found.  `point` is where it refuted (letter, exact text); `evidence` one plain sentence."""

    verdict: str
    road: str
    digits: int | None = None
    points: int | None = None
    point: tuple[tuple[str, str], ...] = ()
    evidence: str = ""


@dataclass(frozen=True, slots=True)
class Judged:
    """A claim with its verdict, what each road found, measured numbers, and, if refuted, where it goes wrong."""

    claim: Claim
    verdict: str
    findings: tuple[Finding, ...]
    numbers: tuple[Number, ...] = ()
    diagnosis: str = ""


@dataclass(frozen=True, slots=True)
class AtAsk:
    """A number asked for at an ask or a time: what the entry's law says there and what was measured.

    `apart` is (law - measured)/measured to two digits, "0" where the two enclosures overlap, "" where one is missing.
    """

    entry: str
    quantity: Quantity | None
    law: Number | None
    measured: Number | None
    apart: str = ""


@dataclass(frozen=True, slots=True)
class Curve:
    """Points as decimal strings.  `role` is derived (thin ink line), measured (open ring) or bound."""

    label: str
    role: str
    x: tuple[str, ...]
    y: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Plot:
    """A figure's data.  Axes carry symbol and unit; `says` is the sentence that tells what is to be seen.

    `x_label`, `y_label` are plain text with mathematics between dollar signs; scales are linear or log.
    `regimes` are named along the top: (label, from, to), the two as decimal strings on the x axis.
    """

    id: str
    says: str
    x_label: str
    y_label: str
    curves: tuple[Curve, ...]
    x_scale: str = "linear"
    y_scale: str = "linear"
    regimes: tuple[tuple[str, str, str], ...] = ()


@dataclass(frozen=True, slots=True)
class Report:
    """All that is written, in one record."""

    question: Question
    derivations: tuple[Derivation, ...]
    judged: tuple[Judged, ...]
    plots: tuple[Plot, ...] = ()
    notes: tuple[Prose, ...] = ()
    version: str = ""
    asked: tuple[AtAsk, ...] = ()

    def verdict(self) -> str:
        """The worst verdict of all entries; a report without entries is untested."""
        given = {j.verdict for j in self.judged}
        return next((v for v in VERDICTS if v in given), "untested")

