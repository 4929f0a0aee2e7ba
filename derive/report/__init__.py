"""The report: records in, files out.  `write` is a pure function: the same report gives the same bytes."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from derive.formula.tree import Formula
from derive.problem.setting import Letter
from derive.record.said import Report

if TYPE_CHECKING:
    from derive.report.context import Context


def latex(f: Formula, letters: Iterable[Letter] = ()) -> str:
    """The LaTeX of one formula, self-contained (amsmath)."""
    from derive.report.emit_latex import latex as emit
    from derive.report.layout import Layout
    from derive.report.letters import names_of

    return emit(Layout(names_of(letters)).box(f))


def write(report: Report) -> dict[str, bytes]:
    """Relative path -> contents of every file of the report."""
    from derive.report.asked import numbers_table
    from derive.report.context import Context
    from derive.report.ledger import ledger
    from derive.report.page import page
    from derive.report.tex import document, fragments

    context = Context(report.question.setting)
    files = {"ledger.json": ledger(report, context)} | _pictures(report, context)
    if report.asked:
        files["data/numbers.csv"] = numbers_table(report)
    pdfs = tuple(name for name in files if name.endswith(".pdf"))
    html = page(report, context, {name: data for name, data in files.items() if name.endswith(".svg")})
    return files | fragments(report, context) | {"derivation.tex": document(report, context, pdfs), "report.html": html}


def _pictures(report: Report, context: Context) -> dict[str, bytes]:
    """Every figure as SVG and PDF, with its numbers."""
    from derive.report.escape import file_name
    from derive.report.figures import draw_graph, draw_plot
    from derive.report.picture import picture
    from derive.report.prose import graph
    from derive.report.tables import graph_table, plot_table

    files: dict[str, bytes] = {}
    drawn = picture(report.question.setting)
    if drawn is not None:
        both = draw_graph(drawn, context, graph(report.question.setting))
        files |= {"figures/graph.svg": both.svg, "figures/graph.pdf": both.pdf}
        files["data/graph.csv"] = graph_table(drawn, context)
    for plot in report.plots:
        both, name = draw_plot(plot), file_name(plot.id)
        files |= {f"figures/{name}.svg": both.svg, f"figures/{name}.pdf": both.pdf}
        files[f"data/{name}.csv"] = plot_table(plot)
    return files
