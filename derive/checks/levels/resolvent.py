"""<d|(H - E)^(-1)|d> rebuilt from the setting by elimination, for the exact road of topics about levels.

h    the least polynomial with h(H) d = 0, from eliminating d, H d, H^2 d, ...
q    the polynomial part of h(E) sum_k T_k E^(-k-1), T_k = <d|H^k|d>: the resolvent is -q/h
r    r_psi/q = sum_k <V|A^k|psi> E^(-k-1) = <V|(E - A)^(-1)|psi>

Polynomials are lists of coefficients, constant term first.  No Krylov orthogonalisation, no generator is used.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from functools import cached_property
from math import comb, factorial

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.formula.tree import I_UNIT, TAU, Formula
from derive.problem.efficiency import half_coth, missed
from derive.problem.setting import Domain, Finite, Setting
from derive.problem.setting import Vector as Ket

LARGEST_NUMERIC, LARGEST_SYMBOLIC = 40, 14
"""Dimensions reached by the detector up to which the elimination is done: with one letter at most, with more."""


class Resolvent:
    """h, q, T_k over the field of the setting, with tau and i in it."""

    def __init__(self, setting: Setting):
        self.setting = setting
        if not isinstance(setting.space, Finite):
            raise NotCovered("a finite graph is needed here")
        self.rows = setting.space.rows
        self.vector: Ket = setting.detectors[0].vectors[0]
        self.coth = half_coth(missed(setting.detectors[0].efficiency, setting.domains()))
        self.start = setting.start.mixture if setting.start else ()
        self.formulas = tuple(dict.fromkeys(self._formulas()))
        self.field = Field.of(self.formulas, setting.domains())
        self.d = {x: self.field.element(f) for x, f in self.vector}
        letters = [n for n in self.field.gen if n.startswith(("letter:", "unit", "growth")) and n != "letter:tau"]
        self.symbolic = len(letters) > 1
        self.h, self.powers = self._least_polynomial()

    def _formulas(self) -> Iterable[Formula]:
        yield TAU
        yield I_UNIT
        yield self.coth
        yield from (f for _, f in self.vector)
        yield from (f for row in self.rows for _, f in row)
        yield from (f for w, v in self.start for f in (w, *(a for _, a in v)))

    def hamiltonian(self, v: Vector) -> Vector:
        out: Vector = {}
        for y, a in v.items():
            accumulate(out, {x: self.field.conjugate(self.field.element(f)) * a for x, f in self.rows[y]})
        return out

    def inner(self, a: Vector, b: Vector) -> Element:
        total = self.field.zero
        for x, f in a.items():
            if x in b:
                total = total + self.field.conjugate(f) * b[x]
        return total

    def _least_polynomial(self) -> tuple[list[Element], list[Vector]]:
        """h, monic, constant term first, and d, H d, ..., by elimination of H^n d against the ones before."""
        most = LARGEST_SYMBOLIC if self.symbolic else LARGEST_NUMERIC
        echelon: dict[int, tuple[Vector, Vector]] = {}
        powers: list[Vector] = []
        v = self.d
        for n in range(most + 1):
            rest, made_of = dict(v), {n: self.field.one}
            while rest and min(rest) in echelon:
                row, its = echelon[min(rest)]
                front = -rest[min(rest)]
                accumulate(rest, {x: front * f for x, f in row.items()})
                accumulate(made_of, {k: front * c for k, c in its.items()})
            if not rest:
                return [made_of.get(k, self.field.zero) for k in range(n + 1)], powers
            top = self.field.one / rest[min(rest)]
            echelon[min(rest)] = ({x: top * f for x, f in rest.items()}, {k: top * c for k, c in made_of.items()})
            powers.append(v)
            v = self.hamiltonian(v)
        raise NotCovered("the space reached from the detector is too large for elimination")

    @cached_property
    def moments(self) -> list[Element]:
        """T_k, as many as q needs."""
        return [self.inner(self.d, v) for v in self.powers]

    @cached_property
    def q(self) -> list[Element]:
        return self.polynomial_part(self.h, self.moments)

    def polynomial_part(self, p: list[Element], moments: Sequence[Element]) -> list[Element]:
        """Of p(E) sum_k moments[k] E^(-k-1)."""
        out = []
        for j in range(len(p) - 1):
            total = self.field.zero
            for k in range(len(p) - 1 - j):
                total = total + p[j + k + 1] * moments[k]
            out.append(total)
        return out

    def numerator(self, psi: Vector) -> list[Element]:
        """r_psi: q(E) <V|(E - A)^(-1)|psi>, psi cut to range(Q)."""
        v = self.outside(self.hamiltonian(self.d))
        state, moments = self.outside(psi), []
        for _ in range(len(self.q) - 1):
            moments.append(self.inner(v, state))
            state = self.outside(self.hamiltonian(state))
        return self.polynomial_part(self.q, moments)

    def outside(self, v: Vector) -> Vector:
        out, overlap = dict(v), self.inner(self.d, v)
        accumulate(out, {x: -(overlap * f) for x, f in self.d.items()})
        return out

    def pushes(self, order: int) -> list[list[Element]]:
        """h times the coefficients of x, ..., x^order in the bracket."""
        found = []
        for m in range(1, order + 1):
            if m == 1:
                inner = [self.field.element(self.coth).scaled(Fraction(1, 2))]
            elif m % 2:
                inner = []
            else:
                inner = [c.scaled(-bernoulli(m) / factorial(m)) for c in self.around(m - 1)]
            found.append(_product(self.field, self.h, inner))
        return found

    def around(self, n: int) -> list[Element]:
        """<d|(H - E)^n|d> in powers of E."""
        v, returns = self.d, [self.field.one]
        for _ in range(n):
            v = self.hamiltonian(v)
            returns.append(self.inner(self.d, v))
        return [returns[n - k].scaled(Fraction((-1) ** k * comb(n, k))) for k in range(n + 1)]


def bernoulli(n: int) -> Fraction:
    """B_n by the triangle of Akiyama and Tanigawa (which has B_1 = 1/2; only even n are asked for)."""
    row = [Fraction(1, m + 1) for m in range(n + 1)]
    for width in range(n, 0, -1):
        row = [(k + 1) * (row[k] - row[k + 1]) for k in range(width)]
    return row[0]


def _product(field: Field, a: Sequence[Element], b: Sequence[Element]) -> list[Element]:
    out = [field.zero] * max(len(a) + len(b) - 1, 0) if b else []
    for i, x in enumerate(a):
        for j, y in enumerate(b):
            out[i + j] = out[i + j] + x * y
    return out


def polynomial_over(
    setting: Setting, base: Field, formulas: Sequence[Formula], polynomial: Formula, name: str
) -> list[Element]:
    """A polynomial in the letter `name`, given as a formula, as coefficients in a field made for `formulas`."""
    domains = {**setting.domains(), name: Domain("real", "real")}
    named = Field.of([*formulas, polynomial], domains)
    x, at = named.element(polynomial), named.index[f"letter:{name}"]
    split: dict[int, dict[tuple[int, ...], object]] = {}
    for monomial, c in x.num.terms():
        bare = list(map(int, monomial))
        k, bare[at] = bare[at], 0
        split.setdefault(k, {})[tuple(bare)] = c
    return [
        base.element(named.formula(named.quotient(named.ring.from_dict(split.get(k, {})), x.den)))
        for k in range(max(split, default=-1) + 1)
    ]
