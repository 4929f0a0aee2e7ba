"""report.html: one file, no network, nothing that needs a script.

The order: the question, the graph, the answers, the user's claims, the derivations, what is not shown, colophon.
"""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Iterator
from dataclasses import dataclass, field
from urllib.parse import quote

from derive.record.said import Derivation, Expansion, Judged, Plot, Report, Step
from derive.report.asked import HEADING
from derive.report.asked import section as numbers_asked
from derive.report.blocks import WIDEST, Manner, entry, equation, remarked, words
from derive.report.boxes import Chain
from derive.report.breaking import broken
from derive.report.claims import own_claim
from derive.report.context import Context
from derive.report.escape import file_name, html_text
from derive.report.figures import INK, VIOLET
from derive.report.ledger import all_notes
from derive.report.prose import CONVENTIONS, MEANING, graph, letters, mathematics, question
from derive.report.references import reference
from derive.report.style import css, font_face

RING = '<span class="ring" aria-hidden="true"></span>'
MOST_ANSWERS = 8  # entries of one topic in the answers, where there is one
ALL_ANSWERS = 16  # entries in the answers, shared by the topics: about a page
FEWEST_ANSWERS = 2  # of one topic
ANSWER_LINES = 3  # equations of one entry in the answers; the derivation has them all
LONGEST_ANSWER = 7  # lines that they take
SCRIPT = (
    "for(const d of document.querySelectorAll('details.latex')){const b=document.createElement('button');"
    "b.className='copy';b.type='button';b.textContent='copy';const c=d.querySelector('code');"
    "b.addEventListener('click',()=>{navigator.clipboard.writeText(c.textContent).then(()=>{b.textContent='copied'},"
    "()=>{getSelection().selectAllChildren(c)})});d.append(b)}"
    "addEventListener('beforeprint',()=>{for(const d of document.querySelectorAll('details.between'))d.open=true});"
)


@dataclass
class _Page:
    """The page as it grows; `shown` are the entries whose full line has been printed."""

    report: Report
    context: Context
    pictures: dict[str, bytes]
    shown: set[str] = field(default_factory=set)
    said_to_hold: str = ""

    @property
    def judged(self) -> dict[str, Judged]:
        return {j.claim.id: j for j in self.report.judged}

    def own(self) -> list[Judged]:
        return [j for j in self.report.judged if j.claim.origin != "derived"]

    def open_entries(self) -> list[Judged]:
        return [j for j in self.report.judged if j.verdict in ("undecided", "untested")]


def page(report: Report, context: Context, pictures: dict[str, bytes]) -> bytes:
    """The whole page; `pictures` are the SVG figures by path."""
    here = _Page(report, context, pictures)
    body = "\n".join(
        part
        for section in (_opening, _answers, _asked, _claims, _derivations, _figures, _left_out, _cited)
        for part in section(here)
    )
    parts = (_head(report), "<body>\n<main>", body, "</main>", _colophon(report), _script(), "</body>\n</html>\n")
    return "\n".join(parts).encode("utf-8")


def _head(report: Report) -> str:
    title = html_text(report.question.setting.title)
    digest = base64.b64encode(hashlib.sha256(SCRIPT.encode("utf-8")).digest()).decode("ascii")
    policy = f"default-src 'none'; style-src 'unsafe-inline'; font-src data:; script-src 'sha256-{digest}'"
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{title}</title>\n<style>\n{font_face()}{css()}</style>\n</head>\n"
    )


def _script() -> str:
    return f"<script>{SCRIPT}</script>"


# the question


def _opening(page: _Page) -> Iterator[str]:
    setting = page.report.question.setting
    yield f"<header><h1>{html_text(setting.title)}</h1>"
    yield f'<p class="question">{words(question(page.context), page.context)}</p>'
    yield f'<p class="letters">Letters: {words(letters(setting), page.context)}.</p>'
    said = " ".join(html_text(c) for c in CONVENTIONS)
    yield f'<p class="conventions">{said.replace("P projects", f"P {RING} projects", 1)}</p>'
    yield f"<nav aria-label=\"Contents\"><ol>{''.join(_contents(page))}</ol></nav></header>"
    yield from _graph(page)
    yield from _asked_of(page)


def _contents(page: _Page) -> Iterator[str]:
    places = [("answers", "The answers")] if page.report.derivations else []
    if page.report.asked:
        places.append(("numbers", HEADING))
    if page.own():
        places.append(("claims", "Your claims"))
    places += [(_anchor(d.topic), f"The {d.topic}, derived") for d in page.report.derivations]
    if page.report.plots:
        places.append(("figures", "Figures"))
    places.append(("not-shown", "What is not shown"))
    for anchor, name in places:
        yield f'<li><a href="#{anchor}">{html_text(name)}</a></li>'


def _anchor(topic: str) -> str:
    return "derived-" + "".join(c if c.isalnum() else "-" for c in topic)


def _graph(page: _Page) -> Iterator[str]:
    kind = graph(page.report.question.setting)
    drawing = page.pictures.get("figures/graph.svg")
    caption = f"{kind[:1].upper()}{kind[1:]}."
    if drawing is None:
        yield f"<p>{html_text(caption)}</p>"
        return
    key = f"{RING} detector"
    if page.report.question.setting.start is not None:
        key += ', <span class="dot"></span> start'
    yield f"<figure>{_inlined(drawing)}<figcaption>{html_text(caption)} {key}.</figcaption></figure>"


def _asked_of(page: _Page) -> Iterator[str]:
    """H, or the step that stands in its place, by distinct entries."""
    given = page.context.given()
    if given is not None:
        name, value = given
        chain = page.context.matrix(value, page.context.formula(name))
        said = remarked(page.context.remark(value, chain))
        yield f'<div class="line" id="given">{equation(chain, "the matrix of the system")}{said}</div>'


def _inlined(svg: bytes) -> str:
    return svg.decode("utf-8").replace(INK, "currentColor").replace(VIOLET, "var(--violet)")


# the answers


def _answers(page: _Page) -> Iterator[str]:
    if not page.report.derivations:
        return
    yield '<section id="answers"><h2>The answers</h2>'
    most = min(MOST_ANSWERS, max(FEWEST_ANSWERS, ALL_ANSWERS // max(len(page.report.derivations), 1)))
    for derivation in page.report.derivations:
        wanted = [c for c in derivation.claims if c.quantity is not None and c.id in page.judged]
        wanted.sort(key=lambda c: not isinstance(c.value, Expansion))
        for claim in wanted[:most]:
            yield _answer(page.judged[claim.id], page)
        left = len(wanted) - most
        if left > 0:
            yield f'<p class="where">{_more(left, "entry", "entries", "#" + _anchor(derivation.topic))}</p>'
    yield _verdict_key(page)
    yield "</section>"


def _answer(judged: Judged, page: _Page) -> str:
    """Formula, where it holds, seam; only the first lines of a long one."""
    chain = page.context.claim(judged.claim)
    whole = broken(chain, WIDEST).links
    cut = len(chain.links) > ANSWER_LINES or len(whole) > LONGEST_ANSWER
    shown = broken(Chain(chain.links[:ANSWER_LINES]), WIDEST).links[:LONGEST_ANSWER] if cut else whole
    left = len(whole) - len(shown)
    manner = Manner(anchor=False, brief=True, cut=left > 0)
    block = entry(judged, [Chain(shown)], page.context, manner)
    more = _more(left, "line", "lines", "#" + quote(judged.claim.id)) if left > 0 else ""
    return block + (f'<p class="where">{more}</p>' if more else "")


def _more(count: int, one: str, many: str, link: str) -> str:
    return f'<a href="{link}">{count} more {one if count == 1 else many}</a> in the derivation.'


def _verdict_key(page: _Page) -> str:
    """What the words in the seams mean, for the words that occur."""
    given = [v for v in MEANING if any(j.verdict == v for j in page.report.judged)]
    rows = "".join(f"<dt>{v}</dt><dd>{html_text(MEANING[v])}</dd>" for v in given)
    return f'<dl class="verdicts">{rows}</dl>' if rows else ""


def _asked(page: _Page) -> Iterator[str]:
    yield from numbers_asked(page.report, page.context)


# claims


def _claims(page: _Page) -> Iterator[str]:
    own = page.own()
    if not own:
        return
    yield '<section id="claims"><h2>Your claims</h2>'
    for judged in own:
        page.shown.add(judged.claim.id)
        yield own_claim(judged, page.report, page.context)
    if not page.report.derivations:  # else it stands below the answers
        yield _verdict_key(page)
    yield "</section>"


# derivations


def _derivations(page: _Page) -> Iterator[str]:
    for derivation in page.report.derivations:
        yield f'<section id="{_anchor(derivation.topic)}"><h2>The {html_text(derivation.topic)}, derived</h2>'
        for step in derivation.steps:
            yield from _step(step, page)
        yield from _unearned(derivation, page)
        yield "</section>"


def _step(step: Step, page: _Page) -> Iterator[str]:
    """Reason, line, seam."""
    yield f'<p class="reason">{words(step.reason, page.context)}</p>'
    chains = [page.context.line(line) for line in step.lines]
    earned = step.earns if step.earns in page.judged and step.earns not in page.shown else None
    if earned:
        page.shown.add(earned)
        yield entry(page.judged[earned], chains, page.context, _manner(page.judged[earned], page, step.fold))
    elif chains:
        together = Chain(tuple(link for chain in chains for link in chain.links))
        yield f'<div class="line">{equation(together, "equation", step.fold)}</div>'
    if step.where:
        yield f'<p class="where">{words(step.where, page.context)}</p>'


def _manner(judged: Judged, page: _Page, fold: bool = False) -> Manner:
    """Where a line holds is said once, not again below every line that holds in the same way."""
    said = judged.claim.valid_for
    news = said != page.said_to_hold
    page.said_to_hold = said
    return Manner(fold=fold, holds=news)


def _unearned(derivation: Derivation, page: _Page) -> Iterator[str]:
    rest = [c for c in derivation.claims if c.id in page.judged and c.id not in page.shown]
    if rest:
        yield "<h3>Further entries</h3>"
    for claim in rest:
        page.shown.add(claim.id)
        judged = page.judged[claim.id]
        yield entry(judged, [page.context.claim(claim)], page.context, _manner(judged, page))


# figures, what is not shown, colophon


def _figures(page: _Page) -> Iterator[str]:
    if not page.report.plots:
        return
    yield '<section id="figures"><h2>Figures</h2>'
    for plot in page.report.plots:
        svg = page.pictures.get(f"figures/{file_name(plot.id)}.svg")
        if svg is not None:
            says = words(mathematics(plot.says), page.context)
            yield f"<figure>{_inlined(svg)}<figcaption>{says}</figcaption>{_numbers(plot)}</figure>"
    yield "</section>"


def _numbers(plot: Plot) -> str:
    rows = "".join(
        f"<tr><td>{html_text(c.label)}</td><td>{html_text(x)}</td><td>{html_text(y)}</td></tr>"
        for c in plot.curves
        for x, y in zip(c.x, c.y, strict=True)
    )
    head = "".join(f"<th>{html_text(t.replace('$', ''))}</th>" for t in ("curve", plot.x_label, plot.y_label))
    return (
        f'<details><summary>The numbers, data/{file_name(plot.id)}.csv</summary><div class="numbers" tabindex="0" '
        f'role="region" aria-label="numbers of {html_text(plot.id)}"><table><thead><tr>{head}</tr></thead>'
        f"<tbody>{rows}</tbody></table></div></details>"
    )


def _left_out(page: _Page) -> Iterator[str]:
    notes = list(all_notes(page.report))
    yield '<section id="not-shown"><h2>What is not shown</h2>'
    if not page.open_entries() and not notes:
        yield "<p>Every entry was decided, and nothing was left out.</p>"
    for judged in page.open_entries():
        yield entry(judged, [page.context.claim(judged.claim)], page.context, Manner(anchor=False))
    if notes:
        yield "<ul>" + "".join(f"<li>{words(n, page.context)}</li>" for n in notes) + "</ul>"
    yield "</section>"


def _cited(page: _Page) -> Iterator[str]:
    keys = list(dict.fromkeys(k for d in page.report.derivations for k in d.sources))
    if keys:
        yield '<section id="works"><h2>Works cited</h2><ul>'
        yield from (f"<li>{html_text(reference(k))}</li>" for k in keys)
        yield "</ul></section>"


def _colophon(report: Report) -> str:
    check = report.question.check
    points = f"{check.samples} point{'s' if check.samples != 1 else ''}"
    said = f"watchpot {report.version}, seed {check.seed}, {points}, {check.digits} digits."
    font = "Set in a subset of STIX Two Math, SIL Open Font License 1.1."
    return f"<footer><p>{html_text(said)} {font}</p></footer>"
