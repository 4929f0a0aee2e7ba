"""The numbers behind each figure, as CSV (RFC 4180)."""

from __future__ import annotations

import re
from collections.abc import Iterable

from derive.formula.text import text
from derive.problem.setting import Setting, Unitary
from derive.record.said import Plot
from derive.report.context import Context
from derive.report.escape import csv_cell, quoted
from derive.report.picture import Picture


def plot_table(plot: Plot) -> bytes:
    """curve, role, x, y: one line a point, the numbers as they were given; a regime's two ends have no y."""
    head = ("curve", "role", _plain(plot.x_label), _plain(plot.y_label))
    rows = ((c.label, c.role, x, y) for c in plot.curves for x, y in zip(c.x, c.y, strict=True))
    ends = ((_plain(label), "regime", x, "") for label, *both in plot.regimes for x in both)
    return table(head, (*rows, *ends))


def _plain(label: str) -> str:
    """A label without its LaTeX: `\\tau` is tau, `\\Vert` a bar."""
    words = re.sub(r"\\([A-Za-z]+)\s*", lambda m: "|" if m[1] in ("Vert", "lVert", "rVert") else f" {m[1]} ", label)
    return " ".join(re.sub(r"[$\\{}]", "", words).split())


def graph_table(picture: Picture, context: Context) -> bytes:
    """One line an edge that is drawn: both sites by name and the matrix element between them."""
    head = ("site", "site", "step element" if _is_step(context.setting) else "H")
    rows = _edges(picture, context.setting)
    # a formula of the grammar's own functions is data, kept to the letter; names of sites are anybody's text
    lines = [",".join((csv_cell(context.site(x)), csv_cell(context.site(y)), quoted(v))) for x, y, v in rows]
    return _lines([",".join(head), *lines])


def _is_step(setting: Setting) -> bool:
    return isinstance(setting.space, Unitary)


def _edges(picture: Picture, setting: Setting) -> Iterable[tuple[int, int, str]]:
    rows = getattr(setting.space, "rows", ())
    for x, y in picture.edges:
        yield x, y, next((text(f) for column, f in rows[x] if column == y), "0")


def table(head: Iterable[str], rows: Iterable[Iterable[str]]) -> bytes:
    """CSV with a heading."""
    return _lines([",".join(csv_cell(c) for c in row) for row in (tuple(head), *rows)])


def _lines(lines: list[str]) -> bytes:
    return ("\r\n".join(lines) + "\r\n").encode("utf-8")
