"""Small changes of a formula: what a slip of the pen could have made of the right one, undone.

Two kinds.  `affine_places` are the parts on which a formula depends linearly (terms, factors, factors inside the body
of a sum): what number belongs there can be solved for.  `edits` are changes of anything else: indices, functions,
arguments, powers, conjugates, one place or every place.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import partial

from derive.errors import FormulaFault
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    ONE,
    ZERO,
    Formula,
    bound_letter,
    call,
    free_letters,
    letter,
    negate,
    number,
    power,
    rebuild,
    replace,
    times,
    walk,
)
from derive.problem.setting import Domain

MOST_PLACES = 400
CONTEXT = 50  # characters
Put = Callable[[Formula], Formula]


@dataclass(frozen=True, slots=True)
class Place:
    """A part of a formula, how to put another there, and whether the formula is linear in it."""

    node: Formula
    put: Put
    affine: bool
    top: bool = False
    around: Formula | None = None  # the part that this one is an argument of
    index: int = 0


@dataclass(frozen=True, slots=True)
class Edit:
    """A changed formula and the change in words."""

    formula: Formula
    words: str


SWAPS = {
    "sin": ("cos", "tan", "sinh"), "cos": ("sin", "cot", "cosh"), "tan": ("cot", "sin", "tanh"), "cot": ("tan", "cos"),
    "sinh": ("cosh", "sin"), "cosh": ("sinh", "cos"), "tanh": ("coth", "tan"), "coth": ("tanh", "cot"),
    "bessel_J": ("bessel_I",), "bessel_I": ("bessel_J",), "asin": ("acos",), "acos": ("asin",),
    "Re": ("Im", "abs"), "Im": ("Re",), "exp": (), "log": (),
}
_SCALES = (Fraction(2), Fraction(1, 2), Fraction(-1), Fraction(3), Fraction(1, 3), Fraction(4), Fraction(1, 4))


def places(f: Formula) -> list[Place]:
    """Every part of f, outermost first, at most `MOST_PLACES`."""
    found = [Place(f, lambda new: new, True, True)]
    for place in found:  # grows while it is walked: breadth first
        if len(found) >= MOST_PLACES:
            break
        found.extend(_inner(place))
    return found[:MOST_PLACES]


def _inner(place: Place) -> Iterator[Place]:
    node = place.node
    for k, part in enumerate(node.args):
        if not isinstance(part, Formula):
            continue
        linear = node.head in ("plus", "times") or (node.head in ("sum", "integral") and k == 3)
        yield Place(part, _putter(place, k), place.affine and linear, False, node, k)


def _putter(place: Place, k: int) -> Put:
    args = place.node.args

    def put(new: Formula) -> Formula:
        return place.put(rebuild(place.node, (*args[:k], new, *args[k + 1 :])))

    return put


def edits(f: Formula, domains: Mapping[str, Domain]) -> Iterator[Edit]:
    """Changed formulas, the likelier slips first; each one once."""
    seen = {f}
    for make in (_conjugates, _everywhere, _one_place):
        for edit in make(f, domains):
            if edit.formula not in seen:
                seen.add(edit.formula)
                yield edit


def _conjugates(f: Formula, domains: Mapping[str, Domain]) -> Iterator[Edit]:
    yield Edit(call("conj", f), "the complex conjugate is right")


def _everywhere(f: Formula, domains: Mapping[str, Domain]) -> Iterator[Edit]:
    """One letter, number or function changed wherever it stands; two letters swapped."""
    names = sorted(free_letters(f))
    for name in names:
        if _is_whole(name, domains):
            for d in (1, -1):
                yield _told(replace(f, {name: letter(name) + number(d)}), letter(name), letter(name) + number(d), True)
    for k, a in enumerate(names):
        for b in names[k + 1 :]:
            swapped = replace(f, {a: letter(b), b: letter(a)})
            yield Edit(swapped, f"{a} and {b} are swapped")
    for node, count in Counter(walk(f)).items():
        if count < 2:
            continue
        if node.head == "number" and node.args[0].denominator == 1 and abs(node.args[0]) >= 2:
            for d in (1, -1):
                yield from _all_told(f, node, number(node.args[0] + d))
        if node.head == "call":
            for other in SWAPS.get(node.args[0], ()):
                yield from _all_told(f, node, Formula("call", (other, *node.args[1:])))


def _all_told(f: Formula, old: Formula, new: Formula) -> Iterator[Edit]:
    made = _made(lambda: _all(f, old, new))
    if made is not None:
        yield _told(made, old, new, True)


def _is_whole(name: str, domains: Mapping[str, Domain]) -> bool:
    """Letters that a quantity brings along as counters are whole too."""
    return domains[name].kind == "integer" if name in domains else name in ("k", "n")


def _all(f: Formula, old: Formula, new: Formula) -> Formula:
    """f with every occurrence of a part replaced."""
    if f == old:
        return new
    args = tuple(_all(a, old, new) if isinstance(a, Formula) else a for a in f.args)
    return f if args == f.args else rebuild(f, args)


def _one_place(f: Formula, domains: Mapping[str, Domain]) -> Iterator[Edit]:
    """Each part by itself."""
    counters = {bound_letter(n) for n in walk(f)}
    names = sorted({*free_letters(f), *domains})
    for place in places(f):
        for new in _variants(place.node, domains, counters, names):
            made = _made(partial(place.put, new))
            if made is not None:
                yield Edit(made, _in_context(place, new))


def _in_context(place: Place, new: Formula) -> str:
    """A number or a letter alone says little: what it stands in is shown with it, where that is short."""
    extra = _left_out(place.node, new)
    if extra is not None:
        return f"{short(extra)} is too much"
    around = place.around
    if around is not None and place.node.head in ("number", "letter") and len(text(around)) <= CONTEXT:
        changed = _made(lambda: rebuild(around, (*around.args[: place.index], new, *around.args[place.index + 1 :])))
        if changed is not None:
            return _words(around, changed, False)
    return _words(place.node, new, False)


def _left_out(node: Formula, new: Formula) -> Formula | None:
    """The one term of a sum that the new formula lacks."""
    if node.head != "plus":
        return None
    terms = (rebuild(node, (*node.args[:k], *node.args[k + 1 :])) for k in range(len(node.args)))
    return next((a for a, rest in zip(node.args, terms, strict=True) if rest == new), None)


def _made(make: Callable[[], Formula]) -> Formula | None:
    """A changed formula, unless the change divides by zero."""
    try:
        return make()
    except FormulaFault:
        return None


def _variants(
    node: Formula, domains: Mapping[str, Domain], counters: set[str | None], names: list[str]
) -> Iterator[Formula]:
    if node.head == "number":
        yield from _numbers(node.args[0])
    elif node.head == "letter":
        name = str(node.args[0])
        if _is_whole(name, domains) or name in counters:
            yield from (node + ONE, node - ONE)
        yield from (letter(other) for other in names if other != name)
        yield from (power(node, number(2)), power(node, number(3)), power(node, number(-1)), call("sqrt", node))
        yield from (times(number(s), node) for s in _SCALES)
    elif node.head == "power":
        yield from _powers(*node.args)
    elif node.head == "call":
        yield from _calls(node)
    elif node == I_UNIT:
        yield negate(node)
    if node.head in ("number", "times"):
        yield from (times(node, power(letter(x), number(m)) if m > 1 else letter(x)) for x in names for m in (1, 2))
    if node.head in ("times", "plus", "constant"):
        yield from (times(number(s), node) for s in _SCALES)
    if node.head == "plus":
        yield from (rebuild(node, (*node.args[:k], negate(a), *node.args[k + 1 :])) for k, a in enumerate(node.args))
        yield from (rebuild(node, (*node.args[:k], *node.args[k + 1 :])) for k in range(len(node.args)))
        yield from (node + ONE, node - ONE)
    if node.head == "times":
        yield from (rebuild(node, (*node.args[:k], *node.args[k + 1 :])) for k in range(len(node.args)))
        yield from (node + ONE, node - ONE)


def _numbers(q: Fraction) -> Iterator[Formula]:
    p, d = q.numerator, q.denominator
    found = [q + 1, q - 1, -q, 2 * q, q / 2, Fraction(p + 1, d), Fraction(p - 1, d), Fraction(p, d + 1)]
    found += [Fraction(p, d - 1)] if d > 1 else []
    found += [q * s for s in _SCALES] + [q + Fraction(1, 2), q - Fraction(1, 2), q + 2, q - 2]
    yield from (number(x) for x in dict.fromkeys(found))


def _powers(base: Formula, exponent: Formula) -> Iterator[Formula]:
    changed = (exponent + ONE, exponent - ONE, negate(exponent), times(number(2), exponent))
    yield base
    yield from (_power(base, e) for e in changed)


def _power(base: Formula, exponent: Formula) -> Formula:
    """base^exponent with a number for its exponent where it is one."""
    exponent = exponent if exponent.head == "plus" else exponent + ZERO
    if exponent.head == "plus" and all(a.head == "number" for a in exponent.args):
        total = sum((a.args[0] for a in exponent.args), Fraction(0))
        return ONE if total == 0 else base if total == 1 else power(base, number(total))
    return power(base, exponent)


def _calls(node: Formula) -> Iterator[Formula]:
    name, *args = node.args
    for other in SWAPS.get(name, ()):
        yield call(other, *args)
    if len(args) == 1:
        yield from (call(name, times(number(s), args[0])) for s in _SCALES)
        yield from (power(node, number(2)), call("conj", node))
        yield args[0]
    elif name in ("bessel_J", "bessel_I", "binomial"):
        yield from (call(name, args[0] + number(d), args[1]) for d in (1, -1))
        yield from (call(name, args[0], times(number(s), args[1])) for s in _SCALES)


def _told(f: Formula, old: Formula, new: Formula, everywhere: bool) -> Edit:
    return Edit(f, _words(old, new, everywhere))


def _words(old: Formula, new: Formula, everywhere: bool) -> str:
    return f"{short(old)} stands where {short(new)} belongs{' everywhere' if everywhere else ''}"


def collected(f: Formula) -> Formula:
    """A product with the whole powers of one base written as one; a sum without the terms that have become 0."""
    if f.head == "plus" and ZERO in f.args:
        return rebuild(f, tuple(a for a in f.args if a != ZERO))
    if f.head != "times":
        return f
    powers: dict[Formula, Fraction] = {}
    rest = []
    for a in f.args:
        base, e = a.args if a.head == "power" else (a, ONE)
        if base.head == "letter" and e.head == "number":
            powers[base] = powers.get(base, Fraction(0)) + e.args[0]
            rest += [base] if base not in rest else []
        else:
            rest.append(a)
    return times(*(_power(a, number(powers[a])) if a in powers else a for a in rest))


def short(f: Formula) -> str:
    said = text(f)
    return said if len(said) <= 90 else f"{said[:87]}..."
