"""Every worksheet that is shipped: its document compiles, its page stands in a browser."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from tests.answered import SHEETS, files_of

from .test_browser import CHROMIUM, WIDTHS, measured
from .test_latex import BAD, LATEX, WIDEST, compiled, overfull


@pytest.fixture(scope="module", params=SHEETS, ids=lambda p: p.stem)
def files(request: pytest.FixtureRequest) -> dict[str, bytes]:
    """The files of one worksheet's report."""
    return files_of(request.param)


KINDS = {
    "root in a root": r"<msqrt>(?:(?!</msqrt>).)*<msqrt>", "sum with limits": "<munderover", "matrix": "<mtable",
    "sum over roots": "<munder>", "cases": 'class="cases"', "dagger": "†", "ket": "⟩", "bra": "⟨", "hat": "ˆ",
    "bar": 'class="bar"', "bound": "≤", "definition": "≔", "infinity": "∞", "integral": "∫", "floor": "⌊",
    "binomial": 'linethickness="0"', "chain": 'class="chain"',
}


def test_the_gallery_shows_every_kind() -> None:
    """Each kind of formula once at least, and nothing in it undecided."""
    made = files_of(next(s for s in SHEETS if s.stem == "gallery"))
    assert json.loads(made["ledger.json"])["verdict"] in ("proved", "agrees")
    page = made["report.html"].decode("utf-8")
    maths = "".join(re.findall(r"<math.*?</math>", page, re.S))
    assert [kind for kind, sign in KINDS.items() if not re.search(sign, maths, re.S)] == []


@pytest.mark.skipif(LATEX is None, reason="pdflatex is not installed")
def test_document_compiles(files: dict[str, bytes], tmp_path: Path) -> None:
    log = compiled(tmp_path, files)
    assert not re.search(BAD, log) and max(overfull(log), default=0.0) <= WIDEST


@pytest.mark.skipif(CHROMIUM is None, reason="chromium is not installed")
@pytest.mark.parametrize("width", WIDTHS)
def test_page_stands(files: dict[str, bytes], width: int, tmp_path: Path) -> None:
    seen = measured(files["report.html"].decode("utf-8"), width, tmp_path)
    assert seen["scroll"] <= width and seen["empty"] == [] and seen["sticking"] == [] and seen["aligned"]
    assert seen["font"] == "loaded" and seen["fetched"] == [] and seen["columns"] == seen["nameless"] == 0
