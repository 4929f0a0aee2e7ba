"""Edge lists, inline or from a CSV file: the sites they number or name, and the bonds."""

from __future__ import annotations

import csv
import io
import os
import re
import stat
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path as FilePath
from typing import Any

from derive.formula.tree import ONE, Formula
from derive.problem.graphs import MOST_EDGES, MOST_SITES, Bond
from derive.worksheet.keys import WORDS_FOR_SITES
from derive.worksheet.positions import Path, line_starts, spot
from derive.worksheet.values import Decimal, Reader, shown

LARGEST_FILE = 64_000_000  # bytes of an edge file
LONGEST_NAME = 100
_DIGITS = re.compile(r"[+-]?[0-9]+")
_HEADINGS = {("x", "y"), ("from", "to"), ("source", "target"), ("i", "j"), ("site1", "site2")}
"""First lines that say what the columns are; refused only where no other line knows these two names."""
_NO_HEADING = "An edge file has no heading; take this line out."

End = int | str
Report = Callable[[int, int, str, str], None]
"""edge number, column (0, 1, 2, or -1 for the edge as a whole), message, mend"""
Tell = Callable[..., None]
"""A `Report` that also takes how many characters into the cell."""


@dataclass
class Listed:
    """Edges as read: sites by number, names if they have any, bonds, and whether some edge wants the hopping."""

    size: int
    names: tuple[str, ...] | None
    bonds: list[Bond]
    wants_hopping: bool


@dataclass(frozen=True, slots=True)
class Edge:
    x: End
    y: End
    value: Formula | None


def inline_edges(r: Reader, path: Path, value: Any) -> list[Edge] | None:
    """[[x, y], [x, y, H_xy], ...]"""
    if not r.is_list(path, value, "edges", MOST_EDGES):
        return None
    if not value:
        r.faults.add(path, "there is no edge.", 'Write at least one: edges = [["a", "b"]].')
        return None
    read = [_inline_edge(r, (*path, k), inner) for k, inner in enumerate(value)]
    return None if None in read else [e for e in read if e is not None]


def _inline_edge(r: Reader, path: Path, value: Any) -> Edge | None:
    if not isinstance(value, (list, tuple)) or len(value) not in (2, 3):
        r.faults.add(path, f"{shown(value)} is no edge.", "An edge is [x, y], or [x, y, H_xy].")
        return None
    for k in (0, 1):
        end = value[k]
        if isinstance(end, (bool, Decimal)) or not isinstance(end, (int, str)):
            r.faults.add((*path, k), f"{shown(end)} is no site.", "A site is a whole number, or a name in quotes.")
            return None
        if isinstance(end, str) and not _may_be_name(r, (*path, k), end):
            return None
    formula = r.formula((*path, 2), value[2]) if len(value) == 3 else None
    if len(value) == 3 and formula is None:
        return None
    return Edge(value[0], value[1], formula)


def _may_be_name(r: Reader, path: Path, name: str) -> bool:
    fault = name_fault(name)
    if fault is not None:
        r.faults.add(path, *fault)
    return fault is None


def name_fault(name: str) -> tuple[str, str] | None:
    """Why `name` cannot name a site, or None."""
    if not name.strip() or name != name.strip():
        return f"{shown(name)} cannot name a site: it is empty or begins or ends with a blank.", "Write it without."
    if name in WORDS_FOR_SITES:
        return f"{name} cannot name a site: worksheets use the word for a place.", "Choose another name."
    if _DIGITS.fullmatch(name):
        return (
            f"{shown(name)} cannot name a site: it is a number in quotes.",
            "Write it without quotes, or add a letter.",
        )
    if len(name) > LONGEST_NAME:
        return f"a site's name has {len(name)} characters.", f"At most {LONGEST_NAME} are read."
    if not name.replace("\n", "").isprintable():
        return f"{shown(name)} cannot name a site: it holds a control character.", "Choose another name."
    return None


def number_sites(edges: list[Edge], report: Report) -> Listed | None:
    """Give every site its number: the integers themselves, or names by first appearance."""
    integers = sum(isinstance(e.x, int) + isinstance(e.y, int) for e in edges)
    if integers == 2 * len(edges):
        size = _count_integers(edges, report)
        numbered = [(e.x, e.y, e.value) for e in edges]
        names: dict[str, int] = {}
    elif integers == 0:
        names = {}
        for e in edges:
            names.setdefault(str(e.x), len(names))
            names.setdefault(str(e.y), len(names))
        size = len(names)
        numbered = [(names[str(e.x)], names[str(e.y)], e.value) for e in edges]
    else:
        _report_mixed(edges, report)
        return None
    if size is None:
        return None
    if size > MOST_SITES:
        report(0, -1, f"these edges join {size:,} sites.", f"At most {MOST_SITES:,} are built.")
        return None
    bonds = _distinct(numbered, report)
    if bonds is None:
        return None
    return Listed(size, tuple(names) or None, bonds, any(e.value is None for e in edges))


def _report_mixed(edges: list[Edge], report: Report) -> None:
    """Point at the first site that is not of the kind of the first one."""
    first = type(edges[0].x)
    k, column, end = next(
        (k, c, v) for k, e in enumerate(edges) for c, v in ((0, e.x), (1, e.y)) if not isinstance(v, first)
    )
    what = "a number" if isinstance(end, int) else "a name"
    other = "names" if first is str else "numbers"
    report(k, column, f"{shown(end)} is {what} among {other}.", "Sites are all numbers from 0, or all names.")


def _count_integers(edges: list[Edge], report: Report) -> int | None:
    """N if the sites are exactly 0 to N-1."""
    used = {int(v) for e in edges for v in (e.x, e.y)}
    size = len(used)
    if used == set(range(size)):
        return size
    odd = next((v for v in sorted(used) if v < 0), None)
    if odd is None:
        missing = next(v for v in range(size + 1) if v not in used)
        odd = min(v for v in used if v > missing)
        message = f"site {shown(odd)} stands here, but no edge has site {missing}."
    else:
        message = f"site {shown(odd)} stands here, and sites are counted from 0."
    k, column = next((k, c) for k, e in enumerate(edges) for c, v in ((0, e.x), (1, e.y)) if v == odd)
    counted = "Counted from 1? Write names in quotes, " if 0 not in used else "Write names in quotes, "
    report(k, column, message, counted + 'such as "s1", or number the sites 0, 1, 2, ... without a gap.')
    return None


def _distinct(edges: list[tuple[Any, Any, Formula | None]], report: Report) -> list[Bond] | None:
    seen: set[tuple[int, int]] = set()
    whole = True
    for k, (x, y, _) in enumerate(edges):
        pair = (x, y) if x < y else (y, x)
        if x == y:
            report(k, -1, "this edge joins a site to itself.", "H_xx belongs in energies: { site = value }.")
            whole = False
        elif pair in seen:
            report(k, -1, "this edge stands here for the second time.", "Keep one of the two; H_yx follows from H_xy.")
            whole = False
        seen.add(pair)
    return [(x, y, ONE if value is None else value) for x, y, value in edges] if whole else None


def open_edges(r: Reader, path: Path, value: Any, folder: FilePath) -> tuple[str, str] | None:
    """(name, text) of an edge file, which must lie inside `folder`, links followed."""
    name = r.text(path, value, "edge_file")
    if name is None:
        return None
    try:
        found, inside = (folder / name).resolve(), folder.resolve()
        if os.path.isabs(name) or not found.is_relative_to(inside):
            r.faults.add(
                path, f"{shown(name)} is outside the worksheet's folder.", "Put the file beside the worksheet."
            )
            return None
        state = found.stat()
    except (OSError, ValueError, RuntimeError):
        r.faults.add(path, f"there is no file {shown(name)} beside the worksheet.", _nearby(folder, name))
        return None
    if not stat.S_ISREG(state.st_mode):
        r.faults.add(path, f"{shown(name)} is no file.", "Name a CSV file beside the worksheet.")
        return None
    if state.st_size > LARGEST_FILE:
        r.faults.add(path, f"{shown(name)} has {state.st_size:,} bytes.", f"At most {LARGEST_FILE:,} are read.")
        return None
    try:
        source = found.read_bytes().decode("utf-8-sig")
    except OSError:
        r.faults.add(path, f"{shown(name)} cannot be read.", "Look at its permissions.")
        return None
    except UnicodeDecodeError as fault:
        r.faults.add(path, f"{shown(name)} is not UTF-8 text (byte {fault.start + 1}).", "Save it as UTF-8.")
        return None
    return name, source


def _nearby(folder: FilePath, name: str) -> str:
    from derive.worksheet.faults import near

    try:
        beside = sorted(p.name for p in folder.iterdir() if p.suffix == ".csv")[:1000]
    except OSError:
        beside = []
    return near(name, beside) or "Its name is read from the worksheet's own folder."


def file_edges(r: Reader, path: Path, name: str, source: str) -> tuple[list[Edge], Report, bool]:
    """The rows of a CSV file as edges; a report that knows the file's lines; whether all rows were read."""
    rows: list[tuple[int, list[str]]] = []
    lines = CsvPlaces(source)
    faults = 0

    def report(k: int, column: int, message: str, mend: str, into: int = 0) -> None:
        line, at = lines.place(rows[k][0], column)
        if k == 0 and column == 2 and _stands_alone(rows):
            mend = f"{_NO_HEADING} If it is an edge: {mend}"
        r.faults.add_elsewhere(path, (name, line, at + into), message, mend)

    if "\0" in source:
        r.faults.add_elsewhere(path, (name, *spot(source, source.index("\0"))), "a NUL character stands here.", "")
        return [], report, False
    reader = csv.reader(io.StringIO(source, newline=""), strict=True)
    try:
        before = 0
        for row in reader:
            if any(cell.strip() for cell in row):
                rows.append((before, row))
            before = reader.line_num
    except csv.Error as fault:
        said = "a quote is not closed, or something follows it." if '"' in source else f"this is no CSV: {fault}."
        r.faults.add_elsewhere(path, (name, reader.line_num, 1), said, "Columns are x,y or x,y,H_xy.")
        return [], report, False
    if not rows:
        r.faults.add_elsewhere(path, (name, 1, 1), "there is no edge in this file.", "Columns are x,y or x,y,H_xy.")
        return [], report, False
    edges: list[Edge] = []
    all_digits = _mostly_numbers(rows)
    if not all_digits and _is_heading(rows):
        mend = f"{_NO_HEADING[:-1]}, or, if it is an edge, put it further down."
        report(0, -1, "this line looks like a heading.", mend)
        return [], report, False
    for k in range(len(rows)):
        edge = _row_edge(r, path, k, rows[k][1], all_digits, report)
        if edge is None:
            faults += 1
        else:
            edges.append(edge)
    return edges, report, faults == 0


def _mostly_numbers(rows: list[tuple[int, list[str]]]) -> bool:
    """Whether the file numbers its sites: most rows do (the first may be a heading, one may be a slip)."""
    numbered = sum(all(_DIGITS.fullmatch(cell.strip()) for cell in row[:2]) for _, row in rows)
    return 2 * numbered >= len(rows)


def _stands_alone(rows: list[tuple[int, list[str]]]) -> bool:
    """Whether the first line names two sites that no other line knows."""
    first = {cell.strip() for cell in rows[0][1][:2]}
    return len(rows) > 1 and not any(cell.strip() in first for _, row in rows[1:] for cell in row[:2])


def _is_heading(rows: list[tuple[int, list[str]]]) -> bool:
    words = tuple(cell.strip().lower() for cell in rows[0][1][:2])
    return words in _HEADINGS and _stands_alone(rows)


def _row_edge(r: Reader, path: Path, k: int, row: list[str], numbers: bool, report: Tell) -> Edge | None:
    cells = [cell.strip() for cell in row]
    if len(cells) not in (2, 3):
        report(k, -1, f"this line has {len(cells)} columns.", "Columns are x,y or x,y,H_xy; quote a cell with a comma.")
        return None
    ends: list[End] = []
    for column in (0, 1):
        end = cells[column]
        if _DIGITS.fullmatch(end):
            if not numbers:
                report(
                    k, column, f"{shown(end)} is a number among names.", "Sites are all numbers from 0, or all names."
                )
                return None
            ends.append(int(end[:30]))
        elif numbers:
            heading = k == 0 and not any(_DIGITS.fullmatch(c) for c in cells[:2])
            mend = _NO_HEADING if heading else "Sites are all numbers, or all names."
            report(k, column, f"{shown(end)} is a name among numbers.", mend)
            return None
        else:
            fault = name_fault(end)
            if fault is not None:
                report(k, column, *fault)
                return None
            ends.append(end)
    value = _row_value(r, path, k, cells[2], report) if len(cells) == 3 and cells[2] else None
    if len(cells) == 3 and cells[2] and value is None:
        return None
    return Edge(ends[0], ends[1], value)


def _row_value(r: Reader, path: Path, k: int, written: str, tell: Tell) -> Formula | None:
    """The third column; its faults are told at the file's place, at the character where they are."""
    r.faults.redirect = lambda message, mend, offset: tell(k, 2, message, mend, offset or 0)
    try:
        return r.formula(path, written)
    finally:
        r.faults.redirect = None


class CsvPlaces:
    """Line and column of a cell, found only when a fault has to be told."""

    def __init__(self, source: str):
        self._source = source
        self._starts: list[int] | None = None

    def place(self, lines_before: int, column: int) -> tuple[int, int]:
        """Of the row that begins after `lines_before` lines; column -1 is the row itself."""
        if self._starts is None:
            self._starts = line_starts(self._source)
        start = self._starts[min(lines_before, len(self._starts) - 1)]
        at, cell, quoted = start, 0, False
        while at < len(self._source) and cell < column:
            c = self._source[at]
            quoted ^= c == '"'
            cell += c == "," and not quoted
            at += 1
        while column >= 0 and self._source[at : at + 1] in (" ", "\t"):
            at += 1
        return spot(self._source, at, self._starts)
