"""Road `exact` for the graph-free words: re-exponentiated in the free algebra of A, B_0, B_1, ...

(H^m)_QQ is enumerated here anew, as paths over the two sides of the cut: off the detector a step is A or goes in,
on it a step is C or comes out; one visit of k + 2 steps is B_k.  exp(sum_d x^d L_d) = 1 + sum_m x^m (H^m)_QQ/m! is
then solved for L_1, L_2, ... degree by degree, and the claimed words G_k = (-i)^k L_(k+1) are compared term by term.
That paths are words at all is seen by the other road, on matrices.
"""

from __future__ import annotations

from fractions import Fraction
from math import factorial

from derive.formula.text import text
from derive.formula.tree import I_UNIT, Formula
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

Word = tuple[str, ...]
Gauss = tuple[Fraction, Fraction]
Combination = dict[Word, Gauss]
PREFIX = "generator.universal."


def check_words_exact(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """One finding for each universal claim; the graph plays no part."""
    found: dict[str, Finding] = {}
    solved: list[dict[Word, Fraction]] = []
    for claim in claims:
        if claim.id.startswith(PREFIX) and isinstance(claim.value, Formula):
            found[claim.id] = _compare(claim.value, int(claim.id.removeprefix(PREFIX)), solved)
    return found


def _compare(value: Formula, k: int, solved: list[dict[Word, Fraction]]) -> Finding:
    while len(solved) <= k:
        _solve_next(solved)
    claimed = _combination(value)
    wanted = {word: _rotated(c, k) for word, c in solved[k].items()}
    wrong = sorted(w for w in claimed.keys() | wanted.keys() if claimed.get(w, _NONE) != wanted.get(w, _NONE))
    if not wrong:
        return Finding("proved", "exact", evidence="re-exponentiated in the free algebra, the residual is exactly zero")
    word = wrong[0]
    has, due = _shown(claimed.get(word, _NONE)), _shown(wanted.get(word, _NONE))
    evidence = f"the word {' '.join(word)} has {has}, not {due}"
    return Finding("refuted", "exact", evidence=evidence)


_NONE: Gauss = (Fraction(0), Fraction(0))


def _shown(c: Gauss) -> str:
    re, im = c
    return str(re) if not im else f"{im}*i" if not re else f"{re} + {im}*i"


def _rotated(c: Fraction, k: int) -> Gauss:
    """(-i)^k c."""
    return ((c, Fraction(0)), (Fraction(0), -c), (-c, Fraction(0)), (Fraction(0), c))[k % 4]


def _paths(m: int, inside: int | None = None) -> list[Word]:
    """Words of the paths with m steps left; `inside` counts the steps spent on the detector so far."""
    if inside is None:
        if m == 0:
            return [()]
        stay = [("A", *rest) for rest in _paths(m - 1)]
        return stay + _paths(m - 1, 0)
    if m == 0:
        return []  # a path that ends on the detector is none of (H^m)_QQ
    out = [(f"B_{inside}", *rest) for rest in _paths(m - 1)]
    return out + _paths(m - 1, inside + 1)


def _solve_next(solved: list[dict[Word, Fraction]]) -> None:
    """L_m = (H^m)_QQ/m! - sum over products of two and more lower ones of total degree m, over p!."""
    m = len(solved) + 1
    found = dict.fromkeys(_paths(m), Fraction(1, factorial(m)))
    powers = dict(enumerate(solved, start=1))
    for p in range(2, m + 1):
        powers = {d: _convolved(solved, powers, d) for d in range(p, m + 1)}
        for word, c in powers[m].items():
            found[word] = found.get(word, Fraction(0)) - c / factorial(p)
    solved.append({word: c for word, c in found.items() if c})


def _convolved(
    solved: list[dict[Word, Fraction]], powers: dict[int, dict[Word, Fraction]], d: int
) -> dict[Word, Fraction]:
    out: dict[Word, Fraction] = {}
    for e in range(1, min(len(solved), d) + 1):
        for w1, c1 in solved[e - 1].items():
            for w2, c2 in powers.get(d - e, {}).items():
                out[w1 + w2] = out.get(w1 + w2, Fraction(0)) + c1 * c2
    return out


def _combination(f: Formula) -> Combination:
    """A formula over A and B_k with Gaussian rational coefficients, expanded."""
    if f.head == "plus":
        out: Combination = {}
        for a in f.args:
            for word, (re, im) in _combination(a).items():
                r0, i0 = out.get(word, _NONE)
                out[word] = (r0 + re, i0 + im)
        return {w: c for w, c in out.items() if c != _NONE}
    if f.head == "times":
        product: Combination = {(): (Fraction(1), Fraction(0))}
        for a in f.args:
            product = _times(product, _combination(a))
        return product
    if f.head == "power" and f.args[1].head == "number":
        product = {(): (Fraction(1), Fraction(0))}
        for _ in range(int(f.args[1].args[0])):
            product = _times(product, _combination(f.args[0]))
        return product
    return _leaf(f)


def _leaf(f: Formula) -> Combination:
    if f.head == "number":
        return {(): (f.args[0], Fraction(0))}
    if f == I_UNIT:
        return {(): (Fraction(0), Fraction(1))}
    if f.head == "operator":
        return {(text(f),): (Fraction(1), Fraction(0))}
    raise ValueError(f"{text(f)} is no word in A and B_k")


def _times(a: Combination, b: Combination) -> Combination:
    out: Combination = {}
    for w1, (r1, i1) in a.items():
        for w2, (r2, i2) in b.items():
            r0, i0 = out.get(w1 + w2, _NONE)
            out[w1 + w2] = (r0 + r1 * r2 - i1 * i2, i0 + r1 * i2 + i1 * r2)
    return {w: c for w, c in out.items() if c != _NONE}
