"""The graph-free logarithm in words, and the detector-local form, against each other and against numbers."""

from __future__ import annotations

from fractions import Fraction
from itertools import product
from math import factorial

import pytest

from derive.algebra.local import Moments, truncated_local_log
from derive.algebra.series import truncated_log
from derive.algebra.words import A, truncated_word_log, words_of_degree
from derive.exact.field import Field

F = Fraction


def test_low_degrees_are_the_published_and_the_derived_ones() -> None:
    """First two terms: Phys. Rev. A 91, 062115 (2015), from memory; degrees 3 to 5 derived by hand for this test."""
    logs = [w.terms for w in truncated_word_log(5)]
    assert logs[0] == {(A,): F(1)}
    assert logs[1] == {(0,): F(1, 2)}
    assert logs[2] == {(1,): F(1, 6), (A, 0): F(-1, 12), (0, A): F(-1, 12)}
    assert logs[3] == {
        (2,): F(1, 24), (A, 1): F(-1, 24), (1, A): F(-1, 24), (A, 0, A): F(1, 24), (0, 0): F(-1, 12)
    }
    assert logs[4][(A, A, A, 0)] == F(1, 720) and logs[4][(A, 1, A)] == F(1, 45)
    assert logs[4][(0, A, 0)] == F(1, 120) and logs[4][(A, 0, 0)] == F(7, 240)


def test_number_of_words_doubles() -> None:
    assert [len(w.terms) for w in truncated_word_log(9)[1:]] == [1, 3, 5, 15, 29, 63, 125, 255]


@pytest.mark.parametrize("m", range(1, 7))
def test_words_are_the_paths(m: int) -> None:
    """Road: brute force.  Every string of on/off positions of length m + 1 that begins and ends off is one word."""
    brute = set()
    for middle in product((0, 1), repeat=m - 1):
        positions, word, inside = (0, *middle, 0), [], -1
        for here, there in zip(positions, positions[1:], strict=False):
            if here == there == 0:
                word.append(A)
            elif there == 1:
                inside += 1
            else:
                word.append(inside)
                inside = -1
        brute.add(tuple(word))
    assert set(words_of_degree(m)) == brute


class Number:
    """Commuting stand-in: floats under the same protocol."""

    def __init__(self, x: F):
        self.x = x

    def __add__(self, other: Number) -> Number:
        return Number(self.x + other.x)

    def __mul__(self, other: Number) -> Number:
        return Number(self.x * other.x)

    def scaled(self, q: F) -> Number:
        return Number(self.x * q)


def test_logarithm_of_numbers_is_the_textbook_series() -> None:
    """Outside: log(1/(1-x)) = sum x^d/d, and log(e^x) = x (textbook)."""
    geometric = truncated_log([Number(F(1)) for _ in range(8)])
    assert [t.x for t in geometric] == [F(1, d) for d in range(1, 9)]
    exponential = truncated_log([Number(F(1, factorial(d))) for d in range(1, 9)])
    assert [t.x for t in exponential] == [1] + [0] * 7


def test_local_form_for_numbers_is_the_scalar_logarithm() -> None:
    """Two levels coupled by mu_0 = g^2, C = Delta and A = 0: then Q U Q is one number with a known series.

    Outside oracle: the matrix exponential [[0, g], [g, Delta]] summed by hand in rationals.
    """
    g2, delta = F(2), F(3)
    field = Field.of([], {})
    zero = [[field.rational(0)]]
    mu = [[[field.rational(g2)]], *[zero] * 6]
    logs = truncated_local_log(Moments(field, [[field.rational(delta)]], mu), 6)
    returns = _off_diagonal_powers(g2, delta, 6)
    wanted = truncated_log([Number(c / factorial(d)) for d, c in enumerate(returns, start=1)])
    for found, number in zip(logs, wanted, strict=True):
        total = found.local.get((0, 0))
        value = F(0) if total is None else _fraction(total[0][0]) * g2
        assert value == number.x


def _off_diagonal_powers(g2: F, delta: F, n: int) -> list[F]:
    """(H^m)_00 for H = [[0, 1], [g2, delta]], m = 1 ... n (similar to the symmetric matrix)."""
    row, out = [F(1), F(0)], []
    for _ in range(n):
        row = [row[1] * g2, row[0] + row[1] * delta]
        out.append(row[0])
    return out


def _fraction(x: object) -> F:
    terms = list(x.num.terms())  # type: ignore[attr-defined]
    return F(int(terms[0][1].p), int(terms[0][1].q)) if terms else F(0)
