"""Where a long line is broken: before a + or -, aligned behind the relation sign."""

from __future__ import annotations

from derive.report.boxes import Big, Box, Chain, Fence, Link, Row, Sign, width

WIDEST = 34.0  # em behind the relation sign
OPENED = (0.75, 0.4, 0.2)  # of a line: a shorter fence goes whole to the next line, if that is enough


def broken(chain: Chain, widest: float = WIDEST) -> Chain:
    """The chain with every long right side spread over several lines."""
    return Chain(tuple(part for link in chain.links for part in _link(link, widest)))


def _link(link: Link, widest: float) -> list[Link]:
    first, *rest = (line[0] if len(line) == 1 else Row(tuple(line)) for line in _lines(link.right, widest))
    return [Link(link.left, link.relation, first, link.goes_on), *(Link(None, "", line, True) for line in rest)]


def _lines(box: Box, widest: float) -> list[list[Box]]:
    """The box on as many lines as it takes, opening shorter and shorter fences until every line fits."""
    best = [[box]]
    for part in OPENED:
        if _longest(best) <= widest:
            break
        tried = _filled(_opened(box, part * widest), widest)
        best = min(best, tried, key=_longest)
    return best


def _longest(lines: list[list[Box]]) -> float:
    return max(sum(width(b) for b in line) for line in lines)


def _opened(box: Box, longest: float) -> list[Box]:
    """The items of a long box; a fence or a sum longer than `longest` is opened, so that a line may end inside."""
    if isinstance(box, Fence) and width(box) > longest:
        return [Sign(box.left, "opening"), *_opened(box.inside, longest), Sign(box.right, "closing")]
    if isinstance(box, Big) and width(box) > longest:
        return [Big(box.sign, box.low, box.high, Row(())), *_opened(box.body, longest)]
    if isinstance(box, Row):
        return [part for item in box.items for part in _opened(item, longest)]
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
