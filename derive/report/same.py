"""Do two formulas have the same terms?  Decides by shape, for printing only.

A matrix is printed by half where the other half is seen to be its conjugate; where that is not seen, everything is
printed.  Nothing here says anything about truth: that is the checks' business.
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache

from derive.formula.text import text
from derive.formula.tree import Formula

MOST_TERMS = 400  # an expansion longer than this is not looked at

Atoms = tuple[tuple[str, Fraction], ...]
Terms = dict[Atoms, tuple[Fraction, Fraction]]
Flat = Terms | None


def same(f: Formula, g: Formula, sign: int = 1) -> bool:
    """Do f and sign*g have the same terms?  False means: not seen to be."""
    left, right = flat(f), flat(g)
    if left is None or right is None:
        return False
    return left == {k: (sign * a, sign * b) for k, (a, b) in right.items()}


@lru_cache(maxsize=20_000)
def flat(f: Formula) -> Flat:
    if f.head == "number":
        return {(): (f.args[0], Fraction(0))} if f.args[0] else {}
    if f.head == "constant" and f.args[0] == "i":
        return {(): (Fraction(0), Fraction(1))}
    if f.head == "plus":
        return _added([flat(a) for a in f.args])
    if f.head == "times":
        return _multiplied([flat(a) for a in f.args])
    if f.head == "power" and f.args[1].head == "number":
        return _flat_power(f)
    return {((text(f), Fraction(1)),): (Fraction(1), Fraction(0))}




def _flat_power(f: Formula) -> Flat:
    base, exponent = f.args[0], f.args[1].args[0]
    if exponent.denominator == 1 and 0 < exponent <= 12 and base.head in ("plus", "times", "constant"):
        return _multiplied([flat(base)] * int(exponent))
    return {((text(base), exponent),): (Fraction(1), Fraction(0))}


def _added(parts: list[Flat]) -> Flat:
    out: Terms = {}
    for part in parts:
        if part is None:
            return None
        for key, (a, b) in part.items():
            c, d = out.get(key, (Fraction(0), Fraction(0)))
            out[key] = (a + c, b + d)
    return {k: v for k, v in out.items() if v != (0, 0)}


def _multiplied(parts: list[Flat]) -> Flat:
    out: Terms = {(): (Fraction(1), Fraction(0))}
    for part in parts:
        if part is None or len(out) * len(part) > MOST_TERMS:
            return None
        products: list[Flat] = [
            {_joined(k, m): (a * c - b * d, a * d + b * c)}
            for k, (a, b) in out.items()
            for m, (c, d) in part.items()
        ]
        summed = _added(products)
        out = summed if summed is not None else {}
    return out


def _joined(left: Atoms, right: Atoms) -> Atoms:
    powers = dict(left)
    for atom, exponent in right:
        powers[atom] = powers.get(atom, Fraction(0)) + exponent
    return tuple(sorted((a, e) for a, e in powers.items() if e))
