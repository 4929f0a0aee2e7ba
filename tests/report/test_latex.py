"""A real LaTeX on every kind of document: no error, no undefined reference, no overfull box over 10 pt."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

import pytest

from derive.record.said import Report
from derive.report import write

from . import gallery
from .sample import demo, every_verdict
from .test_hostile import TITLE, hostile

LATEX = shutil.which("pdflatex")
needs_latex = pytest.mark.skipif(LATEX is None, reason="pdflatex is not installed")
REPORTS = {"demo": demo, "verdicts": every_verdict, "gallery": gallery.report, "hostile": hostile}
WIDEST = 10.0  # pt
BAD = r"(Reference|Citation|Label)[^\n]*(undefined|multiply)|undefined references|multiply[- ]defined"


def compiled(folder: Path, files: dict[str, bytes], main: str = "derivation.tex") -> str:
    """Two runs, as a person would do; the log of the second."""
    for name, data in files.items():
        if name.endswith((".tex", ".pdf")):
            path = folder / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(data)
    for _ in range(2):
        done = subprocess.run(
            [LATEX or "pdflatex", "-interaction=nonstopmode", "-halt-on-error", "-no-shell-escape", main],
            cwd=folder, capture_output=True, timeout=120,
        )
        assert done.returncode == 0, done.stdout.decode("utf-8", "replace")[-2000:]
    return (folder / main).with_suffix(".log").read_text("utf-8", "replace")


def overfull(log: str) -> list[float]:
    return [float(size) for size in re.findall(r"Overfull \\[hv]box \(([0-9.]+)pt too (?:wide|high)", log)]


@needs_latex
@pytest.mark.parametrize("name", REPORTS)
def test_document_compiles(name: str, tmp_path: Path) -> None:
    log = compiled(tmp_path, write(REPORTS[name]()))
    assert not re.search(BAD, log)
    assert max(overfull(log), default=0.0) <= WIDEST


@needs_latex
def test_fragments_go_into_a_paper(tmp_path: Path) -> None:
    """A bare article that loads amsmath and mathtools takes every fragment and can refer to it by the entry's id."""
    files = {name: data for name, data in write(every_verdict()).items() if name.startswith("fragments/")}
    inputs = "".join(f"\\input{{{name}}}\n" for name in sorted(files))
    paper = (
        "\\documentclass{article}\\usepackage{amsmath,mathtools}\\begin{document}\n"
        f"{inputs}See \\eqref{{generator.2}} and \\eqref{{claim.refuted-one}}.\n\\end{{document}}\n"
    )
    log = compiled(tmp_path, files | {"paper.tex": paper.encode()}, "paper.tex")
    assert not re.search(BAD, log)


@needs_latex
@pytest.mark.skipif(shutil.which("pdftotext") is None, reason="pdftotext is not installed")
def test_hostile_title_is_printed_as_text(tmp_path: Path) -> None:
    compiled(tmp_path, write(hostile()))
    command = ["pdftotext", "-layout", "derivation.pdf", "-"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, timeout=60)
    said = done.stdout.decode("utf-8")
    assert "\\input{/etc/passwd}" in said and "root:" not in said and "[U+202E]" in said
    assert TITLE.splitlines()[0][:8] in said


def test_a_wide_box_is_seen() -> None:
    """The reader of the log can fail."""
    assert re.search(BAD, "LaTeX Warning: Reference `x' on page 1 undefined on input line 3.")
    assert overfull("Overfull \\hbox (23.5pt too wide) in paragraph at lines 1--2") == [23.5]


def test_labels_are_the_entries_ids() -> None:
    source = write(demo())["derivation.tex"].decode("ascii")
    wanted = {j.claim.id for j in demo().judged}
    assert set(re.findall(r"\\label\{([^}]*)\}", source)) == wanted


def test_claims_stand_by_name_beside_ours() -> None:
    """A refuted claim: its name, yours with the label, ours below it."""
    source = write(every_verdict())["derivation.tex"].decode("ascii")
    part = source[source.index("\\subsection*{refuted-one}") :].split("\\subsection*", 2)[1]
    yours, ours = part.index("\\itshape yours"), part.index("\\itshape ours")
    assert yours < part.index("\\label{claim.refuted-one}") < ours


def test_fragments_say_what_a_list_of_entries_leaves_out() -> None:
    fragment = write(demo())["fragments/generator.2.tex"].decode("ascii")
    assert "% Hermitian; every entry not named is 0." in fragment


def test_long_formulas_were_broken_not_shrunk() -> None:
    report: Report = gallery.report()
    assert b"\\resizebox" not in write(report)["derivation.tex"]
