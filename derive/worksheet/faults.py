"""Faults gathered while a worksheet is read, put in file order, and said in the house's voice.

Whoever reads a value goes on after a fault; all faults of a file are told together.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from difflib import get_close_matches

from derive.errors import Fault
from derive.worksheet.positions import Path, Positions

MOST_SHOWN = 50


@dataclass
class Faults:
    """What is wrong (`found`) and what is right but served by nothing (`unserved`), each with its place.

    Without `positions` (the Python road) the place is the key path.
    """

    file: str = ""
    positions: Positions | None = None
    found: list[tuple[tuple[int, int], Fault]] = field(default_factory=list)
    unserved: list[tuple[tuple[int, int], Fault]] = field(default_factory=list)
    redirect: Callable[[str, str, int | None], None] | None = None

    def add(self, path: Path, message: str, mend: str = "", offset: int | None = None) -> None:
        """A fault of the value at `path`; `offset` counts characters into the string that stands there.

        While `redirect` is set (a value that stands in another file) it goes there.
        """
        if self.redirect is not None:
            self.redirect(message, mend, offset)
            return
        self.found.append(self._made(path, message, mend, offset, at_key=False))

    def add_key(self, path: Path, message: str, mend: str = "") -> None:
        """A fault of the key itself."""
        self.found.append(self._made(path, message, mend, None, at_key=True))

    def add_elsewhere(self, path: Path, place: tuple[str, int, int], message: str, mend: str = "") -> None:
        """A fault in another file (file, line, column), told where `path` names that file."""
        key, anchor = _written(path), self._place(path, None, False)
        file, line, column = place
        self.found.append((anchor, Fault(message, mend, key, file, line, column)))

    def not_served(self, path: Path, message: str, mend: str = "") -> None:
        """Well formed, but nothing serves it."""
        self.unserved.append(self._made(path, message, mend, None, at_key=True))

    def _made(
        self, path: Path, message: str, mend: str, offset: int | None, at_key: bool
    ) -> tuple[tuple[int, int], Fault]:
        line, column = self._place(path, offset, at_key)
        return (line, column), Fault(message, mend, _written(path), self.file, line, column)

    def _place(self, path: Path, offset: int | None, at_key: bool) -> tuple[int, int]:
        if self.positions is None:
            return (0, 0)
        return self.positions.key(path) if at_key else self.positions.value(path, offset)

    def in_order(self) -> list[Fault]:
        return _sorted(self.found)

    def unserved_in_order(self) -> list[Fault]:
        return _sorted(self.unserved)


def _sorted(placed: Iterable[tuple[tuple[int, int], Fault]]) -> list[Fault]:
    """In file order, the same fault at the same place once."""
    seen: dict[Fault, None] = {}
    for _, fault in sorted(placed, key=lambda p: p[0]):
        seen.setdefault(fault)
    return list(seen)


def _written(path: Path) -> str:
    """graph.bonds[0][2] for ("graph", "bonds", 0, 2)."""
    out = ""
    for part in path:
        if isinstance(part, int):
            out += f"[{part}]"
        else:
            shown = part if part.isprintable() and len(part) <= 60 else ascii(part[:60])[1:-1]
            out += ("." if out else "") + shown
    return out


def near(word: str, known: Iterable[str]) -> str:
    """ "Did you mean ...?" where a known word is close to this one, else nothing."""
    known = sorted(known)
    lowered = {k.lower(): k for k in known}
    close = get_close_matches(str(word)[:100].lower(), lowered, n=1, cutoff=0.65)
    return f"Did you mean {lowered[close[0]]}?" if close else ""


def say(fault: Fault) -> str:
    """file:line:column: key: message, and under it what to change."""
    place = f"{fault.file}:{fault.line}:{fault.column}: " if fault.file and fault.line else ""
    place = place or (f"{fault.file}: " if fault.file else "")
    key = f"{fault.key}: " if fault.key else ""
    told = f"{place}{key}{fault.message}"
    return told + "".join(f"\n    {line}" for line in fault.mend.splitlines())


def say_all(faults: list[Fault]) -> str:
    """All of them, or the first `MOST_SHOWN` and how many are left."""
    told = [say(f) for f in faults[:MOST_SHOWN]]
    if len(faults) > MOST_SHOWN:
        told.append(f"and {len(faults) - MOST_SHOWN} more.")
    return "\n".join(told)
