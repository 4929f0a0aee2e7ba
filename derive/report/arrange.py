"""The order in which a person writes a formula: same value, other arrangement.

Products: number, i and constants, letters, tau, roots and exponentials, sums in parentheses, functions, large
operators; letters that do not commute stay in their order, and so does everything behind the first of them.
Sums: ascending in tau, O(...) last, a positive term first where the order is free, common factors in front.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import gcd, lcm

from derive.formula.tree import (
    ONE,
    ZERO,
    Formula,
    children,
    free_letters,
    number,
    plus,
    power,
    rebuild,
    times,
)

_LARGE = ("sum", "integral", "rootsum")
_TIGHT_CALLS = ("conj", "abs", "factorial", "sqrt")


@lru_cache(maxsize=20_000)
def arrange(f: Formula) -> Formula:
    """f as a person would write it.  The value never changes; only order and common factors do."""
    if not children(f):
        return f
    args = tuple(arrange(a) if isinstance(a, Formula) else a for a in f.args)
    f = rebuild(f, args)
    if f.head == "times":
        return ZERO if f.args[0] == ZERO else _product(f)
    return _sum(f) if f.head == "plus" else f


@lru_cache(maxsize=20_000)
def is_operator(f: Formula) -> bool:
    """Does a letter that does not commute stand in f?"""
    return f.head == "operator" or any(is_operator(a) for a in children(f))


def _product(f: Formula) -> Formula:
    """What stands in front of the first operator is sorted; behind it everything keeps its place."""
    first = next((n for n, a in enumerate(f.args) if is_operator(a)), len(f.args))
    return times(*sorted(f.args[:first], key=_rank), *f.args[first:])


def _rank(f: Formula) -> int:
    base = f.args[0] if f.head == "power" else f
    if base.head == "number":
        return 0 if f is base else 2
    if base.head == "constant":
        return 1
    if base.head == "letter":
        return 4 if base.args[0] == "tau" else 3
    if base.head == "call":
        return _call_rank(base)
    if base.head == "times":
        return 3 if is_plain(base) else 7
    return {"plus": 7}.get(base.head, 10 if base.head in _LARGE else 5)


def is_plain(f: Formula) -> bool:
    """A product of numbers, constants, letters and their powers."""
    parts = (a.args[0] if a.head == "power" else a for a in f.args)
    return all(a.head in ("number", "constant", "letter") for a in parts)


def _call_rank(f: Formula) -> int:
    name = f.args[0]
    if name in _TIGHT_CALLS:
        return 2 if name == "sqrt" and f.args[1].head == "number" else 3
    return 9 if name == "exp" else 8


def _sum(f: Formula) -> Formula:
    tails = [a for a in f.args if a.head == "order"]
    terms = [a for a in f.args if a.head != "order" and a != ZERO]
    if not terms:
        return plus(*tails) if tails else ZERO
    if any(is_operator(a) for a in terms):
        return plus(*terms, *tails)
    groups = [sorted(g, key=ends_large) for g in _by_degree(terms)]
    if not free_letters(f):  # a number: 1 + sqrt(5)
        groups = [sorted(groups[0], key=lambda t: t.head != "number")]
    if len(groups) == 1 and not tails:
        return factored(_positive_first(groups[0]))
    return plus(*(factored(_positive_first(g)) for g in groups), *tails)


def ends_large(f: Formula) -> bool:
    """Does f end with a sum or an integral, whose body would swallow what follows?"""
    if f.head == "times":
        return any(a.head in _LARGE for a in f.args)
    return f.head in _LARGE


def _by_degree(terms: list[Formula]) -> list[list[Formula]]:
    """Terms grouped by their power of tau, ascending; one group where some term has no such power."""
    groups: dict[int, list[Formula]] = {}
    for term in terms:
        degree = tau_degree(term)
        if degree is None:
            return [terms]
        groups.setdefault(degree, []).append(term)
    return [groups[d] for d in sorted(groups)]


@lru_cache(maxsize=20_000)
def tau_degree(f: Formula) -> int | None:
    """The power of tau that f carries as a factor; None where tau stands anywhere else."""
    if f.head == "letter":
        return 1 if f.args[0] == "tau" else 0
    if f.head == "times":
        degrees = [tau_degree(a) for a in f.args]
        return None if None in degrees else sum(d for d in degrees if d is not None)
    if f.head == "power" and f.args[1].head == "number" and f.args[1].args[0].denominator == 1:
        inner = tau_degree(f.args[0])
        return None if inner is None else inner * int(f.args[1].args[0])
    return None if any(tau_degree(a) != 0 for a in children(f)) else 0


def coefficient(term: Formula) -> Fraction:
    """The rational in front of a term."""
    front = term.args[0] if term.head == "times" else term
    return front.args[0] if front.head == "number" else Fraction(1)


def _positive_first(terms: list[Formula]) -> list[Formula]:
    if not terms or coefficient(terms[0]) > 0:
        return terms
    lead = next((n for n, t in enumerate(terms) if coefficient(t) > 0), 0)
    return [terms[lead], *terms[:lead], *terms[lead + 1 :]]


@dataclass(frozen=True, slots=True)
class _Monomial:
    """coefficient * product of base^integer * rest."""

    front: Fraction
    powers: tuple[tuple[Formula, int], ...]
    rest: tuple[Formula, ...]


def factored(terms: list[Formula]) -> Formula:
    """The sum of the terms with what they have in common in front."""
    if len(terms) < 2:
        return plus(*terms)
    parts = [_monomial(t) for t in terms]
    shared = _shared_powers(parts)
    content = _content([p.front for p in parts], bool(shared))
    if content == 1 and not shared:
        return plus(*terms)
    inside = plus(*(_divided(p, content, shared) for p in parts))
    return _product(times(number(content), *(_raised(b, e) for b, e in shared.items()), inside))


def _monomial(term: Formula) -> _Monomial:
    powers: dict[Formula, int] = {}
    rest = []
    for a in term.args if term.head == "times" else (term,):
        if a.head == "number":
            continue
        base, exponent = _split(a)
        if exponent is None:
            rest.append(a)
        else:
            powers[base] = powers.get(base, 0) + exponent
    return _Monomial(coefficient(term), tuple(powers.items()), tuple(rest))


def _split(f: Formula) -> tuple[Formula, int | None]:
    """(letter or constant, integer exponent), or (f, None)."""
    base, exponent = (f.args[0], f.args[1]) if f.head == "power" else (f, ONE)
    whole = exponent.head == "number" and exponent.args[0].denominator == 1
    if whole and base.head in ("letter", "constant"):
        return base, int(exponent.args[0])
    return f, None


def _shared_powers(parts: list[_Monomial]) -> dict[Formula, int]:
    """Bases that stand in every term, with the exponent nearest to 0 (i counts only if to the same power)."""
    tables = [dict(p.powers) for p in parts]
    shared: dict[Formula, int] = {}
    for base in tables[0]:
        found = [t.get(base, 0) for t in tables]
        if all(e > 0 for e in found):
            shared[base] = min(found)
        elif all(e < 0 for e in found):
            shared[base] = max(found)
    return shared


def _content(fronts: Iterable[Fraction], with_letters: bool) -> Fraction:
    """The rational to take out.  Without common letters only a whole number or one common value is worth it."""
    fronts = list(fronts)
    over = gcd(*(f.numerator for f in fronts))
    under = lcm(*(f.denominator for f in fronts))
    sign = -1 if all(f < 0 for f in fronts) else 1
    content = Fraction(sign * over, under)
    if not with_letters and abs(content) == 1:
        return Fraction(1)  # -x - y reads better than -(x + y)
    alike = all(abs(f) == abs(fronts[0]) for f in fronts)
    return content if with_letters or alike or content.denominator == 1 else Fraction(1)


def _divided(part: _Monomial, content: Fraction, shared: dict[Formula, int]) -> Formula:
    left = [_raised(b, e - shared.get(b, 0)) for b, e in part.powers]
    return times(number(part.front / content), *left, *part.rest)


def _raised(base: Formula, exponent: int) -> Formula:
    if exponent == 0:
        return ONE
    return base if exponent == 1 else power(base, number(exponent))
