"""Worksheet -> `Question`: the whole language, all faults at once, each with its place.

`read(path)` gives the question or raises `BadInput`; `survey(path)` gives what was understood together with the
faults and with what is right but not served yet.  `understand(tables)` is the road from Python.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path as FilePath
from typing import Any

from derive.errors import BadInput, Fault
from derive.problem.setting import Check, Interval, Own, Question, Setting, Wish
from derive.worksheet.claims import Surroundings, read_claims
from derive.worksheet.faults import Faults
from derive.worksheet.graph import read_graph
from derive.worksheet.keys import TOP
from derive.worksheet.letters import read_letters
from derive.worksheet.measured import read_detectors, read_interval, read_start
from derive.worksheet.places import Sites, sites_of
from derive.worksheet.positions import Positions
from derive.worksheet.serving import refuse_unserved_topics, refuse_unserved_uses
from derive.worksheet.source import decode, load, tables
from derive.worksheet.topics import read_wishes
from derive.worksheet.values import Reader, Use
from derive.worksheet.wanted import (
    check_brought_letters,
    check_point_values,
    check_set_values,
    read_check,
    start_wanted,
)


@dataclass
class Sheet:
    """A worksheet as far as it was understood.  `question` is None where there are faults.

    `uses` are the features of the measured system that not every topic serves.
    """

    question: Question | None
    faults: list[Fault] = field(default_factory=list)
    unserved: list[Fault] = field(default_factory=list)
    uses: list[Use] = field(default_factory=list)

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
    return _survey_text(source, str(path), path.parent, _report_name(path))


def survey_bytes(raw: bytes, file: str, folder: FilePath) -> Sheet:
    """The same for a worksheet that is not on disk; edge files are looked for in `folder`."""
    try:
        source = decode(raw, file)
    except BadInput as bad:
        return Sheet(None, bad.faults)
    return _survey_text(source, file, folder, _report_name(FilePath(file)))


def _report_name(path: FilePath) -> str:
    """What the report's folder is named after: the file without .toml and without dots around, which lead elsewhere."""
    return path.stem.strip(". ") or "worksheet"


def _survey_text(source: str, file: str, folder: FilePath, name: str) -> Sheet:
    try:
        data = tables(source, file)
    except BadInput as bad:
        return Sheet(None, bad.faults)
    return understand(data, folder, name, Faults(file, Positions(source)))


def understand(
    data: Mapping[str, Any],
    folder: FilePath,
    name: str = "worksheet",
    faults: Faults | None = None,
    must_ask: bool = True,
) -> Sheet:
    """Tables as a worksheet has them -> sheet.  Without positions the place of a fault is its key path.

    A worksheet must ask for something; from Python the asking comes later (`must_ask` False).
    """
    faults = faults if faults is not None else Faults()
    r = Reader(faults)
    question = _question(r, data, folder, name, must_ask)
    found = faults.in_order()
    return Sheet(None if found else question, found, faults.unserved_in_order(), r.uses)


def ask(question: Question, derive: Mapping[str, Any], claim: Mapping[str, Any], uses: Iterable[Use] = ()) -> Sheet:
    """The same measured system (`uses` its features) with other topics and claims, read as a worksheet's are."""
    setting, faults = question.setting, Faults()
    r = Reader(faults, {x.name: x for x in setting.letters}, setting.domains())
    r.uses = [u for u in uses if u.topic is None]
    wishes = read_wishes(r, derive)
    claims = read_claims(r, claim, Surroundings(sites_of(setting.space), setting.detectors))
    _check_together(r, setting, wishes, claims, setting.start is not None)
    found = faults.in_order()
    asked = Question(setting, wishes, claims, question.check, question.name)
    return Sheet(None if found else asked, found, faults.unserved_in_order())


def _check_together(
    r: Reader, setting: Setting | None, wishes: tuple[Wish, ...], claims: tuple[Own, ...], has_start: bool
) -> None:
    """What no section can know by itself."""
    refuse_unserved_topics(r.faults, wishes)
    refuse_unserved_uses(r.faults, r.uses, wishes, claims)
    check_brought_letters(r, wishes, claims)
    wanting = start_wanted(wishes, claims)
    if wanting and not has_start:
        r.faults.add((), f"{wanting} depends on the start, and there is none.", "Add  start.at = 0  or another start.")
    if setting is not None:
        check_set_values(r, setting, wishes)


def _question(r: Reader, data: Mapping[str, Any], folder: FilePath, name: str, must_ask: bool) -> Question | None:
    top = r.table((), data, TOP, "a worksheet") or {}
    _check_required(r, top)
    if must_ask:
        _check_asks(r, top)
    read_letters(r, top.get("symbols", {}))
    title = r.text(("title",), top["title"], "title") if "title" in top else ""
    assume = r.relations(("assume",), top["assume"]) if "assume" in top else ()
    sites = read_graph(r, top["graph"], folder) if "graph" in top else Sites()
    detectors = read_detectors(r, top["detector"], sites) if "detector" in top else ()
    start = read_start(r, top["start"], sites, detectors) if "start" in top else None
    interval = read_interval(r, top["interval"]) if "interval" in top else Interval()
    wishes = read_wishes(r, top["derive"]) if "derive" in top else ()
    claims = read_claims(r, top["claim"], Surroundings(sites, detectors)) if "claim" in top else ()
    check = read_check(r, top["check"], interval.length, assume) if "check" in top else Check()
    known = sites.space is not None and detectors
    if not known or sites.space is None:
        _check_together(r, None, wishes, claims, "start" in top)
        return None
    letters = tuple((r.letters or {}).values())
    setting = Setting(title or "", letters, sites.space, detectors, start, interval, assume)
    _check_together(r, setting, wishes, claims, "start" in top)
    check_point_values(r, setting, check)
    return Question(setting, wishes, claims, check, name)


def _check_required(r: Reader, top: Mapping[str, Any]) -> None:
    examples = {"title": 'title = "..."', "graph": "[graph]", "detector": "[detector]  with  at = 0"}
    for key in TOP:
        if key.required and key.name not in top:
            r.faults.add((), f"{key.name} is missing: {key.says}.", f"Add  {examples[key.name]}.")


def _check_asks(r: Reader, top: Mapping[str, Any]) -> None:
    asked = [top[k] for k in ("derive", "claim") if k in top]
    if not any(table or not isinstance(table, Mapping) for table in asked):
        r.faults.add((), "nothing is asked: there is no topic and no claim.", "Add  [derive.generator].")
