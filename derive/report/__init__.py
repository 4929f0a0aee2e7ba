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
    from derive.report.tex import document, fragments

    files = {"ledger.json": ledger(report)}
    pictures = tuple(name for name in files if name.endswith(".pdf"))
    return files | fragments(report) | {"derivation.tex": document(report, pictures)}
