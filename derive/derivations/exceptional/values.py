"""Values of a letter, a flux above all, at which fewer phases are seen though the interval is generic.

The squared lengths n_0, n_1, ... of the bright vectors multiply to the determinant of the moments <d|H^(j+k)|d>,

    n_0^w n_1^(w-1) ... n_(w-1) = prod_l p_l prod_(j<k) (E_j - E_k)^2,

w energies seen.  So w drops exactly where one of the n_j vanishes: where two seen energies coincide or one is no
longer seen.  A factor of some n_j that holds one letter, be it by its phase exp(i phi) or by its ratio to one other
positive letter, is solved for; values are numbered letter by letter, ascending, a phase's within (-pi, pi].  Other
factors are told in a note.  Derived here (the identity is textbook material).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from derive.algebra.special_zeros import Coefficients, Zero, on_circle, on_line
from derive.derivations.detection.topic import total_probability
from derive.derivations.sight import Sight
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, free_letters, letter, number
from derive.problem.quantities import Quantity
from derive.problem.setting import Domain, Setting
from derive.problem.specialise import at_values
from derive.record.said import Claim, Prose

SERVED = ("real", "positive", "nonnegative")
"""Domains of letters that are solved for."""


@dataclass(frozen=True)
class Special:
    """One value of one letter: its number, the phases seen there, the total probability there (None: not known)."""

    number: int
    name: str
    value: Formula
    phases: int | None
    total: Formula | None


@dataclass(frozen=True)
class Univariate:
    """A condition as a polynomial in one letter's phase, or in the letter over `unit`."""

    condition: Formula
    name: str
    polynomial: Coefficients
    is_phase: bool
    unit: Formula = ONE


def special_values(setting: Setting, sight: Sight) -> tuple[list[Special], tuple[Prose, ...]]:
    """All values that are found, and a note about conditions that are not solved."""
    solved, open_ = _sorted_out(sight.conditions, setting.domains())
    found: list[Special] = []
    counted = 0
    for x in setting.letters:
        mine = [u for u in solved if u.name == x.name]
        if not mine or x.domain.kind not in SERVED or len({(u.is_phase, u.unit) for u in mine}) > 1:
            open_ += [u.condition for u in mine]
            continue
        for zero, unit in _zeros(mine, x.domain):
            counted += 1
            if zero.formula is None:
                open_.append(f"{x.name} = {zero.place:.6g}" + (f"*{text(unit)}" if unit != ONE else ""))
            else:
                found.append(_special(setting, counted, x.name, _scaled(zero.formula, unit)))
    return found, _note(open_)


def _scaled(value: Formula, unit: Formula) -> Formula:
    return ZERO if value == ZERO else value if unit == ONE else value * unit


def _sorted_out(
    conditions: Sequence[Formula], domains: dict[str, Domain]
) -> tuple[list[Univariate], list[str | Formula]]:
    solved: list[Univariate] = []
    left: list[str | Formula] = []
    for condition in conditions:
        found = univariate(condition, domains)
        if found is None:
            left.append(condition)
        else:
            solved.append(found)
    return solved, left


def univariate(condition: Formula, domains: dict[str, Domain]) -> Univariate | None:
    """The condition as a polynomial of one variable with rational coefficients; None where it has more."""
    names = list(free_letters(condition))
    try:
        field = Field.of([condition], domains)
        num = field.element(condition).num
    except NotCovered:
        return None
    used = {n: k for n, k in field.index.items() if int(num.degrees()[k])}
    if len(names) == 1 and set(used) <= {"unit0", "unit0bar"} and list(field.needs.units) == [(letter(names[0]),)]:
        powers = {int(m[field.index["unit0"]]) - int(m[field.index["unit0bar"]]): c for m, c in num.terms()}
        whole = field.needs.units[letter(names[0]),] == 1
        return Univariate(condition, names[0], _polynomial(powers), True) if whole else None
    plain = {n.removeprefix("letter:"): k for n, k in used.items() if n.startswith("letter:")}
    if len(plain) != len(used) or any(n in field.needs.letter_roots for n in plain) or len(plain) > 2:
        return None
    return _in_letters(condition, num, plain, domains)


def _in_letters(
    condition: Formula, num: Any, used: dict[str, int], domains: dict[str, Domain]
) -> Univariate | None:
    """A homogeneous polynomial in two letters, one of them positive, or a polynomial in one."""
    units = [n for n in domains if n in used and domains[n].is_positive] if len(used) == 2 else []
    unit = units[0] if units else None
    rest = [n for n in used if n != unit]
    terms = list(num.terms())
    if len(rest) != 1 or (unit and len({sum(int(e) for e in m) for m, _ in terms}) > 1):
        return None
    powers = {int(m[used[rest[0]]]): c for m, c in terms}
    return Univariate(condition, rest[0], _polynomial(powers), False, letter(unit) if unit else ONE)


def _polynomial(powers: dict[int, Any]) -> Coefficients:
    """Coefficients from the lowest power on."""
    found = {k: Fraction(int(c.p), int(c.q)) for k, c in powers.items()}
    return [found.get(k, Fraction(0)) for k in range(min(found), max(found) + 1)]


def _zeros(found: Sequence[Univariate], domain: Domain) -> Iterator[tuple[Zero, Formula]]:
    """Zeros of all the polynomials of one letter, each once, with what they are multiples of."""
    solve = on_circle if found[0].is_phase else on_line
    for zero in solve(u.polynomial for u in found):
        if domain.kind == "real" or zero.place > 0 or (zero.place == 0 and domain.kind == "nonnegative"):
            yield zero, found[0].unit


def _special(setting: Setting, n: int, name: str, value: Formula) -> Special:
    """What is seen at the value, where it has a place in an exact field."""
    try:
        there = Sight(at_values(setting, {name: value}))
        total = total_probability(there) if setting.start is not None and setting.start.mixture else None
    except (NotCovered, ZeroDivisionError):
        return Special(n, name, value, None, None)
    return Special(n, name, value, there.phases, total)


def _note(left: Sequence[str | Formula]) -> tuple[Prose, ...]:
    if not left:
        return ()
    out: list[str | Formula] = ["Fewer phases may also be seen where "]
    for k, f in enumerate(left):
        out += [", " if k else "", f] + ([" = 0"] if isinstance(f, Formula) else [])
    return ((*out, "; these are not solved here."),)


def claims_of(found: Sequence[Special]) -> tuple[Claim, ...]:
    """Value, phases and total probability, numbered through."""
    out = []
    for e in found:
        count = None if e.phases is None else number(e.phases)
        rows = (("value", "exceptional value", e.value), ("phases", "phases at exceptional value", count),
                ("total", "total probability at exceptional value", e.total))
        out += [
            Claim(f"exceptional.letter.{e.number}.{what}", "exceptional", Quantity(about, (("value", e.number),)), f)
            for what, about, f in rows if f is not None
        ]
    return tuple(out)


