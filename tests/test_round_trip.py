"""What a ledger says can be said again: formulas read back, entries are accepted as claims, bytes repeat."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from derive.formula.grammar import parse
from derive.formula.text import text
from derive.pipeline import answer
from derive.report import write
from derive.worksheet import read
from tests.answered import SHEETS, files_of

ROOT = Path(__file__).parent.parent
SPOILT = {"agrees", "proved"}


def ledger_of(sheet: Path) -> dict[str, Any]:
    return json.loads(files_of(sheet)["ledger.json"])


@pytest.fixture(scope="module", params=SHEETS, ids=lambda p: p.stem)
def sheet(request: pytest.FixtureRequest) -> tuple[Path, dict[str, Any]]:
    return request.param, ledger_of(request.param)


def formulas(ledger: dict[str, Any]) -> list[str]:
    found = []
    for entry in ledger["entries"]:
        found += [entry["formula"]] if entry.get("formula") else []
        found += [f for _, _, f in entry.get("matrix") or []]
        found += [c["formula"] for c in entry.get("cases") or []]
        found += [entry["per_root"][k] for k in ("polynomial", "formula") if entry.get("per_root")]
    return found


def test_every_ledger_formula_reads_back(sheet: tuple[Path, dict[str, Any]]) -> None:
    _, ledger = sheet
    assert formulas(ledger)
    for source in formulas(ledger):
        assert text(parse(source)) == source


def test_every_worksheet_passes(sheet: tuple[Path, dict[str, Any]]) -> None:
    path, ledger = sheet
    assert {e["id"]: e["verdict"] for e in ledger["entries"] if e["verdict"] not in SPOILT} == {}, path


def spoilt(source: str, holds: str = "exactly") -> str:
    """Twice the formula; an order of magnitude one power higher; 1 for 0; a bound far too sharp."""
    if holds == "as an upper bound":
        return f"({source})/10^9"
    if holds == "as a lower bound":
        return f"10^9*({source})"
    if source.startswith("O("):
        return re.sub(r"\^(\d+)\)$", lambda m: f"^{int(m[1]) + 1})", source)
    return "1" if source == "0" else f"2*({source})"


def claims(ledger: dict[str, Any], spoil: bool = False) -> str:
    """The ledger's entries with a quantity as [claim.*] tables, none left out; `spoil` makes each formula wrong."""
    entries = [e for e in ledger["entries"] if e["quantity"] and e["id"] != "validity.radius_kind"]
    return "\n\n".join(table(n, entry, spoil) for n, entry in enumerate(entries))


def table(n: int, entry: dict[str, Any], spoil: bool) -> str:
    key = entry["key"]
    lines = [f"[claim.again-{n}]", f'about = "{entry["quantity"]}"', f'holds = "{entry["kind"]}"']
    lines += [f"{name} = {json.dumps(key[name])}" for name in ("which", "entry", "side", "arm") if name in key]
    lines += [f'assume = {json.dumps(entry["assume"])}'] if entry["assume"] else []
    return "\n".join([*lines, said(entry, spoil)])


def said(entry: dict[str, Any], spoil: bool) -> str:
    """The entry's value in the worksheet's words; if spoilt, one of its formulas is wrong."""

    def first(source: str, k: int = 0) -> str:
        return spoilt(source, entry["kind"]) if spoil and k == 0 else source

    if entry.get("values"):
        return f"values = {json.dumps([[n, first(q, k)] for k, (n, q) in enumerate(entry['values'])])}"
    if entry.get("cases"):
        last = len(entry["cases"]) - 1  # the others may be empty where the worksheet's own assumptions exclude them
        cases = [f'{{ if = "{c["if"]}", formula = "{first(c["formula"], last - k)}" }}'
                 for k, c in enumerate(entry["cases"])]
        return f"cases = [{', '.join(cases)}]"
    if entry.get("per_root"):
        root = entry["per_root"]
        pairs = [("polynomial", root["polynomial"]), ("letter", root["letter"]), ("formula", first(root["formula"]))]
        return f"per_root = {{ {', '.join(f'{name} = {json.dumps(value)}' for name, value in pairs)} }}"
    if entry.get("matrix") is not None:
        rows = [[x, y, first(f, k)] for k, (x, y, f) in enumerate(entry["matrix"])]
        return f"matrix = {json.dumps(rows or ([[0, 0, '1']] if spoil else []))}"
    source = entry["number"]["value"] if entry.get("number") else entry["formula"]
    return f'formula = "{first(source)}"'


def again(path: Path, ledger: dict[str, Any], folder: Path, spoil: bool) -> dict[str, str]:
    """Verdicts of the worksheet's own entries said again as claims."""
    source = path.read_text(encoding="utf-8")
    for beside in path.parent.glob("*.csv"):
        (folder / beside.name).write_bytes(beside.read_bytes())
    sheet = folder / path.name
    sheet.write_text(f"{source}\n\n{claims(ledger, spoil)}\n", encoding="utf-8")
    judged = answer(read(sheet)).judged
    return {j.claim.id: j.verdict for j in judged if j.claim.id.startswith("claim.again-")}


def test_every_entry_fed_back_is_accepted(sheet: tuple[Path, dict[str, Any]], tmp_path: Path) -> None:
    found = again(*sheet, tmp_path, spoil=False)
    assert found and {n: v for n, v in found.items() if v not in SPOILT} == {}


def test_every_entry_fed_back_doubled_is_refuted(sheet: tuple[Path, dict[str, Any]], tmp_path: Path) -> None:
    """The round trip is shown to fail."""
    found = again(*sheet, tmp_path, spoil=True)
    assert found and {n: v for n, v in found.items() if v != "refuted"} == {}


@pytest.mark.parametrize(
    ("environment", "options"),
    [({"PYTHONHASHSEED": "1", "TZ": "Asia/Tokyo"}, []), ({"PYTHONHASHSEED": "77", "LANG": "C"}, ["--jobs", "2"])],
    ids=["hash seed and time zone", "hash seed and jobs"],
)
def test_same_bytes(environment: dict[str, str], options: list[str], tmp_path: Path) -> None:
    """Another hash seed, folder, time zone and number of processes: the same files."""
    demo = ROOT / "worksheets" / "nine-cavities.toml"
    copy = tmp_path / "elsewhere" / demo.name
    copy.parent.mkdir()
    copy.write_bytes(demo.read_bytes())
    program = str(Path(sys.executable).parent / "watchpot")
    command = [program, "run", str(copy), "--out", str(tmp_path / "out"), *options]
    subprocess.run(command, check=True, capture_output=True, cwd=ROOT, env={**os.environ, **environment})
    written = tmp_path / "out" / "nine-cavities"
    found = {p.relative_to(written).as_posix(): p.read_bytes() for p in written.rglob("*") if p.is_file()}
    assert found == write(answer(read(demo)))
