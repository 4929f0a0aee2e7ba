"""A local similarity between two generators that agree far from the detector.

Wanted: L = 1 + sum_k x^k L_k with G L = L S, where x G = x A + ..., x S = x A + ... as words, and every word of L_k
touches the detector.  At order k + 1 it reads

    [A, L_k] = D_k,      D_k = sum_{m>=2} (L_(k+1-m) S_m - G_m L_(k+1-m)),

and with L_k = sum_ij l_ij A^i w A^j for each core w (which begins with V and ends with W) the commutator multiplies
sum_ij l_ij u^i v^j by (u - v).  So there is one solution, and only if the coefficients of w with i + j fixed add up
to zero.  The first order where they do not is where the levels of G and S part.  Derived here.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from dataclasses import dataclass

from derive.algebra.paths import A, Paths, V, W, Word, word
from derive.algebra.slow import Series
from derive.exact.field import Element


@dataclass(frozen=True)
class Similarity:
    """L_0 ... L_(parts - 2); S - G, made similar, first differs at order `parts - 1` of G by `gap` (in words)."""

    l: Series  # noqa: E741 - the map's own letter
    parts: int | None
    gap: Paths


def local_similarity(
    g: Series, s: Series, tidy: Callable[[Paths], Paths] = lambda paths: paths
) -> Similarity:
    """L as far as it exists; g[k], s[k] are the coefficients of x^k in x G, x S (g[1] = s[1] = A).

    `parts` is the power of x in x G at which levels part, None where they agree as far as the series go.
    """
    field = g[1].field
    found = [word(field)]
    for k in range(1, len(g) - 1):
        d = Paths(field)
        for m in range(2, k + 2):
            d = d + found[k + 1 - m] * s[m] - g[m] * found[k + 1 - m]
        solved, gap = _commutator_solved(tidy(d))
        if gap:
            return Similarity(found, k + 1, gap)
        found.append(solved)
    return Similarity(found, None, Paths(field))


def _commutator_solved(d: Paths) -> tuple[Paths, Paths]:
    """(L, gap): [A, L] = d where gap is empty; gap holds the sums that had to vanish, as the words core A^n."""
    cores: dict[tuple[Word, int], dict[int, Element]] = defaultdict(dict)
    for w, c in d.terms.items():
        i, core, j = _around(w)
        cores[core, i + j][i] = c
    solved: dict[Word, Element] = {}
    gap: dict[Word, Element] = {}
    for (core, total), held in cores.items():
        carried = d.field.zero
        for i in range(total, 0, -1):  # d(u, v) divided by (u - v), highest power of u first
            carried = carried + held.get(i, d.field.zero)
            if carried:
                solved[(A,) * (i - 1) + core + (A,) * (total - i)] = carried
        left = carried + held.get(0, d.field.zero)
        if left:
            gap[core + (A,) * total] = left
    return Paths(d.field, solved), Paths(d.field, gap)


def _around(w: Word) -> tuple[int, Word, int]:
    """w = A^i core A^j; a word that never leaves range(Q) has an empty core."""
    if V not in w:
        return len(w), (), 0
    i = w.index(V)
    j = w[::-1].index(W)
    return i, w[i : len(w) - j], j
