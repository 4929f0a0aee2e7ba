"""Text from a user is text everywhere: in HTML, SVG, CSV, LaTeX and JSON.

Read back by each format's own reader: html.parser, ElementTree, csv, json, and (where installed) LaTeX and pdftotext.
"""

from __future__ import annotations

import csv
import io
import json
import re
from dataclasses import replace
from html.parser import HTMLParser
from xml.etree import ElementTree

import pytest

from derive.formula.tree import ONE, letter
from derive.problem.setting import Letter, Start, Watcher
from derive.record.said import Claim, Curve, Judged, Plot, Report
from derive.report import write
from derive.report.escape import csv_cell, file_name, html_text, tex_text, visible

from .sample import POSITIVE, REAL, chain, demo, every_verdict, setting

TITLE = '</title></script><script>alert(1)</script> \\input{/etc/passwd} $x$ 100% & "q" #1 ~^_{} \u202eabc\nline <!--'
NAMES = ("</mtext><b>", "a&b", "$\\input{x}$", "50%_#", "\u202eright", 'quo"te', "new\nline", "=cmd()", "\\")


def hostile() -> Report:
    space = chain(9, NAMES, detuned=4)
    here = setting(
        TITLE, space=space, detectors=(Watcher((((4, ONE),),)),), start=Start(((ONE, ((2, ONE),)),)),
        letters=(Letter("g", POSITIVE, "\\input{x}"), Letter("Delta", REAL, "$</math>")),
    )
    base = every_verdict()
    judged = tuple(spoilt(j) if j.claim.origin == "claimed" else j for j in base.judged)
    plot = Plot("../../up", TITLE, "$\\frac{$ <b>", TITLE, (Curve(TITLE, "measured", ("1", "2"), ("0.5", "1")),
                Curve("=HYPERLINK(1)", "bound", ("1", "2"), ("0.5", "1"))),
                regimes=(("=HYPERLINK(2)" + TITLE, "1", "2"),))
    question = replace(base.question, setting=here)
    return replace(base, question=question, judged=judged, plots=(plot,), notes=((TITLE, letter("g")),))


def spoilt(j: Judged) -> Judged:
    found = tuple(replace(f, evidence=TITLE) for f in j.findings)
    claim: Claim = replace(j.claim, id=j.claim.id + ' <i>&"%', source=TITLE, valid_for=TITLE)
    return replace(j, claim=claim, findings=found, diagnosis=TITLE)


FILES = write(hostile())
UP = file_name("../../up")


class Reader(HTMLParser):
    """Counts elements and gathers text and ids."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.said: list[str] = []
        self.ids: list[str] = []

    def handle_starttag(self, tag: str, attrs: list) -> None:
        self.tags.append(tag)
        self.ids += [value for name, value in attrs if name == "id"]
        assert not any(name.startswith("on") for name, _ in attrs)

    def handle_data(self, data: str) -> None:
        self.said.append(data)


def read(data: bytes) -> Reader:
    reader = Reader()
    reader.feed(data.decode("utf-8"))
    return reader


def test_html_has_no_element_of_the_users() -> None:
    bad, good = read(FILES["report.html"]), read(write(every_verdict())["report.html"])
    assert bad.tags.count("script") == good.tags.count("script") == 1
    for tag in ("b", "title", "iframe", "img", "h1", "main"):
        assert bad.tags.count(tag) - bad.tags.count("figure") * 0 <= good.tags.count(tag) + (tag == "title") * 2
    assert any("</script><script>alert(1)</script>" in said for said in bad.said)
    assert len(set(bad.ids)) == len(bad.ids)


def test_svg_is_well_formed_and_says_the_text() -> None:
    for name, data in FILES.items():
        if name.endswith(".svg"):
            root = ElementTree.fromstring(data)
            assert all(e.tag.rpartition("}")[2] not in ("script", "b", "foreignObject") for e in root.iter())
    said = "".join(ElementTree.fromstring(FILES[f"figures/{UP}.svg"]).itertext())
    assert "alert(1)" in said and "[U+202E]" in said


def test_csv_reads_back_and_starts_no_formula() -> None:
    rows = list(csv.reader(io.StringIO(FILES[f"data/{UP}.csv"].decode("utf-8"), newline="")))
    assert all(len(row) == 4 for row in rows) and len(rows) == 7
    assert rows[1][0] == visible(TITLE) and rows[3][0] == "'=HYPERLINK(1)" and rows[5][0][0] == "'"
    sites = list(csv.reader(io.StringIO(FILES["data/graph.csv"].decode("utf-8"), newline="")))
    assert ["new line", "'=cmd()", "-g"] in sites


def test_no_path_leaves_the_folder() -> None:
    assert all(".." not in name and not name.startswith("/") for name in FILES)
    assert re.fullmatch(r"etc-passwd-[0-9a-f]{8}", file_name("../../etc/passwd"))
    assert re.fullmatch(r"entry-[0-9a-f]{8}", file_name("..."))


def test_names_that_look_alike_have_files_of_their_own() -> None:
    ids = ["claim.a/b", "claim.a-b", "claim.a b", "claim.a_b", ".claim.a-b", "x" * 300, "x" * 301, "", "東", "京"]
    names = [file_name(i) for i in ids]
    assert len(set(names)) == len(ids) and max(map(len, names)) < 200
    assert file_name("claim.a-b") == "claim.a-b" and file_name("survival.small_tau") == "survival.small_tau"


def test_json_keeps_the_text_as_it_was() -> None:
    assert json.loads(FILES["ledger.json"])["title"] == TITLE
    FILES["ledger.json"].decode("ascii")


def test_latex_has_no_command_of_the_users() -> None:
    source = FILES["derivation.tex"].decode("ascii")  # plain ASCII, whatever was typed
    assert "\\input" not in source and "\\textbackslash{}input" in source
    assert all("\\input{" not in data.decode("ascii").replace("\\textbackslash{}input", "")
               for name, data in FILES.items() if name.startswith("fragments/"))


@pytest.mark.parametrize("c", "\\{}$&#%_^~<>|\"")
def test_every_special_character_is_escaped_in_latex(c: str) -> None:
    assert tex_text(c) != c
    assert html_text(c) == {"&": "&amp;", "<": "&lt;", ">": "&gt;", '"': "&quot;"}.get(c, c)


def test_unseen_characters_are_named() -> None:
    assert visible("a\u200fb\u0000c\u2028d\te") == "a[U+200F]b[U+0000]c d e"
    assert tex_text("é ß ħ τ 東") == "\\'{e} \\ss{} \\ensuremath{\\hbar} \\ensuremath{\\tau} {[}U+6771{]}"


@pytest.mark.parametrize("cell", ["=1+1", "+1", "@x", "-cmd|x", "-HYPERLINK(1)"])
def test_spreadsheets_run_nothing(cell: str) -> None:
    assert csv_cell(cell).lstrip('"').startswith("'")
    assert csv_cell("-1.5e-3") == "-1.5e-3" and csv_cell("-g^2/2") == "-g^2/2"


def test_the_usual_report_is_left_alone() -> None:
    assert b"[U+" not in write(demo())["report.html"]
