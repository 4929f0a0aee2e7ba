"""A matrix on paper: its distinct entries, half of them where the other half is their conjugate.

A matrix of a few sites is printed as a matrix; a larger one by value, each value with the places where it stands.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from derive.formula.tree import Formula, letter, number, plus, power, times
from derive.problem.conjugate import conjugate
from derive.problem.setting import Domain
from derive.record.said import Expansion, Matrix
from derive.report.boxes import Box, Chain, Grid, Link, Sign, Space, Words, row, width
from derive.report.layout import Layout
from derive.report.same import same
from derive.report.symbols import entry

SMALLEST_BY_ENTRY = 5  # a matrix of so many sites is printed as a matrix where it fits
WIDEST = 30.0  # em
PLACES = 12  # places named for one value
ON_ONE_LINE = 4  # of them
LINES = 60  # distinct values printed; the ledger has them all

Entries = dict[tuple[int, int], Formula]
Naming = Callable[[int], str]


@dataclass(frozen=True, slots=True)
class Value:
    """One distinct entry: what it is, the first places where it stands, and how many there are."""

    formula: Formula
    places: tuple[tuple[int, int], ...]
    count: int


@dataclass(frozen=True, slots=True)
class Distinct:
    """`symmetry` is Hermitian, anti-Hermitian or empty; with one, `values` come from the upper half only."""

    symmetry: str
    values: tuple[Value, ...]


def entries_of(value: Matrix | Expansion) -> Entries:
    """Entries by place.  An expansion becomes one matrix in its letter, ascending."""
    if isinstance(value, Matrix):
        return {(x, y): v for x, y, v in value.entries()}
    sums: dict[tuple[int, int], list[Formula]] = {}
    for exponent, term in zip(value.powers, value.terms, strict=True):
        if isinstance(term, Matrix):
            for x, y, v in term.entries():
                sums.setdefault((x, y), []).append(raised(v, value.letter, exponent))
    return {place: plus(*terms) for place, terms in sorted(sums.items())}


def raised(f: Formula, name: str, exponent: int) -> Formula:
    """f * name^exponent."""
    if exponent == 0:
        return f
    factor = letter(name) if exponent == 1 else power(letter(name), number(exponent))
    if f.head == "plus":
        return times(factor, f)
    return times(f, factor)


def distinct(entries: Entries, domains: Mapping[str, Domain]) -> Distinct:
    """The distinct entries of a matrix, in order of first appearance, rows before columns."""
    symmetry = _symmetry(entries, domains)
    places: dict[Formula, list[tuple[int, int]]] = {}
    counts: dict[Formula, int] = {}
    for (x, y), value in entries.items():
        if symmetry and x > y:
            continue
        counts[value] = counts.get(value, 0) + 1
        held = places.setdefault(value, [])
        if len(held) < PLACES:
            held.append((x, y))
    return Distinct(symmetry, tuple(Value(v, tuple(held), counts[v]) for v, held in places.items()))


def _symmetry(entries: Entries, domains: Mapping[str, Domain]) -> str:
    pairs = {(value, entries.get((y, x))) for (x, y), value in entries.items()}
    for name, sign in (("Hermitian", 1), ("anti-Hermitian", -1)):
        if pairs and all(_mirrors(left, right, sign, domains) for left, right in pairs):
            return name
    return ""


def _mirrors(value: Formula, other: Formula | None, sign: int, domains: Mapping[str, Domain]) -> bool:
    """Is `other` = sign * conj(value), as far as the shape says?"""
    if other is None:
        return False
    return same(other, conjugate(value, domains), sign)


@dataclass(frozen=True, slots=True)
class View:
    """A matrix looked at once: its entries, and what is printed of them."""

    size: int
    entries: Entries
    found: Distinct


def view(value: Matrix | Expansion, domains: Mapping[str, Domain]) -> View:
    entries = entries_of(value)
    parts = (value,) if isinstance(value, Matrix) else value.terms
    size = max((p.size for p in parts if isinstance(p, Matrix)), default=0)
    return View(size, entries, distinct(entries, domains))


def matrix_box(seen: View, name: Box, layout: Layout, naming: Naming) -> Chain:
    """The matrix called `name`: as a matrix where that fits, else by distinct entries."""
    if seen.size <= SMALLEST_BY_ENTRY and seen.entries:
        grid = _grid(seen.entries, seen.size, layout)
        if width(grid) <= WIDEST:
            return Chain((Link(name, "=", grid),))
    return _by_value(seen.found, name, layout, naming)


def _grid(entries: Entries, size: int, layout: Layout) -> Grid:
    zero = Sign("0", "number")
    return Grid(
        tuple(
            tuple(layout.box(entries[x, y]) if (x, y) in entries else zero for y in range(size))
            for x in range(size)
        )
    )


def _by_value(found: Distinct, name: Box, layout: Layout, naming: Naming) -> Chain:
    if not found.values:
        return Chain((Link(name, "=", Sign("0", "number")),))
    links = [link for v in found.values[:LINES] for link in _value_links(v, name, layout, naming)]
    left_out = len(found.values) - LINES
    if left_out > 0:
        links.append(Link(None, "", Words(f"and {left_out:,} more distinct entries"), True))
    return Chain(tuple(links))


def _value_links(value: Value, name: Box, layout: Layout, naming: Naming) -> list[Link]:
    """name_{0,1} = name_{1,2} = ... = value, over several lines where there are many places."""
    places = [entry(name, naming(x), naming(y)) for x, y in value.places]
    formula = layout.box(value.formula)
    if value.count > len(value.places):
        places = places[:ON_ONE_LINE - 1]
        more = Words(f"and at {value.count - len(places):,} more places")
        formula = row(formula, Sign(",", "punctuation"), Space("quad"), more)
    lines = [[places[0], *places[1:ON_ONE_LINE]]]
    lines += [places[n : n + ON_ONE_LINE] for n in range(ON_ONE_LINE, len(places), ON_ONE_LINE)]
    lines[-1].append(formula)
    first = Link(lines[0][0], "=", _equal(lines[0][1:]))
    return [first, *(Link(None, "=", _equal(line)) for line in lines[1:])]


def _equal(boxes: list[Box]) -> Box:
    out: list[Box] = []
    for n, box in enumerate(boxes):
        out.extend((Sign("=", "relation"), box) if n else (box,))
    return row(*out)


def remark(found: Distinct, by_value: bool, cut: bool = False) -> str:
    """What is said once below a matrix printed by value; of a list that is `cut` nothing follows for the rest."""
    if not by_value:
        return ""
    rest = "" if cut else "every entry not named is 0" if is_whole(found) else "the ledger names every entry"
    return "; ".join(part for part in (found.symmetry, rest) if part)


def is_whole(found: Distinct) -> bool:
    """Is every value printed with every place where it stands?"""
    return len(found.values) <= LINES and all(v.count == len(v.places) for v in found.values)


def is_by_value(chain: Chain) -> bool:
    return not (len(chain.links) == 1 and isinstance(chain.links[0].right, Grid))


def listed_rows(entries: Entries, written: Callable[[Formula], str]) -> Sequence[list[object]]:
    """[x, y, text] of every non-zero entry, rows then columns ascending; each distinct formula written once."""
    seen: dict[Formula, str] = {}
    rows: list[list[object]] = []
    for (x, y), value in sorted(entries.items()):
        shown = seen.get(value)
        if shown is None:
            shown = seen[value] = written(value)
        rows.append([x, y, shown])
    return rows
