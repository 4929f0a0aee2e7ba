"""Worksheet -> `Question`: the whole language, all faults at once, each with its place.

`read(path)` gives the question or raises `BadInput`; `survey(path)` gives what was understood together with the
faults and with what is right but not served yet.  `understand(tables)` is the road from Python.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path as FilePath
from typing import Any

from derive.errors import BadInput, Fault
from derive.problem.setting import Check, Interval, Question, Setting
from derive.worksheet.claims import Surroundings, read_claims
from derive.worksheet.faults import Faults
from derive.worksheet.graph import read_graph
from derive.worksheet.keys import TOP
from derive.worksheet.letters import read_letters
from derive.worksheet.measured import read_detectors, read_interval, read_start
from derive.worksheet.positions import Positions
from derive.worksheet.source import decode, load, tables
from derive.worksheet.topics import read_wishes
from derive.worksheet.values import Reader
from derive.worksheet.wanted import check_brought_letters, read_check, start_wanted


@dataclass
class Sheet:
    """A worksheet as far as it was understood.  `question` is None where there are faults."""

    question: Question | None
    faults: list[Fault] = field(default_factory=list)
    unserved: list[Fault] = field(default_factory=list)

    def taken(self) -> Question:
        """The question, or `BadInput` with all faults."""
        if self.question is None:
            raise BadInput(self.faults)
        return self.question


def read(path: str | FilePath) -> Question:
    """The question a worksheet file asks; `BadInput` with every fault otherwise.  Served or not is not looked at."""
    return survey(path).taken()


def survey(path: str | FilePath) -> Sheet:
    """What a worksheet file says, its faults in file order, and what of it nothing serves yet."""
    path = FilePath(path)
    try:
        source = load(path)
    except BadInput as bad:
        return Sheet(None, bad.faults)
    return _survey_text(source, str(path), path.parent, path.stem)


def survey_bytes(raw: bytes, file: str, folder: FilePath) -> Sheet:
    """The same for a worksheet that is not on disk; edge files are looked for in `folder`."""
    try:
        source = decode(raw, file)
    except BadInput as bad:
        return Sheet(None, bad.faults)
    return _survey_text(source, file, folder, FilePath(file).stem)


def _survey_text(source: str, file: str, folder: FilePath, name: str) -> Sheet:
    try:
        data = tables(source, file)
    except BadInput as bad:
        return Sheet(None, bad.faults)
    return understand(data, folder, name, Faults(file, Positions(source)))


def understand(
    data: Mapping[str, Any], folder: FilePath, name: str = "worksheet", faults: Faults | None = None
) -> Sheet:
    """Tables as a worksheet has them -> sheet.  Without positions the place of a fault is its key path."""
    faults = faults if faults is not None else Faults()
    question = _question(Reader(faults), data, folder, name)
    found = faults.in_order()
    return Sheet(None if found else question, found, faults.unserved_in_order())


def _question(r: Reader, data: Mapping[str, Any], folder: FilePath, name: str) -> Question | None:
    top = r.table((), data, TOP, "a worksheet") or {}
    _check_required(r, top)
    read_letters(r, top.get("symbols", {}))
    title = r.text(("title",), top["title"], "title") if "title" in top else ""
    assume = r.relations(("assume",), top["assume"]) if "assume" in top else ()
    sites = read_graph(r, top["graph"], folder) if "graph" in top else _no_sites()
    detectors = read_detectors(r, top["detector"], sites) if "detector" in top else ()
    start = read_start(r, top["start"], sites, detectors) if "start" in top else None
    interval = read_interval(r, top["interval"]) if "interval" in top else Interval()
    wishes = read_wishes(r, top["derive"]) if "derive" in top else ()
    claims = read_claims(r, top["claim"], Surroundings(sites, detectors)) if "claim" in top else ()
    check = read_check(r, top["check"], interval.length, assume) if "check" in top else Check()
    check_brought_letters(r, wishes, claims)
    wanting = start_wanted(wishes, claims)
    if wanting and "start" not in top:
        r.faults.add((), f"{wanting} depends on the start, and there is none.", "Add  start.at = 0  or another start.")
    if sites.space is None or not detectors:
        return None
    letters = tuple((r.letters or {}).values())
    setting = Setting(title or "", letters, sites.space, detectors, start, interval, assume)
    return Question(setting, wishes, claims, check, name)


def _no_sites() -> Any:
    from derive.worksheet.places import Sites

    return Sites()


def _check_required(r: Reader, top: Mapping[str, Any]) -> None:
    examples = {"title": 'title = "..."', "graph": "[graph]", "detector": "[detector]  with  at = 0"}
    for key in TOP:
        if key.required and key.name not in top:
            r.faults.add((), f"{key.name} is missing: {key.says}.", f"Add  {examples[key.name]}.")
    asked = [top[k] for k in ("derive", "claim") if k in top]
    if not any(table or not isinstance(table, Mapping) for table in asked):
        r.faults.add((), "nothing is asked: there is no topic and no claim.", "Add  [derive.generator].")
