"""Complex conjugate of a formula, carried inwards as far as the letters' domains allow.

Both triangles of H come from one: H_yx = conj(H_xy).  Real letters stay, i turns to -i, exp(a) to exp(conj(a));
where nothing certain can be said the result is conj(...), which is always right.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from derive.formula.tree import (
    Formula,
    call,
    free_letters,
    negate,
    plus,
    power,
    times,
    walk,
)
from derive.problem.setting import Domain

Domains = Mapping[str, Domain]

# Analytic, real on the real axis and without a cut: f(conj z) = conj f(z) wherever f is finite.
_REFLECTING = ("exp", "sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "Gamma", "factorial", "binomial")
_REAL_VALUED = ("abs", "Re", "Im", "floor")
_INTEGER = Domain("integer", "integer")
_REAL = Domain("real", "real")


def conjugate(f: Formula, domains: Domains) -> Formula:
    """conj(f), for letters in their `domains`; a letter without one is taken as complex."""
    if f.head in ("number", "root"):
        return f
    if f.head == "constant":
        return negate(f) if f.args[0] == "i" else f
    if f.head == "letter":
        return f if _real_letter(f, domains) else call("conj", f)
    if f.head in ("plus", "times"):
        return (plus if f.head == "plus" else times)(*(conjugate(a, domains) for a in f.args))
    if f.head == "power":
        return _power(f, domains)
    if f.head == "call":
        return _call(f, domains)
    if f.head in ("sum", "integral"):
        return _ranged(f, domains)
    return _rootsum(f, domains) if f.head == "rootsum" else call("conj", f)


def _real_letter(f: Formula, domains: Domains) -> bool:
    domain = domains.get(f.args[0])
    return domain is not None and domain.is_real


def _power(f: Formula, domains: Domains) -> Formula:
    base, exponent = f.args
    if exponent.head == "number" and exponent.args[0].denominator == 1:
        return power(conjugate(base, domains), exponent)
    if surely_nonnegative(base, domains):  # base^z reflects for a base >= 0
        return power(base, conjugate(exponent, domains))
    if exponent.head == "letter" and domains.get(exponent.args[0], _REAL).kind == "integer":
        return power(conjugate(base, domains), exponent)
    return call("conj", f)


def _call(f: Formula, domains: Domains) -> Formula:
    name, *args = f.args
    if name in _REAL_VALUED:
        return f
    if name == "conj":
        return args[0]
    if name in _REFLECTING:
        return call(name, *(conjugate(a, domains) for a in args))
    if name in ("sqrt", "log") and surely_nonnegative(args[0], domains):
        return f
    if name == "atan" and surely_real(args[0], domains):
        return f
    if name in ("bessel_J", "bessel_I") and args[0].head == "number" and args[0].args[0].denominator == 1:
        return call(name, args[0], conjugate(args[1], domains))
    return call("conj", f)


def _ranged(f: Formula, domains: Domains) -> Formula:
    name, low, high, body = f.args
    if not (surely_real(low, domains) and surely_real(high, domains)):
        return call("conj", f)
    inner = dict(domains)
    inner[name] = _INTEGER if f.head == "sum" else _REAL
    return Formula(f.head, (name, low, high, conjugate(body, inner)))


def _rootsum(f: Formula, domains: Domains) -> Formula:
    """The roots of conj(p) are the conjugates: the bound letter may be read as real, unless the body looks at
    its real or imaginary part."""
    name, polynomial, body = f.args
    if any(_hinders(n) for n in walk(body)):
        return call("conj", f)
    inner = {**domains, name: _REAL}
    turned = conjugate(body, inner)
    if any(n.head == "call" and n.args[0] == "conj" and name in free_letters(n) for n in walk(turned)):
        return call("conj", f)
    return Formula("rootsum", (name, conjugate(polynomial, inner), turned))


def _hinders(f: Formula) -> bool:
    """f looks at a real part, or may sit on a cut for a complex root."""
    if f.head == "power":
        return not (f.args[1].head == "number" and f.args[1].args[0].denominator == 1)
    return f.head == "call" and f.args[0] in (*_REAL_VALUED, "conj", "sqrt", "log", "asin", "acos", "atan")


def surely_real(f: Formula, domains: Domains) -> bool:
    """True only where f is real for every value of its letters (False: not known)."""
    return conjugate(f, domains) == f


def surely_nonnegative(f: Formula, domains: Domains) -> bool:
    """True only where f >= 0 for every value of its letters (False: not known)."""
    if f.head == "number":
        return bool(f.args[0] >= 0)
    if f.head == "constant":
        return f.args[0] in ("pi", "euler_gamma", "infinity")
    if f.head == "letter":
        domain = domains.get(f.args[0])
        return domain is not None and (domain.kind in ("positive", "nonnegative") or domain.is_positive)
    if f.head == "plus" or f.head == "times":
        return all(surely_nonnegative(a, domains) for a in f.args)
    if f.head == "power":
        return _nonnegative_power(f, domains)
    return f.head == "call" and _nonnegative_call(f, domains)


def _nonnegative_power(f: Formula, domains: Domains) -> bool:
    base, exponent = f.args
    even = exponent.head == "number" and exponent.args[0] % 2 == Fraction(0)
    if even and surely_real(base, domains):
        return True
    return surely_nonnegative(base, domains) and surely_real(exponent, domains)


def _nonnegative_call(f: Formula, domains: Domains) -> bool:
    name, first = f.args[0], f.args[1]
    if name == "abs":
        return True
    if name == "sqrt":
        return surely_nonnegative(first, domains)
    return name in ("exp", "cosh") and surely_real(first, domains)
