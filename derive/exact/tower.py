"""Which generators a set of formulas needs, and the relations between them.

A field is the rational functions over Q in the letters, extended by

- `i` and the square roots of primes (independent over Q by a classical theorem), primes' q-th roots for odd q;
- one root of unity zeta_n, 4 | n, where an angle is a rational multiple of pi; then `i`, and the square roots of
  those primes that divide n, are written in it (Gauss sums), so that the tower stays irreducible;
- pairs u, 1/u for exp(i m) and for exp(m), m a real monomial such as `phi`;
- complex letters as a pair z, conj(z);
- square roots of sums, s^2 = radicand, taken only where x^2 - radicand stays irreducible (checked by its norm);
- numbers nobody can relate to the others (pi, euler_gamma, log 2): free generators; with them "not zero" is not known.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from fractions import Fraction
from math import lcm

from derive.errors import NotCovered
from derive.exact.arguments import Domains, Monomial, Parts, is_nonnegative, is_positive, is_real, taken_apart
from derive.formula.text import text
from derive.formula.tree import I_UNIT, PI, Formula, children, times

CIRCULAR = frozenset(("cos", "sin", "tan", "cot"))
HYPERBOLIC = frozenset(("cosh", "sinh", "tanh", "coth"))
LARGEST_ORDER = 240  # of a root of unity: degree 64 at most
LARGEST_PRIME_BASE = 10**12  # numbers under a root are factored by trial division


@dataclass
class Needs:
    """What a scan of the formulas found."""

    i: bool = False
    letters: list[str] = field(default_factory=list)
    radicals: dict[int, int] = field(default_factory=dict)  # prime -> q of its q-th root
    letter_roots: dict[str, int] = field(default_factory=dict)  # positive letter -> q of its q-th root
    turn: int = 1  # order n of the root of unity
    units: dict[Monomial, int] = field(default_factory=dict)  # exp(i m/D)
    growths: dict[Monomial, int] = field(default_factory=dict)  # exp(m/D)
    nested: list[Formula] = field(default_factory=list)  # radicands, inner ones first
    free: list[Formula] = field(default_factory=list)


def scan(formulas: Iterable[Formula], domains: Domains) -> Needs:
    """Everything that must be adjoined so that each formula has a place in the field."""
    needs = Needs()
    seen: set[Formula] = set()
    for f in formulas:
        _scan(f, domains, needs, seen)
    if needs.turn > 4:
        needs.turn = lcm(4, needs.turn)
        if needs.turn > LARGEST_ORDER:
            raise NotCovered(f"a root of unity of order {needs.turn} is beyond what is done exactly")
        needs.i = False
    for prime, q in needs.radicals.items():
        if needs.turn > 4 and q > 2 and q % 2 == 0 and in_turn(prime, needs.turn):
            raise NotCovered(f"{prime}^(1/{q}) beside a root of unity of order {needs.turn}")
    return needs


def in_turn(prime: int, turn: int) -> bool:
    """Does Q(zeta_turn), 4 | turn, hold the square root of the prime?"""
    return turn > 4 and turn % (8 if prime == 2 else prime) == 0


def _scan(f: Formula, domains: Domains, needs: Needs, seen: set[Formula]) -> None:
    if f in seen or f.head == "number":
        return
    seen.add(f)
    if f.head == "constant":
        _scan_constant(f, needs)
    elif f.head == "letter":
        if f.args[0] not in domains:
            raise NotCovered(f"the letter {f.args[0]} has no domain")
        if f.args[0] not in needs.letters:
            needs.letters.append(f.args[0])
    elif f.head in ("plus", "times"):
        for a in f.args:
            _scan(a, domains, needs, seen)
    elif f.head == "power":
        _scan_power(f, domains, needs, seen)
    elif f.head == "call":
        _scan_call(f, domains, needs, seen)
    else:
        raise NotCovered(f"{text(f)} has no place in an exact field here")


def _scan_constant(f: Formula, needs: Needs) -> None:
    if f.args[0] == "i":
        needs.i = True
    elif f.args[0] == "infinity":
        raise NotCovered("infinity is no number")
    else:
        _free(f, needs)


def _free(f: Formula, needs: Needs) -> None:
    if f not in needs.free:
        needs.free.append(f)


def _scan_power(f: Formula, domains: Domains, needs: Needs, seen: set[Formula]) -> None:
    base, exponent = f.args
    if exponent.head != "number":
        raise NotCovered(f"the exponent of {text(f)} is no rational number")
    if abs(exponent.args[0]) > 10_000:
        raise NotCovered(f"the exponent of {text(f)} is too large")
    if exponent.args[0].denominator == 1:
        _scan(base, domains, needs, seen)
    else:
        _scan_root(base, exponent.args[0].denominator, domains, needs, seen)


def _scan_call(f: Formula, domains: Domains, needs: Needs, seen: set[Formula]) -> None:
    name, *args = f.args
    if name == "sqrt":
        _scan_root(args[0], 2, domains, needs, seen)
    elif name == "exp":
        _scan_exponential(taken_apart(args[0], domains), needs)
    elif name in CIRCULAR:
        needs.i = True
        _scan_exponential(taken_apart(times(I_UNIT, args[0]), domains), needs)
    elif name in HYPERBOLIC:
        _scan_exponential(taken_apart(args[0], domains), needs)
    elif name in ("conj", "Re", "Im"):
        needs.i = needs.i or name == "Im"
        _scan(args[0], domains, needs, seen)
    elif name == "abs" and is_positive(args[0], domains):
        _scan(args[0], domains, needs, seen)
    elif not any(_has_letter(a) for a in args) and is_real(f, domains):
        _free(f, needs)
    else:
        raise NotCovered(f"{text(f)} has no place in an exact field here")


def _has_letter(f: Formula) -> bool:
    return f.head == "letter" or any(_has_letter(c) for c in children(f))


def _scan_exponential(parts: Parts, needs: Needs) -> None:
    for monomial, (re, im) in parts.items():
        if re:
            needs.growths[monomial] = lcm(needs.growths.get(monomial, 1), re.denominator)
        if im and monomial == (PI,):
            order = 2 * im.denominator
            needs.turn = lcm(needs.turn, order)
            needs.i = needs.i or order > 2
        elif im:
            needs.i = True
            needs.units[monomial] = lcm(needs.units.get(monomial, 1), im.denominator)


def _scan_root(base: Formula, q: int, domains: Domains, needs: Needs, seen: set[Formula]) -> None:
    """base^(1/q): numbers by their primes, positive letters by their own roots, sums as a nested radical."""
    for factor, power in root_factors(base, domains):
        if factor.head == "number":
            value = factor.args[0]
            if value < 0 and q != 2:
                raise NotCovered(f"a root of {value} other than the square root")
            needs.i = needs.i or value < 0
            for prime in primes_of(value):
                needs.radicals[prime] = lcm(needs.radicals.get(prime, 1), q)
        elif factor.head == "letter":
            _scan(factor, domains, needs, seen)
            share = (power / q).denominator
            needs.letter_roots[factor.args[0]] = lcm(needs.letter_roots.get(factor.args[0], 1), share)
        elif q == 2 and power.denominator == 1:
            _scan(factor, domains, needs, seen)
            if power % 2 and factor not in needs.nested:
                needs.nested.append(factor)
        else:
            raise NotCovered(f"a root of {text(factor)}")


def root_factors(base: Formula, domains: Domains) -> list[tuple[Formula, Fraction]]:
    """base as a product of (factor, power) whose roots may be taken one by one: all but a number are positive."""
    out: list[tuple[Formula, Fraction]] = []
    for a in base.args if base.head == "times" else (base,):
        factor, power = a, Fraction(1)
        if a.head == "power" and a.args[1].head == "number" and is_positive(a.args[0], domains):
            factor, power = a.args[0], a.args[1].args[0]
        if factor.head == "number" and power != 1:
            if power.denominator != 1:
                raise NotCovered(f"a root of {text(a)}")
            factor, power = Formula("number", (factor.args[0] ** int(power),)), Fraction(1)
        if factor.head != "number" and not is_nonnegative(factor, domains):
            raise NotCovered(f"{text(factor)} under a root is not known to be positive")
        out.append((factor, power))
    return out


def primes_of(value: Fraction) -> list[int]:
    """Primes of numerator and denominator."""
    return sorted({p for p, _ in factored(value)})


def factored(value: Fraction) -> list[tuple[int, int]]:
    """(prime, exponent) of |value|, by flint; numbers beyond the limit are refused."""
    from flint import fmpz

    if max(abs(value.numerator), value.denominator) > LARGEST_PRIME_BASE:
        raise NotCovered(f"the number {value} under a root is too large to be taken apart")
    found = [(int(p), int(e)) for p, e in fmpz(abs(value.numerator)).factor()]
    return found + [(int(p), -int(e)) for p, e in fmpz(value.denominator).factor()]
