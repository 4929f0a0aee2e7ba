"""Two things a tower of roots needs: 1/x, and whether a new root is really new.

1/y modulo a monic relation p(s) of degree d: the adjugate of "multiply by y" on 1, s, ..., s^(d-1), by the
Faddeev-LeVerrier recurrence, which divides by integers only.  A new root: x^2 - a stays irreducible over the tower
exactly when its norm (resultants over every algebraic generator, after a shift that makes it square-free) is.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from flint import fmpq

if TYPE_CHECKING:
    from derive.exact.field import Field

Poly = Any
TRIES = 6  # shifts x -> x - c s tried until the norm is square-free; all but finitely many are


def rationalised(num: Poly, den: Poly, field: Field) -> tuple[Poly, Poly]:
    """num/den with no algebraic generator, and no 1/u, left in the denominator."""
    for name, relation in field.relations:
        gen = field.gen[name]
        if name + "bar" in field.gen:
            num, den = _cleared(num, den, name, field)
        elif den.degrees()[field.index[name]] > 0:
            cofactor, den = _adjugate(den, relation, name, gen, field)
            num = field.reduce(num * cofactor)
    return num, den


def _cleared(num: Poly, den: Poly, name: str, field: Field) -> tuple[Poly, Poly]:
    """Multiply by a power of u until 1/u has left the denominator."""
    k = den.degrees()[field.index[name + "bar"]]
    lift = field.gen[name] ** int(k)
    return field.reduce(num * lift), field.reduce(den * lift)


def _adjugate(y: Poly, relation: Poly, name: str, gen: Poly, field: Field) -> tuple[Poly, Poly]:
    """(c, n) with y*c = n modulo the relation and n free of the generator."""
    d = int(relation.degrees()[field.index[name]])
    one = field.ring.constant(1)
    c, power = one, field.reduce(y)  # Faddeev-LeVerrier: M_1 = 1, A M_k, trace, M_{k+1} = A M_k + c_k
    for k in range(1, d):
        c = power - one * (_trace(power, name, gen, d, field) * fmpq(1, k))
        power = field.reduce(y * c)
    norm = _trace(power, name, gen, d, field) * fmpq(1, d)
    return c, norm


def _trace(y: Poly, name: str, gen: Poly, d: int, field: Field) -> Poly:
    """Trace of "multiply by y" on 1, s, ..., s^(d-1)."""
    total = field.ring.constant(0)
    for k in range(d):
        total = total + _coefficient(field.reduce(y * gen**k), name, k, field)
    return total


def _coefficient(y: Poly, name: str, k: int, field: Field) -> Poly:
    """Coefficient of s^k in y."""
    at = field.index[name]
    kept = {}
    for monomial, c in y.terms():
        if int(monomial[at]) == k:
            bare = list(map(int, monomial))
            bare[at] = 0
            kept[tuple(bare)] = c
    return field.ring.from_dict(kept)


def is_irreducible_square(
    relation: Poly, name: str, below: list[tuple[str, Poly]], gen: dict[str, Poly]
) -> bool:
    """Does s^2 - a, over the tower whose relations are `below`, stay irreducible?"""
    algebraic = [(n, r) for n, r in below if n + "bar" not in gen]
    for c in range(1, TRIES + 1):
        shift = gen[name]
        for weight, (n, _) in enumerate(algebraic, start=1):
            shift = shift - gen[n] * (c + weight)
        images = [shift if g == name else gen[g] for g in gen]
        norm = relation.compose(*images)
        for n, r in algebraic:
            norm = norm.resultant(r, n)
        factors = [(f, e) for f, e in norm.factor()[1] if f.degrees()[list(gen).index(name)] > 0]
        if all(e == 1 for _, e in factors):
            return len(factors) == 1
    return False

