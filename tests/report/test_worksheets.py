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
