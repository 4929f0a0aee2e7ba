"""Where a long line is broken: before a + or -, aligned behind the relation sign."""

from __future__ import annotations

from derive.report.boxes import Big, Box, Chain, Fence, Link, Row, Sign, width

WIDEST = 34.0  # em behind the relation sign
OPENED = 0.75  # of a line: a shorter fence goes whole to the next line


def broken(chain: Chain, widest: float = WIDEST) -> Chain:
    """The chain with every long right side spread over several lines."""
    return Chain(tuple(part for link in chain.links for part in _link(link, widest)))


def _link(link: Link, widest: float) -> list[Link]:
    items = _opened(link.right, widest) if width(link.right) > widest else [link.right]
    lines = _filled(items, widest)
    first, *rest = (line[0] if len(line) == 1 else Row(tuple(line)) for line in lines)
    return [Link(link.left, link.relation, first, link.goes_on), *(Link(None, "", line, True) for line in rest)]


def _opened(box: Box, widest: float) -> list[Box]:
    """The items of a long box; a long fence is opened, so that a line may end inside it."""
    if isinstance(box, Fence) and width(box) > OPENED * widest:
        return [Sign(box.left, "opening"), *_opened(box.inside, widest), Sign(box.right, "closing")]
    if isinstance(box, Big) and width(box) > OPENED * widest:
        return [Big(box.sign, box.low, box.high, Row(())), *_opened(box.body, widest)]
    if isinstance(box, Row):
        return [part for item in box.items for part in _opened(item, widest)]
    return [box]


def _filled(items: list[Box], widest: float) -> list[list[Box]]:
    """Lines filled greedily with terms; a term begins at a sign or a relation."""
    lines: list[list[Box]] = [[]]
    used = 0.0
    for term in _terms(items):
        size = sum(width(b) for b in term)
        if lines[-1] and used + size > widest:
            lines.append([])
            used = 0.0
        lines[-1].extend(term)
        used += size
    return lines


def _terms(items: list[Box]) -> list[list[Box]]:
    terms: list[list[Box]] = [[]]
    for item in items:
        if isinstance(item, Sign) and item.role in ("binary", "relation") and item.char != "⋅" and terms[-1]:
            terms.append([])
        terms[-1].append(item)
    return terms
