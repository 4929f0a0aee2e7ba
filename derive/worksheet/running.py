"""A question answered and its report put on disk, whole or not at all."""

from __future__ import annotations

import os
import shutil
import signal
import tempfile
import threading
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from derive.errors import BadInput, Fault
from derive.problem.setting import Question
from derive.record.said import Derivation, Report

OWN_FOLDERS = ("figures", "data", "fragments")
_MARK = "ledger.json"

EXIT = {"proved": 0, "agrees": 0, "refuted": 1, "undecided": 3, "untested": 3}
BAD_INPUT = 2
INTERRUPTED = 130


def answered(question: Question, jobs: int = 1, progress: Callable[[str], None] | None = None) -> Report:
    """The report on a question; heavy imports happen here, after everything that can be refused was refused."""
    from derive.pipeline import answer

    return answer(question, jobs=jobs, progress=progress)


def derived(question: Question) -> tuple[Derivation, ...]:
    """The derivations alone, nothing checked."""
    from derive.derivations.registry import DERIVATIONS
    from derive.problem.specialise import at_values

    return tuple(DERIVATIONS[w.topic](at_values(question.setting, dict(w.set)), w) for w in question.wishes)


def written(report: Report) -> dict[str, bytes]:
    """Relative path -> contents of every file of the report."""
    from derive.report import write

    return write(report)


def exit_code(verdicts: list[str]) -> int:
    """1 where anything is refuted, else 3 where anything is open, else 0."""
    codes = {EXIT[v] for v in verdicts}
    return 1 if 1 in codes else 3 if 3 in codes else 0


def folder_for(name: str, out: str | None) -> Path:
    """DIR/<worksheet name>, or <worksheet name>-report here."""
    return Path(out) / name if out is not None else Path(f"{name}-report")


def check_folder(folder: Path) -> None:
    """Refuse at once, before hours of work, a place where nothing can be written."""
    place = folder
    while not place.exists() and place != place.parent:
        place = place.parent
    if not place.is_dir():
        raise BadInput(
            [Fault(f"{place} is a file, and the report needs a folder there.", "Choose another with --out.")]
        )
    if not os.access(place, os.W_OK | os.X_OK):
        raise BadInput([Fault(f"nothing can be written in {place}.", "Choose another folder with --out.")])


def put(files: Mapping[str, bytes], folder: Path) -> None:
    """Write all files of a report into `folder`.

    Everything is first written to a hidden folder beside it, then each file takes its place by one rename, with ^C
    held back meanwhile: a file is the old one or the new one, never half of one.  What an earlier report left in
    figures/, data/ and fragments/ and this one lacks goes away; nothing else in the folder is touched.
    """
    folder.parent.mkdir(parents=True, exist_ok=True)
    ready = Path(tempfile.mkdtemp(prefix=".watchpot-", dir=folder.parent))
    try:
        for name in sorted(files):
            place = ready / name
            place.parent.mkdir(parents=True, exist_ok=True)
            place.write_bytes(files[name])
        with held_back():
            _take_places(ready, folder, files)
    finally:
        shutil.rmtree(ready, ignore_errors=True)


def _take_places(ready: Path, folder: Path, files: Mapping[str, bytes]) -> None:
    was_ours = (folder / _MARK).is_file()
    for name in sorted(files):
        place = folder / name
        place.parent.mkdir(parents=True, exist_ok=True)
        os.replace(ready / name, place)
    if was_ours:
        _drop_left_over(folder, files)


def _drop_left_over(folder: Path, files: Mapping[str, bytes]) -> None:
    for inner in OWN_FOLDERS:
        for place in sorted((folder / inner).glob("*")):
            if place.is_file() and f"{inner}/{place.name}" not in files:
                place.unlink()


@contextmanager
def held_back() -> Iterator[None]:
    """^C waits until the block has ended (only the main thread can hold it)."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    came: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, frame: came.append(number))
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
    if came:
        raise KeyboardInterrupt
