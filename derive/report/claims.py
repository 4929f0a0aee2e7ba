"""A user's claim: yours and ours as two equations on one relation sign, what differs underlined."""

from __future__ import annotations

from dataclasses import replace

from derive.formula.tree import ZERO, Formula
from derive.problem.quantities import Quantity
from derive.record.said import Claim, Expansion, Judged, Matrix, Report
from derive.report.arrange import arrange
from derive.report.blocks import IN_FULL, equation, exact, measured, under, words
from derive.report.boxes import Box, Chain, Link
from derive.report.compare import differing
from derive.report.context import Context, expansion_formula
from derive.report.escape import html_text
from derive.report.layout import Layout
from derive.report.matrices import Entries
from derive.report.prose import about
from derive.report.seams import seam
from derive.report.symbols import entry as entry_symbol
from derive.report.symbols import symbol

DIFFERENCES = 6  # entries of a matrix that are shown where yours and ours differ


def own_claim(judged: Judged, report: Report, context: Context) -> str:
    """The claim beside the derived entry, its seam, and where it was tested."""
    claim = judged.claim
    rows = yours_and_ours(claim, report, context, judged.verdict == "refuted")
    body = "".join(
        f'<span class="who">{who}</span>{equation(chain, f"{claim.id}, {who}")}' for who, chain in rows if chain.links
    )
    name = claim.id.removeprefix("claim.")
    head = f'<h3>{html_text(name)}</h3><p class="source">{words(about(claim), context)}</p>'
    return (
        f'{head}<div class="entry" id="{html_text(claim.id)}"><div class="derived"><div class="pair">{body}</div>'
        f"{exact(judged, context)}</div>"
        f"{measured(judged, context)}{seam(judged, context)}{under(judged, context, IN_FULL)}</div>"
    )


def yours_and_ours(claim: Claim, report: Report, context: Context, refuted: bool) -> list[tuple[str, Chain]]:
    """The claim and the derived value of its quantity, differing parts underlined; one line where they are alike."""
    ours = _derived(claim, report, context)
    if isinstance(claim.value, (Matrix, Expansion)) and isinstance(ours, dict):
        return _matrices(claim, ours, context)
    yours = claim.value if isinstance(claim.value, Formula) else None
    if yours is None or not isinstance(ours, Formula):
        return [("yours", context.claim(claim))]
    name = symbol(claim.quantity) if claim.quantity else None
    if arrange(yours) == arrange(ours):
        return [("yours and ours", context.equation(name, "=", ours))]
    if not refuted:
        return [("yours", context.equation(name, "=", yours)), ("ours", context.equation(name, "=", ours))]
    left, right = differing(yours, ours)
    return [
        ("yours", Chain((Link(name, "=", _marked(yours, left, context)),))),
        ("ours", Chain((Link(name, "=", _marked(ours, right, context)),))),
    ]


def _marked(f: Formula, marks: frozenset[Formula], context: Context) -> Box:
    layout: Layout = replace(context.layout, marked=marks)
    return layout.box(f)


def _derived(claim: Claim, report: Report, context: Context) -> Formula | Entries | None:
    """The derived value of the same quantity: a formula, one entry of a matrix, or all its entries."""
    if claim.quantity is None:
        return None
    place = claim.quantity.key("entry")
    bare = Quantity(claim.quantity.name, tuple(k for k in claim.quantity.keys if k[0] != "entry"))
    for j in report.judged:
        if j.claim.origin == "derived" and j.claim.quantity in (claim.quantity, bare):
            return _value(j.claim, place, context)
    return None


def _value(claim: Claim, place: object, context: Context) -> Formula | Entries | None:
    value = claim.value
    if isinstance(value, Matrix) or (isinstance(value, Expansion) and isinstance(value.terms[0], Matrix)):
        entries = context.view(value).entries
        return entries.get((place[0], place[1]), ZERO) if isinstance(place, (tuple, list)) else entries
    if isinstance(value, Expansion):
        return expansion_formula(value)
    return value if isinstance(value, Formula) else None


def _matrices(claim: Claim, ours: Entries, context: Context) -> list[tuple[str, Chain]]:
    """Only the entries that differ; where none does, yours as it stands."""
    value = claim.value
    yours = context.view(value).entries if isinstance(value, (Matrix, Expansion)) else {}
    places = [p for p in sorted(yours.keys() | ours.keys()) if yours.get(p, ZERO) != ours.get(p, ZERO)]
    if not places or claim.quantity is None:
        return [("yours", context.claim(claim))]
    name = symbol(claim.quantity)
    shown = places[:DIFFERENCES]
    return [
        ("yours", _entries(name, shown, yours, ours, context)),
        ("ours", _entries(name, shown, ours, yours, context)),
    ]


def _entries(name: Box, places: list[tuple[int, int]], mine: Entries, other: Entries, context: Context) -> Chain:
    links = []
    for x, y in places:
        value = mine.get((x, y), ZERO)
        marks, _ = differing(value, other.get((x, y), ZERO))
        left = entry_symbol(name, context.site(x), context.site(y))
        links.append(Link(left, "=", _marked(value, marks, context)))
    return Chain(tuple(links))
