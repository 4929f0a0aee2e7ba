"""Where a long line is broken: before a + or -, else between two factors, aligned behind the relation sign.

A factor that begins a line has a multiplication sign in front.  Fences, powers of fences and the bodies of sums and
integrals are opened where nothing else helps; a fraction wider than a line becomes a product of fractions.
"""

from __future__ import annotations

from derive.report.boxes import Big, Box, Chain, Fence, Fraction, Link, Row, Script, Sign, Space, row, width

WIDEST = 34.0  # em behind the relation sign
OPENED = (0.75, 0.4, 0.2)  # of a line: a shorter fence goes whole to the next line, if that is enough
SEAM = Sign("×", "seam")
"""Between two factors, where a line may end; printed only where one does."""
ONE = Sign("1", "number")
_BINDING = ("binary", "relation", "prefix", "punctuation", "word", "opening")


def broken(chain: Chain, widest: float = WIDEST, seams: bool = True) -> Chain:
    """The chain with every long right side spread over several lines; without `seams` at + and - alone."""
    return Chain(tuple(part for link in chain.links for part in _link(link, widest, seams)))


def _link(link: Link, widest: float, seams: bool) -> list[Link]:
    first, *rest = (line[0] if len(line) == 1 else Row(tuple(line)) for line in _lines(link.right, widest, seams))
    return [Link(link.left, link.relation, first, link.goes_on), *(Link(None, "", line, True) for line in rest)]


def _lines(box: Box, widest: float, seams: bool) -> list[list[Box]]:
    """The box on as many lines as it takes, opening shorter and shorter fences, then ending lines at factors."""
    best = [[box]]
    for at_factors in (False, True) if seams else (False,):
        for part in OPENED:
            if _longest(best) <= widest:
                return best
            tried = _filled(_opened(box, part * widest, at_factors), widest)
            best = min(best, tried, key=_longest)
    return best


def _longest(lines: list[list[Box]]) -> float:
    return max(sum(width(b) for b in line) for line in lines)


def _opened(box: Box, longest: float, seams: bool) -> list[Box]:
    """The items of a long box; a fence or a sum longer than `longest` is opened, so that a line may end inside.

    With `seams` powers and fractions are opened too, and lines may end between factors.
    """
    if isinstance(box, Fence) and width(box) > longest:
        return [Sign(box.left, "opening"), *_opened(box.inside, longest, seams), Sign(box.right, "closing")]
    if isinstance(box, Big) and width(box) > longest:
        return [Big(box.sign, box.low, box.high, Row(())), *_opened(box.body, longest, seams)]
    if isinstance(box, Row):
        return _in_row(box.items, longest, seams)
    if seams and isinstance(box, Script) and isinstance(box.base, Fence) and width(box) > longest:
        *inside, last = _opened(box.base, longest, seams)
        return [*inside, Script(last, box.sub, box.sup)]
    if seams and isinstance(box, Fraction) and width(box) > longest:
        return _apart(box, longest)
    return [box]


def _in_row(items: tuple[Box, ...], longest: float, seams: bool) -> list[Box]:
    found: list[Box] = []
    for n, item in enumerate(items):
        if seams and n and _is_seam(items[n - 1], item):
            found.append(SEAM)
        found += _opened(item, longest, seams)
    return found


def _is_seam(before: Box, after: Box) -> bool:
    """Whether two neighbours are factors: surely no function and its argument, no sign and its term."""
    if isinstance(before, Sign) and before.role in _BINDING:
        return False
    if isinstance(before, Big) and before.body == Row(()):  # its body follows
        return False
    if isinstance(after, Big):
        return True
    if isinstance(after, Fraction):
        return not isinstance(before, Space)
    return _is_fenced(after) and (isinstance(before, Fraction) or _is_fenced(before))


def _is_fenced(box: Box) -> bool:
    return isinstance(box, Fence) or (isinstance(box, Script) and isinstance(box.base, Fence))


def _apart(box: Fraction, longest: float) -> list[Box]:
    """a b/(c d) as a product of fractions, none wider than it must be; sums above the bar stand behind it."""
    above, below = _factors(box.over, longest), _factors(box.under, longest)
    loose = above.pop() if len(above) > 1 and _is_fenced(above[-1]) else None
    first, *rest = below
    found: list[Box] = [Fraction(_bare(row(*above)), _bare(first))]
    for factor in rest:
        found += [SEAM, Fraction(ONE, _bare(factor))]
    return found if loose is None else [*found, SEAM, *_opened(loose, longest, True)]


def _bare(box: Box) -> Box:
    """Without round fences, which a bar makes needless."""
    return box.inside if isinstance(box, Fence) and box.left == "(" else box


def _factors(box: Box, longest: float) -> list[Box]:
    """The factors of a product, put together again as long as they are short."""
    groups: list[list[Box]] = [[]]
    items = box.items if isinstance(box, Row) else (box,)
    if any(isinstance(item, Sign) and item.role in ("binary", "relation") and item.char != "⋅" for item in items):
        return [box]
    for n, item in enumerate(items):
        wide = sum(width(b) for b in (*groups[-1], item)) > longest
        if n and wide and (_is_seam(items[n - 1], item) or _is_fenced(item) and _is_number(groups[-1])):
            groups.append([])
        groups[-1].append(item)
    return [row(*group) for group in groups]


def _is_number(items: list[Box]) -> bool:
    return all(isinstance(item, Sign) and item.role == "number" for item in items)


def _filled(items: list[Box], widest: float) -> list[list[Box]]:
    """Lines filled greedily with terms; a term begins at a sign, a relation or a seam."""
    lines: list[list[Box]] = [[]]
    used = 0.0
    for term in _terms(items):
        size = sum(width(b) for b in term)
        if any(lines[-1]) and used + size > widest:
            lines.append([])
            used = 0.0
        if term[0] == SEAM:
            term = term[1:] if lines[-1] else [Sign(SEAM.char, "binary"), *term[1:]]
        lines[-1].extend(term)
        used += size
    return lines


def _terms(items: list[Box]) -> list[list[Box]]:
    terms: list[list[Box]] = [[]]
    for item in items:
        sign = isinstance(item, Sign) and item.role in ("binary", "relation") and item.char != "⋅"
        if (sign or item == SEAM) and terms[-1]:
            terms.append([])
        terms[-1].append(item)
    return terms
