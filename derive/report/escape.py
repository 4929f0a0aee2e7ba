"""Text that came from a user, made harmless for each kind of file.

Characters that steer text without being seen (controls, direction marks) are shown as [U+202E] everywhere: a title
must not be able to reorder or hide what stands around it.
"""

from __future__ import annotations

import hashlib
import html
import re
import unicodedata

_TEX = {
    "\\": "\\textbackslash{}", "{": "\\{", "}": "\\}", "$": "\\$", "&": "\\&", "#": "\\#", "%": "\\%", "_": "\\_",
    "^": "\\textasciicircum{}", "~": "\\textasciitilde{}", "<": "\\textless{}", ">": "\\textgreater{}",
    "|": "\\textbar{}", '"': "''", "–": "--", "—": "---", "‘": "`", "’": "'", "“": "``", "”": "''",
    "†": "\\ensuremath{\\dagger}", "±": "\\ensuremath{\\pm}", "−": "\\ensuremath{-}", "≤": "\\ensuremath{\\le}",
    "≥": "\\ensuremath{\\ge}", "→": "\\ensuremath{\\to}", "∞": "\\ensuremath{\\infty}", "×": "\\ensuremath{\\times}",
    "·": "\\ensuremath{\\cdot}", "…": "\\dots{}", "[": "{[}", "]": "{]}", "°": "\\ensuremath{^\\circ}",
    "ħ": "\\ensuremath{\\hbar}", "ß": "\\ss{}", "ø": "\\o{}", "Ø": "\\O{}", "æ": "\\ae{}", "Æ": "\\AE{}",
    "œ": "\\oe{}", "Œ": "\\OE{}", "ł": "\\l{}", "Ł": "\\L{}", "§": "\\S{}", "\u00a0": "~",
}
_TEX_MARKS = {
    "\u0300": "`", "\u0301": "'", "\u0302": "^", "\u0303": "~", "\u0304": "=", "\u0306": "u", "\u0307": ".",
    "\u0308": '"', "\u030a": "r", "\u030b": "H", "\u030c": "v", "\u0327": "c",
}
LONGEST_NAME = 100  # characters of a file's name that come from an id
_UNSEEN = ("Cc", "Cf", "Co", "Cs", "Cn", "Zl", "Zp")


def visible(text: str) -> str:
    """One line of text without unseen characters: line breaks become spaces, the others are named."""
    line = re.sub(r"\s+", " ", text)
    return "".join(c if unicodedata.category(c) not in _UNSEEN else f"[U+{ord(c):04X}]" for c in line)


def html_text(text: str) -> str:
    """Text for HTML, SVG or an attribute in double quotes."""
    return html.escape(visible(text), quote=True)


def tex_text(text: str) -> str:
    """Text for LaTeX in plain ASCII, for any engine and font encoding; what that cannot say is named by its code."""
    return "".join(_tex_char(c) for c in visible(text))


def _tex_char(c: str) -> str:
    from derive.report.letters import GREEK

    if c in _TEX:
        return _TEX[c]
    if c.isascii():
        return c
    letter, mark = (*unicodedata.normalize("NFD", c), "")[:2]
    if letter.isascii() and mark in _TEX_MARKS:  # spelled out, so that no font encoding is needed
        return f"\\{_TEX_MARKS[mark]}{{{letter}}}"
    name = next((name for name, char in GREEK.items() if char == c), None)
    return f"\\ensuremath{{\\{name}}}" if name else f"{{[}}U+{ord(c):04X}{{]}}"


def file_name(text: str) -> str:
    """An id as the name of a file or a label: letters, digits, dot, hyphen, underscore; never a path.

    An id of other characters (a/b) gets a mark made from the whole of it, so that it never meets another (a-b).
    """
    plain = re.sub(r"[^A-Za-z0-9._-]", "-", text).lstrip(".-")[:LONGEST_NAME]
    if plain and plain == text:
        return plain
    mark = hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()[:8]
    return f"{plain or 'entry'}-{mark}"


def csv_cell(text: str) -> str:
    """One cell of a table (RFC 4180); text that a spreadsheet would run as a formula gets a quote in front."""
    cell = visible(text)
    if cell[:1] in ("=", "+", "@") or (cell[:1] == "-" and not _is_harmless(cell)):
        cell = "'" + cell
    return quoted(cell)


def quoted(cell: str) -> str:
    """A cell in quotes where its characters need them, otherwise to the letter."""
    return '"' + cell.replace('"', '""') + '"' if any(c in cell for c in ',"\n\r') else cell


def _is_harmless(cell: str) -> bool:
    """A number, or a product of plain letters and numbers: nothing a spreadsheet would call or look up."""
    return re.fullmatch(r"-[A-Za-z0-9_.*/^+-]+", cell) is not None
