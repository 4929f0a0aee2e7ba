"""Words of single steps between the detector and the rest, over a field of coefficients.

Letters: A = QHQ, V = QHD, W = V†, C = D†HD, each of degree 1.  A word reads like an operator product: V C W is a dip
that stays one step.  Products of words that do not fit (V after C, say) never arise: every factor knows its ends.
The coefficients live in a field that may hold coth(kappa/2).  Derived here; the roads that check use matrices.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from math import factorial

from derive.exact.field import Element, Field

A, V, W, C = range(4)
Word = tuple[int, ...]
FROM_REST, FROM_DETECTOR = (A, V), (W, C)  # letters whose result lies in range(Q), on the detector


class Paths:
    """A combination of words; the empty word is the identity where it stands."""

    __slots__ = ("field", "terms")

    def __init__(self, field: Field, terms: dict[Word, Element] | None = None):
        self.field = field
        self.terms = terms or {}

    def __add__(self, other: Paths) -> Paths:
        out = dict(self.terms)
        for word, c in other.terms.items():
            total = out[word] + c if word in out else c
            if total:
                out[word] = total
            else:
                out.pop(word, None)
        return Paths(self.field, out)

    def __neg__(self) -> Paths:
        return Paths(self.field, {w: -c for w, c in self.terms.items()})

    def __sub__(self, other: Paths) -> Paths:
        return self + -other

    def __mul__(self, other: Paths) -> Paths:
        out: dict[Word, Element] = {}
        for w1, c1 in self.terms.items():
            for w2, c2 in other.terms.items():
                word, c = w1 + w2, c1 * c2
                out[word] = out[word] + c if word in out else c
        return Paths(self.field, {w: c for w, c in out.items() if c})

    def scaled(self, q: Fraction) -> Paths:
        return Paths(self.field, {w: c.scaled(q) for w, c in self.terms.items()}) if q else Paths(self.field)

    def times(self, factor: Element) -> Paths:
        """factor times self."""
        return Paths(self.field, {w: factor * c for w, c in self.terms.items()}) if factor else Paths(self.field)

    def __bool__(self) -> bool:
        return bool(self.terms)


def word(field: Field, *letters: int) -> Paths:
    """One word with coefficient 1; without letters the identity."""
    return Paths(field, {tuple(letters): field.one})


def steps(field: Field, m: int, left: tuple[int, int], right: tuple[int, int]) -> Paths:
    """The block of H^m/m! between two ends: `left` and `right` are the first and last letters allowed, m >= 1."""
    share = field.rational(Fraction(1, factorial(m)))
    return Paths(field, dict.fromkeys(_walks(m, left, right), share))


def _walks(m: int, first: tuple[int, int], last: tuple[int, int]) -> Iterator[Word]:
    for x in first:
        if m == 1:
            if x in last:
                yield (x,)
        else:
            follow = FROM_REST if x in (A, W) else FROM_DETECTOR
            for rest in _walks(m - 1, follow, last):
                yield (x, *rest)


TO_REST, TO_DETECTOR = (A, W), (V, C)  # last letters of words that act on range(Q), on the detector


def mirrored(paths: Paths) -> Paths:
    """Every word read backwards, V and W exchanged."""
    swap = {A: A, C: C, V: W, W: V}
    return Paths(paths.field, {tuple(swap[x] for x in reversed(w)): c for w, c in paths.terms.items()})


def in_order(paths: Paths) -> Paths:
    """For a detector of rank one: what happens between two stays in range(Q) is a number, and numbers commute.

    Between a word's first V and last W stand loops C and W A^m V; they are put in one order.
    """
    out = Paths(paths.field)
    for w, c in paths.terms.items():
        out = out + Paths(paths.field, {_loops_sorted(w): c})
    return out


def _loops_sorted(w: Word) -> Word:
    begin = w.index(V) + 1 if V in w else 0
    end = len(w) - w[::-1].index(W) - 1 if W in w else len(w)
    if begin >= end:
        return w
    order = sorted(loops(w[begin:end]), key=lambda p: (len(p), p))
    return w[:begin] + tuple(x for loop in order for x in loop) + w[end:]


def loops(inner: Word) -> Iterator[Word]:
    """The closed walks C and W A^m V that a walk on the detector is made of, in order."""
    at = 0
    while at < len(inner):
        stop = at + 1 if inner[at] == C else inner.index(V, at) + 1
        yield inner[at:stop]
        at = stop
