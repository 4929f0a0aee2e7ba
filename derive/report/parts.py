"""Named parts of a formula too long for any line break: f = ... X_1 ..., X_1 = ....

A sum that occurs more than once gets a name first, then the largest one that fits on a line of its own.  Closed parts,
in which no letter bound outside occurs, are named first; where none is left, an open one becomes a function of the
letters bound outside: X_2(q).  The value never changes.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from derive.formula.tree import Formula, bound_letter, call, children, free_letters, letter, rebuild, walk
from derive.report.arrange import arrange, is_operator

SMALLEST = 7  # nodes of a part that deserves a name
MOST = 24  # parts of one formula
MOST_ARGUMENTS = 2  # of an open part
_NAMEABLE = ("plus", "times", "sum", "integral", "call", "power", "rootsum")
_STEMS = ("X", "Y", "Z", "W")

Fits = Callable[[Formula], bool]


@dataclass(frozen=True, slots=True)
class Spread:
    """The formula with letters for its parts, and what the letters stand for, in order of first use."""

    formula: Formula
    parts: tuple[tuple[str, Formula], ...] = ()
    arguments: tuple[tuple[str, tuple[str, ...]], ...] = ()

    def left(self, name: str) -> Formula:
        """A part as it is written: X_1, or X_2(q) where letters bound outside occur in it."""
        return _named(name, dict(self.arguments)[name])


def _named(name: str, arguments: tuple[str, ...]) -> Formula:
    return call(name, *map(letter, arguments)) if arguments else letter(name)


def spread(f: Formula, fits: Fits, taken: set[str]) -> Spread:
    """f in pieces that fit, as far as naming parts can bring that about."""
    f = arrange(f)
    if fits(f):
        return Spread(f)
    stem = next((s for s in _STEMS if s not in taken), "X")
    pieces: list[tuple[str, Formula]] = [("", f)]
    bound = sorted({b for node in walk(f) if (b := bound_letter(node)) is not None})
    arguments: dict[str, tuple[str, ...]] = {"": ()}
    while len(pieces) <= MOST:
        formulas = [piece for _, piece in pieces]
        chosen = (_choose(piece, formulas, fits) for piece in formulas if not fits(piece))
        part = next((p for p in chosen if p is not None), None)
        if part is None:
            break
        name = f"{stem}_{len(pieces)}"
        arguments[name] = tuple(b for b in bound if b in free_letters(part))
        named = _named(name, arguments[name])
        pieces = [(n, arrange(_without(piece, part, named))) for n, piece in pieces] + [(name, part)]
    return _in_order(pieces, arguments)


def _choose(long: Formula, pieces: list[Formula], fits: Fits) -> Formula | None:
    """The next part to be named: in `long`, not all of it; closed if any is, and sums before anything else."""
    term = _culprit(long, fits)
    for parts in (closed_parts, open_parts):
        found = list(dict.fromkeys(p for p in parts(term) if p != long and _weight(p) >= SMALLEST))
        sums = [p for p in found if p.head != "times" and p.head != "power" and p.head != "call"]
        for candidates in (sums, found):
            repeated = [p for p in candidates if sum(_count(piece, p) for piece in pieces) > 1]
            fitting = [p for p in candidates if fits(p)]
            if candidates:
                return max(repeated or fitting or candidates, key=_weight)
    return None


def _culprit(f: Formula, fits: Fits) -> Formula:
    """The term of a sum that does not fit; a sum of terms that do can be broken."""
    terms = f.args if f.head == "plus" else ()
    return next((t for t in terms if not fits(t)), f)


def _weight(f: Formula) -> int:
    return sum(1 for _ in walk(f))


def _count(f: Formula, part: Formula) -> int:
    return sum(1 for node in walk(f) if node == part)


def closed_parts(f: Formula, bound: frozenset[str] = frozenset()) -> Iterator[Formula]:
    """Parts of f in which no letter occurs that is bound outside of them, and no operator."""
    inner = bound_letter(f)
    if f.head in _NAMEABLE and not free_letters(f) & bound and not is_operator(f):
        yield f
    for child in children(f):
        yield from closed_parts(child, bound | {inner} if inner else bound)


def open_parts(f: Formula, bound: frozenset[str] = frozenset()) -> Iterator[Formula]:
    """Parts of f in which letters occur that are bound outside of them, MOST_ARGUMENTS at most, and no operator."""
    inner = bound_letter(f)
    if f.head in _NAMEABLE and 0 < len(free_letters(f) & bound) <= MOST_ARGUMENTS and not is_operator(f):
        yield f
    for child in children(f):
        yield from open_parts(child, bound | {inner} if inner else bound)


def _without(f: Formula, part: Formula, name: Formula) -> Formula:
    if f == part:
        return name
    if not children(f):
        return f
    return rebuild(f, tuple(_without(a, part, name) if isinstance(a, Formula) else a for a in f.args))


def _in_order(pieces: list[tuple[str, Formula]], arguments: dict[str, tuple[str, ...]]) -> Spread:
    """Parts renumbered as they are first used, reading from the top."""
    known = dict(pieces)
    order: list[str] = []
    queue = [""]
    while queue:
        for node in walk(known[queue.pop(0)]):
            name = node.args[0] if node.head in ("letter", "call") else None
            if name in known and name and name not in order:
                order.append(name)
                queue.append(name)
    new = {old: f"{old.partition('_')[0]}_{n}" for n, old in enumerate(order, start=1)}
    parts = tuple((new[o], _renamed(known[o], new)) for o in order)
    return Spread(_renamed(known[""], new), parts, tuple((new[o], arguments[o]) for o in order))


def _renamed(f: Formula, new: dict[str, str]) -> Formula:
    if f.head == "letter":
        return letter(new.get(f.args[0], f.args[0]))
    if not children(f):
        return f
    args = tuple(_renamed(a, new) if isinstance(a, Formula) else a for a in f.args)
    name = new.get(f.args[0]) if f.head == "call" else None
    return rebuild(f, args) if name is None else call(name, *args[1:])
