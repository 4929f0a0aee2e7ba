"""Words in A and B_0, B_1, ...: the graph-free form of the undetected step.

A = QHQ has degree 1, B_k = V C^k V† degree k + 2.  (H^m)_QQ is the sum, each once, of all words of degree m: a path
of m steps from Q to Q either stays in Q (A) or dips into the detector, stays there k steps, and comes back (B_k).
Derived here; confirmed against the measured step.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from math import factorial

from derive.algebra.series import truncated_log

A = -1  # the letter A; B_k is the letter k
Word = tuple[int, ...]


class Words:
    """A rational combination of words."""

    __slots__ = ("terms",)

    def __init__(self, terms: dict[Word, Fraction]):
        self.terms = terms

    def __add__(self, other: Words) -> Words:
        out = dict(self.terms)
        for word, c in other.terms.items():
            out[word] = out.get(word, Fraction(0)) + c
        return Words({w: c for w, c in out.items() if c})

    def __mul__(self, other: Words) -> Words:
        out: dict[Word, Fraction] = {}
        for w1, c1 in self.terms.items():
            for w2, c2 in other.terms.items():
                out[w1 + w2] = out.get(w1 + w2, Fraction(0)) + c1 * c2
        return Words(out)

    def scaled(self, q: Fraction) -> Words:
        return Words({w: c * q for w, c in self.terms.items()})


def words_of_degree(m: int) -> Iterator[Word]:
    """All words of degree m in A (degree 1) and B_k (degree k + 2)."""
    if m == 0:
        yield ()
    for letter in range(A, m - 1):
        for rest in words_of_degree(m - max(letter + 2, 1)):
            yield (letter, *rest)


def truncated_word_log(n: int) -> list[Words]:
    """L_1 ... L_n with log(1 + sum_m x^m/m! (H^m)_QQ) = sum_d x^d L_d + O(x^(n+1)), as words."""
    steps = [Words(dict.fromkeys(words_of_degree(m), Fraction(1, factorial(m)))) for m in range(1, n + 1)]
    return truncated_log(steps)
