"""The report: records in, files out.  `write` is a pure function: the same report gives the same bytes."""

from __future__ import annotations

from collections.abc import Iterable

from derive.formula.tree import Formula
from derive.problem.setting import Letter
from derive.record.said import Report


def latex(f: Formula, letters: Iterable[Letter] = ()) -> str:
    """The LaTeX of one formula, self-contained (amsmath)."""
    from derive.report.emit_latex import latex as emit
    from derive.report.layout import Layout
    from derive.report.letters import names_of

    return emit(Layout(names_of(letters)).box(f))


def write(report: Report) -> dict[str, bytes]:
    """Relative path -> contents of every file of the report."""
    from derive.report.ledger import ledger
    from derive.report.page import page
    from derive.report.tex import document, fragments

    files = {"ledger.json": ledger(report)} | _pictures(report)
    pdfs = tuple(name for name in files if name.endswith(".pdf"))
    html = page(report, {name: data for name, data in files.items() if name.endswith(".svg")})
    return files | fragments(report) | {"derivation.tex": document(report, pdfs), "report.html": html}


def _pictures(report: Report) -> dict[str, bytes]:
    """Every figure as SVG and PDF, with its numbers."""
    from derive.report.context import Context
    from derive.report.figures import draw_graph, draw_plot
    from derive.report.picture import picture
    from derive.report.prose import graph
    from derive.report.tables import graph_table, plot_table

    files: dict[str, bytes] = {}
    context = Context(report.question.setting)
    drawn = picture(report.question.setting)
    if drawn is not None:
        both = draw_graph(drawn, context, graph(report.question.setting))
        files |= {"figures/graph.svg": both.svg, "figures/graph.pdf": both.pdf}
        files["data/graph.csv"] = graph_table(drawn, context)
    for plot in report.plots:
        both = draw_plot(plot)
        files |= {f"figures/{plot.id}.svg": both.svg, f"figures/{plot.id}.pdf": both.pdf}
        files[f"data/{plot.id}.csv"] = plot_table(plot)
    return files
