"""Values at which a generic answer may change: of the interval, and of letters.

At a fixed interval tau two energies are seen as one where (E - E') tau is a multiple of 2 pi.  With algebraic E - E'
that needs tau/pi algebraic; so a letter tau, a random interval, and tau = 7/10 beside rational H are generic
(pi is transcendental), and 2*pi/(3*g) is not.

A letter's special values are the zeros of what an answer divided by: found where a letter stands in it linearly, and
where a phase makes it vanish at a simple fraction of pi.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from fractions import Fraction

from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Field
from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import PI, ZERO, Formula, free_letters, letter, number, replace, times
from derive.problem.setting import Domain, Setting, Unitary
from derive.problem.specialise import at_values

TURNS = tuple(Fraction(n, d) for d in (1, 2, 3, 4, 6) for n in range(-d + 1, d + 1) if Fraction(n, d).denominator == d)
"""Fractions of pi at which a phase is tried: 0, 1, +-1/2, +-1/3, ..."""


def special_interval(setting: Setting) -> Formula | None:
    """The interval's length where phases of different energies may coincide at it, else None."""
    length = setting.interval.length
    if isinstance(setting.space, Unitary) or setting.interval.law != "fixed" or "tau" in free_letters(length):
        return None
    field = Field.of([length, PI], setting.domains())
    share = field.element(length) / field.element(PI)
    names = [n for n in field.index if n.startswith("free")]
    polynomials = [f for f in (share.num, share.den) if f is not None]
    return None if any(int(f.degrees()[field.index[n]]) for f in polynomials for n in names) else length


def pieces(
    setting: Setting, conditions: Iterable[Formula], generic: Formula, value_at: Callable[[Setting], Formula]
) -> tuple[tuple[str, Formula], ...]:
    """(condition, value) wherever a special value of one letter gives another answer than `generic` does there."""
    found: dict[str, Formula] = {}
    for condition in conditions:
        for name, value in _zeros(condition, setting.domains()):
            at = {name: value}
            try:
                there = value_at(at_values(setting, at))
            except (NotCovered, ZeroDivisionError):
                continue
            if not _continues(generic, at, there, setting):
                found[f"{name} = {text(value)}"] = there
    return tuple(found.items())


def _continues(generic: Formula, at: dict[str, Formula], there: Formula, setting: Setting) -> bool:
    """Whether the generic formula has the value `there` at the special place."""
    try:
        return vanishes(replace(generic, at) - there, setting.domains()) is True
    except ZeroDivisionError:
        return False


def _zeros(f: Formula, domains: dict[str, Domain]) -> Iterable[tuple[str, Formula]]:
    for name in sorted(free_letters(f), key=list(domains).index):
        value = _linear_zero(f, name, domains)
        candidates = [value] if value is not None else _turns(f, name, domains)
        for candidate in candidates:
            if _allowed(candidate, domains[name], domains):
                yield name, candidate


def _linear_zero(f: Formula, name: str, domains: dict[str, Domain]) -> Formula | None:
    """-c_0/c_1 where f = c_0 + c_1 x with c_0, c_1 free of x; None where f is not of that form."""
    start, slope = replace(f, {name: ZERO}), replace(f, {name: number(1)}) - replace(f, {name: ZERO})
    straight = vanishes(f - start - slope * letter(name), domains)
    if straight is not True or vanishes(slope, domains) is not False:
        return None
    field = Field.of([start, slope], domains)
    return field.formula(-(field.element(start) / field.element(slope)))


def _turns(f: Formula, name: str, domains: dict[str, Domain]) -> list[Formula]:
    values = [times(number(q), PI) if q else ZERO for q in TURNS]
    return [v for v in values if domains[name].kind == "real" and vanishes(replace(f, {name: v}), domains) is True]


def _allowed(value: Formula, domain: Domain, domains: dict[str, Domain]) -> bool:
    """Whether a value surely lies in a letter's domain."""
    if domain.kind in ("real", "complex"):
        return True
    if domain.kind == "positive":
        return is_positive(value, domains)
    if domain.kind == "nonnegative":
        return value == ZERO or is_positive(value, domains)
    return value.head == "number" and domain.kind == "interval" and _inside(value.args[0], domain)


def _inside(value: Fraction, domain: Domain) -> bool:
    low = domain.low.args[0] if domain.low is not None and domain.low.head == "number" else None
    high = domain.high.args[0] if domain.high is not None and domain.high.head == "number" else None
    above = low is None or value > low or (value == low and not domain.low_open)
    below = high is None or value < high or (value == high and not domain.high_open)
    return above and below
