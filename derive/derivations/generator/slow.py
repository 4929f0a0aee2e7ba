"""The generator of the slow states of an imperfect detector; a perfect one goes to `generator.py`.

    K = (1 - (1 - q) P) exp(-i H tau),  q = sqrt(1 - eta),      K (1; X) = (1; X) exp(-i tau G),  X(0) = 0

on range(Q): G acts on the part off the detector of those states whose part on it is X of the rest; what an
undetected state has besides decays like q^n.  G = sum_k tau^k G_k at fixed kappa; G_1 = -(i/2) coth(kappa/2) V V†,
and at eta = 1 all G_k are the perfect detector's.  No G_k is Hermitian or anti-Hermitian below efficiency 1 (k >= 2);
levels keep their parity.  Exact; the series is useful for h tau coth(kappa/2) well below 1.  Derived here.
"""

from __future__ import annotations

from derive.algebra.slow import log_of, measured_slow
from derive.algebra.slow_local import truncated_slow_log
from derive.derivations.absorber.maps import word_field
from derive.derivations.generator import slow_steps, steps
from derive.derivations.generator.topic import (
    DEFAULT_ORDER,
    cut_hamiltonian,
    derive_generator,
    term_claim,
    truncated_claim,
)
from derive.derivations.generator.weak import derive_weak_generator
from derive.derivations.imperfect import Imperfect, efficiency_of, watched_with_coth, written_out
from derive.derivations.watched import sandwiched
from derive.formula.tree import ONE
from derive.problem.setting import Setting, Wish
from derive.record.said import Derivation, Matrix, Step

WORDS_SHOWN = 2
VALID = "exact at fixed kappa; the series in tau is useful for h*tau*coth(kappa/2) well below 1"


def derive_any_generator(setting: Setting, wish: Wish) -> Derivation:
    """Perfect or not: the generator of the undetected, or of the slow, states."""
    if setting.detectors[0].efficiency == ONE:
        return derive_generator(setting, wish)
    return derive_slow_generator(setting, wish)


def derive_slow_generator(setting: Setting, wish: Wish) -> Derivation:
    """G_0 ... G_K of the slow states and the truncated generator, with their steps."""
    order = wish.option("order", DEFAULT_ORDER)
    if not isinstance(order, int):
        raise TypeError(f"order is {order!r}, not an integer")
    detector = efficiency_of(setting)
    if detector.is_weak:
        return derive_weak_generator(setting, detector, order)
    matrices, told = _terms(setting, detector, order)
    claims = (*(term_claim(k, matrix, VALID) for k, matrix in enumerate(matrices)), truncated_claim(matrices))
    return Derivation("generator", claims, told, sources=("phys-rev-a-91-062115",))


def _terms(setting: Setting, detector: Imperfect, order: int) -> tuple[tuple[Matrix, ...], tuple[Step, ...]]:
    watched, c = watched_with_coth(setting, detector, order)
    krylov = watched.krylov(max(order, 1))
    moments = watched.moments(krylov, max(order - 1, 0))
    logs = truncated_slow_log(moments, c, order + 1)
    rest = (sandwiched(watched, krylov, logs[k].local, krylov, k) for k in range(1, order + 1))
    matrices = (cut_hamiltonian(watched), *(written_out(matrix, detector) for matrix in rest))
    shown = min(order, WORDS_SHOWN)
    field, coth = word_field(False)
    words = log_of(measured_slow(field, coth, shown + 1))
    told = (
        *slow_steps.one_step(),
        *slow_steps.slow_states(),
        *slow_steps.in_words(words),
        *steps.local_form(moments.rank),
        *steps.on_this_graph(watched, krylov, moments),
        *(slow_steps.inserted(k, matrix) for k, matrix in enumerate(matrices)),
        steps.put_together(order),
    )
    return matrices, told
