"""A matrix by its distinct entries says the whole matrix: rebuilt from what is printed, against numpy."""

from __future__ import annotations

import numpy
import pytest

from derive.problem.setting import Domain
from derive.record.said import Expansion
from derive.report.boxes import Sign
from derive.report.context import Context
from derive.report.emit_latex import latex
from derive.report.matrices import LINES, PLACES, Distinct, distinct, entries_of

from .sample import G1, G2, POSITIVE, REAL, free_part, matrix, setting

DOMAINS = {"g": POSITIVE, "Delta": REAL, "phi": REAL, "w": Domain("complex", "complex"), "tau": POSITIVE}
VALUES = {"g": 1.3, "Delta": 0.7, "phi": 0.4, "w": 0.2 + 0.9j, "i": 1j}
CHIRAL = {(0, 1): "g*exp(i*phi)", (1, 0): "g*exp(-i*phi)", (1, 2): "w", (2, 1): "conj(w)", (0, 0): "Delta"}


def value(source: str) -> complex:
    names = {**VALUES, "exp": numpy.exp, "conj": numpy.conj}
    return complex(eval(source.replace("^", "**"), {}, names))  # our own strings only


def dense(entries: dict[tuple[int, int], str], size: int) -> numpy.ndarray:
    out = numpy.zeros((size, size), complex)
    for (x, y), source in entries.items():
        out[x, y] = value(source)
    return out


def rebuilt(found: Distinct, size: int) -> numpy.ndarray:
    """The matrix from its printed values, places and symmetry alone."""
    from derive.formula.text import text

    out = numpy.zeros((size, size), complex)
    sign = {"Hermitian": 1, "anti-Hermitian": -1}.get(found.symmetry)
    for v in found.values:
        for x, y in v.places:
            out[x, y] = value(text(v.formula))
            if sign is not None and x != y:
                out[y, x] = sign * numpy.conj(out[x, y])
    return out


@pytest.mark.parametrize(
    "entries, symmetry",
    [(G1, "anti-Hermitian"), (G2, "Hermitian"), (CHIRAL, "Hermitian"), ({(0, 1): "g"}, ""),
     ({(0, 1): "g", (1, 0): "-g"}, "anti-Hermitian"), ({(0, 1): "i*g", (1, 0): "i*g"}, "anti-Hermitian")],
    ids=["G1", "G2", "phases", "one-sided", "real-anti", "imaginary"],
)
def test_printed_entries_give_the_matrix_back(entries: dict[tuple[int, int], str], symmetry: str) -> None:
    found = distinct(entries_of(matrix(entries)), DOMAINS)
    assert found.symmetry == symmetry
    assert all(v.count <= PLACES for v in found.values)
    assert numpy.allclose(rebuilt(found, 9), dense(entries, 9))


def test_one_wrong_entry_and_everything_is_printed() -> None:
    """A matrix that is only nearly Hermitian must not be printed by half."""
    spoilt = {**CHIRAL, (1, 0): "g*exp(i*phi)"}
    found = distinct(entries_of(matrix(spoilt)), DOMAINS)
    assert found.symmetry == ""
    assert numpy.allclose(rebuilt(found, 9), dense(spoilt, 9))


def test_a_series_becomes_one_matrix() -> None:
    series = Expansion("tau", (0, 1, 2), (free_part(), matrix(G1), matrix(G2)), 3)
    entries = entries_of(series)
    assert set(entries) == set(G1) | set(G2) | set(entries_of(free_part()))


def test_a_list_that_is_cut_says_nothing_of_the_rest() -> None:
    context = Context(setting())
    hopping = free_part()
    chain = context.matrix(hopping, Sign("M"))
    assert context.remark(hopping, chain) == "Hermitian; every entry not named is 0"
    assert context.remark(hopping, chain, cut=True) == "Hermitian"
    many = matrix({(x, x): f"{x + 1}*i*g" for x in range(LINES + 1)} | {(0, 1): "g"}, 300)
    same = matrix({(x, x): "g" for x in range(PLACES + 1)}, 300)
    for large in (many, same):
        said = context.remark(large, context.matrix(large, Sign("M")))
        assert "is 0" not in said and "the ledger names every entry" in said


def test_small_matrices_are_printed_as_matrices() -> None:
    small = matrix({(0, 1): "g", (1, 0): "g"}, 2)
    shown = latex(Context(setting()).matrix(small, Sign("M")))
    assert shown == r"\begin{aligned} M &= \begin{bmatrix} 0 & g \\ g & 0 \end{bmatrix} \end{aligned}"


def test_zero_matrix() -> None:
    assert latex(Context(setting()).matrix(matrix({}), Sign("M"))) == r"\begin{aligned} M &= 0 \end{aligned}"
