"""Mean and return variance as nested sums over the roots of the seen energies' polynomial m, for any number of levels.

The other roots beside a root x are those of (m(y) - m(x))/(y - x), a polynomial in y whose coefficients hold x; so a
sum over pairs of different levels is a sum over roots within a sum over roots, and no energy has to be written down:

    A(x) = 1/(2 p(x)),   C(x, y) = cot((x - y) tau/2),   S(x) = -sum_y p(y) C(x, y) (A(x) + A(y))
    D(x) = A(x) + w/2 - sum_y p(y) [A(x) + A(y) + C(x, y) (S(x) - S(y))]/2
    mean = sum_x |q(x)|^2/p(x) D(x) + sum_x sum_y conj(q(x)) T(x, y) q(y)
    T(x, y) = [A(x) + A(y) + C (S(x) - S(y))]/2 + (i/2) [S(x) - S(y) - C (A(x) + A(y))]
    return variance = 2 sum_x D(x) - w - w^2

for a perfect detector state at a fixed interval; p(x) = a(x)/m'(x), a the minor of m without the detector.  The case
R = 1, a = 1 of `algebra/stein.py`.
"""

from __future__ import annotations

from derive.algebra.polynomial import Polynomial, continuants, multiplied, polynomial_formula
from derive.derivations.moments.structured import amplitude_polynomial, derivative
from derive.derivations.sight import Sight
from derive.formula.tree import I_UNIT, Formula, call, letter, number, plus, power, replace, times

NAMES = "xyzXYZ"
ROOT = "a root"  # stands for a root until it is named; no letter of a user's can be called so


class Nested:
    """p, A, S and D as formulas of a root, and the sums."""

    def __init__(self, sight: Sight):
        self.sight = sight
        taken = {x.name for x in sight.setting.letters}
        self.x, self.y, self.z = [n for n in NAMES if n not in taken][:3]
        self.m: Polynomial = [sight.field.one]
        for f, _ in sight.factors:
            self.m = multiplied(self.m, f)
        self.w = len(self.m) - 1
        self.tau = sight.setting.interval.length
        top, below = continuants(sight.space, 1), derivative(sight.factors, sight.field)
        self._p = polynomial_formula(top, ROOT) / polynomial_formula(below, ROOT)

    def p(self, x: str) -> Formula:
        return replace(self._p, {ROOT: letter(x)})

    def a(self, x: str) -> Formula:
        return number(1) / (2 * self.p(x))

    def cot(self, x: str, y: str) -> Formula:
        return call("cot", (letter(x) - letter(y)) * self.tau / 2)

    def over(self, x: str, body: Formula) -> Formula:
        """Sum over all roots."""
        return Formula("rootsum", (x, polynomial_formula(self.m, x), body))

    def over_others(self, x: str, y: str, body: Formula) -> Formula:
        """Sum over the roots y beside the root x."""
        return Formula("rootsum", (y, self.quotient(x, y), body))

    def quotient(self, x: str, y: str) -> Formula:
        """(m(y) - m(x))/(y - x), highest power of y first."""
        shown = self.sight.field.formula
        terms = []
        for i in range(self.w - 1, -1, -1):
            inner = [times(shown(c), _power(x, k - 1 - i)) for k, c in enumerate(self.m) if k > i and c]
            terms.append(times(plus(*inner), _power(y, i)))
        return plus(*terms)

    def s(self, x: str, other: str) -> Formula:
        body = self.p(other) * self.cot(x, other) * (self.a(x) + self.a(other))
        return -self.over_others(x, other, body)

    def apart(self, x: str, y: str) -> Formula:
        """S(x) - S(y)."""
        return self.s(x, self.z) - self.s(y, self.z)

    def d(self) -> Formula:
        """D(x)."""
        x, y = self.x, self.y
        inner = self.a(x) + self.a(y) + self.cot(x, y) * self.apart(x, y)
        return self.a(x) + number(self.w) / 2 - self.over_others(x, y, self.p(y) / 2 * inner)

    def mixed(self) -> Formula:
        """T(x, y)."""
        x, y = self.x, self.y
        apart, together, c = self.apart(x, y), self.a(x) + self.a(y), self.cot(x, y)
        return (together + c * apart) / 2 + I_UNIT * (apart - c * together) / 2


def _power(x: str, k: int) -> Formula:
    return power(letter(x), number(k)) if k > 1 else letter(x) if k else number(1)


def nested_return_variance(sight: Sight) -> Formula:
    nested = Nested(sight)
    return nested.over(nested.x, 2 * nested.d()) - number(nested.w + nested.w**2)


def nested_mean(sight: Sight) -> Formula:
    nested, terms = Nested(sight), []
    for part in sight.parts:
        s = polynomial_formula(amplitude_polynomial(sight, part.overlaps), ROOT)
        q = {n: nested.p(n) * replace(s, {ROOT: letter(n)}) for n in (nested.x, nested.y)}
        here, there = q[nested.x], q[nested.y]
        alone = power(call("abs", here), number(2)) / nested.p(nested.x) * nested.d()
        pairs = nested.over_others(nested.x, nested.y, call("conj", here) * nested.mixed() * there)
        terms.append(sight.field.formula(part.weight) * nested.over(nested.x, alone + pairs))
    return plus(*terms)
