"""Factors of a square-free polynomial over a tower of roots, from those of its norm.

f(y) over K(s_1, s_2, ...), the s_i the tower's algebraic generators with monic relations r_i:

    N(y) = Res_(s_k) ( ... Res_(s_1) (f(y - c_1 s_1 - c_2 s_2 - ...), r_1) ..., r_k)     is over K;

where N is square-free its irreducible factors n_i over K give those of f over the tower,
gcd(f, n_i(y + c_1 s_1 + ...)).
All but finitely many shifts c make N square-free.  After "factorisation over algebraic number fields", textbook
computer algebra.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import prod
from typing import Any

from flint import Ordering, fmpq_mpoly_ctx

from derive.algebra.factor import gcd
from derive.algebra.polynomial import Polynomial
from derive.exact.field import Element, Field

LARGEST_DEGREE = 24
"""Degree of a norm up to which it is taken apart (measured: seconds beyond, with letters)."""
TRIES = 4


def split_by_norm(field: Field, f: Polynomial) -> list[Polynomial]:
    """The monic irreducible factors of a square-free monic f; f itself where its norm is out of reach."""
    tower = _Tower(field)
    if len(f) < 3 or (len(f) - 1) * tower.degree > LARGEST_DEGREE:
        return [f]
    for attempt in range(1, TRIES + 1):
        found = tower.factors(f, attempt)
        if found is not None:
            return found
    return [f]


class _Tower:
    """The field's ring with y in front; 1/u is cleared, so that only algebraic generators have relations."""

    def __init__(self, field: Field):
        self.field = field
        self.units = [n for n in field.gen if n + "bar" in field.gen and n.startswith(("unit", "growth"))]
        barred = {n + "bar" for n in self.units}
        self.names = [n for n in field.gen if n not in barred]
        self.ring: Any = fmpq_mpoly_ctx.get(("root of it", *self.names), Ordering.lex)
        self.y, *rest = self.ring.gens()
        self.gen = dict(zip(self.names, rest, strict=True))
        roots = [(n, r) for n, r in field.relations if n not in self.units]
        self.roots = [(n, self._cleared([r])) for n, r in roots]
        self.degree = prod(int(r.degrees()[field.index[n]]) for n, r in roots)

    def factors(self, f: Polynomial, attempt: int) -> list[Polynomial] | None:
        """None where this shift leaves the norm with a square."""
        shift = self.ring.constant(0)
        for weight, (n, _) in enumerate(self.roots):
            shift = shift + self.gen[n] * (attempt + weight)
        norm = self._moved(self._cleared_polynomial(f), self.y - shift)
        for n, relation in self.roots:
            norm = norm.resultant(relation, n)
        pieces = [(g, int(e)) for g, e in norm.factor()[1] if int(g.degrees()[0]) > 0]
        if any(e > 1 for _, e in pieces):
            return None
        if len(pieces) < 2:
            return [f]
        return [gcd(list(f), self._back(self._moved(g, self.y + shift))) for g, _ in pieces]

    def _moved(self, g: Any, y: Any) -> Any:
        return g.compose(y, *self.gen.values(), ctx=self.ring)

    def _cleared_polynomial(self, f: Polynomial) -> Any:
        """A multiple of f by what the roots do not touch, without denominators."""
        common = self.field.ring.constant(1)
        for c in f:
            if c.den is not None:
                common = common * c.den // common.gcd(c.den)
        return self._cleared([c.num * common if c.den is None else c.num * (common // c.den) for c in f])

    def _cleared(self, coefficients: Sequence[Any]) -> Any:
        """sum_k c_k y^k, multiplied by the power of each u that takes 1/u out."""
        index, field = [self.field.index[n] for n in self.names], self.field
        bars = {self.names.index(n): field.index[n + "bar"] for n in self.units}
        terms: dict[tuple[int, ...], Any] = {}
        for k, c in enumerate(coefficients):
            for m, value in c.terms():
                exponents = [int(m[i]) - (int(m[bars[j]]) if j in bars else 0) for j, i in enumerate(index)]
                terms[k, *exponents] = terms.get((k, *exponents), 0) + value
        lowest = [min(column) for column in zip(*terms, strict=True)]
        return self.ring.from_dict(
            {tuple(e - min(low, 0) for e, low in zip(m, lowest, strict=True)): v for m, v in terms.items()}
        )

    def _back(self, g: Any) -> Polynomial:
        """A polynomial in y over the field, reduced."""
        field = self.field
        split: dict[int, dict[tuple[int, ...], Any]] = {}
        for m, value in g.terms():
            k, *exponents = map(int, m)
            full = [0] * len(field.index)
            for n, e in zip(self.names, exponents, strict=True):
                full[field.index[n]] = e
            split.setdefault(k, {})[tuple(full)] = value
        top = max(split)
        found = [field.reduce(field.ring.from_dict(split.get(k, {}))) for k in range(top + 1)]
        out = [Element(field, c) for c in found]
        while not out[-1]:
            out.pop()
        return out
