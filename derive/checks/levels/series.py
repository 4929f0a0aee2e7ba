"""What the exact roads of levels with a letter for their size share: series in x = -i tau, and how a claim is read.

    Y = x/2 - x^2 <d|H-E|d>/12 + x^4 <d|(H-E)^3|d>/720 + O(x^6)           (B_2 = 1/6, B_4 = -1/30)

with <d|H-E|d> = G and <d|(H-E)^3|d> = G^3 + m T^2 (2 G - E), G = C - E, by counting walks: m neighbours of the watched
site, no two of them joined, hopping of size T, energies 0 on them.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from derive.errors import NotCovered
from derive.exact.arguments import is_nonnegative
from derive.exact.field import Element, Field
from derive.formula.tree import TAU, Formula, letter, number, plus, power, times, walk
from derive.problem.setting import Domain, Relation
from derive.record.said import Expansion, Value

HIGHEST_ORDER = 5
"""The highest power of tau whose coefficient is demanded."""
K = letter("k")
Series = list[Element]


def y_series(field: Field, gap: Series, energy: Series, square: Element) -> Series:
    """Y; gap is C - E, square is m T^2."""
    around = [(g + g - e) * square for g, e in zip(gap, energy, strict=True)]
    cubed = [a + b for a, b in zip(around, product(field, gap, product(field, gap, gap)), strict=True)]
    y = [field.zero] * len(gap)
    for n in range(1, len(gap)):
        y[n] = field.rational(Fraction(1, 2)) if n == 1 else -gap[n - 2].scaled(Fraction(1, 12))
        if n >= 4:
            y[n] = y[n] + cubed[n - 4].scaled(Fraction(1, 720))
    return y


def composed(field: Field, coefficients: Series, d: Series) -> Series:
    """sum_n coefficients[n] d^n."""
    total = [field.zero] * len(d)
    for c in reversed(coefficients):
        total = product(field, total, d)
        total[0] = total[0] + c
    return total


def product(field: Field, a: Series, b: Series) -> Series:
    """Below the length of a."""
    out = [field.zero] * len(a)
    for i, x in enumerate(a):
        if x:
            for j in range(len(a) - i):
                if b[j]:
                    out[i + j] = out[i + j] + x * b[j]
    return out


# -- what a claim says


def highest_demanded(name: str, order: int) -> int:
    """The last power of tau below `order` that an energy or a rate has."""
    highest = order - 1 if (order - 1) % 2 == (name == "decay rate") else order - 2
    if highest > HIGHEST_ORDER:
        raise NotCovered(f"coefficients are demanded up to tau^{HIGHEST_ORDER}")
    return highest


def formula_of(value: Value) -> Formula:
    if isinstance(value, Expansion):
        pairs = zip(value.powers, value.terms, strict=True)
        return plus(*(times(t, power(TAU, number(k))) for k, t in pairs if isinstance(t, Formula)))
    if isinstance(value, Formula):
        return value
    raise NotCovered("a level is claimed by a formula")


def by_power(value: Value) -> dict[int, Formula]:
    """A claimed series by powers of tau; a single formula as it is, at power 0."""
    if isinstance(value, Expansion):
        return {k: t for k, t in zip(value.powers, value.terms, strict=True) if isinstance(t, Formula)}
    return {0: formula_of(value)}


def below(field: Field, x: Element, order: int) -> Formula | None:
    """The terms below tau^order, None where there are none."""
    at = field.index["letter:tau"]
    if x.den is not None and int(x.den.degrees()[at]) > 0:
        raise NotCovered("tau stands in a denominator")
    kept = field.ring.from_dict({tuple(map(int, m)): c for m, c in x.num.terms() if int(m[at]) < order})
    return None if kept.is_zero() else field.formula(Element(field, kept, x.den))


def holds_always(size: Formula, least: int, assume: Sequence[Relation], domains: dict[str, Domain]) -> bool:
    """Whether size >= least by the letters' domains or by an assumption that says so."""
    plain = [r for r in assume if not _called(r.left) and not _called(r.right)]
    field = Field.of([size, *(f for r in plain for f in (r.left, r.right))], domains)
    gap = field.element(size) - field.rational(least)
    if is_nonnegative(field.formula(gap), domains):
        return True
    known = [field.element(r.left) - field.element(r.right) for r in plain if r.op in (">", ">=", "=")]
    known += [field.element(r.right) - field.element(r.left) for r in plain if r.op in ("<", "<=", "=")]
    return any(not difference - gap for difference in known)


def _called(f: Formula) -> bool:
    """Whether f is more than a rational expression in declared letters."""
    return any(node.head in ("call", "sum") or node == K for node in walk(f))
