"""What can go wrong, by whose hand.

Four kinds and no more: the user's worksheet (`BadInput`, a list of faults with places), a formula asked
for where it does not hold (`OutsideValidity`), a ball that came out too wide (`NeedsPrecision`), and a
well-formed wish that nothing here serves (`NotCovered`).  Anything else that escapes is a defect of ours.
"""

from __future__ import annotations

from dataclasses import dataclass, field


class WatchpotError(Exception):
    """Root of the four kinds below."""


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing to mend: where it stands, what stands there, and the smallest change that works."""

    message: str
    mend: str = ""
    key: str = ""
    file: str = ""
    line: int = 0
    column: int = 0


@dataclass
class BadInput(WatchpotError):
    """The user's input cannot be taken as it is.  All faults of a file travel together, in file order."""

    faults: list[Fault] = field(default_factory=list)

    def __str__(self) -> str:
        return "\n".join(f"{f.message} {f.mend}".rstrip() for f in self.faults)


@dataclass
class FormulaFault(WatchpotError):
    """A formula cannot be read.  `position` counts characters from 0 inside the formula's own text."""

    message: str
    mend: str = ""
    position: int = 0

    def __str__(self) -> str:
        return self.message


class OutsideValidity(WatchpotError):
    """A formula was asked for at a point where it does not hold."""


class NeedsPrecision(WatchpotError):
    """An enclosure is too wide for the question; the caller may try again with more digits."""


class NotCovered(WatchpotError):
    """Well formed, but nothing here serves it."""
