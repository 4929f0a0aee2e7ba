"""Elements back to formulas, written as a person would: content and common letters in front, pairs as cos and sin."""

from __future__ import annotations

from fractions import Fraction
from functools import reduce
from math import gcd, lcm
from typing import TYPE_CHECKING, Any

from derive.formula.tree import I_UNIT, ZERO, Formula, call, inverse, number, plus, power, times

if TYPE_CHECKING:
    from derive.exact.field import Element, Field

Term = tuple[tuple[int, ...], Fraction]


def written(x: Element) -> Formula:
    """num/den as one formula."""
    if x.den is None:
        return _polynomial(x.num, x.field)
    top, below = _balanced(x.num, x.den, x.field)
    return times(_polynomial(top, x.field), inverse(_polynomial(below, x.field)))


def _balanced(num: Any, den: Any, field: Field) -> tuple[Any, Any]:
    """Both by the power of 1/u that puts 1 in the middle of the denominator, where cosines show."""
    for k in range(len(field.needs.units)):
        width = int(den.degrees()[field.index[f"unit{k}"]])
        if width and width % 2 == 0:
            back = field.gen[f"unit{k}bar"] ** (width // 2)
            num, den = field.reduce(num * back), field.reduce(den * back)
    return num, den


def _polynomial(f: Any, field: Field) -> Formula:
    terms = _turned([(tuple(map(int, m)), Fraction(int(c.p), int(c.q))) for m, c in f.terms()], field)
    if not terms:
        return ZERO
    common = tuple(min(column) for column in zip(*(m for m, _ in terms), strict=True))
    common = tuple(0 if _stays_inside(field, k) else e for k, e in enumerate(common))
    content = _content(_shown(terms, field))
    if len(terms) > 1 and terms[0][1] < 0 and all(c < 0 for _, c in terms):
        content = -content
    rest = [(tuple(a - b for a, b in zip(m, common, strict=True)), c / content) for m, c in terms]
    front = _letters(common, field)
    if len(rest) == 1:
        inner, c = rest[0]
        return _ordered(number(content * c), [*front, *_letters(inner, field)])
    return _ordered(number(content), [*front, _sum(rest, field)])


def _turned(terms: list[Term], field: Field) -> list[Term]:
    """Powers of a root of unity as i and a basis of roots and cosines, which take exponents behind the ring's own.

    A letter monomial that holds a single power keeps it, unless that power is 1, i, -1 or -i.
    """
    if "turn" not in field.gen:
        return terms
    turned, at = field.turned(), field.index["turn"]
    groups: dict[tuple[int, ...], dict[int, Fraction]] = {}
    for m, c in terms:
        groups.setdefault((*m[:at], 0, *m[at + 1 :]), {})[m[at]] = c
    none = (0,) * (1 + len(turned.basis))
    out: list[Term] = []
    for bare, powers in groups.items():
        k = next(iter(powers))
        if len(powers) == 1 and 4 * k % turned.order:
            out.append(((*bare[:at], k, *bare[at + 1 :], *none), powers[k]))
            continue
        for unit, part in enumerate(turned.coordinates(powers)):
            marks = (tuple(int(j == b) for b in range(len(part))) for j in range(len(part)))
            out += [((*bare, unit, *mark), c) for mark, c in zip(marks, part, strict=True) if c]
    return out


def _meanings(field: Field) -> list[Formula]:
    """What each exponent belongs to: the ring's generators, then i and the basis of `_turned`."""
    return field._meaning if "turn" not in field.gen else [*field._meaning, I_UNIT, *field.turned().basis]


def _ordered(front: Formula, factors: list[Formula]) -> Formula:
    """Rational, then i (two of them are a sign), then roots and letters, exponentials last."""
    flat = [a for f in factors for a in (f.args if f.head == "times" else (f,))]
    units = sum(f == I_UNIT for f in flat)
    rest = sorted((f for f in flat if f != I_UNIT), key=_rank)
    sign = number(-1) if units % 4 in (2, 3) else number(1)
    return times(front, sign, *([I_UNIT] if units % 2 else []), *rest)


def _rank(f: Formula) -> int:
    base = f.args[0] if f.head == "power" and isinstance(f.args[0], Formula) else f
    if base == I_UNIT:
        return 0
    if base.head in ("number", "constant"):
        return 1
    if base.head == "call":
        return {"sqrt": 2, "exp": 4, "cos": 4, "sin": 4}.get(base.args[0], 3)
    return 5 if base.head == "plus" else 3


def _stays_inside(field: Field, k: int) -> bool:
    """Exponentials and roots of unity are no common factor that a person would take out."""
    names = field.ring.names()
    return k < len(names) and str(names[k]).startswith(("unit", "growth", "turn"))


def _shown(terms: list[Term], field: Field) -> list[Fraction]:
    """The coefficients that will be seen: twice the term's own where u and 1/u make a cosine or a sine."""
    known = dict(terms)
    out = []
    for m, c in terms:
        mirror = _mirrored(m, field)
        paired = mirror != m and mirror in known and abs(known[mirror]) == abs(c)
        out.append(2 * c if paired else c)
    return out


def _content(values: list[Fraction]) -> Fraction:
    """The largest positive rational whose multiples they all are."""
    top = reduce(gcd, (v.numerator for v in values))
    return Fraction(top, reduce(lcm, (v.denominator for v in values)))


def _letters(exponents: tuple[int, ...], field: Field) -> list[Formula]:
    meanings = _meanings(field)
    return [_power_of(meanings[k], e) for k, e in enumerate(exponents) if e]


def _power_of(meaning: Formula, e: int) -> Formula:
    """meaning^e, with exponentials and square roots written in one piece."""
    if e == 1:
        return meaning
    if meaning.head == "call" and meaning.args[0] == "exp":
        return call("exp", times(number(e), meaning.args[1]))
    if meaning.head == "call" and meaning.args[0] == "sqrt":
        whole, odd = divmod(e, 2)
        inside = meaning.args[1] if whole == 1 else power(meaning.args[1], number(whole))
        return times(inside, meaning) if odd else inside
    if meaning.head == "power" and meaning.args[1].head == "number":
        exponent = meaning.args[1].args[0] * e
        return meaning.args[0] if exponent == 1 else power(meaning.args[0], number(exponent))
    return power(meaning, number(e))


def _sum(terms: list[Term], field: Field) -> Formula:
    """The terms in the ring's order, u + 1/u written as 2 cos and u - 1/u as 2 i sin."""
    left = dict(terms)
    out: list[Formula] = []
    for exponents, _ in terms:
        if exponents not in left:
            continue
        c = left.pop(exponents)
        mirror = _mirrored(exponents, field)
        other = left.get(mirror) if mirror != exponents else None
        if other is not None and abs(other) == abs(c):
            del left[mirror]
            out.append(_circular(exponents, c, other, field))
        else:
            out.append(_ordered(number(c), _letters(exponents, field)))
    return plus(*out)


def _mirrored(exponents: tuple[int, ...], field: Field) -> tuple[int, ...]:
    """The exponents with every unit u and 1/u exchanged."""
    out = list(exponents)
    for k in range(len(field.needs.units)):
        a, b = field.index[f"unit{k}"], field.index[f"unit{k}bar"]
        out[a], out[b] = out[b], out[a]
    return tuple(out)


def _circular(exponents: tuple[int, ...], c: Fraction, other: Fraction, field: Field) -> Formula:
    """c U + other/U, |other| = |c|, as 2 c cos or 2 i c sin."""
    rest, angle = list(exponents), []
    for k, (monomial, shared) in enumerate(field.needs.units.items()):
        a, b = field.index[f"unit{k}"], field.index[f"unit{k}bar"]
        steps = exponents[a] - exponents[b]
        rest[a] = rest[b] = 0
        if steps:
            angle.append(times(number(Fraction(steps, shared)), *monomial))
    name, factor = ("cos", ()) if other == c else ("sin", (I_UNIT,))
    letters = [*factor, *_letters(tuple(rest), field)]
    return _ordered(number(2 * c), [*letters, call(name, plus(*angle))])
