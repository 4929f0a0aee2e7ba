"""Boxes -> MathML Core, as browsers draw it today without help.

Fences that stay on one line are marked so (a browser would stretch them), bars over letters are drawn by the style
sheet (`class="bar"`), and the alignment of chains is the style sheet's too: MathML Core has no columnalign.
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
from derive.report.emit_latex import latex
from derive.report.escape import html_text

_ACCENTS = {"hat": "ˆ", "bar": "¯", "tilde": "˜", "dot": "˙", "vec": "→"}
_BOLD = {c: chr(0x1D400 + n) for n, c in enumerate("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz")}
_SPACES = {"thin": "0.167em", "word": "0.167em", "quad": "1em"}


def mathml(box: Box, block: bool = True) -> str:
    """A whole <math> element; its LaTeX is the text alternative."""
    display = ' display="block"' if block else ""
    return f'<math{display} alttext="{html_text(latex(box))}">{_emit(box)}</math>'


@singledispatch
def _emit(box: Box) -> str:
    raise TypeError(f"no MathML for {type(box).__name__}")


@_emit.register
def _(box: Sign) -> str:
    char = html_text(box.char)
    if box.role == "number":
        return f"<mn>{char}</mn>"
    if box.role == "word":
        return f"<mi>{char}</mi>" if len(box.char) > 1 else f'<mi mathvariant="normal">{char}</mi>'
    if box.role == "letter" and "Α" <= box.char <= "Ω":  # capital Greek stands upright, as in LaTeX
        return f'<mi mathvariant="normal">{char}</mi>'
    if box.role == "letter":
        return f"<mi>{char}</mi>" if len(box.char) == 1 else f'<mi class="name">{char}</mi>'
    if box.role == "upright":
        return f'<mi mathvariant="normal">{char}</mi>'
    if box.role == "bold":
        return f"<mi>{''.join(_BOLD.get(c, c) for c in char)}</mi>"
    if box.role == "script":
        return f"<mi>{char}</mi>"
    return _operator(box, char)


def _operator(box: Sign, char: str) -> str:
    if box.role in ("binary", "relation"):
        return f'<mo form="infix">{char}</mo>'
    if box.role == "prefix":
        return f'<mo form="prefix">{char}</mo>'
    if box.role in ("opening", "closing"):
        return f'<mo stretchy="false">{char}</mo>'
    if box.role == "punctuation":
        return f'<mo separator="true" lspace="0" rspace="0.2em">{char}</mo>'
    if box.char.isalpha():
        return f'<mi mathvariant="normal">{char}</mi>'
    return f'<mo stretchy="false" lspace="0" rspace="0">{char}</mo>'


@_emit.register
def _(box: Words) -> str:
    return f"<mtext>{html_text(box.text)}</mtext>"


@_emit.register
def _(box: Space) -> str:
    return f'<mspace width="{_SPACES[box.size]}"></mspace>'


@_emit.register
def _(box: Row) -> str:
    return f"<mrow>{''.join(_emit(item) for item in box.items)}</mrow>"


@_emit.register
def _(box: Fraction) -> str:
    return f"<mfrac>{_emit(box.over)}{_emit(box.under)}</mfrac>"


@_emit.register
def _(box: Stack) -> str:
    inside = f'<mfrac linethickness="0">{_emit(box.over)}{_emit(box.under)}</mfrac>'
    return f"<mrow><mo>(</mo>{inside}<mo>)</mo></mrow>"


@_emit.register
def _(box: Root) -> str:
    if box.degree is not None:
        return f"<mroot>{_emit(box.inside)}{_emit(box.degree)}</mroot>"
    return f"<msqrt>{_emit(box.inside)}</msqrt>"


@_emit.register
def _(box: Script) -> str:
    base = _emit(box.base)
    if box.sub is not None and box.sup is not None:
        return f"<msubsup>{base}{_emit(box.sub)}{_emit(box.sup)}</msubsup>"
    if box.sub is not None:
        return f"<msub>{base}{_emit(box.sub)}</msub>"
    return f"<msup>{base}{_emit(box.sup)}</msup>" if box.sup is not None else base


@_emit.register
def _(box: Accent) -> str:
    if box.sign == "line":
        return f'<mrow class="bar">{_emit(box.inside)}</mrow>'
    sign = f'<mo stretchy="false">{_ACCENTS[box.sign]}</mo>'
    return f'<mover accent="true">{_emit(box.inside)}{sign}</mover>'


@_emit.register
def _(box: Mark) -> str:
    return f'<mrow class="mark">{_emit(box.inside)}</mrow>'


@_emit.register
def _(box: Fence) -> str:
    left, right = (_fence(char, form, box.tall) for char, form in ((box.left, "prefix"), (box.right, "postfix")))
    return f"<mrow>{left}{_emit(box.inside)}{right}</mrow>"


def _fence(char: str, form: str, tall: bool) -> str:
    if not char:
        return ""
    stretch = "true" if tall else "false"
    return f'<mo form="{form}" fence="true" stretchy="{stretch}" lspace="0" rspace="0">{html_text(char)}</mo>'


@_emit.register
def _(box: Big) -> str:
    return f"<mrow>{_limits(box)}{_emit(box.body)}</mrow>"


def _limits(box: Big) -> str:
    integral = box.sign == "∫"
    sign = f'<mo largeop="true" movablelimits="false">{box.sign}</mo>'
    below_tag, above_tag, both_tag = (
        ("msub", "msup", "msubsup") if integral else ("munder", "mover", "munderover")
    )
    if box.low is not None and box.high is not None:
        return f"<{both_tag}>{sign}{_emit(box.low)}{_emit(box.high)}</{both_tag}>"
    if box.low is not None:
        return f"<{below_tag}>{sign}{_emit(box.low)}</{below_tag}>"
    return f"<{above_tag}>{sign}{_emit(box.high)}</{above_tag}>" if box.high is not None else sign


@_emit.register
def _(box: Grid) -> str:
    rows = "".join(f"<mtr>{''.join(f'<mtd>{_emit(b)}</mtd>' for b in line)}</mtr>" for line in box.rows)
    return f"<mrow><mo>[</mo><mtable>{rows}</mtable><mo>]</mo></mrow>"


@_emit.register
def _(box: Pieces) -> str:
    rows = "".join(f"<mtr><mtd>{_emit(v)}</mtd><mtd>{_emit(c)}</mtd></mtr>" for v, c in box.pairs)
    return f'<mrow><mo form="prefix" stretchy="true">{{</mo><mtable class="cases">{rows}</mtable></mrow>'


@_emit.register
def _(box: Chain) -> str:
    rows = "".join(_link(link) for link in box.links)
    return f'<mtable class="chain">{rows}</mtable>'


def _link(link: Link) -> str:
    start = _emit(link.left) if link.left is not None else ""
    sign = f'<mo form="infix">{html_text(link.relation)}</mo>' if link.relation else ""
    indent = '<mspace width="2em"></mspace>' if link.goes_on else ""
    return f"<mtr><mtd>{start}</mtd><mtd><mrow>{sign}{indent}{_emit(link.right)}</mrow></mtd></mtr>"
