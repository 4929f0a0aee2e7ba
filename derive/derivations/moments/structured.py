"""Mean and return variance as sums over pairs of levels, for energies and phases that are not expanded.

With theta_jk = (E_j - E_k) tau, C_jk = cot(theta_jk/2), a_j = 1/(2 p_j), w levels, a perfect detector (eta = 1):

    s_j = -sum_{k != j} p_k C_jk (a_j + a_k)
    p_j T_jj = a_j + w/2 - sum_{k != j} p_k [(a_j + a_k)/2 + C_jk (s_j - s_k)/2]
    T_jk = (a_j + a_k)/2 + C_jk (s_j - s_k)/2 + (i/2) [s_j - s_k - C_jk (a_j + a_k)]
    mean = sum_jk conj(q_j) T_jk q_k,      return variance = 2 sum_j p_j T_jj - w - w^2.

The case R = 1, a = 1 of `algebra/stein.py`, written as a formula of closed energies (`moments_nested.py` does without).
"""

from __future__ import annotations

from fractions import Fraction

from derive.algebra.polynomial import Polynomial, added, multiplied
from derive.derivations.sight import Sight
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, ZERO, Formula, call, number, plus, power


class Pairs:
    """p_j, q_j, a_j, C_jk and s_j as formulas."""

    def __init__(self, sight: Sight):
        self.sight = sight
        self.energies = sight.energies or []
        size = range(len(self.energies))
        tau = sight.setting.interval.length
        self.p, self.amplitudes = _closed(sight)
        self.cot = [[call("cot", _gap(a, b) * tau / 2) if i != j else ZERO for j, b in enumerate(self.energies)]
                    for i, a in enumerate(self.energies)]
        self.a = [number(1) / (2 * p) for p in self.p]
        self.s = [plus(*(self._pull(j, k) for k in size if k != j)) for j in size]

    def _pull(self, j: int, k: int) -> Formula:
        """-p_k C_jk (a_j + a_k)."""
        return -(self.p[k] * self.cot[j][k] * (self.a[j] + self.a[k]))

    def diagonal(self, j: int) -> Formula:
        """p_j T_jj."""
        size = range(len(self.p))
        rest = [-(self.p[k] / 2 * (self.a[j] + self.a[k] + self.cot[j][k] * (self.s[j] - self.s[k])))
                for k in size if k != j]
        return plus(self.a[j], number(len(self.p)) / 2, *rest)

    def mixed(self, j: int, k: int) -> Formula:
        """T_jk, j != k."""
        apart, together, c = self.s[j] - self.s[k], self.a[j] + self.a[k], self.cot[j][k]
        return (together + c * apart) / 2 + I_UNIT * (apart - c * together) / 2


def _gap(a: Formula, b: Formula) -> Formula:
    """a - b."""
    return a if b == ZERO else -b if a == ZERO else a - b


Rows = tuple[list[Formula], list[list[Formula]]]
"""p_j, and q_j for every part of the start."""


def _closed(sight: Sight) -> Rows:
    levels = sight.levels(None)
    shown = levels.field.formula
    rows = [[shown(p * s) for p, s in zip(levels.p, row, strict=True)] for row in levels.s]
    return [shown(p) for p in levels.p], rows


def structured_return_variance(sight: Sight) -> Formula:
    pairs = Pairs(sight)
    w = len(pairs.p)
    return plus(*(2 * pairs.diagonal(j) for j in range(w)), number(-w - w * w))


def structured_mean(sight: Sight) -> Formula:
    pairs, field = Pairs(sight), sight.field
    size, terms = range(len(pairs.p)), []
    for part, q in zip(sight.parts, pairs.amplitudes, strict=True):
        weight = field.formula(part.weight)
        for j in size:
            if q[j] != ZERO:
                terms.append(weight * power(call("abs", q[j]), number(2)) / pairs.p[j] * pairs.diagonal(j))
        for j in size:
            for k in range(j + 1, len(pairs.p)):
                if ZERO not in (q[j], q[k]):
                    terms.append(2 * weight * call("Re", call("conj", q[j]) * pairs.mixed(j, k) * q[k]))
    return plus(*terms)


def derivative(factors: tuple[tuple[Polynomial, int], ...], field: Field) -> Polynomial:
    """m'(E), m the product of the factors."""
    product = [field.one]
    for f, _ in factors:
        product = multiplied(product, f)
    return [c.scaled(Fraction(k)) for k, c in enumerate(product)][1:]


def amplitude_polynomial(sight: Sight, overlaps: tuple[Element, ...]) -> Polynomial:
    """sum_j q_j(E) <u_j|psi>/n_j, the q_j by the three-term recursion."""
    space, field = sight.space, sight.field
    before: Polynomial = []
    now: Polynomial = [field.one]
    total: Polynomial = []
    for j in range(space.size):
        total = added(total, [c * overlaps[j] / space.norms[j] for c in now])
        column = space.columns[j]
        following = added([field.zero, *now], [-(column.get(j, field.zero) * c) for c in now])
        if j:
            following = added(following, [-(space.columns[j].get(j - 1, field.zero) * c) for c in before])
        before, now = now, following
    return total

