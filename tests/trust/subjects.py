"""What is changed: every formula of every entry of a worksheet's ledger, or the reason why it is not.

A formula counts once for each entry of the ledger, a matrix by its different entries (`ENTRIES` of one).  An entry
whose derivation is an equation counts by the number that a road certified, at the point where it did.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from random import Random

from derive import pipeline
from derive.formula.grammar import parse, parse_relations
from derive.formula.tree import TAU, Formula, number, plus, power, times, walk
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Own, Question, Relation
from derive.record.said import Cases, Claim, Expansion, Matrix, Number, PerRoot, Value
from tests.trust.mutants import nodes

ENTRIES = 2  # of one matrix
LARGE = 150  # nodes from which a formula gets few changes
HUGE = 4_000  # nodes of the largest formula that is changed
OTHERWISE = "otherwise"
Put = Callable[[Formula], Value]


def _itself(f: Formula) -> Value:
    return f


@dataclass(frozen=True)
class Subject:
    """A formula, the claim that it is part of, and how another is put in its place.

    `besides` are relations at which it is meant (a case, a certified point); `root` the polynomial and the letter
    whose roots it is meant at; `radius` how well a number is known; `window` the times between which a regime holds.
    """

    claim: Claim
    formula: Formula
    put: Put = _itself
    entry: tuple[int, int] | None = None
    besides: tuple[Relation, ...] = ()
    root: tuple[Formula, str] | None = None
    radius: Fraction | None = None
    window: tuple[Formula, Formula] | None = None
    part: str = ""

    @property
    def name(self) -> str:
        return f"{self.claim.id}{f' {self.entry}' if self.entry else ''}{f' {self.part}' if self.part else ''}"

    @property
    def is_costly(self) -> bool:
        """A late-time law, an integral, a very long formula: a change of it is judged slowly."""
        heads = {n.head for n in walk(self.formula)}
        return self.claim.kind.name == "limit" or "integral" in heads or nodes(self.formula) > LARGE

    def own(self, name: str, f: Formula) -> Own:
        """The claim with f in the formula's place, as a worksheet would say it."""
        claim, value = self.claim, self.put(f)
        keys = dict(claim.quantity.keys) if claim.quantity else {}
        spec = QUANTITIES[claim.quantity.name]  # type: ignore[union-attr]
        which = keys.get(spec.which) if spec.which else None
        said = Own(
            name, claim.quantity.name, claim.kind.phrase,  # type: ignore[union-attr]
            which if isinstance(which, (int, str)) else None, self.entry, keys.get("side"),  # type: ignore[arg-type]
            assume=claim.assume, arm=keys.get("arm"),  # type: ignore[arg-type]
        )
        if isinstance(value, Matrix):
            return replace(said, matrix=tuple(value.entries()))
        if isinstance(value, Cases):
            return replace(said, cases=value.pieces)
        if isinstance(value, PerRoot):
            return replace(said, per_root=(value.polynomial, value.letter, value.formula))
        return replace(said, formula=f)


def subjects(question: Question, left_out: Counter[str]) -> Iterator[Subject]:
    """Every formula that the worksheet derives; what is not changed is counted with its reason."""
    judged_claims = pipeline.answer(replace(question, claims=())).judged
    times_of = {j.claim.id: j.claim.value for j in judged_claims if j.claim.id.endswith((".from", ".to"))}
    for judged in judged_claims:
        claim = judged.claim
        why = _unfit(claim)
        found = [] if why else list(_parts(claim))
        if not found:
            left_out[why or f"without a formula ({type(claim.value).__name__})"] += 1
        for subject in found:
            if nodes(subject.formula) > HUGE:
                left_out[f"of more than {HUGE} nodes"] += 1
            else:
                yield replace(subject, window=_window(claim, times_of))


def _window(claim: Claim, times_of: dict[str, Value]) -> tuple[Formula, Formula] | None:
    """The times between which a regime's law holds, where both are formulas."""
    stem = claim.id.removesuffix(".law")
    first, last = times_of.get(f"{stem}.from"), times_of.get(f"{stem}.to")
    return (first, last) if isinstance(first, Formula) and isinstance(last, Formula) else None


def _unfit(claim: Claim) -> str:
    if claim.quantity is None or claim.quantity.name not in QUANTITIES:
        return "without a quantity"
    if claim.quantity.name == "dark state":
        return "dark states (any multiple, any combination is one)"
    if isinstance(claim.value, Formula) and any(n.head == "order" for n in walk(claim.value)):
        return "orders of an error (one number, changed by the round trip)"
    return ""


def _parts(claim: Claim) -> Iterator[Subject]:
    value = claim.value
    if isinstance(value, Formula):
        yield Subject(claim, value)
    elif isinstance(value, Number):
        yield Subject(claim, parse(value.value), radius=Fraction(value.radius), besides=claim.assume)
    elif isinstance(value, PerRoot):
        yield Subject(claim, value.formula, lambda f: replace(value, formula=f), root=(value.polynomial, value.letter))
    elif isinstance(value, Cases):
        yield from _of_cases(claim, value)
    elif isinstance(value, Expansion) and all(isinstance(t, Formula) for t in value.terms):
        terms = [t for t in value.terms if isinstance(t, Formula)]
        yield Subject(claim, _in_powers(list(zip(value.powers, terms, strict=True))))
    elif isinstance(value, (Matrix, Expansion)):
        yield from _of_matrix(claim, _cells(value))


def _of_cases(claim: Claim, value: Cases) -> Iterator[Subject]:
    conditions = {when: _relations(when) for when, _ in value.pieces if when != OTHERWISE}
    for k, (when, f) in enumerate(value.pieces):
        besides = conditions.get(when) or tuple(
            Relation(r.left, "!=", r.right) for rs in conditions.values() for r in rs
        )

        def put(new: Formula, k: int = k) -> Value:
            return Cases(tuple((c, new if n == k else old) for n, (c, old) in enumerate(value.pieces)))

        yield Subject(claim, f, put, besides=besides, part=when)


def _relations(when: str) -> tuple[Relation, ...]:
    return tuple(Relation(a, op, b) for a, op, b in parse_relations(when))


def _in_powers(terms: list[tuple[int, Formula]]) -> Formula:
    return plus(*(times(t, power(TAU, number(k))) if k > 1 else times(t, TAU) if k else t for k, t in terms))


Cells = dict[tuple[int, int], Formula]


def _cells(value: Matrix | Expansion) -> Cells:
    """The entries of a matrix; of a truncated series of matrices, as polynomials."""
    if isinstance(value, Matrix):
        return {(x, y): f for x, y, f in value.entries()}
    terms: dict[tuple[int, int], list[tuple[int, Formula]]] = {}
    for k, term in zip(value.powers, value.terms, strict=True):
        for x, y, f in term.entries() if isinstance(term, Matrix) else ():
            terms.setdefault((x, y), []).append((k, f))
    return {place: _in_powers(found) for place, found in terms.items()}


def _of_matrix(claim: Claim, cells: Cells) -> Iterator[Subject]:
    """Different entries by chance: each by itself, or within the whole matrix where entries go together."""
    seen: dict[Formula, tuple[int, int]] = {}
    for place, f in cells.items():
        seen.setdefault(f, place)
    chosen = list(seen.items())
    Random(claim.id).shuffle(chosen)
    alone = claim.quantity is not None and claim.quantity.name == "generator"
    size = claim.value.size if isinstance(claim.value, Matrix) else 0
    for f, place in chosen[:ENTRIES]:

        def put(new: Formula, place: tuple[int, int] = place) -> Value:
            return _matrix_of(size, {**cells, place: new})

        yield Subject(claim, f, _itself if alone else put, place if alone else None, part="" if alone else str(place))


def _matrix_of(size: int, cells: Cells) -> Matrix:
    rows: dict[int, list[tuple[int, Formula]]] = {}
    for (x, y), f in sorted(cells.items()):
        rows.setdefault(x, []).append((y, f))
    return Matrix(size, (), tuple((x, tuple(row)) for x, row in sorted(rows.items())))
