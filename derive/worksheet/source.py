"""A worksheet's file as text, and its text as tables; a file that is no TOML gets one fault, in plain words."""

from __future__ import annotations

import re
import stat
import tomllib
from pathlib import Path as FilePath
from typing import Any

from derive.errors import BadInput, Fault
from derive.worksheet.positions import line_starts, spot
from derive.worksheet.values import Decimal

LARGEST_FILE = 4_000_000  # bytes; larger graphs go into an edge file
DEEPEST = 40  # open brackets and keys between dots


def load(path: FilePath) -> str:
    """The text of a worksheet file, or `BadInput` with the one thing that hinders."""
    shown = str(path)
    try:
        state = path.stat()
        if stat.S_ISDIR(state.st_mode):
            raise _one(shown, "this is a folder.", "Name a worksheet in it.")
        if not stat.S_ISREG(state.st_mode):
            raise _one(shown, "this is no ordinary file.", "Name a worksheet.")
        if state.st_size > LARGEST_FILE:
            mend = f"At most {LARGEST_FILE:,} are read; a large graph goes into an edge_file."
            raise _one(shown, f"this file has {state.st_size:,} bytes.", mend)
        raw = path.read_bytes()
    except (FileNotFoundError, NotADirectoryError, ValueError):
        raise _one(shown, "there is no such file.", _nearby(path)) from None
    except OSError as fault:
        raise _one(shown, "this file cannot be read.", f"The system says: {fault.strerror}.") from None
    return decode(raw, shown)


def decode(raw: bytes, file: str) -> str:
    """Bytes as text without NUL; not empty."""
    try:
        source = raw.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        before = raw[: fault.start].decode("utf-8", "replace")
        at = spot(before, len(before))
        raise _one(file, "this byte is not UTF-8 text.", "Save the file as UTF-8.", at) from None
    if "\0" in source:
        at = spot(source, source.index("\0"))
        raise _one(file, "a NUL character stands here.", "A worksheet is plain text; take it out.", at)
    if not source.strip():
        raise _one(file, "this file is empty.", "watchpot new chain  writes one to start from.")
    return source


def _one(file: str, message: str, mend: str, at: tuple[int, int] = (0, 0)) -> BadInput:
    return BadInput([Fault(message, mend, "", file, *at)])


def _nearby(path: FilePath) -> str:
    from derive.worksheet.faults import near

    try:
        beside = [p.stem for p in path.parent.iterdir() if p.suffix == ".toml"][:1000]
    except (OSError, ValueError):
        return ""
    close = near(path.stem, beside)
    return close.replace("?", ".toml?")


def tables(source: str, file: str) -> dict[str, Any]:
    """TOML as Python values; decimals are kept as written."""
    _check_nesting(source, file)
    try:
        return tomllib.loads(source, parse_float=Decimal)
    except tomllib.TOMLDecodeError as fault:
        raise _no_toml(source, file, str(fault)) from None
    except RecursionError:
        raise _one(file, "brackets are nested too deep here.", "Write it flatter.") from None
    except (ValueError, OverflowError):
        found = _LONG_NUMBER.search(_bare(source))
        at = spot(source, found.start()) if found else (0, 0)
        raise _one(file, "a number here has too many digits.", "Write it as a power, in quotes.", at) from None


_LONG_NUMBER = re.compile(r"[0-9][0-9_]{3999,}")
"""Python reads 4300 digits at once."""


def _check_nesting(source: str, file: str) -> None:
    """Refuse what would make any TOML reader recurse without end."""
    depth = 0
    bare = _bare(source)
    for at, c in enumerate(bare):
        depth += (c in "[{") - (c in "]}")
        if depth > DEEPEST:
            raise _one(file, f"more than {DEEPEST} brackets are open here.", "Write it flatter.", spot(source, at))
    begin = 0
    for line in bare.split("\n"):
        if line.partition("=")[0].count(".") >= DEEPEST:
            raise _one(file, "this key has too many dots.", "Write it as tables.", spot(source, begin))
        begin += len(line) + 1


def _bare(source: str) -> str:
    """The text with its strings and comments blanked, every position kept."""
    strings = r"\"\"\".*?\"\"\"|'''.*?'''|\"(?:\\.|[^\"\\\n])*\"|'[^'\n]*'|#[^\n]*"
    return re.sub(strings, _blank, source, flags=re.DOTALL)


def _blank(found: re.Match[str]) -> str:
    """Strings and comments, so that their brackets do not count; every position stays."""
    return "".join("\n" if c == "\n" else "s" for c in found.group())


_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")

_SAID = (
    ("Expected '=' after a key", "a key stands here without its =.", "Write  key = value."),
    ("Expected newline or end of document", "something is left over on this line.", "One key = value a line."),
    ("Invalid statement", "this line is neither key = value nor [section].", "Write  key = value."),
    ("Invalid initial character for a key part", "a key is missing here.", "Write  key = value."),
    ("Invalid value", "there is no value here that TOML knows.", 'Formulas and words stand in quotes: hopping = "-g".'),
    ("Unterminated string", "a string is opened and not closed.", "Add the closing quote."),
    ("Unclosed array", "a list is opened and not closed, or misses a comma.", "Write [a, b]."),
    (
        "Unclosed inline table",
        "an inline table is opened and not closed, or misses a comma.",
        "Write { a = 1, b = 2 }.",
    ),
    ("Duplicate inline table key", "a key stands here twice in one table.", "Keep one of the two."),
    ("Cannot overwrite a value", "this key or section stands here twice.", "Keep one of the two."),
    ("Cannot declare", "this section stands here twice.", "Put its keys into the first one."),
    (
        "Cannot mutate immutable",
        "this section was closed before, by { ... } or by dotted keys.",
        "Keep its keys together.",
    ),
    ("Cannot redefine", "this section stands here twice.", "Put its keys into the first one."),
    ("Expected ']", "a section's name is not closed.", "Write [section]."),
    ("Illegal character '\\n'", "a string ends with its line.", "Close it, or use three quotes."),
    ("Illegal character", "a control character stands here.", "Take it out."),
    ("Found invalid character", "a control character stands here.", "Take it out."),
    ("Unescaped '\\'", "a backslash needs care in double quotes.", "Write '...' with single quotes, or \\\\."),
    ("Hex value", "an escape \\u needs four digits, \\U eight.", "Write '...' with single quotes, or \\\\."),
    ("Escaped character is not", "this escape names no character.", "Write '...' with single quotes, or \\\\."),
    ("Invalid hex value", "an escape \\u needs four digits, \\U eight.", "Write '...' with single quotes, or \\\\."),
    ("Invalid date", "this looks like a date and is none.", "Worksheets have no dates."),
)


def _no_toml(source: str, file: str, said: str) -> BadInput:
    place = _PLACE.search(said)
    starts = line_starts(source)
    at = (int(place[1]), int(place[2])) if place and place[1] else spot(source, len(source.rstrip()), starts)
    if "twice" in said or said.startswith("Cannot"):
        at = (at[0], 1 + len(_line(source, at[0], starts)) - len(_line(source, at[0], starts).lstrip()))
    message, mend = next(
        ((m, e) for s, m, e in _SAID if said.startswith(s)), ("this is no TOML.", "Write  key = value.")
    )
    if said.startswith("Invalid value") and _quoted_wanted(source, at, starts):
        mend = f'Write it in quotes: "{_quoted_wanted(source, at, starts)}".'
    return _one(file, f"{message}", mend, at)


def _line(source: str, number: int, starts: list[int]) -> str:
    return source[starts[number - 1] :].split("\n", 1)[0]


def _quoted_wanted(source: str, at: tuple[int, int], starts: list[int]) -> str:
    """A bare formula or word that stands where a value is wanted."""
    rest = source[starts[at[0] - 1] + at[1] - 1 :].splitlines()[:1]
    found = re.match(r"[-+A-Za-z(][^#,\]}\"]*", rest[0]) if rest else None
    return found.group().strip()[:40] if found else ""
