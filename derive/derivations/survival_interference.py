"""The terms of order tau in survival at fixed t*tau: interference between levels, on an explicit graph.

With c_j = <psi|v_j><v_j|V> (no phase of v_j enters) first-order states of the undetected evolution overlap by
<R_j|R_k> = -i tau <v_j|V><V|v_k>/(E_k - E_j), which adds to S, for real H, start and detector,

    - 2 tau sum_(j<k) c_j c_k sin((E_k - E_j) t)/(E_k - E_j) exp(-(Gamma_j + Gamma_k) t/2)  + O(tau^2)

and to the density  2 tau sum_(j<k) c_j c_k cos((E_k - E_j) t) exp(-(Gamma_j + Gamma_k) t/2).  The c_j are
r(E_j)/q'(E_j), r(E) = <psi| adj(E - A) |V>.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.polynomial import Polynomial, added, at, continuants, taylor
from derive.derivations.spectrum import Level, Spectrum
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.tree import TAU, ZERO, Formula, call, inverse, letter, negate, number, plus, times
from derive.problem.setting import Setting

T = letter("t")


@dataclass(frozen=True)
class Pair:
    """Interference at one gap in energy: 2 c_j c_k, the same over the gap, the gap, and the mean of the two rates."""

    product: Formula
    amplitude: Formula
    gap: Formula
    rate: Formula

    def law(self) -> Formula:
        return times(number(-1), self.amplitude, TAU, call("sin", times(self.gap, T)), self._fading())

    def density(self) -> Formula:
        return times(self.product, TAU, call("cos", times(self.gap, T)), self._fading())

    def _fading(self) -> Formula:
        return call("exp", times(number(-1), self.rate, T))


def interference(spectrum: Spectrum, levels: Sequence[Level]) -> tuple[Pair, ...]:
    """Every pair of levels whose interference is not zero."""
    starts = spectrum.starts()
    if not spectrum.field.is_real or len(starts) != 1:
        raise NotCovered("terms of order tau are derived for a real Hamiltonian, detector and one real start state")
    if any(x in starts[0][1] for x in spectrum.watched.support):
        raise NotCovered("terms of order tau are derived for a start off the detector")
    if any(level.place.polynomial is not None for level in levels):
        raise NotCovered("terms of order tau need every level written out; one factor here has a degree of 3 or more")
    couplings = _couplings(spectrum, levels)
    found: list[Pair] = []
    for k, (upper, b) in enumerate(zip(levels, couplings, strict=True)):
        for lower, a in zip(levels[:k], couplings[:k], strict=True):
            product = simple(times(number(2), a, b), spectrum.setting)
            if product != ZERO:
                gap = simple(plus(upper.zeroth, negate(lower.zeroth)), spectrum.setting)
                mean = simple(times(number(Fraction(1, 2)), plus(lower.rate[1], upper.rate[1])), spectrum.setting)
                _add(found, product, gap, times(mean, TAU), spectrum.setting)
    return tuple(p for p in found if p.product != ZERO)


def _add(found: list[Pair], product: Formula, gap: Formula, rate: Formula, setting: Setting) -> None:
    """One pair more; pairs of the same gap and rate are one term."""
    same = next((n for n, p in enumerate(found) if p.gap == gap and p.rate == rate), None)
    if same is not None:
        product = simple(plus(found.pop(same).product, product), setting)
    found.append(Pair(product, simple(times(product, inverse(gap)), setting), gap, rate))


def _couplings(spectrum: Spectrum, levels: Sequence[Level]) -> list[Formula]:
    """c_j for each level."""
    r, slope = _numerator(spectrum), taylor(spectrum.q, 1)
    out = []
    for level in levels:
        place = level.place
        out.append(place.ratio(at(place.taken(r), place.root), at(place.taken(slope), place.root), 1))
    return out


def _numerator(spectrum: Spectrum) -> Polynomial:
    """r(E) = sum_i <psi|u_i> q^(i+1)(E), q^(i) the last minors of the tridiagonal A, u_0 = V."""
    bright = spectrum.bright
    _, psi = spectrum.starts()[0]
    total: Polynomial = [spectrum.field.zero]
    for i, u in enumerate(bright.basis):
        overlap = spectrum.watched.inner(psi, u)
        if overlap:
            tail = continuants(bright, i + 1) if i + 1 < bright.size else [spectrum.field.one]
            total = added(total, [overlap * c for c in tail]) or [spectrum.field.zero]
    return total


def simple(f: Formula, setting: Setting) -> Formula:
    """f as its exact field writes it, where there is one."""
    try:
        field = Field.of([f], setting.domains())
        return field.formula(field.element(f))
    except NotCovered:
        return f
