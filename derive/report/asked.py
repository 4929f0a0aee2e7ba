"""Numbers that were asked for, law beside measurement, as tables for the page, for paper, and as CSV.

One table a point; rows of one quantity stand together under a line that says what is counted.  The tables show twelve
digits, data/numbers.csv and the ledger all of them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from decimal import Context as Rounding
from decimal import Decimal
from itertools import groupby
from urllib.parse import quote

from derive.formula.grammar import parse
from derive.formula.tree import letter
from derive.problem.quantities import Quantity
from derive.record.said import AtAsk, Number, Prose, Report
from derive.report.blocks import digits, words
from derive.report.context import Context
from derive.report.escape import html_text
from derive.report.prose import mathematics, measured_at
from derive.report.tables import table

SHOWN = 12
CLOCK = ("n", "t", "part")
"""Names among a number's places that are not the point's."""
HEADING = "Numbers asked for"
EXPLAINED = "By the time t, n asks have come; off by: law/measured - 1, and 0 where the two enclosures overlap."
COLUMNS = ("n", "t", "law", "measured", "off by", "entry")
WHAT = {
    "detection probability": "first click at ask n",
    "detection amplitude": "amplitude of the first click at ask n",
    "generating function": "amplitude of the first click at ask n, the coefficient of z^n",
    "survival probability": "no click up to ask n",
    "absorber strength": "no click up to ask n; as law what the plain absorber leaves by then",
    "survival density": "rate of clicks at t",
    "total detection probability": "a click within n asks",
    "splitting probability": "within n asks, the first click comes from {key}",
    "classical survival": "the walk, not caught",
    "classical density": "the walk, caught at that time",
}


@dataclass(frozen=True, slots=True)
class Line:
    """One row: cells in the order of COLUMNS, and how many digits law and measurement are worth in print."""

    cells: tuple[str, str, str, str, str, str]
    what: str


def by_point(report: Report) -> Iterator[tuple[Prose, list[Line]]]:
    """(at which point, its lines) for every point that numbers were asked at."""
    for place, rows in groupby(report.asked, lambda row: _place(_known(row))):
        words_of_point = measured_at(Number("", "", place), report.question.setting.domains())
        yield words_of_point, _together([_line(row) for row in rows])


def _together(lines: list[Line]) -> list[Line]:
    """Lines of one kind stand together, kinds in the order they come."""
    kinds = list(dict.fromkeys(line.what for line in lines))
    return sorted(lines, key=lambda line: kinds.index(line.what))


def _known(row: AtAsk) -> Number:
    known = row.measured or row.law
    return known if known is not None else Number("", "")


def _place(n: Number) -> tuple[tuple[str, str], ...]:
    return tuple(pair for pair in n.at if pair[0] not in CLOCK)


def _line(row: AtAsk) -> Line:
    at = dict(_known(row).at)
    law, measured = (_rounded(n) for n in (row.law, row.measured))
    return Line((at.get("n", ""), at.get("t", ""), law, measured, row.apart, row.entry), _what(row.quantity, at))


def _what(quantity: Quantity | None, at: dict[str, str]) -> str:
    """What is counted, in words; of a complex number, which part."""
    name = quantity.name if quantity is not None else ""
    key = next((str(v) for k, v in (quantity.keys if quantity else ()) if k == "detector"), "")
    part = f", {at['part']} part" if "part" in at else ""
    return WHAT.get(name, name).format(key=key) + part


def _rounded(n: Number | None) -> str:
    if n is None:
        return ""
    value = Rounding(prec=SHOWN).create_decimal(n.value).normalize()
    return _plain(value) if -4 <= value.adjusted() < SHOWN or not value else _scaled(value)


def _plain(value: Decimal) -> str:
    return f"{value:f}"


def _scaled(value: Decimal) -> str:
    exponent = value.adjusted()
    return f"{value.scaleb(-exponent).normalize():f}e{exponent}"


# -- on the page


def section(report: Report, context: Context) -> Iterator[str]:
    """The tables in HTML, below a heading of their own."""
    if not report.asked:
        return
    yield f'<section id="numbers"><h2>{HEADING}</h2><p class="where">{words(mathematics(EXPLAINED), context)}</p>'
    for place, lines in by_point(report):
        yield f'<p class="where">At {words(place, context)}:</p>' if place else ""
        head = "".join(f"<th>{_head(c, context)}</th>" for c in COLUMNS)
        body = "".join(_group(what, list(rows), context) for what, rows in groupby(lines, lambda line: line.what))
        yield (
            f'<div class="numbers" tabindex="0" role="region" aria-label="numbers asked for"><table class="asked">'
            f"<thead><tr>{head}</tr></thead>{body}</table></div>"
        )
    yield '<p class="where">All digits: <code>data/numbers.csv</code>.</p></section>'


def _head(name: str, context: Context) -> str:
    return words((letter(name),), context) if name in CLOCK else html_text(name)


def _group(what: str, rows: list[Line], context: Context) -> str:
    said = f'<tr><th colspan="{len(COLUMNS)}" scope="rowgroup">{words(mathematics(what), context)}</th></tr>'
    return f"<tbody>{said}{''.join(_row(line, context) for line in rows)}</tbody>"


def _row(line: Line, context: Context) -> str:
    n, t, law, measured, apart, entry = line.cells
    link = f'<a href="#{quote(entry)}"><code class="id">{html_text(entry)}</code></a>'
    time = words((parse(t),), context) if t else ""
    cells = (html_text(n), time, digits(law, None), digits(measured, None), digits(apart, None), link)
    marked = ("", "", "", ' class="measure"', "", "")
    return "<tr>" + "".join(f"<td{m}>{c}</td>" for m, c in zip(marked, cells, strict=True)) + "</tr>"


# -- as CSV


def numbers_table(report: Report) -> bytes:
    """data/numbers.csv: every row with all digits, its point in one cell."""
    head = ("entry", "what", "at", "n", "t", "law", "law radius", "measured", "measured radius", "road", "off by")
    return table(head, (_full(row) for row in report.asked))


def _full(row: AtAsk) -> tuple[str, ...]:
    at = dict(_known(row).at)
    point = ", ".join(f"{name} = {value}" for name, value in _place(_known(row)))
    law, measured = (row.law or _MISSING, row.measured or _MISSING)
    road = row.measured.road if row.measured else ""
    counted = (row.entry, _what(row.quantity, at), point, at.get("n", ""), at.get("t", ""))
    return (*counted, law.value, law.radius, measured.value, measured.radius, road, row.apart)


_MISSING = Number("", "")
