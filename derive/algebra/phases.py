"""Rational functions of phases u = exp(i m) written in sines and cosines, factor by factor.

A factor f of numerator or denominator with conj(f) u^(2c) = +-f, c the middle of its exponents, is u^c times a real
trigonometric polynomial, or i times one; half angles appear by themselves: u - 1 = u^(1/2) 2 i sin(m/2).
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from math import gcd, lcm
from typing import Any

from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, ONE, Formula, call, formula, inverse, number, plus, power, times

Exponents = tuple[Fraction, ...]
Poly = Any  # flint's fmpq_mpoly


def trigonometric(x: Element) -> Formula:
    """x with every phase turned into sines and cosines where its factors allow it."""
    field = x.field
    if not field.needs.units or not x:
        return field.formula(x)
    writer = _Writer(field)
    top, lift = writer.cleared(x.num)
    bottom, drop = writer.cleared(x.den if x.den is not None else field.one.num)
    front = Fraction(1)
    above: list[Formula] = []
    below: list[Formula] = []
    for polynomial, sign, into in ((top, 1, above), (bottom, -1, below)):
        content, factors = polynomial.factor()
        front *= Fraction(int(content.p), int(content.q)) ** sign
        for f, e in _paired(_joined([(f, int(e)) for f, e in factors], field), field):
            into += writer.written(f, sign * e)
    front *= writer.front
    return writer.together(front, above, below, [b - a for a, b in zip(lift, drop, strict=True)])


class _Writer:
    """One field, and what has been left over: powers of the u and of i."""

    def __init__(self, field: Field):
        self.field = field
        self.monomials = list(field.needs.units.items())
        self.places = [(field.index[f"unit{k}"], field.index[f"unit{k}bar"]) for k in range(len(self.monomials))]
        self.left = [Fraction(0)] * len(self.places)
        self.quarter_turns = 0
        self.front = Fraction(1)

    def cleared(self, f: Poly) -> tuple[Poly, list[Fraction]]:
        """(g, k) with f = u^(-k) g and no 1/u in g."""
        lift = []
        for n, (_, bar) in enumerate(self.places):
            k = int(f.degrees()[bar])
            f = self.field.reduce(f * self.field.gen[f"unit{n}"] ** k)
            lift.append(Fraction(k))
        return f, lift

    def written(self, f: Poly, e: int) -> list[Formula]:
        """f^e as a list of at most one formula; what it leaves over is noted."""
        split = self._split(f)
        if len(split) == 1 and self.field.formula(self._element(f)) == I_UNIT:
            self.quarter_turns += e
            return []
        centre = tuple((max(c) + min(c)) / 2 for c in zip(*split, strict=True))
        sign = self._symmetry(f, centre)
        if sign == 0:
            return [_raised(self.field.formula(self._element(f)), abs(e))]
        self.left = [a + e * c for a, c in zip(self.left, centre, strict=True)]
        self.quarter_turns += e if sign < 0 else 0
        content, shown = _taken_out(self._sum(split, centre, sign))
        self.front *= content**e
        return [] if shown == ONE else [_raised(shown, abs(e))]

    def _element(self, f: Poly) -> Element:
        return Element(self.field, self.field.reduce(f))

    def _split(self, f: Poly) -> dict[Exponents, Element]:
        """Coefficients, free of phases, by the exponents of the u."""
        found: dict[Exponents, dict[tuple[int, ...], Any]] = {}
        for monomial, c in f.terms():
            bare = list(map(int, monomial))
            key = tuple(Fraction(bare[a] - bare[b]) for a, b in self.places)
            for a, b in self.places:
                bare[a] = bare[b] = 0
            found.setdefault(key, {})[tuple(bare)] = c
        return {k: self._element(self.field.ring.from_dict(v)) for k, v in found.items()}

    def _symmetry(self, f: Poly, centre: Exponents) -> int:
        """+1 or -1 where conj(f) u^(2 centre) = +-f, else 0."""
        x = self._element(f)
        y = self.field.conjugate(x)
        for n, c in enumerate(centre):
            name = f"unit{n}" if c >= 0 else f"unit{n}bar"
            for _ in range(abs(int(2 * c))):
                y = y * Element(self.field, self.field.gen[name])
        return 1 if y == x else -1 if y == -x else 0

    def _sum(self, split: dict[Exponents, Element], centre: Exponents, sign: int) -> Formula:
        """f u^(-centre), divided by i where `sign` is -1."""
        terms: list[Formula] = []
        for key in sorted(split, reverse=True):
            away = tuple(k - c for k, c in zip(key, centre, strict=True))
            if not any(away):
                middle = split[key] if sign > 0 else split[key] * self._minus_i()
                terms.append(self.field.formula(middle))
            elif away > tuple(-a for a in away):
                terms += self._pair(split[key], away, sign)
        return plus(*terms)

    def _pair(self, c: Element, away: Exponents, sign: int) -> Iterator[Formula]:
        """c u^e + sign conj(c) u^-e = 2 Re c cos - 2 Im c sin, or i (2 Re c sin + 2 Im c cos)."""
        angle = self._angle(away)
        bar = self.field.conjugate(c)
        double_real, double_imaginary = c + bar, (c - bar) * self._minus_i() if c - bar else self.field.zero
        names = ("cos", "sin") if sign > 0 else ("sin", "cos")
        parts = ((double_real, names[0]), (-double_imaginary if sign > 0 else double_imaginary, names[1]))
        for factor, name in parts:
            if factor:
                yield times(self.field.formula(factor), call(name, angle))

    def _minus_i(self) -> Element:
        return self.field.element(-I_UNIT)

    def _angle(self, exponents: Exponents) -> Formula:
        parts = []
        for e, (monomial, shared) in zip(exponents, self.monomials, strict=True):
            if e:
                parts.append(times(number(e / shared), *monomial))
        return plus(*parts)

    def together(self, front: Fraction, above: list[Formula], below: list[Formula], lift: list[Fraction]) -> Formula:
        """The whole, with what the factors left over."""
        turns = self.quarter_turns % 4
        front = -front if turns in (2, 3) else front
        place = next((k for k, f in enumerate(above) if f.head == "plus"), None)
        if front < 0 and place is not None:  # a minus in front goes into the first sum
            front, above = -front, [*above[:place], _negated(above[place]), *above[place + 1 :]]
        rest = tuple(a + b for a, b in zip(self.left, lift, strict=True))
        unit = [I_UNIT] if turns % 2 else []
        phase = [call("exp", times(I_UNIT, self._angle(rest)))] if any(rest) else []
        return times(number(front), *unit, *above, *phase, *(inverse(f) for f in below))


def _joined(factors: list[tuple[Poly, int]], field: Field) -> list[tuple[Poly, int]]:
    """u - 1 and u + 1 to the same power are one factor, u^2 - 1: a sine of the whole angle."""
    for n in range(len(field.needs.units)):
        u = field.gen[f"unit{n}"]
        shared = min(_exponent(factors, u - 1), _exponent(factors, u + 1))
        if shared:
            factors = [(f, e - shared if f in (u - 1, u + 1) else e) for f, e in factors] + [(u**2 - 1, shared)]
    return [(f, e) for f, e in factors if e]


def _paired(factors: list[tuple[Poly, int]], field: Field) -> list[tuple[Poly, int]]:
    """A factor that is not its own mirror image, together with its mirror image where that is there too."""
    out: list[tuple[Poly, int]] = []
    left = list(factors)
    while left:
        f, e = left.pop(0)
        mirror = _mirror(f, field)
        place = next((k for k, (g, d) in enumerate(left) if d == e and _is_multiple(g, mirror)), None)
        if place is None or _is_multiple(f, mirror):
            out.append((f, e))
        else:
            out.append((f * left.pop(place)[0], e))
    return out


def _mirror(f: Poly, field: Field) -> Poly:
    """conj(f), 1/u cleared."""
    g = field.conjugate(Element(field, field.reduce(f))).num
    for n in range(len(field.needs.units)):
        k = int(g.degrees()[field.index[f"unit{n}bar"]])
        g = field.reduce(g * field.gen[f"unit{n}"] ** k)
    return g


def _is_multiple(f: Poly, g: Poly) -> bool:
    """f = q g for a rational q."""
    return bool(f * g.leading_coefficient() == g * f.leading_coefficient())


def _exponent(factors: list[tuple[Poly, int]], f: Poly) -> int:
    return next((e for g, e in factors if g == f), 0)


def _taken_out(f: Formula) -> tuple[Fraction, Formula]:
    """(q, g) with f = q g: the common content of a sum's terms, positive for its first term."""
    terms = f.args if f.head == "plus" else (f,)
    numbers = [_front(t) for t in terms]
    q = Fraction(gcd(*(c.numerator for c in numbers)), lcm(*(c.denominator for c in numbers)))
    q = -q if numbers[0] < 0 else q
    return q, plus(*(times(number(1 / q), t) for t in terms))


def _front(f: Formula) -> Fraction:
    """The rational in front of a term."""
    first = f.args[0] if f.head == "times" else f
    return first.args[0] if first.head == "number" else Fraction(1)


def _negated(f: Formula) -> Formula:
    return plus(*(times(number(-1), t) for t in f.args))


def _raised(f: Formula, e: int) -> Formula:
    return f if e == 1 else power(f, formula(e))
