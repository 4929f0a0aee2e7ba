"""Each shipped worksheet's report, made once for all tests of a run."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from derive.pipeline import answer
from derive.report import write
from derive.worksheet import read

SHEETS = sorted((Path(__file__).parent.parent / "worksheets").glob("*.toml"))


@cache
def files_of(sheet: Path) -> dict[str, bytes]:
    """Relative path -> bytes, as the command writes them."""
    return write(answer(read(sheet)))
