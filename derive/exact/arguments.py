"""The argument of an exponential, taken apart into rational multiples of real monomials.

`taken_apart(f)` of `i*phi/2 + 3*g*t` is {(phi,): (0, 1/2), (g, t): (3, 0)}: real and imaginary rational
coefficient by monomial, a monomial being its non-rational real factors in a fixed order.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Protocol

from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import Formula, number, plus, power, times


class Known(Protocol):
    """What the exact layer asks of a letter's domain."""

    @property
    def is_real(self) -> bool: ...

    @property
    def is_positive(self) -> bool: ...

    @property
    def low(self) -> Formula | None: ...

    @property
    def high(self) -> Formula | None: ...

    @property
    def low_open(self) -> bool: ...

    @property
    def high_open(self) -> bool: ...


Domains = Mapping[str, Known]
Monomial = tuple[Formula, ...]
Parts = dict[Monomial, tuple[Fraction, Fraction]]

REAL_FUNCTIONS = frozenset(("sin", "cos", "exp", "sinh", "cosh", "tanh", "coth", "tan", "cot", "atan"))


def is_real(f: Formula, domains: Domains) -> bool:
    """Surely real for all values of its letters; False only says that it is not known."""
    if f.head in ("number", "operator"):
        return True
    if f.head == "constant":
        return f.args[0] in ("pi", "euler_gamma")
    if f.head == "letter":
        return f.args[0] in domains and domains[f.args[0]].is_real
    if f.head in ("plus", "times"):
        return all(is_real(a, domains) for a in f.args)
    if f.head == "power":
        base, exponent = f.args
        whole = exponent.head == "number" and exponent.args[0].denominator == 1
        return is_real(base, domains) and (whole or is_positive(base, domains))
    if f.head == "call":
        name, *args = f.args
        if name in ("Re", "Im", "abs"):
            return True
        if name == "sqrt":
            return is_nonnegative(args[0], domains)
        if name == "log":
            return is_positive(args[0], domains)
        return name in REAL_FUNCTIONS and all(is_real(a, domains) for a in args)
    return False


def is_positive(f: Formula, domains: Domains) -> bool:
    """Surely above 0; False only says that it is not known."""
    if f.head == "number":
        return bool(f.args[0] > 0)
    if f.head == "constant":
        return f.args[0] in ("pi", "euler_gamma")
    if f.head == "letter":
        return f.args[0] in domains and domains[f.args[0]].is_positive
    if f.head == "times":
        return all(is_positive(a, domains) for a in f.args)
    if f.head == "plus":
        return _is_positive_sum(f, domains)
    if f.head == "power":
        return is_positive(f.args[0], domains) and is_real(f.args[1], domains)
    if f.head == "call" and f.args[0] in ("sqrt", "exp", "cosh"):
        return is_positive(f.args[1], domains) if f.args[0] == "sqrt" else is_real(f.args[1], domains)
    return False


def _is_positive_sum(f: Formula, domains: Domains) -> bool:
    """The terms' lower bounds add up to more than 0, or to 0 with one of them out of reach."""
    least = _bound(f, domains, 1)
    return least is not None and (least[0] > 0 or least == (0, True))


def is_nonnegative(f: Formula, domains: Domains) -> bool:
    """Surely 0 or above; False only says that it is not known."""
    least = _bound(f, domains, 1)
    return least is not None and least[0] >= 0


def _bound(f: Formula, domains: Domains, side: int) -> tuple[Fraction, bool] | None:
    """A bound of side*f from below and whether it is out of reach; None where none is known."""
    if f.head == "number":
        return side * f.args[0], False
    if f.head == "plus":
        bounds = [_bound(a, domains, side) for a in f.args]
        known = [b for b in bounds if b is not None]
        total = sum((b for b, _ in known), Fraction(0))
        return (total, any(o for _, o in known)) if len(known) == len(bounds) else None
    if f.head == "times" and f.args[0].head == "number":
        front, rest = f.args[0].args[0], times(*f.args[1:])
        inner = _bound(rest, domains, side if front > 0 else -side)
        return None if inner is None else (abs(front) * inner[0], inner[1])
    if f.head == "letter" and f.args[0] in domains:
        found = _letter_bound(domains[f.args[0]], side)
        if found is not None:
            return found
    if side < 0:
        return None
    if is_positive(f, domains):
        return Fraction(0), True
    root = f.head == "call" and f.args[0] == "sqrt" and is_nonnegative(f.args[1], domains)
    return (Fraction(0), False) if root or _is_square(f, domains) else None


def _letter_bound(domain: Known, side: int) -> tuple[Fraction, bool] | None:
    end, is_open = (domain.low, domain.low_open) if side > 0 else (domain.high, domain.high_open)
    return None if end is None or end.head != "number" else (side * end.args[0], is_open)


def _is_square(f: Formula, domains: Domains) -> bool:
    if f.head == "times":
        return all(is_positive(a, domains) or _is_square(a, domains) for a in f.args)
    if f.head != "power" or f.args[1].head != "number":
        return False
    exponent = f.args[1].args[0]
    return exponent.denominator == 1 and exponent % 2 == 0 and is_real(f.args[0], domains)


def taken_apart(f: Formula, domains: Domains) -> Parts:
    """f as a sum of Gaussian rationals times real monomials, or `NotCovered`."""
    if f.head == "plus":
        parts: Parts = {}
        for term in f.args:
            for monomial, (re, im) in taken_apart(term, domains).items():
                r0, i0 = parts.get(monomial, (Fraction(0), Fraction(0)))
                parts[monomial] = (r0 + re, i0 + im)
        return {m: c for m, c in parts.items() if c != (0, 0)}
    if f.head == "times":
        return _product(f, domains)
    if f.head == "number":
        return {(): (f.args[0], Fraction(0))} if f.args[0] else {}
    if f.head == "constant" and f.args[0] == "i":
        return {(): (Fraction(0), Fraction(1))}
    if not is_real(f, domains):
        raise NotCovered(f"the argument {text(f)} is not known to be real")
    if f.head == "power" and f.args[1].head == "number" and f.args[1].args[0].denominator == 1:
        return _power(f.args[0], int(f.args[1].args[0]), domains)
    return {(f,): (Fraction(1), Fraction(0))}


def _power(base: Formula, n: int, domains: Domains) -> Parts:
    """base^n in one shape however it is written: numbers out, one term factor by factor, a sum with a leading 1."""
    parts = taken_apart(base, domains)
    if not parts and n < 0:
        raise NotCovered("the argument divides by zero")
    if len(parts) <= 1:
        monomial, (front, _) = next(iter(parts.items()), ((), (Fraction(0), Fraction(0))))
        return {_merged(monomial, n): (front**n, Fraction(0))} if front or not n else {}
    ordered = sorted(parts, key=lambda m: (not m, [text(f) for f in m]))  # the number, if any, last
    front = parts[ordered[0]][0]
    inner = plus(*(times(number(parts[m][0] / front), *m) for m in ordered))
    return {(power(inner, number(n)) if n != 1 else inner,): (front**n, Fraction(0))}


def _merged(monomial: Monomial, n: int = 1) -> Monomial:
    """monomial^n with each base once, in a fixed order."""
    exponents: dict[Formula, Fraction] = {}
    for f in monomial:
        plain = f.head == "power" and f.args[1].head == "number" and f.args[1].args[0].denominator == 1
        base, e = (f.args[0], f.args[1].args[0]) if plain else (f, Fraction(1))
        exponents[base] = exponents.get(base, Fraction(0)) + e * n
    kept = [base if e == 1 else power(base, number(e)) for base, e in exponents.items() if e]
    return tuple(sorted(kept, key=text))


def _product(f: Formula, domains: Domains) -> Parts:
    out: Parts = {(): (Fraction(1), Fraction(0))}
    for factor in f.args:
        out = _multiply(out, taken_apart(factor, domains))
    return out


def _multiply(a: Parts, b: Parts) -> Parts:
    out: Parts = {}
    for m1, (r1, i1) in a.items():
        for m2, (r2, i2) in b.items():
            monomial = _merged(m1 + m2)
            r0, i0 = out.get(monomial, (Fraction(0), Fraction(0)))
            out[monomial] = (r0 + r1 * r2 - i1 * i2, i0 + r1 * i2 + i1 * r2)
    return {m: c for m, c in out.items() if c != (0, 0)}


def monomial_formula(monomial: Monomial) -> Formula:
    return times(*monomial)
