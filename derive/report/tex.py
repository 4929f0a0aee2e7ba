"""derivation.tex: the derivation as a document that compiles with amsmath, mathtools and graphicx.

Every entry is an equation whose label is the entry's id, in the document and in fragments/<id>.tex alike.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import groupby

from derive.formula.grammar import parse
from derive.formula.tree import Formula
from derive.record.said import Claim, Derivation, Judged, Matrix, Prose, Report, Step
from derive.report.asked import COLUMNS, EXPLAINED, HEADING, Line, by_point
from derive.report.blocks import listed_remark
from derive.report.boxes import Chain
from derive.report.breaking import broken
from derive.report.claims import yours_and_ours
from derive.report.context import Context
from derive.report.emit_latex import MACRO_BLOCK, chain_rows, latex
from derive.report.escape import file_name, tex_text
from derive.report.ledger import all_notes
from derive.report.prose import CONVENTIONS, about, graph, letters, mathematics, question, verdict_line
from derive.report.references import reference

MOST_ROWS = 40  # of one table, so that a page holds it
COLUMN_WIDTHS = "p{14mm}p{20mm}p{29mm}p{29mm}p{15mm}p{40mm}"
WIDEST = 30.0  # em behind the relation sign, on an A4 page with 25 mm margins

_HEAD = (
    "\\documentclass[10pt,a4paper]{article}",
    "\\usepackage[margin=25mm]{geometry}",
    "\\usepackage{amsmath,mathtools,graphicx}",
    "\\allowdisplaybreaks[2]",
    "\\setlength{\\parindent}{0pt}\\setlength{\\parskip}{0.5\\baselineskip}",
    "\\emergencystretch=3em",
)


@dataclass
class _Pages:
    """The document as it grows; `labelled` are the entries that have their equation already."""

    report: Report
    context: Context
    figures: tuple[str, ...]
    labelled: set[str] = field(default_factory=set)

    @property
    def judged(self) -> dict[str, Judged]:
        return {j.claim.id: j for j in self.report.judged}


def document(report: Report, context: Context, figures: tuple[str, ...]) -> bytes:
    """derivation.tex; `figures` are the paths of the PDF pictures that exist."""
    pages = _Pages(report, context, figures)
    lines = [
        *_HEAD, "% macros", *MACRO_BLOCK, "\\begin{document}", *_opening(pages), *_asked(pages), *_derivations(pages),
        *_claims(pages), *_plots(pages), *_left_out(pages), *_bibliography(pages), *_colophon(pages),
        "\\end{document}",
    ]
    return ("\n".join(lines) + "\n").encode("utf-8")


def prose(words: Prose, context: Context) -> str:
    """Words with formulas in between, as LaTeX text."""
    return "".join(tex_text(part) if isinstance(part, str) else _inline(part, context) for part in words)


def _inline(f: Formula, context: Context) -> str:
    return f"${latex(context.layout.as_written(f, small=True), macros=True)}$"


def _opening(pages: _Pages) -> Iterator[str]:
    setting = pages.report.question.setting
    yield f"\\begin{{center}}\\Large {tex_text(setting.title)}\\end{{center}}"
    yield ""
    yield prose(question(pages.context), pages.context)
    kind = tex_text(graph(setting))
    yield f"The system is {kind}. Letters: {prose(letters(setting), pages.context)}."
    yield from _figure("figures/graph.pdf", "The graph. Double ring: detector; filled dot: start.", pages)
    yield from _asked_of(pages)
    yield ""
    yield f"\\paragraph{{Conventions.}} {' '.join(tex_text(c) for c in CONVENTIONS)}"


def _asked_of(pages: _Pages) -> Iterator[str]:
    """H, or the step that stands in its place, by distinct entries."""
    given = pages.context.given()
    if given is not None:
        name, value = given
        chain = pages.context.matrix(value, pages.context.formula(name))
        said = pages.context.remark(value, chain)
        yield from _display([broken(chain, WIDEST)], None)
        yield f"({tex_text(said)}.)" if said else ""


def _figure(path: str, caption: str, pages: _Pages) -> Iterator[str]:
    if path in pages.figures:
        yield ""
        yield "\\begin{center}"
        yield f"\\includegraphics[width=0.8\\linewidth,height=0.35\\textheight,keepaspectratio]{{{path}}}\\\\"
        yield f"{{\\small {prose(mathematics(caption), pages.context)}}}"
        yield "\\end{center}"


def _asked(pages: _Pages) -> Iterator[str]:
    """The numbers that were asked for, a table a point."""
    if not pages.report.asked:
        return
    yield ""
    yield f"\\section*{{{HEADING}}}"
    yield f"{{\\small {prose(mathematics(EXPLAINED), pages.context)}}}"
    for place, lines in by_point(pages.report):
        yield ""
        yield f"{{\\small At {prose(place, pages.context)}:}}" if place else ""
        yield from _table("", [tuple(f"${c}$" if len(c) == 1 else c for c in COLUMNS)])
        for what, rows in groupby(lines, lambda line: line.what):
            shown = [_cells(line, pages.context) for line in rows]
            for start in range(0, len(shown), MOST_ROWS):
                said = "" if start else prose(mathematics(what), pages.context)
                yield from _table(said, shown[start : start + MOST_ROWS])


def _table(said: str, rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    """Rows below a line of words, in columns of fixed width, so that tables below one another line up."""
    yield ""
    yield f"{{\\footnotesize\\setlength{{\\tabcolsep}}{{1mm}}\\begin{{tabular}}{{{COLUMN_WIDTHS}}}"
    if said:
        yield f"\\multicolumn{{{len(COLUMNS)}}}{{l}}{{\\itshape {said}}}\\\\"
    yield from (" & ".join(cells) + "\\\\" for cells in rows)
    yield "\\end{tabular}}"


def _cells(line: Line, context: Context) -> tuple[str, ...]:
    n, t, *numbers, entry = line.cells
    time = prose((parse(t),), context) if t else ""
    name = tex_text(entry).replace(".", ".\\allowbreak{}")
    return (n, time, *(x.replace("-", "$-$") for x in numbers), f"\\texttt{{{name}}}")


def _derivations(pages: _Pages) -> Iterator[str]:
    for derivation in pages.report.derivations:
        yield ""
        yield f"\\section*{{{tex_text(derivation.topic.capitalize())}}}"
        if derivation.sources:
            yield f"This rests on~\\cite{{{','.join(file_name(k) for k in derivation.sources)}}}."
        for step in derivation.steps:
            yield from _step(step, pages)
        yield from _unearned(derivation, pages)


def _step(step: Step, pages: _Pages) -> Iterator[str]:
    yield ""
    yield prose(step.reason, pages.context)
    chains = [broken(pages.context.line(line), WIDEST) for line in step.lines]
    label = step.earns if step.earns in pages.judged and step.earns not in pages.labelled else None
    if label:
        pages.labelled.add(label)
    yield from _display(chains, label)
    yield from _remarks(step, pages)
    if step.where:
        yield prose(step.where, pages.context)
    if label:
        yield from _verdict(pages.judged[label], pages.context)


def _remarks(step: Step, pages: _Pages) -> Iterator[str]:
    """Hermitian; every entry not named is 0: once a step."""
    said: dict[str, None] = {}
    for line in step.lines:
        if isinstance(line.right, Matrix) and line.right.size == pages.context.size:
            said[pages.context.remark(line.right, pages.context.line(line))] = None
    for remark in said:
        if remark:
            yield f"({tex_text(remark)}.)"


def _display(chains: list[Chain], label: str | None) -> Iterator[str]:
    """Lines aligned on their relation signs; the last one carries the label."""
    rows = [row for chain in chains for row in chain_rows(chain, macros=True)]
    if not rows:
        return
    end = f"\\label{{{file_name(label)}}}" if label else "\\nonumber"
    yield "\\begin{align}"
    yield " \\nonumber\\\\\n".join(f"  {row}" for row in rows) + f" {end}"
    yield "\\end{align}"


def _verdict(judged: Judged, context: Context) -> Iterator[str]:
    said = prose(mathematics(verdict_line(judged)), context)
    yield ""
    yield f"{{\\small\\texttt{{{tex_text(judged.claim.id)}}} --- {said}.}}"
    yield ""


def _unearned(derivation: Derivation, pages: _Pages) -> Iterator[str]:
    """Entries that no step has earned stand on their own."""
    rest = [c for c in derivation.claims if c.id in pages.judged and c.id not in pages.labelled]
    if rest:
        yield ""
        yield "\\subsection*{Further entries}"
    for claim in rest:
        yield from _entry(claim, pages)


def _entry(claim: Claim, pages: _Pages) -> Iterator[str]:
    pages.labelled.add(claim.id)
    yield from _display([broken(pages.context.claim(claim), WIDEST)], claim.id)
    if claim.valid_for:
        yield f"{{\\small {prose(mathematics(claim.valid_for), pages.context)}.}}"
    yield from _verdict(pages.judged[claim.id], pages.context)


def _claims(pages: _Pages) -> Iterator[str]:
    own = [j for j in pages.report.judged if j.claim.origin != "derived"]
    if not own:
        return
    yield ""
    yield "\\section*{Claims put to the test}"
    for judged in own:
        yield ""
        yield f"\\subsection*{{{tex_text(judged.claim.id.removeprefix('claim.'))}}}"
        yield prose(about(judged.claim), pages.context)
        yield from _own(judged, pages)
        if judged.diagnosis:
            yield prose(mathematics(judged.diagnosis), pages.context)


def _own(judged: Judged, pages: _Pages) -> Iterator[str]:
    """Yours, which carries the label, ours below it, and the verdict."""
    claim = judged.claim
    pages.labelled.add(claim.id)
    label: str | None = claim.id
    for who, chain in yours_and_ours(claim, pages.report, pages.context, judged.verdict == "refuted"):
        if chain.links:
            yield ""
            yield f"{{\\small\\itshape {who}}}"
            yield from _display([broken(chain, WIDEST)], label)
            label = None
    yield from _verdict(judged, pages.context)


def _plots(pages: _Pages) -> Iterator[str]:
    shown = [p for p in pages.report.plots if f"figures/{file_name(p.id)}.pdf" in pages.figures]
    if shown:
        yield ""
        yield "\\section*{Figures}"
    for plot in shown:
        yield from _figure(f"figures/{file_name(plot.id)}.pdf", plot.says, pages)


def _left_out(pages: _Pages) -> Iterator[str]:
    open_ = [j for j in pages.report.judged if j.verdict in ("undecided", "untested")]
    notes = list(all_notes(pages.report))
    yield ""
    yield "\\section*{What is not shown}"
    if not open_ and not notes:
        yield "Every entry was decided, and nothing was left out."
        return
    yield "\\begin{itemize}"
    for judged in open_:
        yield f"\\item \\texttt{{{tex_text(judged.claim.id)}}} --- {tex_text(verdict_line(judged))}."
    for note in notes:
        yield f"\\item {prose(note, pages.context)}"
    yield "\\end{itemize}"


def _bibliography(pages: _Pages) -> Iterator[str]:
    keys = list(dict.fromkeys(k for d in pages.report.derivations for k in d.sources))
    if not keys:
        return
    yield ""
    yield f"\\begin{{thebibliography}}{{{len(keys)}}}"
    for key in keys:
        yield f"\\bibitem{{{file_name(key)}}} {tex_text(reference(key))}"
    yield "\\end{thebibliography}"


def _colophon(pages: _Pages) -> Iterator[str]:
    version, seed = pages.report.version, pages.report.question.check.seed
    yield ""
    yield f"{{\\footnotesize watchpot {tex_text(version)}, seed {seed}.}}"


def fragments(report: Report, context: Context) -> dict[str, bytes]:
    """fragments/<id>.tex: one labelled equation a file, for \\input in a paper that loads amsmath and mathtools."""
    return {f"fragments/{file_name(j.claim.id)}.tex": _fragment(j, context) for j in report.judged}


def _fragment(judged: Judged, context: Context) -> bytes:
    rows = list(_display([broken(context.claim(judged.claim), WIDEST)], judged.claim.id))
    head = [f"% {tex_text(judged.claim.id)}: {tex_text(verdict_line(judged))}"]
    said = listed_remark(judged.claim, context)
    lines = [*head, *([f"% {said}."] if said else []), *MACRO_BLOCK, *rows]
    return ("\n".join(lines) + "\n").encode("utf-8")


