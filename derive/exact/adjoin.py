"""One root of a polynomial adjoined to a field: K[E]/(p), p monic over K.

    R = WithRoot(K, "E", coefficients)       p = coefficients[0] + coefficients[1] E + ... + E^d
    R.root;  R.lift(x) for x in K;  R.element(f), f in the letter E too

What is computed here holds for every root of p at once.  With p irreducible this is a field and a zero test is a zero
test; with p square-free only, "zero" still means zero at every root, and `invert` may meet a divisor of zero, which
raises `ZeroDivisionError`.  The root is taken as real, so conjugation leaves it alone: p is the characteristic
polynomial, or a factor of it, of a Hermitian matrix.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

from flint import Ordering, fmpq_mpoly_ctx

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import Formula, letter


class WithRoot(Field):
    """A field, or a product of fields, with one real root E more."""

    def __init__(self, below: Field, name: str, coefficients: Sequence[Element]):
        self.below = below
        self.needs = below.needs
        self.domains = below.domains
        self.excluded: list[Formula] = []
        self._cache: dict[Formula, Element] = {}
        self._written_turns = None  # as in `Field`
        own = f"letter:{name}"
        if own in below.gen:
            raise NotCovered(f"the letter {name} stands in the field already")
        names = [own, *below.index]
        self.ring: Any = fmpq_mpoly_ctx.get(tuple(names), Ordering.lex)
        self.index = {n: k for k, n in enumerate(names)}
        self.gen = dict(zip(names, self.ring.gens(), strict=True))
        self._meaning = [letter(name), *below._meaning]
        self.one, self.zero = Element(self, self.ring.constant(1)), Element(self, self.ring.constant(0))
        self.relations = [(n, self._shifted(r)) for n, r in below.relations]
        self._images = [self.gen[own], *(self._shifted(f) for f in below._images)]
        self.is_real = below.is_real
        self.relations = [(own, self._monic(own, coefficients)), *self.relations]
        self.root = Element(self, self.reduce(self.gen[own]))

    def _monic(self, own: str, coefficients: Sequence[Element]) -> Any:
        total = self.gen[own] ** len(coefficients)
        for k, c in enumerate(coefficients):
            if c.den is not None:
                raise NotCovered("a polynomial whose coefficients have denominators")
            total = total + self._shifted(c.num) * self.gen[own] ** k
        return total

    def _shifted(self, f: Any) -> Any:
        """A polynomial of the ring below, in this ring."""
        return self.ring.from_dict({(0, *map(int, m)): c for m, c in f.terms()})

    def lift(self, x: Element) -> Element:
        """x of the field below, as a member of this one."""
        return Element(self, self._shifted(x.num), None if x.den is None else self._shifted(x.den))

    def coefficients(self, x: Element) -> list[Element]:
        """x = sum_k c_k E^k, k below the degree of p, the c_k in the field below; trailing zeros left out."""
        split: dict[int, dict[tuple[int, ...], Any]] = {}
        for monomial, c in x.num.terms():
            k, *rest = map(int, monomial)
            split.setdefault(k, {})[tuple(rest)] = c
        den = None if x.den is None else self._lowered(x.den)
        return [
            self.below.quotient(self.below.ring.from_dict(split.get(k, {})), den)
            for k in range(max(split, default=-1) + 1)
        ]

    def trace(self, x: Element) -> Element:
        """The sum of x over all roots of p, in the field below: sum_k c_k s_k, s_k the roots' power sums (Newton)."""
        parts = self.coefficients(x)
        total = self.below.zero
        for c, s in zip(parts, self._power_sums(len(parts)), strict=True):
            total = total + c * s
        return total

    def _power_sums(self, count: int) -> list[Element]:
        """s_k = -sum_(0<j<k) a_j s_(k-j) - k a_k, a_j the coefficient of E^(d-j) in p, a_k = 0 beyond d."""
        degree = int(self.relations[0][1].degrees()[0])
        p = self.coefficients(Element(self, self.relations[0][1]))
        sums = [self.below.rational(degree)]
        for k in range(1, count):
            total = self.below.zero
            for j in range(1, min(k, degree) + 1):
                a = p[degree - j]
                total = total - (a.scaled(Fraction(k)) if j == k else a * sums[k - j])
            sums.append(total)
        return sums[:count]

    def _lowered(self, f: Any) -> Any:
        return self.below.ring.from_dict({tuple(map(int, m))[1:]: c for m, c in f.terms()})


class Fractions(WithRoot):
    """K[E]/(p) whose elements stay fractions: nothing is ever inverted modulo p.

    A numerator is zero modulo p exactly when the element is, as long as no denominator is; that is the caller's care.
    """

    def invert(self, x: Element) -> Element:
        if not x:
            raise ZeroDivisionError("this divides by zero")
        return self.quotient(self.one.num if x.den is None else x.den, x.num)

    def denominators(self, a: Element, b: Element) -> Any:
        den = super().denominators(a, b)
        return den if den is None else self.reduce(den)
