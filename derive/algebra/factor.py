"""A polynomial over an exact field, taken apart into irreducible factors where flint can.

Over Q(letters), and over phases u = exp(i phi), the factors are irreducible.  Where a coefficient holds an algebraic
generator (a square root, i, a root of unity, an adjoined root) the parts of the square-free decomposition are taken
apart by their norms (`norm.py`) as far as those stay small; a part that is left whole serves as well, since one
formula for all roots needs a square-free polynomial and no more.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from flint import Ordering, fmpq_mpoly_ctx

from derive.algebra.polynomial import Polynomial, trimmed
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field

Factor = tuple[Polynomial, int]


def factored(field: Field, p: Polynomial) -> list[Factor]:
    """Monic factors of p with their multiplicities, by degree, then by text."""
    plain = _Plain(field)
    found = plain.factors(p) if plain.holds(p) and not isinstance(field, WithRoot) else _over_roots(field, p)
    return sorted(found, key=lambda f: (len(f[0]), [repr(c) for c in reversed(f[0])]))


class _Plain:
    """K without its algebraic generators, as a polynomial ring with E in front; 1/u is written as u^-1."""

    def __init__(self, field: Field):
        self.field = field
        barred = {n[:-3] for n in field.gen if n.endswith("bar") and n.startswith(("unit", "growth"))}
        algebraic = {n for n, _ in field.relations} - barred
        self.kept = [n for n in field.gen if n not in algebraic and not (n.endswith("bar") and n[:-3] in barred)]
        self.barred = barred
        self.algebraic = [field.index[n] for n in algebraic]
        self.ring: Any = fmpq_mpoly_ctx.get(("root of it", *self.kept), Ordering.lex)

    def holds(self, p: Polynomial) -> bool:
        return not any(
            int(m[k]) for c in p for f in (c.num, c.den) if f is not None for m in f.monoms() for k in self.algebraic
        )

    def factors(self, p: Polynomial) -> list[Factor]:
        out = []
        for f, multiplicity in self._cleared(p).factor()[1]:
            if int(f.degrees()[0]) > 0:
                out.append((self._monic(f), int(multiplicity)))
        return out

    def _cleared(self, p: Polynomial) -> Any:
        """A multiple of p without denominators."""
        common = self.field.ring.constant(1)
        for c in p:
            if c.den is not None:
                common = common * c.den // common.gcd(c.den)
        terms: dict[tuple[int, ...], Any] = {}
        for k, c in enumerate(p):
            num = c.num * common if c.den is None else c.num * (common // c.den)
            for m, value in num.terms():
                key = (k, *self._exponents(list(map(int, m))))  # u^2/u and u share a place
                terms[key] = terms[key] + value if key in terms else value
        lowest = [min(column) for column in zip(*terms, strict=True)]
        shifted = {tuple(e - min(low, 0) for e, low in zip(m, lowest, strict=True)): v for m, v in terms.items()}
        return self.ring.from_dict(shifted)

    def _exponents(self, m: list[int]) -> tuple[int, ...]:
        index = self.field.index
        return tuple(m[index[n]] - (m[index[n + "bar"]] if n in self.barred else 0) for n in self.kept)

    def _monic(self, f: Any) -> Polynomial:
        split: dict[int, Element] = {}
        terms = [(list(map(int, m)), c) for m, c in f.terms()]
        degree = max(m[0] for m, _ in terms)
        phase = [min(m[j] for m, _ in terms if m[0] == degree) if n in self.barred else 0
                 for j, n in enumerate(self.kept, start=1)]  # phases never stay in a denominator
        for (k, *exponents), c in terms:
            rest = [e - low for e, low in zip(exponents, phase, strict=True)]
            split[k] = split.get(k, self.field.zero) + self._term(rest, c)
        return [split[k] / split[degree] if k in split else self.field.zero for k in range(degree + 1)]

    def _term(self, exponents: list[int], c: Any) -> Element:
        full = [0] * len(self.field.index)
        for n, e in zip(self.kept, exponents, strict=True):
            full[self.field.index[n if e >= 0 else n + "bar"]] = abs(e)
        return Element(self.field, self.field.ring.from_dict({tuple(full): c}))


def _over_roots(field: Field, p: Polynomial) -> list[Factor]:
    """Square-free parts, each taken apart where its norm is within reach."""
    from derive.algebra.norm import split_by_norm  # it divides by this module's gcd

    return [(f, multiplicity) for part, multiplicity in _square_free(p) for f in split_by_norm(field, part)]


def _square_free(p: Polynomial) -> list[Factor]:
    """Yun's decomposition: monic parts, each with the multiplicity of its roots."""
    derivative = _derivative(p)
    common = gcd(p, derivative)
    part, rest = divided(p, common)[0], divided(derivative, common)[0]
    found, multiplicity = [], 0
    while len(part) > 1:
        multiplicity += 1
        rest = _minus(rest, _derivative(part))
        common = gcd(part, rest) if rest else part
        if len(common) > 1:
            found.append((common, multiplicity))
        part, rest = divided(part, common)[0], divided(rest, common)[0] if rest else []
    return found


def _derivative(p: Polynomial) -> Polynomial:
    return trimmed([c.scaled(Fraction(k)) for k, c in enumerate(p)][1:])


def _minus(a: Polynomial, b: Polynomial) -> Polynomial:
    zero = (a or b)[0].field.zero
    length = max(len(a), len(b))
    return trimmed([(a[k] if k < len(a) else zero) - (b[k] if k < len(b) else zero) for k in range(length)])


def divided(a: Polynomial, b: Polynomial) -> tuple[Polynomial, Polynomial]:
    """Quotient and remainder; b's leading coefficient is inverted."""
    rest, top = list(a), b[-1]
    out = [top.field.zero] * max(len(a) - len(b) + 1, 0)
    for k in range(len(a) - len(b), -1, -1):
        c = rest[k + len(b) - 1] / top
        out[k] = c
        for j, y in enumerate(b):
            rest[k + j] = rest[k + j] - c * y
    return trimmed(out), trimmed(rest)


def gcd(a: Polynomial, b: Polynomial) -> Polynomial:
    """Monic greatest common divisor."""
    while b:
        a, b = b, divided(a, b)[1]
    return [c / a[-1] for c in a]
