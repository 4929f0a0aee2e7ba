"""Text that came from a user, made harmless for each kind of file.

Characters that steer text without being seen (controls, direction marks) are shown as [U+202E] everywhere: a title
must not be able to reorder or hide what stands around it.
"""

from __future__ import annotations

import html
import unicodedata

_TEX = {
    "\\": "\\textbackslash{}", "{": "\\{", "}": "\\}", "$": "\\$", "&": "\\&", "#": "\\#", "%": "\\%", "_": "\\_",
    "^": "\\textasciicircum{}", "~": "\\textasciitilde{}", "<": "\\textless{}", ">": "\\textgreater{}",
    "|": "\\textbar{}", '"': "\\textquotedbl{}", "–": "--", "—": "---", "‘": "`", "’": "'", "“": "``", "”": "''",
    "†": "\\ensuremath{\\dagger}", "±": "\\ensuremath{\\pm}", "−": "\\ensuremath{-}", "≤": "\\ensuremath{\\le}",
    "≥": "\\ensuremath{\\ge}", "→": "\\ensuremath{\\to}", "∞": "\\ensuremath{\\infty}", "×": "\\ensuremath{\\times}",
    "·": "\\ensuremath{\\cdot}", "…": "\\dots{}", "[": "{[}", "]": "{]}", "°": "\\ensuremath{^\\circ}",
}
_UNSEEN = ("Cc", "Cf", "Co", "Cs", "Cn", "Zl", "Zp")


def visible(text: str) -> str:
    """One line of text without unseen characters: line breaks become spaces, the others are named."""
    line = " ".join(text.split())
    return "".join(c if unicodedata.category(c) not in _UNSEEN else f"[U+{ord(c):04X}]" for c in line)


def html_text(text: str) -> str:
    """Text for HTML, SVG or an attribute in double quotes."""
    return html.escape(visible(text), quote=True)


def tex_text(text: str) -> str:
    """Text for a LaTeX document set by any engine: what a plain text font lacks is named by its code."""
    edge = (" " if text[:1] == " " else "", " " if text[-1:] == " " and text.strip() else "")
    return edge[0] + "".join(_tex_char(c) for c in visible(text)) + edge[1]


def _tex_char(c: str) -> str:
    from derive.report.letters import GREEK

    if c in _TEX:
        return _TEX[c]
    if c.isascii() or 0xC0 <= ord(c) <= 0x17F:  # Latin letters with marks are in every T1 font
        return c
    name = next((name for name, char in GREEK.items() if char == c), None)
    return f"\\ensuremath{{\\{name}}}" if name else f"{{[}}U+{ord(c):04X}{{]}}"


def csv_cell(text: str) -> str:
    """One cell of a table (RFC 4180); text that a spreadsheet would run as a formula gets a quote in front."""
    cell = visible(text)
    if cell[:1] in ("=", "+", "@", "\t") or (cell[:1] == "-" and not _is_numeric(cell)):
        cell = "'" + cell
    return '"' + cell.replace('"', '""') + '"' if any(c in cell for c in ',"\n\r') else cell


def _is_numeric(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True
