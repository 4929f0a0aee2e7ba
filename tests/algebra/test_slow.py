"""Slow subspaces and the local similarity in words, against dense numerical matrices (numpy)."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
import scipy.linalg

from derive.algebra.paths import A, C, Paths, V, W, in_order, mirrored, word
from derive.algebra.similar import local_similarity
from derive.algebra.slow import log_of, measured_slow
from derive.exact.field import Field
from derive.formula.tree import letter
from derive.problem.setting import POSITIVE

FIELD = Field.of([letter("c")], {"c": POSITIVE})
COTH = FIELD.element(letter("c"))
RNG = np.random.default_rng(7)


def blocks(size: int, rank: int) -> dict[int, np.ndarray]:
    m = RNG.normal(size=(size, size)) + 1j * RNG.normal(size=(size, size))
    h = (m + m.conj().T) / np.linalg.norm(m + m.conj().T, 2)
    return {A: h[rank:, rank:], V: h[rank:, :rank], W: h[:rank, rank:], C: h[:rank, :rank]}


def number(element, c: float) -> float:
    def poly(p):
        return sum(int(v.p) / int(v.q) * c ** sum(map(int, m)) for m, v in p.terms())

    return poly(element.num) if element.den is None else poly(element.num) / poly(element.den)


def dense(paths: Paths, held: dict[int, np.ndarray], c: float) -> np.ndarray:
    total = None
    for w, coefficient in paths.terms.items():
        product = np.eye(held[A].shape[0]) if not w else held[w[0]]
        for x in w[1:]:
            product = product @ held[x]
        term = number(coefficient, c) * product
        total = term if total is None else total + term
    return total


def summed(series, held, c, x):
    return sum(x**k * dense(p, held, c) for k, p in enumerate(series) if p)


@pytest.mark.parametrize("kept", [0.0, 0.5, 0.8])
def test_slow_generator_has_the_step_s_slow_eigenvalues(kept: float) -> None:
    """numpy's eigenvalues of (1 - (1-q)P) exp(xH) against exp of the truncated series; error O(x^7), measured."""
    held, rank, order = blocks(6, 2), 2, 6
    c = (1 + kept) / (1 - kept)
    generator = log_of(measured_slow(FIELD, COTH, order))
    h = np.block([[held[C], held[W]], [held[V], held[A]]])
    errors = []
    for x in (-0.04j / c, -0.02j / c):
        step = scipy.linalg.expm(x * h)
        step[:rank] *= kept
        slow = sorted(np.linalg.eigvals(step), key=abs)[rank:]
        ours = np.linalg.eigvals(scipy.linalg.expm(summed(generator, held, c, x)))
        errors.append(max(min(abs(a - b) for b in ours) for a in slow))
    assert errors[0] < 1e-7
    assert errors[1] < max(errors[0] / 90, 3e-15)


def test_similarity_of_the_generator_with_itself_is_the_identity() -> None:
    g = log_of(measured_slow(FIELD, COTH, 5))
    same = local_similarity(g, g)
    assert same.parts is None
    assert all(not p for p in same.l[1:])


def test_similarity_finds_a_map_that_was_put_in() -> None:
    """G = M S M^-1 with a known local M = 1 + x^2 (VW/3 - 2 A V W): order by order M comes back."""
    m2 = Paths(FIELD, {(V, W): FIELD.rational(Fraction(1, 3))})
    s = log_of(measured_slow(FIELD, COTH, 4))
    g = list(s)
    g[3] = g[3] + m2 * word(FIELD, A) - word(FIELD, A) * m2
    found = local_similarity(g[:4], s[:4])
    assert found.l[1].terms == {}
    assert not found.l[2] - m2


def test_a_changed_level_is_seen_as_a_gap() -> None:
    """A term that is no commutator moves levels and stops the map there."""
    s = log_of(measured_slow(FIELD, COTH, 4))
    g = list(s)
    g[3] = g[3] + Paths(FIELD, {(V, W, A): FIELD.rational(Fraction(1, 7))})
    found = local_similarity(g, s)
    assert found.parts == 3
    assert found.gap.terms.keys() == {(V, W, A)}


def test_mirror_and_order() -> None:
    w = Paths(FIELD, {(A, V, C, W): FIELD.one})
    assert mirrored(w).terms.keys() == {(V, C, W, A)}
    loops = Paths(FIELD, {(V, W, V, C, W): FIELD.one})
    assert in_order(loops).terms.keys() == in_order(Paths(FIELD, {(V, C, W, V, W): FIELD.one})).terms.keys()
