"""A declared exact field: formulas to elements and back, arithmetic, conjugation, and an honest zero test.

    F = Field.of([f, g], domains)
    x = F.element(f);  x*x + F.conjugate(x);  F.is_zero(x);  F.formula(x)

An element is numerator over denominator, polynomials over Q in the tower's generators (see `tower.py`).  The
numerator is kept reduced modulo the tower's relations, so it is zero exactly when the element is; denominators
hold no algebraic generator.  `is_zero` answers True, False, or None where free generators (pi and log 2, say) might
conspire.  `F.excluded` collects what was divided by and therefore must not vanish.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from fractions import Fraction
from typing import Any

from flint import Ordering, fmpq, fmpq_mpoly_ctx, fmpz_poly

from derive.errors import NotCovered
from derive.exact import algebraic
from derive.exact.arguments import Domains, Monomial, taken_apart
from derive.exact.tower import (
    CIRCULAR,
    HYPERBOLIC,
    Needs,
    factored,
    in_turn,
    root_factors,
    scan,
)
from derive.exact.turned import Turned
from derive.formula.text import text
from derive.formula.tree import I_UNIT, PI, Formula, call, letter, number, power, times

Poly = Any  # flint's fmpq_mpoly


class Element:
    """A member of a field.  `num` is reduced, `den` is a polynomial without algebraic generators."""

    __slots__ = ("field", "num", "den")

    def __init__(self, field: Field, num: Poly, den: Poly | None = None):
        self.field = field
        self.num = num
        self.den = den  # None means 1: the hot path has no denominators

    def __add__(self, other: Element) -> Element:
        if self.den is None and other.den is None:
            return Element(self.field, self.num + other.num)
        return self.field.add(self, other)

    def __sub__(self, other: Element) -> Element:
        if self.den is None and other.den is None:
            return Element(self.field, self.num - other.num)
        return self.field.add(self, -other)

    def __neg__(self) -> Element:
        return Element(self.field, -self.num, self.den)

    def __mul__(self, other: Element) -> Element:
        num = self.field.reduce(self.num * other.num)
        if self.den is None and other.den is None:
            return Element(self.field, num)
        return self.field.quotient(num, self.field.denominators(self, other))

    def __truediv__(self, other: Element) -> Element:
        return self * self.field.invert(other)

    def scaled(self, q: Fraction) -> Element:
        """self times a rational."""
        return Element(self.field, self.num * fmpq(q.numerator, q.denominator), self.den)

    def __bool__(self) -> bool:
        """False when the element is identically zero in the field."""
        return not self.num.is_zero()

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Element) and not (self - other)

    __hash__ = None  # type: ignore[assignment]

    def __repr__(self) -> str:
        return f"Element({text(self.field.formula(self))!r})"


class Field:
    """Built by `Field.of`; holds the polynomial ring, the relations and how to conjugate."""

    def __init__(self, needs: Needs, domains: Domains):
        self.needs = needs
        self.domains = domains
        self.excluded: list[Formula] = []
        self._cache: dict[Formula, Element] = {}
        self._written_turns: Turned | None = None
        names = _names(needs, domains)
        self.ring: Any = fmpq_mpoly_ctx.get(tuple(names), Ordering.lex)
        self.index = {name: k for k, name in enumerate(names)}
        gens = self.ring.gens()
        self.gen: dict[str, Poly] = dict(zip(names, gens, strict=True))
        self.relations: list[tuple[str, Poly]] = []
        self._meaning: list[Formula] = [_meaning(name, self) for name in names]
        self.one = Element(self, self.ring.constant(1))
        self.zero = Element(self, self.ring.constant(0))
        self._relate()
        self._images = self._conjugates(names)
        self.is_real = all(a == b for a, b in zip(self._images, gens, strict=True))

    @staticmethod
    def of(formulas: Iterable[Formula], domains: Domains) -> Field:
        """The smallest field here that holds every formula; `NotCovered` says which one it cannot hold."""
        return Field(scan(formulas, domains), domains)

    # -- the tower

    def _relate(self) -> None:
        """Monic relations, outer generators first, so that one pass reduces."""
        needs = self.needs
        base: list[tuple[str, Poly]] = []
        if "i" in self.gen:
            base.append(("i", self.gen["i"] ** 2 + 1))
        if "turn" in self.gen:
            base.append(("turn", self._cyclotomic()))
        for prime, q in needs.radicals.items():
            if _prime_name(prime) in self.gen:
                base.append((_prime_name(prime), self.gen[_prime_name(prime)] ** q - prime))
        for kind, table in (("unit", needs.units), ("growth", needs.growths)):
            for k in range(len(table)):
                pair = self.gen[f"{kind}{k}"] * self.gen[f"{kind}{k}bar"]
                base.append((f"{kind}{k}", pair - 1))
        self.relations = base
        for k, radicand in enumerate(needs.nested):
            self._adjoin_root(k, radicand)

    def _cyclotomic(self) -> Poly:
        coefficients = fmpz_poly.cyclotomic(self.needs.turn).coeffs()
        zeta, out = self.gen["turn"], self.ring.constant(0)
        for k, c in enumerate(coefficients):
            out = out + zeta**k * int(c)
        return out

    def _adjoin_root(self, k: int, radicand: Formula) -> None:
        """s^2 = radicand, refused where x^2 - radicand has a root already."""
        inside = self.element(radicand)
        if inside.den is not None:
            raise NotCovered(f"the root of {text(radicand)}, which has a denominator")
        name = f"root{k}"
        relation = self.gen[name] ** 2 - inside.num
        if not algebraic.is_irreducible_square(relation, name, self.relations, self.gen):
            raise NotCovered(f"the root of {text(radicand)} can be written without it")
        self.relations = [(name, relation), *self.relations]

    def _conjugates(self, names: Sequence[str]) -> list[Poly]:
        return [self._conjugate_of(name) for name in names]

    def _conjugate_of(self, name: str) -> Poly:
        gen = self.gen[name]
        if name == "i":
            return -gen
        if name == "turn":
            return self.reduce(gen ** (self.needs.turn - 1))
        if name.startswith("unit") or name.startswith("letter:") and name + "bar" in self.gen:
            return self.gen[name + "bar"] if not name.endswith("bar") else self.gen[name[:-3]]
        if name.startswith("letter:") and name.endswith("bar") and name[:-3] in self.gen:
            return self.gen[name[:-3]]
        return gen

    # -- arithmetic

    def reduce(self, f: Poly) -> Poly:
        """Normal form modulo the relations."""
        for _, relation in self.relations:
            f = divmod(f, relation)[1]
        return f

    def denominators(self, a: Element, b: Element) -> Poly:
        if a.den is None or b.den is None:
            return a.den if b.den is None else b.den
        return a.den * b.den

    def add(self, a: Element, b: Element) -> Element:
        one = self.one.num
        if a.den is not None and b.den is not None and a.den == b.den:
            return self.quotient(a.num + b.num, a.den)
        left = a.num * (one if b.den is None else b.den)
        right = b.num * (one if a.den is None else a.den)
        return self.quotient(self.reduce(left + right), self.denominators(a, b))

    def quotient(self, num: Poly, den: Poly | None) -> Element:
        """num/den with common factors out and a rational denominator absorbed."""
        if den is None:
            return Element(self, num)
        turned = [name for name in self.gen if name + "bar" in self.gen and name.startswith(("unit", "growth"))]
        for name in turned:
            num, den = self._raised(num, den, name)
        common = num.gcd(den) if not num.is_zero() else den
        if not common.is_constant():
            num, den = num // common, den // common
        for name in turned:
            num, den = self._lowered_again(num, den, name)
        lead = 1 / den.leading_coefficient()
        return Element(self, num * lead) if den.is_constant() else Element(self, num * lead, den * lead)

    def _raised(self, num: Poly, den: Poly, name: str) -> tuple[Poly, Poly]:
        """num/den without 1/u, so that common factors show: u and 1/u are letters of their own to a polynomial."""
        at = self.index[name + "bar"]
        most = max(int(num.degrees()[at]), int(den.degrees()[at])) if not num.is_zero() else int(den.degrees()[at])
        lift = self.gen[name] ** most
        return self.reduce(num * lift), self.reduce(den * lift)

    def _lowered_again(self, num: Poly, den: Poly, name: str) -> tuple[Poly, Poly]:
        """The same with no power of u in front of the denominator."""
        at = self.index[name]
        least = min(int(m[at]) for m in den.monoms())
        if not least:
            return num, den
        return self.reduce(num * self.gen[name + "bar"] ** least), den // self.gen[name] ** least

    def invert(self, x: Element) -> Element:
        """1/x; what must not vanish is noted in `excluded`."""
        if not x:
            raise ZeroDivisionError("this divides by zero")
        num, den = algebraic.rationalised(self.one.num if x.den is None else x.den, x.num, self)
        if not x.num.is_constant():
            shown = self.formula(x)
            if shown not in self.excluded:
                self.excluded.append(shown)
        return self.quotient(self.reduce(num), den)

    def conjugate(self, x: Element) -> Element:
        if self.is_real:
            return x
        num = self.reduce(x.num.compose(*self._images, ctx=self.ring))
        if x.den is None:
            return Element(self, num)
        den = self.reduce(x.den.compose(*self._images, ctx=self.ring))
        return Element(self, num) / Element(self, den)

    def is_zero(self, x: Element) -> bool | None:
        if not x:
            return True
        if any(self._turns_whole(m) for m in self.needs.units):
            return None
        certain = all(f == PI for f in self.needs.free) and len(self.needs.free) <= 1
        numbers = any(not any(map(_has_letter, m)) for m in (*self.needs.units, *self.needs.growths))
        return False if certain and not (numbers and self.needs.free) else None

    def _turns_whole(self, monomial: Monomial) -> bool:
        """An angle such as pi L, L an integer: its phase is no free generator, so "not zero" is not known."""
        names = [f.args[0] for f in monomial if f.head == "letter"]
        whole = [getattr(self.domains[n], "kind", "") == "integer" for n in names]
        return PI in monomial and any(whole)

    def rational(self, q: Fraction | int) -> Element:
        q = Fraction(q)
        return Element(self, self.ring.constant(fmpq(q.numerator, q.denominator)))

    # -- from formulas

    def element(self, f: Formula) -> Element:
        """f in this field; `NotCovered` if it was not declared."""
        known = self._cache.get(f)
        if known is None:
            known = self._cache[f] = self._convert(f)
        return known

    def _convert(self, f: Formula) -> Element:
        makers: dict[str, Callable[[Formula], Element]] = {
            "number": lambda g: self.rational(g.args[0]),
            "constant": self._constant,
            "letter": self._letter,
            "plus": self._plus,
            "times": self._times,
            "power": self._power,
            "call": self._call,
        }
        if f.head not in makers:
            raise NotCovered(f"{text(f)} has no place in an exact field here")
        return makers[f.head](f)

    def _gen(self, name: str, what: Formula) -> Element:
        if name not in self.gen:
            raise NotCovered(f"{text(what)} was not declared in this field")
        return Element(self, self.gen[name])

    def _constant(self, f: Formula) -> Element:
        if f.args[0] == "i":
            return self._i()
        return self._free(f)

    def _i(self) -> Element:
        if "turn" in self.gen:
            return Element(self, self.reduce(self.gen["turn"] ** (self.needs.turn // 4)))
        return self._gen("i", I_UNIT)

    def _free(self, f: Formula) -> Element:
        if f not in self.needs.free:
            raise NotCovered(f"{text(f)} was not declared in this field")
        return Element(self, self.gen[f"free{self.needs.free.index(f)}"])

    def _letter(self, f: Formula) -> Element:
        gen = self._gen(f"letter:{f.args[0]}", f)
        q = self.needs.letter_roots.get(f.args[0], 1)
        return Element(self, gen.num**q) if q > 1 else gen

    def _plus(self, f: Formula) -> Element:
        out = self.zero
        for a in f.args:
            out = out + self.element(a)
        return out

    def _times(self, f: Formula) -> Element:
        out = self.one
        for a in f.args:
            out = out * self.element(a)
        return out

    def _power(self, f: Formula) -> Element:
        base, exponent = f.args
        if exponent.head != "number":
            raise NotCovered(f"the exponent of {text(f)} is no rational number")
        e = exponent.args[0]
        return self._whole(self.element(base), int(e)) if e.denominator == 1 else self._root(base, e)

    def _whole(self, x: Element, e: int) -> Element:
        if e < 0:
            return self.invert(self._whole(x, -e))
        out, square = self.one, x
        while e:
            if e & 1:
                out = out * square
            e >>= 1
            if e:
                square = square * square
        return out

    def _root(self, base: Formula, e: Fraction) -> Element:
        """base^e for a fractional e, factor by factor."""
        out = self.one
        for factor, share in root_factors(base, self.domains):
            out = out * self._factor_root(factor, share * e)
        return out

    def _factor_root(self, factor: Formula, e: Fraction) -> Element:
        if factor.head == "number":
            return self._number_root(factor.args[0], e)
        if factor.head == "letter":
            name = factor.args[0]
            steps = e * self.needs.letter_roots.get(name, 1)
            if steps.denominator != 1:
                raise NotCovered(f"{name}^{e} was not declared in this field")
            return self._whole(self._gen(f"letter:{name}", factor), int(steps))
        if e.denominator == 1:
            return self._whole(self.element(factor), int(e))
        if factor not in self.needs.nested:
            raise NotCovered(f"the root of {text(factor)} was not declared in this field")
        return self._whole(Element(self, self.gen[f"root{self.needs.nested.index(factor)}"]), int(2 * e))

    def _number_root(self, value: Fraction, e: Fraction) -> Element:
        out = self.one
        if value < 0:
            out = self._whole(self._i(), int(2 * e))
        for prime, k in factored(value):
            out = out * self._prime_root(prime, k * e)
        return out

    def _prime_root(self, prime: int, e: Fraction) -> Element:
        q = self.needs.radicals.get(prime, 1)
        steps = e * q
        if steps.denominator != 1:
            raise NotCovered(f"{prime}^({e}) was not declared in this field")
        whole, rest = divmod(int(steps), q)
        front = self.rational(Fraction(prime) ** whole)
        if not rest:
            return front
        name = _prime_name(prime)
        inner = Element(self, self.gen[name] ** rest) if name in self.gen else self._gauss_sum(prime)
        return front * inner

    def _gauss_sum(self, prime: int) -> Element:
        """The positive square root of a prime in Q(zeta_n): published as the quadratic Gauss sum."""
        n = self.needs.turn
        zeta = self.gen["turn"]
        if prime == 2:
            return Element(self, self.reduce(zeta ** (n // 8) + zeta ** (n - n // 8)))
        total = self.ring.constant(0)
        for a in range(1, prime):
            total = total + zeta ** (a * (n // prime)) * (1 if pow(a, (prime - 1) // 2, prime) == 1 else -1)
        found = Element(self, self.reduce(total))
        return found if prime % 4 == 1 else -(self._i() * found)

    def _call(self, f: Formula) -> Element:
        name, *args = f.args
        if name == "sqrt":
            return self._root(args[0], Fraction(1, 2))
        if name == "exp":
            return self._exponential(args[0], 1)
        if name in CIRCULAR or name in HYPERBOLIC:
            return self._trigonometric(name, args[0])
        if name in ("conj", "Re", "Im"):
            return self._part(name, self.element(args[0]))
        if name == "abs":
            return self.element(args[0])
        return self._free(f)

    def _part(self, name: str, x: Element) -> Element:
        bar = self.conjugate(x)
        if name == "conj":
            return bar
        half = Fraction(1, 2)
        return (x + bar).scaled(half) if name == "Re" else -(self._i() * (x - bar)).scaled(half)

    def _exponential(self, argument: Formula, sign: int) -> Element:
        out = self.one
        for monomial, (re, im) in taken_apart(argument, self.domains).items():
            if re:
                out = out * self._pair("growth", self.needs.growths, monomial, sign * re)
            if im and monomial == (PI,):
                out = out * self._turned(sign * im)
            elif im:
                out = out * self._pair("unit", self.needs.units, monomial, sign * im)
        return out

    def _pair(self, kind: str, table: dict[Any, int], monomial: Any, q: Fraction) -> Element:
        steps = q * table.get(monomial, 1)
        if monomial not in table or steps.denominator != 1:
            raise NotCovered("an exponential that was not declared in this field")
        k = list(table).index(monomial)
        gen = self.gen[f"{kind}{k}" if steps > 0 else f"{kind}{k}bar"]
        return Element(self, gen ** abs(int(steps)))

    def _turned(self, q: Fraction) -> Element:
        """exp(i pi q)."""
        if q.denominator == 1:
            return self.rational(-1 if q % 2 else 1)
        if "turn" not in self.gen:
            return self._whole(self._i(), int(2 * q) % 4)
        n = self.needs.turn
        steps = q / 2 * n
        if steps.denominator != 1:
            raise NotCovered(f"exp(i*pi*{q}) was not declared in this field")
        return Element(self, self.reduce(self.gen["turn"] ** (int(steps) % n)))

    def _trigonometric(self, name: str, argument: Formula) -> Element:
        inner = argument if name in HYPERBOLIC else times(I_UNIT, argument)
        up, down = self._exponential(inner, 1), self._exponential(inner, -1)
        even, odd = (up + down).scaled(Fraction(1, 2)), (up - down).scaled(Fraction(1, 2))
        if name in CIRCULAR:
            odd = -(self._i() * odd)
        if name in ("cos", "cosh", "sin", "sinh"):
            return even if name.startswith("cos") else odd
        return odd / even if name in ("tan", "tanh") else even / odd

    # -- back to formulas

    def turned(self) -> Turned:
        """How numbers of the root of unity are written; made when first needed."""
        if self._written_turns is None:
            self._written_turns = Turned(self)
        return self._written_turns

    def formula(self, x: Element) -> Formula:
        """x as a formula: common factors in front, letters in the order they were declared."""
        from derive.exact.back import written

        return written(x)


def _has_letter(f: Formula) -> bool:
    return f.head == "letter" or any(_has_letter(a) for a in f.args if isinstance(a, Formula))


def _prime_name(prime: int) -> str:
    return f"prime{prime}"


def _names(needs: Needs, domains: Domains) -> list[str]:
    """Generators, algebraic ones first: a lexicographic order in which every relation leads with its own."""
    names = [f"root{k}" for k in reversed(range(len(needs.nested)))]
    if needs.turn > 4:
        names.append("turn")
    elif needs.i:
        names.append("i")
    names += [_prime_name(p) for p in sorted(needs.radicals) if not in_turn(p, needs.turn)]
    for kind, table in (("unit", needs.units), ("growth", needs.growths)):
        for k in range(len(table)):
            names += [f"{kind}{k}", f"{kind}{k}bar"]
    declared = [name for name in domains if name in needs.letters]
    for name in declared:
        names.append(f"letter:{name}")
        if not domains[name].is_real:
            names.append(f"letter:{name}bar")
    return names + [f"free{k}" for k in range(len(needs.free))]


def _meaning(name: str, field: Field) -> Formula:
    """What one generator stands for."""
    needs = field.needs
    if name == "i":
        return I_UNIT
    if name == "turn":
        return call("exp", times(number(Fraction(2, needs.turn)), I_UNIT, PI))
    if name.startswith("prime"):
        prime = int(name[5:])
        q = needs.radicals[prime]
        return call("sqrt", number(prime)) if q == 2 else power(number(prime), number(Fraction(1, q)))
    if name.startswith("root"):
        return call("sqrt", needs.nested[int(name[4:])])
    if name.startswith("free"):
        return needs.free[int(name[4:])]
    if name.startswith("letter:"):
        return _letter_meaning(name[7:], field)
    return _pair_meaning(name, needs)


def _letter_meaning(name: str, field: Field) -> Formula:
    if name not in field.domains:
        return call("conj", letter(name[:-3]))
    q = field.needs.letter_roots.get(name, 1)
    if q == 2:
        return call("sqrt", letter(name))
    return letter(name) if q == 1 else power(letter(name), number(Fraction(1, q)))


def _pair_meaning(name: str, needs: Needs) -> Formula:
    kind = "unit" if name.startswith("unit") else "growth"
    digits = name[len(kind) :]
    sign = -1 if digits.endswith("bar") else 1
    table = needs.units if kind == "unit" else needs.growths
    monomial, shared = list(table.items())[int(digits.removesuffix("bar"))]
    front = (I_UNIT,) if kind == "unit" else ()
    return call("exp", times(number(Fraction(sign, shared)), *front, *monomial))
