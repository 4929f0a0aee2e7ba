"""Every worksheet that is shipped: its document compiles, its page stands in a browser."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

from .test_browser import CHROMIUM, WIDTHS, measured
from .test_latex import BAD, LATEX, WIDEST, compiled, overfull

SHEETS = sorted((Path(__file__).parents[2] / "worksheets").glob("*.toml"))


@pytest.fixture(scope="module", params=SHEETS, ids=lambda p: p.stem)
def files(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """The files of one worksheet's report, as the command writes them."""
    out = tmp_path_factory.mktemp("report")
    start = "from derive.cli import main; main()"
    command = [sys.executable, "-c", start, "run", str(request.param), "--out", str(out)]
    done = subprocess.run(command, capture_output=True, timeout=600, cwd=out)
    assert done.returncode in (0, 1, 3), done.stderr.decode("utf-8", "replace")[-800:]
    folder = out / request.param.stem
    return {str(p.relative_to(folder)): p.read_bytes() for p in folder.rglob("*") if p.is_file()}


KINDS = {
    "root in a root": r"<msqrt>(?:(?!</msqrt>).)*<msqrt>", "sum with limits": "<munderover", "matrix": "<mtable",
    "sum over roots": "<munder>", "cases": 'class="cases"', "dagger": "†", "ket": "⟩", "bra": "⟨", "hat": "ˆ",
    "bar": 'class="bar"', "bound": "≤", "definition": "≔", "infinity": "∞", "integral": "∫", "floor": "⌊",
    "binomial": 'linethickness="0"', "chain": 'class="chain"',
}


def test_the_gallery_shows_every_kind(tmp_path: Path) -> None:
    """Each kind of formula once at least, and nothing in it undecided."""
    gallery = next(s for s in SHEETS if s.stem == "gallery")
    command = [sys.executable, "-c", "from derive.cli import main; main()", "run", str(gallery), "--out", str(tmp_path)]
    done = subprocess.run(command, capture_output=True, timeout=300)
    assert done.returncode == 0, done.stdout.decode("utf-8", "replace")[-800:]
    page = (tmp_path / "gallery" / "report.html").read_text("utf-8")
    maths = "".join(re.findall(r"<math.*?</math>", page, re.S))
    assert [kind for kind, sign in KINDS.items() if not re.search(sign, maths, re.S)] == []


@pytest.mark.slow
@pytest.mark.skipif(LATEX is None, reason="pdflatex is not installed")
def test_document_compiles(files: dict[str, bytes], tmp_path: Path) -> None:
    log = compiled(tmp_path, files)
    assert not re.search(BAD, log) and max(overfull(log), default=0.0) <= WIDEST


@pytest.mark.slow
@pytest.mark.skipif(CHROMIUM is None, reason="chromium is not installed")
@pytest.mark.parametrize("width", WIDTHS)
def test_page_stands(files: dict[str, bytes], width: int, tmp_path: Path) -> None:
    seen = measured(files["report.html"].decode("utf-8"), width, tmp_path)
    assert seen["scroll"] <= width and seen["empty"] == [] and seen["sticking"] == [] and seen["aligned"]
    assert seen["font"] == "loaded" and seen["fetched"] == [] and seen["columns"] == seen["nameless"] == 0
