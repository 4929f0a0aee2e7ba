"""Boxes: what is printed and how it is stacked, decided once for every output.

A box knows no mathematics and no markup.  `derive.report.layout` turns formulas into boxes; `latex` and `mathml`
turn boxes into text.  Width is an estimate in em of a 10 pt text face, good enough to decide where a line breaks.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import singledispatch


@dataclass(frozen=True, slots=True)
class Sign:
    """One printed sign.  `role`: letter (slanted), upright, bold, script, number, binary, prefix, relation,
    punctuation, word (a function's upright name, such as sin), plain (upright without space), opening or closing
    (half of a fence that ends on another line), seam (where a product may be broken; never printed)."""

    char: str
    role: str = "letter"


@dataclass(frozen=True, slots=True)
class Words:
    """Text inside mathematics, as it stands."""

    text: str


@dataclass(frozen=True, slots=True)
class Space:
    """Thin (1/6 em), word (thin, after a function's name, where LaTeX has its own) or quad (1 em)."""

    size: str = "thin"


@dataclass(frozen=True, slots=True)
class Row:
    """Side by side.  `wide` keeps the width once it was asked for: breaking lines asks again and again."""

    items: tuple[Box, ...]
    wide: float | None = field(default=None, init=False, repr=False, compare=False)


@dataclass(frozen=True, slots=True)
class Fraction:
    over: Box
    under: Box


@dataclass(frozen=True, slots=True)
class Stack:
    """Two rows without a bar in round fences: a binomial."""

    over: Box
    under: Box


@dataclass(frozen=True, slots=True)
class Root:
    inside: Box
    degree: Box | None = None


@dataclass(frozen=True, slots=True)
class Script:
    base: Box
    sub: Box | None = None
    sup: Box | None = None


@dataclass(frozen=True, slots=True)
class Accent:
    """A hat, bar, tilde, dot or vec over the inside; `line` is a bar as wide as the inside."""

    sign: str
    inside: Box


@dataclass(frozen=True, slots=True)
class Mark:
    """The inside underlined: here two formulas differ."""

    inside: Box


@dataclass(frozen=True, slots=True)
class Fence:
    """`left` inside `right`; `tall` fences grow with what they hold."""

    left: str
    inside: Box
    right: str
    tall: bool = False


@dataclass(frozen=True, slots=True)
class Big:
    """A sum, product or integral sign with its limits, then the body."""

    sign: str
    low: Box | None
    high: Box | None
    body: Box


@dataclass(frozen=True, slots=True)
class Grid:
    """A matrix in square fences, row by row."""

    rows: tuple[tuple[Box, ...], ...]


@dataclass(frozen=True, slots=True)
class Pieces:
    """(value, condition) pairs behind one brace."""

    pairs: tuple[tuple[Box, Box], ...]


@dataclass(frozen=True, slots=True)
class Link:
    """One line of a chain: left and relation (both may be empty), right.  `goes_on`: the line before goes on."""

    left: Box | None
    relation: str
    right: Box
    goes_on: bool = False


@dataclass(frozen=True, slots=True)
class Chain:
    """Lines aligned on their relation sign."""

    links: tuple[Link, ...]


Box = (
    Sign | Words | Space | Row | Fraction | Stack | Root | Script | Accent | Mark | Fence | Big | Grid | Pieces
    | Chain
)

TIMES_DOT = Sign("⋅", "binary")
COMMA = Sign(",", "punctuation")
_SPACED = {"binary": 1.0, "relation": 1.3, "punctuation": 0.45, "prefix": 0.75, "seam": 0.0}
_FENCES = {"": 0.0, "|": 0.3, "⟨": 0.4, "⟩": 0.4}
SMALLER = 0.7  # width of a script relative to its size on the line


def row(*items: Box | None) -> Box:
    """The items side by side; rows inside rows are opened, absent items dropped."""
    flat: list[Box] = []
    for item in items:
        if item is not None:
            flat.extend(item.items if isinstance(item, Row) else (item,))
    return flat[0] if len(flat) == 1 else Row(tuple(flat))


def listed(items: list[Box], tight: bool = False) -> Box:
    """Items with commas between; tight in a subscript."""
    comma = Sign(",", "plain") if tight else COMMA
    out: list[Box] = []
    for n, item in enumerate(items):
        out.extend((comma, item) if n else (item,))
    return row(*out)


@singledispatch
def width(box: Box | None) -> float:
    """Estimated width in em."""
    return 0.0


@width.register
def _(box: Sign) -> float:
    if box.role in _SPACED:
        return _SPACED[box.role]
    return (0.5 if box.role in ("number", "word", "plain") else 0.58) * len(box.char)


@width.register
def _(box: Words) -> float:
    return 0.5 * len(box.text)


@width.register
def _(box: Space) -> float:
    return 1.0 if box.size == "quad" else 0.17


@width.register
def _(box: Row) -> float:
    if box.wide is None:
        object.__setattr__(box, "wide", sum(width(item) for item in box.items))
    return box.wide or 0.0


@width.register
def _(box: Fraction) -> float:
    return max(width(box.over), width(box.under)) + 0.3


@width.register
def _(box: Stack) -> float:
    return max(width(box.over), width(box.under)) + 1.0


@width.register
def _(box: Root) -> float:
    return width(box.inside) + 0.9


@width.register
def _(box: Script) -> float:
    return width(box.base) + SMALLER * max(width(box.sub), width(box.sup))


@width.register
def _(box: Accent) -> float:
    return width(box.inside)


@width.register
def _(box: Mark) -> float:
    return width(box.inside)


@width.register
def _(box: Fence) -> float:
    return width(box.inside) + _FENCES.get(box.left, 0.4) + _FENCES.get(box.right, 0.4)


@width.register
def _(box: Big) -> float:
    limits = SMALLER * max(width(box.low), width(box.high))
    return max(1.1, limits) + 0.2 + width(box.body)


@width.register
def _(box: Grid) -> float:
    columns = zip(*box.rows, strict=True)
    return sum(max(width(b) for b in column) + 1.0 for column in columns) + 0.6


@width.register
def _(box: Pieces) -> float:
    value = max(width(v) for v, _ in box.pairs)
    return value + max(width(c) for _, c in box.pairs) + 2.0


@width.register
def _(box: Chain) -> float:
    left = max(width(link.left) for link in box.links)
    return left + 1.3 + max(width(link.right) for link in box.links)


def is_tall(box: Box | None) -> bool:
    """Does it stand higher than a line of text, so that fences around it must grow?"""
    if box is None or isinstance(box, (Sign, Words, Space)):
        return False
    if isinstance(box, (Fraction, Stack, Big, Grid, Pieces, Chain)):
        return True
    if isinstance(box, Row):
        return any(is_tall(item) for item in box.items)
    if isinstance(box, Script):
        return is_tall(box.base)
    return is_tall(box.inside)
