"""Numbers of Q(zeta_n), 4 | n, written as a person would: a + i b with a and b over 1, sqrt(2), sqrt(3), cos(pi q).

Every element is real + i real there.  The real part of the field gets a basis of square roots and cosines with small
denominators, found greedily; coordinates come from one exact elimination, made once a field.
"""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.formula.tree import ONE, PI, Formula, call, number, times

if TYPE_CHECKING:
    from derive.exact.field import Field

Vector = list[Fraction]
ROOTS = {
    Fraction(0): (ONE, 1),
    Fraction(1, 4): (call("sqrt", number(2)), 2),
    Fraction(1, 6): (call("sqrt", number(3)), 2),
}
"""2 cos(pi/4) and 2 cos(pi/6) by their roots."""


class Turned:
    """The basis for one field, and coordinates in it."""

    def __init__(self, field: Field):
        self.field = field
        self.order = field.needs.turn
        self.powers = [self._power(k) for k in range(self.order)]
        self.basis: list[Formula] = []
        self._rows: list[tuple[int, Vector, Vector]] = []  # pivot, reduced row, the same row over the basis
        angles = {Fraction(2 * k, self.order) for k in range(self.order // 4)}
        for q in sorted(angles, key=lambda q: (q.denominator, q)):
            self._offer(q)

    def _power(self, k: int) -> Vector:
        """zeta^k over 1, zeta, zeta^2, ..."""
        at = self.field.index["turn"]
        out = [Fraction(0)] * self.order
        for monomial, c in self.field.reduce(self.field.gen["turn"] ** k).terms():
            out[int(monomial[at])] = Fraction(int(c.p), int(c.q))
        return out

    def _offer(self, q: Fraction) -> None:
        """Take cos(pi q), or the root it is a multiple of, into the basis if it is independent of what is there."""
        k = int(q * self.order / 2)
        shown, scale = ROOTS.get(q, (call("cos", times(number(q), PI)), 1))
        vector = [(a + b) / 2 * scale for a, b in zip(self.powers[k], self.powers[-k % self.order], strict=True)]
        rest, over = self._reduced(vector)
        pivot = next((j for j, c in enumerate(rest) if c), None)
        if pivot is None:
            return
        self.basis.append(shown)
        over = [-c for c in over] + [Fraction(1)]
        self._rows.append((pivot, [c / rest[pivot] for c in rest], [c / rest[pivot] for c in over]))

    def _reduced(self, vector: Vector) -> tuple[Vector, Vector]:
        """What is left of a vector beside the basis, and what was taken off, over the basis."""
        rest, taken = list(vector), [Fraction(0)] * len(self.basis)
        for pivot, row, over in self._rows:
            c = rest[pivot]
            if c:
                rest = [a - c * b for a, b in zip(rest, row, strict=True)]
                for j, b in enumerate(over):
                    taken[j] += c * b
        return rest, taken

    def coordinates(self, coefficients: dict[int, Fraction]) -> tuple[Vector, Vector]:
        """(a, b) over the basis with sum_k c_k zeta^k = a + i b."""
        forward, backward = [Fraction(0)] * self.order, [Fraction(0)] * self.order
        for k, c in coefficients.items():
            forward = [x + c * y for x, y in zip(forward, self.powers[k], strict=True)]
            backward = [x + c * y for x, y in zip(backward, self.powers[-k % self.order], strict=True)]
        real = [(x + y) / 2 for x, y in zip(forward, backward, strict=True)]
        other = [(x - y) / 2 for x, y in zip(forward, backward, strict=True)]
        return self._reduced(real)[1], self._reduced(self._over_i(other))[1]

    def _over_i(self, vector: Vector) -> Vector:
        """vector/i: every power moved back by a quarter turn."""
        out = [Fraction(0)] * self.order
        for k, c in enumerate(vector):
            if c:
                out = [x + c * y for x, y in zip(out, self.powers[(k - self.order // 4) % self.order], strict=True)]
        return out
