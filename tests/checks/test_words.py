"""Universal words on fixed matrices: the derived-by-hand words agree, and every coefficient changed is seen."""

from __future__ import annotations

from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from flint import ctx

from derive.checks.generator.words import CASES, Blocks, case_system, check_words, word_matrix
from derive.formula.tree import I_UNIT, Formula, letter, number, operator, plus, power, times
from derive.problem.setting import Check
from derive.record.said import Claim, Finding, Matrix

# Coefficients of x^d in log(1 + sum_m x^m (H^m)_QQ/m!), x = -i tau, as words; "A0A" is A B_0 A.  Written by hand
# from the expansion to degree 5, confirmed independently there by the exact road's own enumeration.
WORDS: dict[int, dict[str, Fraction]] = {
    1: {"A": Fraction(1)},
    2: {"0": Fraction(1, 2)},
    3: {"1": Fraction(1, 6), "A0": Fraction(-1, 12), "0A": Fraction(-1, 12)},
    4: {
        "2": Fraction(1, 24), "A1": Fraction(-1, 24), "1A": Fraction(-1, 24), "A0A": Fraction(1, 24),
        "00": Fraction(-1, 12),
    },
    5: {
        "3": Fraction(1, 120), "A2": Fraction(-1, 80), "2A": Fraction(-1, 80), "A1A": Fraction(1, 45),
        "AAA0": Fraction(1, 720), "0AAA": Fraction(1, 720), "AA0A": Fraction(-1, 180), "A0AA": Fraction(-1, 180),
        "AA1": Fraction(1, 720), "1AA": Fraction(1, 720), "A00": Fraction(7, 240), "00A": Fraction(7, 240),
        "0A0": Fraction(1, 120), "01": Fraction(-1, 30), "10": Fraction(-1, 30),
    },
}  # fmt: skip


def spelled(word: str) -> Formula:
    return times(*(operator("A") if c == "A" else operator("B", int(c)) for c in word))


def generator_word(degree: int, coefficients: dict[str, Fraction]) -> Formula:
    """G_(d-1) = (-i)^(d-1) L_d."""
    turn = power(-I_UNIT, number(degree - 1)) if degree > 1 else number(1)
    return plus(*(times(number(c), turn, spelled(w)) for w, c in coefficients.items()))


def finding(value: Formula | Matrix, k: int, digits: int = 30) -> Finding:
    claim = Claim(f"generator.universal.{k}", "generator", None, value)
    return check_words((claim,), Check(digits=digits))[claim.id]


@pytest.mark.parametrize("degree", WORDS)
def test_right_words_agree(degree: int) -> None:
    found = finding(generator_word(degree, WORDS[degree]), degree - 1)
    assert found.verdict == "agrees"
    assert found.digits is not None
    assert found.digits >= 30
    assert found.points == 2


CHANGES = [(d, w, how) for d, words in WORDS.items() for w in words for how in ("sign", "double", "dropped")]


@pytest.mark.parametrize(("degree", "word", "how"), CHANGES)
def test_every_changed_coefficient_is_refuted(degree: int, word: str, how: str) -> None:
    changed = dict(WORDS[degree])
    changed[word] *= {"sign": -1, "double": 2, "dropped": 0}[how]
    found = finding(generator_word(degree, changed), degree - 1)
    assert found.verdict == "refuted"
    assert "claimed" in found.evidence


def test_other_planted_errors() -> None:
    """i -> -i, V^T for V†, a word read backwards, the wrong order, a moment shifted."""
    right = generator_word(4, WORDS[4])
    assert finding(times(number(-1), right), 3).verdict == "refuted"
    assert finding(right, 2).verdict == "refuted"
    V, Vd = operator("V"), operator("V", None, True)
    assert finding(times(number(Fraction(-1, 2)), I_UNIT, V, Vd), 1).verdict == "agrees"
    assert finding(times(number(Fraction(-1, 2)), I_UNIT, V, V), 1).verdict == "refuted"
    lopsided = dict(WORDS[3])
    lopsided["A0"], lopsided["0A"] = Fraction(-1, 6), Fraction(0)
    assert finding(generator_word(3, lopsided), 2).verdict == "refuted"

    def with_moment(m: int) -> Formula:
        rest = {w: c for w, c in WORDS[4].items() if w != "00"}
        inner = times(number(Fraction(-1, 12)), I_UNIT, V, operator("mu", m), Vd)
        return plus(generator_word(4, rest), inner)

    assert finding(with_moment(0), 3).verdict == "agrees"
    assert finding(with_moment(1), 3).verdict == "refuted"


def test_powers_and_brackets_are_read_in_order() -> None:
    """(A B_0 + B_0 A)/12 and A^2 B_0: factors do not commute."""
    A, B = operator("A"), operator("B", 0)
    bracket = times(number(Fraction(1, 12)), plus(A * B, B * A))
    value = plus(bracket, times(number(Fraction(-1, 6)), operator("B", 1)))
    assert finding(value, 2).verdict == "agrees"
    with ctx.workprec(100):
        blocks = Blocks(case_system(CASES[0]))
        left, right = word_matrix(power(A, number(2)) * B, blocks), word_matrix(B * power(A, number(2)), blocks)
        assert left.overlaps(blocks.A * blocks.A * word_matrix(B, blocks))
        assert not left.overlaps(right)


def test_words_are_independent_in_the_cases() -> None:
    """All 2^(d-1) words of degree d <= 5, as vectors of matrix elements: full rank (numpy), so no error hides."""
    for degree in range(1, 6):
        columns = []
        for word in all_words(degree):
            column: list[complex] = []
            for case in CASES:
                with ctx.workprec(100):
                    entries = word_matrix(spelled(word), Blocks(case_system(case))).entries()
                column += [complex(float(e.real.mid()), float(e.imag.mid())) for e in entries]
            columns.append(np.array(column) / np.linalg.norm(column))
        assert len(columns) == 2 ** (degree - 1)
        assert np.linalg.svd(np.array(columns), compute_uv=False).min() > 1e-4


def all_words(degree: int) -> list[str]:
    """Words in A (degree 1) and B_k (degree k + 2)."""
    weight = {"A": 1, **{str(k): k + 2 for k in range(degree - 1)}}
    spellings = (w for n in range(1, degree + 1) for w in product(weight, repeat=n))
    return ["".join(w) for w in spellings if sum(weight[c] for c in w) == degree]


def test_cases_are_hermitian_and_their_detectors_orthonormal() -> None:
    for case in CASES:
        with ctx.workprec(100):
            s = case_system(case)
            for x, row in enumerate(s.rows):
                assert all(s.rows[y][x][1].overlaps(f.conjugate()) for y, f in row)
            for v in s.detector:
                for w in s.detector:
                    overlap = sum((a.conjugate() * dict(w)[x] for x, a in v if x in dict(w)), start=0)
                    assert overlap.contains(1 if v is w else 0)


def test_what_is_no_word_is_untested() -> None:
    assert finding(Matrix(3), 1).verdict == "untested"
    assert finding(operator("Z"), 0).verdict == "untested"
    assert finding(power(operator("A"), letter("k")), 0).verdict == "untested"
    assert finding(letter("g"), 0).verdict == "untested"
