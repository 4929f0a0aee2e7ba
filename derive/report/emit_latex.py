"""Boxes -> LaTeX, for amsmath and mathtools.

`latex(box)` is self-contained: it can be pasted anywhere.  With `macros=True` the upright i and e are written by
the macros of the document (`\\iu`, `\\eu`), so that an author changes them in one place.
"""

from __future__ import annotations

from functools import singledispatch

from derive.report.boxes import (
    Accent,
    Big,
    Box,
    Chain,
    Fence,
    Fraction,
    Grid,
    Link,
    Mark,
    Pieces,
    Root,
    Row,
    Script,
    Sign,
    Space,
    Stack,
    Words,
)
from derive.report.escape import tex_text
from derive.report.letters import GREEK, SCRIPT, SYMBOLS

_COMMANDS = {char: f"\\{name}" for name, char in (*GREEK.items(), *SYMBOLS.items())}
_COMMANDS |= {
    "−": "-", "⋅": "\\cdot", "×": "\\times", "≤": "\\le", "≥": "\\ge", "≠": "\\ne", "∼": "\\sim", "≔": "\\coloneqq",
    "…": "\\dots", "→": "\\to", "∑": "\\sum", "∏": "\\prod", "∫": "\\int", "⟨": "\\langle", "⟩": "\\rangle",
    "⌊": "\\lfloor", "⌋": "\\rfloor", "{": "\\{", "}": "\\}", "′": "'", "∗": "*", "≈": "\\approx",
}
_SCRIPT_LETTERS = {char: name for name, char in SCRIPT.items()}
_KNOWN_WORDS = frozenset((
    "log", "sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "exp", "arcsin", "arccos", "arctan", "det",
))
_ACCENTS = {"hat": "hat", "bar": "bar", "tilde": "tilde", "dot": "dot", "vec": "vec", "line": "overline"}
_NEXT = " \\\\ "
_MACROS = {"i": "\\iu", "e": "\\eu"}
MACRO_BLOCK = (
    "\\providecommand{\\iu}{\\mathrm{i}}% the imaginary unit",
    "\\providecommand{\\eu}{\\mathrm{e}}% the base of exponentials",
    "\\providecommand{\\ket}[1]{\\lvert #1\\rangle}",
    "\\providecommand{\\bra}[1]{\\langle #1\\rvert}",
)


def latex(box: Box, macros: bool = False) -> str:
    """The LaTeX of a box, without dollar signs."""
    return _tidy(_emit(box, macros))


def _tidy(source: str) -> str:
    return " ".join(source.split())


@singledispatch
def _emit(box: Box, macros: bool) -> str:
    raise TypeError(f"no LaTeX for {type(box).__name__}")


@_emit.register
def _(box: Sign, macros: bool) -> str:
    char = box.char
    if box.role == "word":
        return f"\\{char} " if char in _KNOWN_WORDS else f"\\operatorname{{{tex_text(char)}}} "
    if box.role == "upright":
        return f"{_MACROS[char]} " if macros and char in _MACROS else _upright(char)
    if box.role in ("opening", "closing"):
        return f"\\big{'l' if box.role == 'opening' else 'r'}{_delimiter(char, 'l')}"
    if box.role == "bold":
        return f"\\mathbf{{{char}}}"
    if box.role == "script":
        return f"\\mathcal{{{_SCRIPT_LETTERS[char]}}}"
    return _sign(box)


def _upright(char: str) -> str:
    return f"{_COMMANDS[char]} " if char in _COMMANDS else f"\\mathrm{{{char}}}"


def _sign(box: Sign) -> str:
    command = _COMMANDS.get(box.char)
    if command is not None:
        shown = command + " " if command[-1].isalpha() else command
    elif box.role == "letter" and len(box.char) > 1:
        shown = f"\\mathit{{{box.char}}}"
    else:
        shown = tex_text(box.char) if not box.char.isalnum() and box.char not in "+=<>/!()|.,:*" else box.char
    if box.role in ("binary", "relation"):
        return f" {shown.strip()} "
    return shown + " " if box.role == "punctuation" else shown


@_emit.register
def _(box: Words, macros: bool) -> str:
    return f"\\text{{{tex_text(box.text)}}}"


@_emit.register
def _(box: Space, macros: bool) -> str:
    return {"quad": "\\quad ", "thin": "\\,", "word": ""}[box.size]


@_emit.register
def _(box: Row, macros: bool) -> str:
    return "".join(_emit(item, macros) for item in box.items)


@_emit.register
def _(box: Fraction, macros: bool) -> str:
    return f"\\frac{_braced(box.over, macros)}{_braced(box.under, macros)}"


@_emit.register
def _(box: Stack, macros: bool) -> str:
    return f"\\binom{_braced(box.over, macros)}{_braced(box.under, macros)}"


@_emit.register
def _(box: Root, macros: bool) -> str:
    degree = f"[{_emit(box.degree, macros).strip()}]" if box.degree else ""
    return f"\\sqrt{degree}{_braced(box.inside, macros)}"


@_emit.register
def _(box: Script, macros: bool) -> str:
    base = _emit(box.base, macros).rstrip()
    if not isinstance(box.base, (Sign, Fence, Accent, Words, Root)):
        base = f"{{{base}}}"
    under = f"_{_script(box.sub, macros)}" if box.sub else ""
    over = f"^{_script(box.sup, macros)}" if box.sup else ""
    return base + under + over + (" " if base.startswith("\\") and not under + over else "")


def _script(box: Box, macros: bool) -> str:
    inside = _emit(box, macros).strip()
    return inside if len(inside) == 1 and inside.isalnum() else f"{{{inside}}}"


@_emit.register
def _(box: Accent, macros: bool) -> str:
    return f"\\{_ACCENTS[box.sign]}{_braced(box.inside, macros)}"


@_emit.register
def _(box: Mark, macros: bool) -> str:
    return f"\\underline{_braced(box.inside, macros)}"


@_emit.register
def _(box: Fence, macros: bool) -> str:
    inside = _emit(box.inside, macros).strip()
    if macros and (box.left, box.right) == ("|", "⟩"):
        return f"\\ket{{{inside}}}"
    if macros and (box.left, box.right) == ("⟨", "|"):
        return f"\\bra{{{inside}}}"
    left, right = _delimiter(box.left, "l"), _delimiter(box.right, "r")
    if box.tall:
        return f"\\left{left} {inside} \\right{right}"
    return f"{left}{' ' if left[-1].isalpha() else ''}{inside}{right}{' ' if right[-1].isalpha() else ''}"


def _delimiter(char: str, side: str) -> str:
    if char == "|":
        return f"\\{side}vert"
    return _COMMANDS.get(char, char or ".")


@_emit.register
def _(box: Big, macros: bool) -> str:
    low = f"_{_script(box.low, macros)}" if box.low else ""
    high = f"^{_script(box.high, macros)}" if box.high else ""
    return f"{_COMMANDS[box.sign]}{low}{high} {_emit(box.body, macros)}"


@_emit.register
def _(box: Grid, macros: bool) -> str:
    rows = (" & ".join(_emit(b, macros).strip() for b in line) for line in box.rows)
    return f"\\begin{{bmatrix}} {_NEXT.join(rows)} \\end{{bmatrix}}"


@_emit.register
def _(box: Pieces, macros: bool) -> str:
    rows = (f"{_emit(v, macros).strip()} & {_emit(c, macros).strip()}" for v, c in box.pairs)
    return f"\\begin{{cases}} {_NEXT.join(rows)} \\end{{cases}}"


@_emit.register
def _(box: Chain, macros: bool) -> str:
    return f"\\begin{{aligned}} {_NEXT.join(chain_rows(box, macros))} \\end{{aligned}}"


def chain_rows(box: Chain, macros: bool = False) -> list[str]:
    """The lines of a chain, for any aligning environment."""
    return [_tidy(_link_row(link, macros)) for link in box.links]


def _link_row(link: Link, macros: bool) -> str:
    start = _emit(link.left, macros).strip() if link.left is not None else ""
    sign = _emit(Sign(link.relation, "relation"), macros).strip() if link.relation else ""
    indent = "\\quad " if link.goes_on else ""
    return f"{start} &{sign} {indent}{_emit(link.right, macros).strip()}".strip()


def _braced(box: Box, macros: bool) -> str:
    return f"{{{_emit(box, macros).strip()}}}"
