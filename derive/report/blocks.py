"""Pieces of the page: a line with what was measured beside it, its seam below, its id and LaTeX under that."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from urllib.parse import quote

from derive.record.said import Claim, Judged, Matrix, Number, Prose
from derive.report.boxes import Chain, Link, width
from derive.report.breaking import broken
from derive.report.context import Context
from derive.report.emit_latex import latex
from derive.report.emit_mathml import mathml
from derive.report.escape import html_text
from derive.report.prose import finding, holds, mathematics, measured_at, shared_digits
from derive.report.seams import seam

WIDEST = 29.0  # em behind the relation sign
COLUMN = 32.5  # em, with the left side: a wider line takes the measured column's place, which moves under it
NARROW = 15.0  # em: what fits on a phone
OPEN_LINES = 7  # lines of one chain that are never folded
ONE_FORMULA = 16  # lines of a single formula that are never folded
UNITS = 3  # digits side by side
MOST_NUMBERS = 4  # numbers beside one line that are not folded


def words(prose: Prose, context: Context) -> str:
    """Words with formulas in between."""
    return "".join(
        html_text(part) if isinstance(part, str) else mathml(context.layout.as_written(part, small=True), block=False)
        for part in prose
    )


def equation(chain: Chain, label: str, fold: bool = False) -> str:
    """A chain of lines in its own region; the middle of a long one is folded."""
    links = broken(chain, WIDEST).links
    if not fold and len(links) <= OPEN_LINES:
        return _region(links, label)
    heads = [n for n, link in enumerate(links) if link.left is not None]
    if len(heads) < 2 and len(links) <= ONE_FORMULA:
        return _region(links, label)
    last = heads[-1] if len(heads) > 1 else len(links) - 1
    first = heads[1] if len(heads) > 1 else 1
    between = len(links[first:last])
    if between < 2:
        return _region(links, label)
    summary = f"<summary>{between} lines between</summary>"
    middle = f'<details class="between">{summary}{_region(links[first:last], label)}</details>'
    return _region(links[:first], label) + middle + _region(links[last:], label)


def _region(links: Iterable[Link], label: str) -> str:
    chain = Chain(tuple(links))
    focus = f' tabindex="0" role="region" aria-label="{html_text(label)}"' if width(chain) > NARROW else ""
    return f'<div class="equation"{focus}>{mathml(chain)}</div>'


@dataclass(frozen=True, slots=True)
class Manner:
    """How an entry is printed: with the anchor its id names; folded; in brief (no evidence, no numbers); with
    the words that say where it holds; without its last lines."""

    anchor: bool = True
    fold: bool = False
    brief: bool = False
    holds: bool = True
    cut: bool = False


IN_FULL = Manner()


def entry(judged: Judged, chains: list[Chain], context: Context, manner: Manner = IN_FULL) -> str:
    """Line, measured column, seam, id."""
    claim = judged.claim
    together = Chain(tuple(link for chain in chains for link in chain.links))
    name = f' id="{html_text(claim.id)}"' if manner.anchor else ""
    line = equation(together, claim.id, manner.fold)
    kind = "entry wide" if width(broken(together, WIDEST)) > COLUMN else "entry"
    return (
        f'<div class="{kind}"{name}><div class="derived">{line}{remark(claim, context, manner.cut)}'
        f"{exact(judged, context, manner)}</div>{measured(judged, context, manner)}{seam(judged, context)}"
        f"{under(judged, context, manner)}</div>"
    )


def remark(claim: Claim, context: Context, cut: bool) -> str:
    """Hermitian; every entry not named is 0, as a paragraph."""
    return remarked(listed_remark(claim, context, cut))


def listed_remark(claim: Claim, context: Context, cut: bool = False) -> str:
    """What a matrix's listed entries leave unsaid; nothing for other values."""
    if not isinstance(claim.value, Matrix):
        return ""
    return context.remark(claim.value, context.claim(claim), cut)


def remarked(said: str) -> str:
    return f'<p class="remark">{html_text(said)}</p>' if said else ""


def exact(judged: Judged, context: Context, manner: Manner = IN_FULL) -> str:
    """What exact algebra found: it belongs to the derivation's side."""
    if manner.brief:
        return ""
    said = (finding(f) for f in judged.findings if f.road == "exact")
    return "".join(f'<p class="exact">{words(mathematics(s), context)}</p>' for s in said)


def under(judged: Judged, context: Context, manner: Manner) -> str:
    """The id, where the line holds, and its LaTeX."""
    claim = judged.claim
    name = f'<code class="id">{html_text(claim.id)}</code>'
    if not manner.anchor:
        name = f'<a href="#{quote(claim.id)}">{name}</a>'
    said = holds(claim) if manner.holds else ()
    where = f'<span class="holds">{words(said, context)}</span>' if said else ""
    source = latex(context.claim(claim))
    pre = f'<pre tabindex="0" aria-label="LaTeX of {html_text(claim.id)}"><code>{html_text(source)}</code></pre>'
    return f'<div class="under">{name}{where}<details class="latex"><summary>LaTeX</summary>{pre}</details></div>'


def measured(judged: Judged, context: Context, manner: Manner = IN_FULL) -> str:
    """The second ink: what each measuring road gave, and the numbers."""
    found = [f for f in judged.findings if f.road != "exact"]
    said = "".join(f"<p>{words(mathematics(finding(f, not manner.brief)), context)}</p>" for f in found)
    given = "" if manner.brief else _numbers(judged, context)
    return f'<div class="measured">{said}{given}</div>'


def _numbers(judged: Judged, context: Context) -> str:
    """A few numbers as they are, many folded."""
    shared = shared_digits(judged)
    given = [number(n, shared, context) for n in judged.numbers]
    if len(given) <= MOST_NUMBERS:
        return "".join(given)
    return f'<details class="more"><summary>{len(given)} numbers</summary>{"".join(given)}</details>'


def number(n: Number, shared: int | None, context: Context) -> str:
    """The digits in threes by margin; shared ones in full strength, the first unshared underlined, the rest grey."""
    where = measured_at(n, context.domains)
    at = f'<span class="at">{words(where, context)}</span>' if where else ""
    return f'<p class="number">{at}<span class="digits">{digits(n.value, shared)}</span>{_radius(n)}</p>'


def _radius(n: Number) -> str:
    return f'<span class="radius"> ±{html_text(n.radius)}</span>' if n.radius else ""


def digits(value: str, shared: int | None) -> str:
    """A decimal's digits, dressed; copying gives the plain number."""
    head, point, tail = value.partition(".")
    mantissa, exponent = _exponent(tail)
    leading = _significant_before(head, mantissa)
    limit = None if shared is None else shared + leading
    plain = sum(c.isdigit() for c in head)
    out = [_dressed(head, 0, limit, grouped=False), point]
    for start in range(0, len(mantissa), UNITS):
        part = mantissa[start : start + UNITS]
        out.append(f'<span class="three">{_dressed(part, plain + start, limit)}</span>')
    return "".join(out) + (f'<span class="three">{html_text(exponent)}</span>' if exponent else "")


def _exponent(tail: str) -> tuple[str, str]:
    for mark in ("e", "E"):
        if mark in tail:
            mantissa, _, power = tail.partition(mark)
            return mantissa, f"e{power}"
    return tail, ""


def _significant_before(head: str, tail: str) -> int:
    """Zeros in front of the first significant digit, the point not counted."""
    plain = "".join(c for c in head + tail if c.isdigit())
    return len(plain) - len(plain.lstrip("0")) if plain.strip("0") else 0


def _dressed(part: str, start: int, limit: int | None, grouped: bool = True) -> str:
    """Digits from position `start` on; those beyond `limit` are not shared."""
    out, at = [], start
    for c in part:
        if not c.isdigit() or limit is None or at < limit:
            out.append(html_text("−" if c == "-" else c))
        elif at == limit:
            out.append(f"<u>{c}</u>")
        else:
            out.append(f'<span class="rest">{c}</span>')
        at += c.isdigit()
    return "".join(out)
