"""Splitting probabilities: which of several detectors clicks first.

    S_w = sum_n eta_w |P_w U K^(n-1) psi|^2 = <psi|Y_w|psi>,
    Y_w - K† Y_w K = eta_w U† P_w U,   K = prod_w (1 - a_w P_w) U

on the bright space, a_w = 1 - sqrt(1 - eta_w).  U is a step given, or exp(-i H tau) = sum_l z_l E_l with closed
energies, E_l = prod_{k != l} (H - E_k)/(E_l - E_k).  The S_w add up to the total probability.  Derived here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from math import isqrt

from derive.algebra.bright import Krylov
from derive.algebra.levels import phase_formula
from derive.algebra.linear import Dense, identity, minus, shifted, times
from derive.algebra.phases import trigonometric
from derive.algebra.stepwise import coordinates, form_value, matrix_of, summed_form
from derive.derivations.explored import Explored
from derive.derivations.sight import Sight
from derive.derivations.stated import has_linear_system
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.formula.tree import I_UNIT, ONE, Formula, call, number, operator
from derive.problem.setting import Setting, Unitary, Watcher
from derive.record.said import Prose

LARGEST = 12
"""Dimension of the bright space up to which the linear system is solved."""
LARGEST_IN_PHASES = 5
LARGEST_IN_SEVERAL = 4
"""The same where two or more independent phases stand in the system: minutes beyond."""
TOO_LARGE = "The bright space is too large for an exact solution."
RANDOM = "Closed forms are derived for fixed intervals."
NO_ENERGIES = "The seen energies have no closed form here, or their phases meet at this interval."


def splitting(sight: Sight) -> tuple[dict[str, Formula], tuple[Prose, ...]]:
    """S by the detector's name, or why they are left out."""
    setting = sight.setting
    try:
        if setting.interval.law != "fixed":
            raise NotCovered(RANDOM)
        bench = bench_to_solve(sight)
    except NotCovered as reason:
        return _stated(sight, str(reason))
    return {w.name or "": trigonometric(x) for w, x in zip(setting.detectors, bench.shares(), strict=True)}, ()


def _stated(sight: Sight, reason: str) -> tuple[dict[str, Formula], tuple[Prose, ...]]:
    """Left to the equation, where a road solves it."""
    if not has_linear_system(sight):
        return {}, ((f"The splitting probabilities are left out: {reason}",),)
    said = f"The splitting probabilities are left to the equation, with certified digits at the first point: {reason}"
    return {w.name or "": operator("S", w.name) for w in sight.setting.detectors}, ((said,),)


def bench_to_solve(sight: Sight) -> Bench:
    """The bench where a linear system in the square of its dimension is solved exactly in reasonable time."""
    bench = bench_of(sight)
    if bench.space.size > LARGEST_IN_SEVERAL and len(bench.field.needs.units) > 1:
        raise NotCovered(TOO_LARGE)
    return bench


def bench_of(sight: Sight, largest: int = LARGEST_IN_PHASES) -> Bench:
    """U, K and the clicks on a bright space of `largest` dimensions at most; `NotCovered` says why not."""
    setting = sight.setting
    free = not isinstance(setting.space, Unitary)
    if sight.space.size > (largest if free else LARGEST):
        raise NotCovered(TOO_LARGE)
    if free and (sight.energies is None or not sight.generic):
        raise NotCovered(NO_ENERGIES)
    explored, space = _in_large_field(setting, sight)
    field, inner = explored.field, explored.inner
    u = _step(setting, explored, space, sight)
    k, projectors = u, []
    for watcher in setting.detectors:
        vectors = [{x: field.element(f) for x, f in v} for v in watcher.vectors]
        p = matrix_of(space, inner, _projection(explored, vectors))
        projectors.append(p)
        a = field.element(share_taken(watcher))
        k = minus(k, [[a * x for x in row] for row in times(p, k)])
    return Bench(explored, space, u, k, tuple(projectors))


@dataclass(frozen=True)
class Bench:
    """The undetected step in coordinates of the bright space, and each detector's projector."""

    explored: Explored
    space: Krylov
    u: Dense
    k: Dense
    projectors: tuple[Dense, ...]

    @property
    def field(self) -> Field:
        return self.explored.field

    def over_start(self, y: Dense) -> Element:
        """<psi|Y|psi>, weighted over the start's mixture."""
        total = self.field.zero
        for w, v in self.explored.mixture:
            psi = {x: self.field.element(f) for x, f in v}
            c = coordinates(self.space, self.explored.inner, psi)
            total = total + self.field.element(w) * form_value(self.field, y, c)
        return total

    def shares(self) -> list[Element]:
        """S_w, detector by detector."""
        out = []
        for watcher, p in zip(self.explored.setting.detectors, self.projectors, strict=True):
            click = _clicked(self.space, self.u, p, self.field.element(watcher.efficiency))
            out.append(self.over_start(summed_form(self.field, self.k, click)))
        return out

    def rising_sums(self, highest: int) -> list[Element]:
        """b_1 ... b_highest, b_p = sum_n binomial(n+p-1, p) F_n: Y_p - K† Y_p K = Y_(p-1), Y_0 = 1."""
        zero, size = self.field.zero, range(self.space.size)
        y: Dense = [[self.space.norms[i] if i == j else zero for j in size] for i in size]
        found = []
        for _ in range(highest):
            y = summed_form(self.field, self.k, y)
            found.append(self.over_start(y))
        return found


def _clicked(space: Krylov, u: Dense, p: Dense, eta: Element) -> Dense:
    """The form eta U† P U: sum_c conj((P U)_ci) n_c (U)_cj, P being a projector."""
    pu = times(p, u)
    field, size = space.field, range(len(u))
    out = [[field.zero for _ in size] for _ in size]
    for i in size:
        for j in size:
            total = field.zero
            for c in size:
                if pu[c][i] and pu[c][j]:
                    total = total + field.conjugate(pu[c][i]) * space.norms[c] * pu[c][j]
            out[i][j] = total * eta
    return out


def _projection(explored: Explored, vectors: list[Vector]) -> Callable[[Vector], Vector]:
    def project(v: Vector) -> Vector:
        out: Vector = {}
        for d in vectors:
            c = explored.inner(d, v)
            for x, f in d.items():
                value = out[x] + f * c if x in out else f * c
                out[x] = value
        return {x: f for x, f in out.items() if f}

    return project


def share_taken(watcher: Watcher) -> Formula:
    """a = 1 - sqrt(1 - eta)."""
    eta = watcher.efficiency
    if eta.head != "number":
        return ONE - call("sqrt", ONE - eta)
    missed = 1 - eta.args[0]
    root = Fraction(isqrt(missed.numerator), isqrt(missed.denominator))
    return number(1 - root) if root * root == missed else ONE - call("sqrt", number(missed))


def _in_large_field(setting: Setting, sight: Sight) -> tuple[Explored, Krylov]:
    """The system again, in a field that holds phases and efficiencies too."""
    also = [I_UNIT, *(f for w in setting.detectors for f in (w.efficiency, share_taken(w)))]
    if not isinstance(setting.space, Unitary):
        energies = sight.energies or []
        also += energies
        also += [phase_formula(e, setting.interval.length, setting.domains()) for e in energies]
    explored = Explored(setting, also)
    return explored, explored.bright()


def _step(setting: Setting, explored: Explored, space: Krylov, sight: Sight) -> Dense:
    """The matrix of U on the bright space."""
    if isinstance(setting.space, Unitary):
        return matrix_of(space, explored.inner, explored.stepped)
    field = explored.field
    h = matrix_of(space, explored.inner, explored.hamiltonian)
    energies = [field.element(e) for e in sight.energies or []]
    total: Dense = [[field.zero for _ in h] for _ in h]
    for n, (e, shown) in enumerate(zip(energies, sight.energies or [], strict=True)):
        z = field.element(phase_formula(shown, setting.interval.length, setting.domains()))
        projector = identity(field, len(h))
        for m, other in enumerate(energies):
            if m != n:
                scale = field.one / (e - other)
                projector = [[x * scale for x in row] for row in times(projector, shifted(h, other))]
        total = [[a + z * b for a, b in zip(p, q, strict=True)] for p, q in zip(total, projector, strict=True)]
    return total
