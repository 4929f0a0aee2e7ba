"""The `holds` phrase: in what sense a claimed formula is meant.

`kind_of("up to O(tau^3)")` gives a `Kind`; a phrase that says nothing known is a `FormulaFault` whose position
counts inside the phrase.  Phrases are split at top-level commas:
exactly | up to O(c*tau^k) [at fixed expr] | as n -> a [, then m -> b] [, error O(...)] [, within r]
[, up to a phase] [, smooth part] | as an upper bound | as a lower bound; each with [, for every L] in the end.
"""

from __future__ import annotations

import re
from dataclasses import replace

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.formula.tree import TAU, Formula
from derive.record.said import EXACTLY, Kind

FORMS = "exactly; up to O(tau^3); as n -> infinity; as an upper bound; as a lower bound; each with , for every L"

_ORDER = re.compile(r"up to\s+(?P<order>O\s*\(.*\))(?:\s+at fixed\s+(?P<fixed>.+))?", re.DOTALL)
_TOWARD = re.compile(r"(?P<lead>as|then)\s+(?P<letter>[A-Za-z][A-Za-z0-9_]*)\s*->\s*(?P<to>.+)", re.DOTALL)
_EVERY = re.compile(r"for every\s+(?P<letter>[A-Za-z][A-Za-z0-9_]*)")


def kind_of(phrase: str) -> Kind:
    """The kind of claim that `phrase` names."""
    parts = _split(phrase)
    every, parts = _take_every(parts)
    at, first = parts[0] if parts else (0, "exactly")
    kind = _head(first, at, parts[1:])
    return replace(kind, phrase=phrase.strip(), every=every)


def _split(phrase: str) -> list[tuple[int, str]]:
    """The parts between top-level commas, each with the position where it begins."""
    parts, depth, begin = [], 0, 0
    for k, c in enumerate(phrase + ","):
        depth += {"(": 1, ")": -1}.get(c, 0)
        if c == "," and depth <= 0 or k == len(phrase):
            raw = phrase[begin:k]
            parts.append((begin + len(raw) - len(raw.lstrip()), raw.strip()))
            begin = k + 1
    for at, part in parts:
        if not part:
            raise FormulaFault("nothing stands between two commas, or there are no words at all.", "", at)
    return parts


def _take_every(parts: list[tuple[int, str]]) -> tuple[str | None, list[tuple[int, str]]]:
    found = _EVERY.fullmatch(parts[-1][1])
    return (found["letter"], parts[:-1]) if found else (None, parts)


def _head(first: str, at: int, rest: list[tuple[int, str]]) -> Kind:
    if first in ("exactly", "as an upper bound", "as a lower bound"):
        _nothing_more(rest)
        name = {"exactly": "exactly", "as an upper bound": "upper", "as a lower bound": "lower"}[first]
        return replace(EXACTLY, name=name)
    order = _ORDER.fullmatch(first)
    if order:
        _nothing_more(rest)
        return _order(order, at)
    toward = _TOWARD.fullmatch(first)
    if toward and toward["lead"] == "as":
        return _limit(toward, at, rest)
    raise FormulaFault(f"{_short(first)} says nothing known about how a formula holds.", f"Known: {FORMS}.", at)


def _short(words: str) -> str:
    return words if len(words) <= 60 and words.isprintable() else ascii(words[:57])[1:-1] + "..."


def _nothing_more(rest: list[tuple[int, str]]) -> None:
    if rest:
        raise FormulaFault(f"{_short(rest[0][1])} cannot stand here.", f"Known: {FORMS}.", rest[0][0])


def _order(found: re.Match[str], at: int) -> Kind:
    inside = _parsed(found["order"], at + found.start("order"))
    if inside.head != "order":
        raise FormulaFault("O(...) stands alone here.", "Write  up to O(tau^3).", at)
    power = tau_power(inside.args[0])
    if power is None or power < 1:
        raise FormulaFault("O(...) holds a power of tau here, from tau on.", "Write  up to O(tau^3).", at)
    fixed = _parsed(found["fixed"], at + found.start("fixed")) if found["fixed"] else None
    return Kind("order", "", power, fixed)


def tau_power(f: Formula) -> int | None:
    """k where f is tau^k, with factors free of tau in front; None where it is anything else."""
    factors = f.args if f.head == "times" else (f,)
    powers = [_one_power(a) for a in factors]
    return None if None in powers else sum(p for p in powers if p is not None)


def _one_power(f: Formula) -> int | None:
    from derive.formula.tree import free_letters

    if f == TAU:
        return 1
    if "tau" not in free_letters(f):
        return 0
    exponent = f.args[1] if f.head == "power" and f.args[0] == TAU else None
    if exponent is None or exponent.head != "number" or exponent.args[0].denominator != 1:
        return None
    return int(exponent.args[0])


def _limit(first: re.Match[str], at: int, rest: list[tuple[int, str]]) -> Kind:
    toward = [(first["letter"], _parsed(first["to"], at + first.start("to")))]
    error = within = None
    phase = smooth = False
    for begin, part in rest:
        then = _TOWARD.fullmatch(part)
        if then and then["lead"] == "then":
            toward.append((then["letter"], _parsed(then["to"], begin + then.start("to"))))
        elif part.startswith("error "):
            error = _parsed(part[6:], begin + 6)
            if error.head != "order":
                raise FormulaFault("an error is told by O(...).", "Write  error O(n^-5).", begin)
        elif part.startswith("within "):
            within = _parsed(part[7:], begin + 7)
        elif part == "up to a phase":
            phase = True
        elif part == "smooth part":
            smooth = True
        else:
            raise FormulaFault(f"{_short(part)} cannot stand behind a limit.", f"Known: {_BEHIND}.", begin)
    return Kind("limit", "", None, None, tuple(toward), error, within, phase, smooth)


_BEHIND = "then t -> infinity; error O(n^-5); within 1/100; up to a phase; smooth part"


def _parsed(source: str, at: int) -> Formula:
    try:
        return parse(source)
    except FormulaFault as fault:
        raise FormulaFault(fault.message, fault.mend, fault.position + at) from None
