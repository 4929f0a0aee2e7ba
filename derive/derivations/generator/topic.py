"""Topic `generator`: the effective generator of the undetected evolution, order by order in tau.

    Q U(tau) Q = exp(-i tau G(tau)),   G = sum_k tau^k G_k,   U(tau) = exp(-i H tau)

on range(Q), for a perfect detector of any rank on any finite graph (hbar = 1; H and 1/tau in one unit of energy).
With x = -i tau, G_k = (-i)^k L_(k+1), L_d the coefficient of x^d in log(1 + sum_m x^m (H^m)_QQ/m!).  Each G_k is
exact; the series converges at least for h tau < log 2, h half the width of H's spectrum.

Source: derived here, by the detector-local algebra (`algebra/local.py`).  The first two terms are published
(phys-rev-a-91-062115).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from derive.algebra.local import Local, Moments, truncated_local_log
from derive.algebra.words import Words, truncated_word_log
from derive.derivations.generator import steps
from derive.derivations.watched import Watched, rotated_row, sandwiched
from derive.exact.sparse import Vector, accumulate
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting, Wish
from derive.record.said import Claim, Derivation, Expansion, Kind, Matrix, Step

DEFAULT_ORDER = 3
WORDS_SHOWN = 4  # the words double with every order: 29 at k = 5, 63 at k = 6
CONVERGES = (
    "exact; the series in tau converges at least for h*tau < log(2), h half the width of the spectrum of H; how far it "
    "does, the topic validity finds"
)


@dataclass(frozen=True)
class Terms:
    """G_0 ... G_K and what they were made of: A^i V, the moments, the local coefficients of L_1 ... L_(K+1)."""

    watched: Watched
    krylov: list[list[Vector]]
    moments: Moments
    logs: list[Local]
    matrices: tuple[Matrix, ...]


def derive_generator(setting: Setting, wish: Wish) -> Derivation:
    """G_0 ... G_K, the truncated generator, and the graph-free words to order 4, with their steps."""
    order = wish.option("order", DEFAULT_ORDER)
    if not isinstance(order, int):
        raise TypeError(f"order is {order!r}, not an integer")
    shown = min(order, WORDS_SHOWN)
    words = truncated_word_log(shown + 1)
    terms = generator_terms(setting, order)
    special = (*(term_claim(k, m) for k, m in enumerate(terms.matrices)), truncated_claim(terms.matrices))
    where = terms.watched.where()
    claims = (
        *(_universal(k, words[k]) for k in range(shown + 1)),
        *(replace(c, valid_for=c.valid_for + where) for c in special),
    )
    return Derivation("generator", claims, _steps(words, terms), sources=("phys-rev-a-91-062115",))


def generator_terms(setting: Setting, order: int) -> Terms:
    """The matrices G_0 ... G_order.  Work depends on the graph within `order` steps of the detector only."""
    watched = Watched(setting, order)
    krylov = watched.krylov(max(order, 1))
    moments = watched.moments(krylov, max(order - 3, 0))
    logs = truncated_local_log(moments, order + 1)
    rest = (sandwiched(watched, krylov, logs[k].local, krylov, k) for k in range(1, order + 1))
    matrices = [cut_hamiltonian(watched), *rest]
    return Terms(watched, krylov, moments, logs, tuple(matrices))


def cut_hamiltonian(watched: Watched) -> Matrix:
    """G_0 = A = QHQ: H's own rows, except on the detector and next to it."""
    rows, space = watched.field, watched.space
    near = {y for x in watched.support for y, _ in space.rows[x]} | set(watched.support)
    patch = []
    for x in sorted(near):
        row = {y: rows.element(f) for y, f in space.rows[x]}
        patch.append((x, rotated_row(_cut_row(watched, x, row), 0)))
    return Matrix(space.size, space.rows, tuple(patch))


def _cut_row(watched: Watched, x: int, row: Vector) -> Vector:
    """Row x of (1 - P) H (1 - P)."""
    field = watched.field
    for d in watched.d:
        if x in d:
            left = watched.hamiltonian(d)  # <d|H = (H|d>)†
            accumulate(row, {y: -(d[x] * field.conjugate(f)) for y, f in left.items()})
    for d in watched.d:
        overlap = field.zero
        for y, f in d.items():
            if y in row:
                overlap = overlap + row[y] * f
        if overlap:
            accumulate(row, {y: -(overlap * field.conjugate(f)) for y, f in d.items()})
    return row


def _universal(k: int, log: Words) -> Claim:
    return Claim(f"generator.universal.{k}", "generator", None, steps.in_words(log, k), valid_for=CONVERGES)


def term_claim(k: int, matrix: Matrix, valid_for: str = CONVERGES) -> Claim:
    return Claim(
        f"generator.{k}", "generator", Quantity("generator", (("order", k),)), matrix, valid_for=valid_for
    )


def truncated_claim(matrices: tuple[Matrix, ...]) -> Claim:
    order = len(matrices)
    phrase = f"up to O(tau^{order})" if order > 1 else "up to O(tau)"
    return Claim(
        "generator.truncated",
        "generator",
        Quantity("generator"),
        Expansion("tau", tuple(range(order)), matrices, order),
        Kind("order", phrase, order),
        valid_for="small h*tau; the error is of the order stated, measured below",
    )


def _steps(words: list[Words], terms: Terms) -> tuple[Step, ...]:
    order = len(terms.matrices) - 1
    return (
        *steps.one_undetected_step(),
        *steps.cut_into_blocks(len(words)),
        *steps.logarithm(words),
        *steps.universal(words),
        *steps.local_form(terms.moments.rank),
        *steps.on_this_graph(terms.watched, terms.krylov, terms.moments),
        *steps.coefficients(terms.logs, terms.moments.rank),
        *(steps.inserted(k, terms.matrices[k]) for k in range(order + 1)),
        steps.put_together(order),
    )

