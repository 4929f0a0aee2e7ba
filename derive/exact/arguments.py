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
from derive.formula.tree import Formula, times


class Known(Protocol):
    """What the exact layer asks of a letter's domain."""

    @property
    def is_real(self) -> bool: ...

    @property
    def is_positive(self) -> bool: ...


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
        if name in ("sqrt", "log"):
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
    """One positive term and otherwise positive terms or squares of real ones."""
    positive = [is_positive(a, domains) for a in f.args]
    return any(positive) and all(p or _is_square(a, domains) for p, a in zip(positive, f.args, strict=True))


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
    return {(f,): (Fraction(1), Fraction(0))}


def _product(f: Formula, domains: Domains) -> Parts:
    out: Parts = {(): (Fraction(1), Fraction(0))}
    for factor in f.args:
        out = _multiply(out, taken_apart(factor, domains))
    return out


def _multiply(a: Parts, b: Parts) -> Parts:
    out: Parts = {}
    for m1, (r1, i1) in a.items():
        for m2, (r2, i2) in b.items():
            monomial = tuple(sorted(m1 + m2, key=text))
            r0, i0 = out.get(monomial, (Fraction(0), Fraction(0)))
            out[monomial] = (r0 + r1 * r2 - i1 * i2, i0 + r1 * i2 + i1 * r2)
    return {m: c for m, c in out.items() if c != (0, 0)}


def monomial_formula(monomial: Monomial) -> Formula:
    return times(*monomial)
