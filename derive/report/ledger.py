"""ledger.json: every entry with its verdict, for programs.  Same report, same bytes; no floating point anywhere."""

from __future__ import annotations

import json
from collections.abc import Iterator
from decimal import Decimal
from typing import Any

from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ONE, Formula, times
from derive.problem.quantities import QUANTITIES, Quantity
from derive.problem.setting import Relation
from derive.record.said import (
    Cases,
    Claim,
    Expansion,
    Finding,
    Judged,
    Matrix,
    Number,
    PerRoot,
    Prose,
    Report,
    Table,
)
from derive.report.arrange import is_operator
from derive.report.context import Context, expansion_formula
from derive.report.emit_latex import latex
from derive.report.matrices import entries_of, listed_rows


def ledger(report: Report, context: Context) -> bytes:
    """The ledger of a report, UTF-8."""
    data = {
        "watchpot": report.version,
        "title": report.question.setting.title,
        "symbols": {x.name: x.domain.text for x in report.question.setting.letters},
        "seed": report.question.check.seed,
        "verdict": report.verdict(),
        "entries": [entry(j, context) for j in report.judged],
        "notes": [plain(note) for note in all_notes(report)],
    }
    return ("".join(_written(data, 0)) + "\n").encode("utf-8")


def all_notes(report: Report) -> Iterator[Prose]:
    """What was left out, topic by topic, then the report's own."""
    for derivation in report.derivations:
        yield from derivation.notes
    yield from report.notes


def plain(prose: Prose) -> str:
    """Prose as one line of text, its formulas in worksheet syntax."""
    return "".join(part if isinstance(part, str) else text(part) for part in prose)


def entry(judged: Judged, context: Context) -> dict[str, Any]:
    """One entry, keys in the ledger's order."""
    claim = judged.claim
    out: dict[str, Any] = {
        "id": claim.id,
        "topic": claim.topic,
        "quantity": claim.quantity.name if claim.quantity else None,
        "key": key(claim.quantity),
        "kind": claim.kind.phrase,
        "assume": [relation(r) for r in claim.assume],
    }
    out |= value(claim, context)
    out["latex"] = latex(context.claim(claim)) if _is_matrix(claim) else latex(context.value(claim))
    out["valid_for"] = claim.valid_for
    out["remainder"] = remainder(claim)
    out["source"] = claim.source
    out["verdict"] = judged.verdict
    out["numbers"] = [number(n) for n in judged.numbers]
    out["findings"] = [finding(f) for f in judged.findings]
    if judged.diagnosis:
        out["diagnosis"] = judged.diagnosis
    return out


def key(quantity: Quantity | None) -> dict[str, Any]:
    """The keys as a worksheet gives them: `which` whatever the quantity's own name for it is."""
    if quantity is None:
        return {}
    spec = QUANTITIES.get(quantity.name)
    selects = spec.which if spec else None
    return {("which" if name == selects else name): _json_key(value) for name, value in quantity.keys}


def _json_key(value: object) -> object:
    if isinstance(value, (tuple, list)):
        return [_json_key(v) for v in value]
    if isinstance(value, Formula):
        return text(value)
    return value if isinstance(value, (int, str)) or value is None else str(value)


def relation(r: Relation) -> str:
    return f"{text(r.left)} {r.op} {text(r.right)}"


def value(claim: Claim, context: Context | None = None) -> dict[str, Any]:
    """`formula` (null where another holds), and one of matrix, cases, per_root, number, words."""
    v = claim.value
    if isinstance(v, (Matrix, Expansion)) and _is_matrix(claim):
        return {"formula": None, "matrix": listed_rows(context.view(v).entries if context else entries_of(v), text)}
    if isinstance(v, Expansion):
        return {"formula": text(expansion_formula(v))}
    if isinstance(v, Formula) and is_operator(v):
        return {"formula": None, **_in_words(v)}
    if isinstance(v, Formula):
        return {"formula": text(v)}
    if isinstance(v, Cases):
        return {"formula": None, "cases": [{"if": when, "formula": text(f)} for when, f in v.pieces]}
    if isinstance(v, Table):
        rows = [{"if": f"n = {n}", "formula": text(parse(q))} for n, q in v.rows]
        return {"formula": None, "cases": rows, "values": [list(row) for row in v.rows]}
    if isinstance(v, PerRoot):
        root = {"polynomial": text(v.polynomial), "letter": v.letter, "formula": text(v.formula)}
        return {"formula": None, "per_root": root}
    if isinstance(v, Number):
        return {"formula": None, "number": number(v), **_at_ask(v)}
    return {"formula": None}


def _in_words(f: Formula) -> dict[str, Any]:
    """A polynomial in letters that do not commute as [coefficient, word]; nothing where it is none."""
    try:
        return {"words": [[text(c), " ".join(names)] for c, names in _words(f)]}
    except NotCovered:
        return {}


def _words(f: Formula) -> list[tuple[Formula, tuple[str, ...]]]:
    """(coefficient, letters from the left), products multiplied out."""
    if not is_operator(f):
        return [(f, ())]
    if f.head == "operator":
        name, sub, dagger = f.args
        return [(ONE, (f"{name}{'' if sub is None else f'_{sub}'}{'†' if dagger else ''}",))]
    if f.head == "plus":
        return [word for a in f.args for word in _words(a)]
    if f.head != "times":
        raise NotCovered("letters that do not commute stand inside a function")
    found: list[tuple[Formula, tuple[str, ...]]] = [(ONE, ())]
    for a in f.args:
        found = [(times(c, d), (*left, *right)) for c, left in found for d, right in _words(a)]
    return found


def _at_ask(n: Number) -> dict[str, Any]:
    """A number at an ask as a worksheet says it: [n, decimal], which stands for what rounds to it."""
    ask = dict(n.at).get("n")
    return {"values": [[ask, f"{Decimal(n.value):f}"]]} if ask is not None else {}


def _is_matrix(claim: Claim) -> bool:
    v = claim.value
    return isinstance(v, Matrix) or (isinstance(v, Expansion) and any(isinstance(t, Matrix) for t in v.terms))


def remainder(claim: Claim) -> str | None:
    """What a truncation leaves out: O(letter^k)."""
    if isinstance(claim.value, Expansion):
        return f"O({claim.value.letter}^{claim.value.remainder})"
    return f"O(tau^{claim.kind.order})" if claim.kind.order is not None else None


def number(n: Number) -> dict[str, Any]:
    return {"at": dict(n.at), "value": n.value, "radius": n.radius, "road": n.road}


def finding(f: Finding) -> dict[str, Any]:
    """A finding without the keys it has nothing to say about."""
    out: dict[str, Any] = {"verdict": f.verdict, "road": f.road}
    if f.digits is not None:
        out["digits"] = f.digits
    if f.points is not None:
        out["points"] = f.points
    if f.point:
        out["point"] = dict(f.point)
    if f.evidence:
        out["evidence"] = f.evidence
    return out


def _written(data: object, depth: int) -> Iterator[str]:
    """JSON with one key a line; a list of plain values stays on one line, so that a matrix is a line an entry."""
    inner, outer = " " * (depth + 1), " " * depth
    if isinstance(data, dict) and data and not _is_short(data):
        for n, (name, item) in enumerate(data.items()):
            yield (",\n" if n else "{\n") + inner + json.dumps(name) + ": "
            yield from _written(item, depth + 1)
        yield "\n" + outer + "}"
    elif isinstance(data, list) and any(isinstance(item, (dict, list)) for item in data):
        for n, item in enumerate(data):
            yield (",\n" if n else "[\n") + inner
            if isinstance(item, list):
                yield json.dumps(item)
            else:
                yield from _written(item, depth + 1)
        yield "\n" + outer + "]"
    else:
        yield json.dumps(data)


def _is_short(data: dict[str, Any]) -> bool:
    return len(data) <= 5 and not any(isinstance(v, (dict, list)) for v in data.values())
