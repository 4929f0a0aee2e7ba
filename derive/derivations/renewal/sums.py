"""Sums over all seen energies as formulas: a root of a linear factor put in, the others under a `rootsum`.

For several detector states D, with m the polynomial of the seen energies E_l,

    D† E_l D = N(E_l)/m'(E_l),     N(E) = sum_(i<k) m_k E^i D† H^(k-1-i) D,

since m(H) = 0 on bright states, where (m(E) - m(H))/(E - H) is that polynomial; D† E_l psi likewise.  Textbook algebra.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from derive.algebra.factor import divided
from derive.algebra.polynomial import Polynomial, multiplied, polynomial_formula, trimmed
from derive.algebra.spectral import roots_of
from derive.derivations.moments.structured import derivative
from derive.derivations.sight import Sight
from derive.exact.field import Element
from derive.exact.sparse import Vector
from derive.formula.tree import (
    I_UNIT,
    ONE,
    ZERO,
    Formula,
    call,
    letter,
    number,
    plus,
    power,
    replace,
    times,
)

Z = letter("z")


def bound_name(sight: Sight) -> str:
    """A letter for a seen energy that the worksheet has not taken: E where it can be."""
    taken = {x.name for x in sight.setting.letters}
    return next(n for n in ("E", "x", "y", "X", "Y", *(f"E{k}" for k in range(len(taken) + 1))) if n not in taken)


def over_seen_energies(sight: Sight, body: Formula, name: str) -> Formula:
    """The body, a formula of the letter `name`, summed over the roots of every factor of the seen polynomial."""
    terms = []
    for f, _ in sight.factors:
        if len(f) == 2:
            roots = roots_of(list(f)) or []
            terms.append(replace(body, {name: roots[0]}))
        else:
            terms.append(Formula("rootsum", (name, polynomial_formula(f, name), body)))
    return plus(*terms)


@dataclass(frozen=True)
class Conjugates:
    """The energies of one factor f: P_cb and q_c in the letter of a root; for a linear f all of it is put in."""

    factor: Polynomial
    name: str
    energy: Formula
    p: list[list[Formula]]
    q: list[Formula]

    def turn(self, n: int, tau: Formula) -> Formula:
        """exp(-i n E tau)."""
        angle = times(number(n), self.energy, tau)
        return ONE if self.energy == ZERO else call("exp", times(number(-1), I_UNIT, angle))

    def summed(self, body: Formula) -> Formula:
        """The body over all roots of f."""
        if len(self.factor) == 2 or body == ZERO:
            return body
        return Formula("rootsum", (self.name, polynomial_formula(self.factor, self.name), body))


class Sums:
    """u and v as sums over all seen energies."""

    def __init__(self, sight: Sight):
        self.tau = sight.setting.interval.length
        self.families = _families(sight)

    def u(self, share: Share) -> list[list[Formula]]:
        """sum_l share(E_l) P(E_l)."""
        size = range(len(self.families[0].q))
        return [[self._over([f.p[c][b] for f in self.families], share) for b in size] for c in size]

    def v(self, share: Share) -> list[Formula]:
        return [self._over([f.q[c] for f in self.families], share) for c in range(len(self.families[0].q))]

    def _over(self, weights: Sequence[Formula], share: Share) -> Formula:
        pairs = zip(self.families, weights, strict=True)
        return plus(*(f.summed(times(weight, share(f))) for f, weight in pairs if weight != ZERO))

    def turn(self, n: int) -> Share:
        return lambda f: f.turn(n, self.tau)

    def turns(self) -> Share:
        """1/(1 - z exp(-i E tau))."""
        return lambda f: power(ONE - times(Z, f.turn(1, self.tau)), number(-1))


Share = Callable[[Conjugates], Formula]


def _families(sight: Sight) -> list[Conjugates]:
    """P_cb = N_cb(E)/m'(E), numerator and denominator modulo each factor of m; q_c the same with psi."""
    name, field = bound_name(sight), sight.field
    m: Polynomial = [field.one]
    for f, _ in sight.factors:
        m = multiplied(m, f)
    kets = [*sight.explored.d, sight.explored.start()[0][1]]
    moments = [_moments(sight, ket, len(m) - 1) for ket in kets]
    tops = [[_numerator(m, column[c]) for column in moments] for c in range(len(kets) - 1)]
    slope = derivative(sight.factors, field)
    found = []
    for f, _ in sight.factors:
        rows = [[_weight(top, slope, f, name) for top in row] for row in tops]
        energy = field.formula(-f[0]) if len(f) == 2 else letter(name)
        found.append(Conjugates(f, name, energy, [row[:-1] for row in rows], [row[-1] for row in rows]))
    return found


def _weight(top: Polynomial, slope: Polynomial, f: Polynomial, name: str) -> Formula:
    """top/slope at the roots of f."""
    above, below = divided(top, f)[1], divided(slope, f)[1]
    if not above:
        return ZERO
    if len(f) == 2:
        return f[0].field.formula(above[0] / below[0])
    lead = below[-1]  # divided out, so that both polynomials are short
    return polynomial_formula([c / lead for c in above], name) / polynomial_formula([c / lead for c in below], name)


def _moments(sight: Sight, ket: Vector, count: int) -> list[list[Element]]:
    """<d_c|H^j|ket>, j < count, for every c."""
    found: list[list[Element]] = [[] for _ in sight.explored.d]
    for _ in range(count):
        for row, d in zip(found, sight.explored.d, strict=True):
            row.append(sight.explored.inner(d, ket))
        ket = sight.explored.hamiltonian(ket)
    return found


def _numerator(m: Polynomial, moments: Sequence[Element]) -> Polynomial:
    """sum_i E^i sum_(k>i) m_k mu_(k-1-i)."""
    zero, size = m[0].field.zero, len(m) - 1
    out = []
    for i in range(size):
        total = zero
        for k in range(i + 1, size + 1):
            total = total + m[k] * moments[k - 1 - i]
        out.append(total)
    return trimmed(out)
