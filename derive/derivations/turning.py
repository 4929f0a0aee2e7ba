"""Intervals at which phases of seen energies meet: (E_j - E_k) tau = 2 pi m, in order, within a window.

All gaps must be numbers times one gap, so that the order does not depend on letters.  The order itself is read off
doubles, which can only misplace intervals closer than 10^-9 to each other; equal ones are recognised exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import cos, floor, pi, sqrt

from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Element, Field
from derive.formula.tree import PI, Formula, free_letters, number, times
from derive.problem.setting import Domain

MOST_FOUND = 200
NEAR = 1e-9
NO_ORDER = "The order of exceptional intervals depends on letters here; set them to numbers."


def meetings(
    energies: Sequence[Formula], window: tuple[Formula, Formula] | None, domains: Mapping[str, Domain]
) -> list[tuple[int, Formula]]:
    """(number, interval) of every tau > 0 in [from, to] at which two of the energies have one phase, ascending.

    Numbers count from the smallest such interval of all, 1, whatever the window.
    """
    field = Field.of([*energies, PI, *(window or ())], domains)
    held = [field.element(e) for e in energies]
    gaps = [b - a for k, a in enumerate(held) for b in held[k + 1 :]]
    if not gaps:
        return []
    unit = _positive(field, gaps[0], domains)
    ratios = [approx_ratio(field, g, unit) for g in gaps]
    low, high = _ends(field, window, unit, max(abs(r) for r in ratios))
    found: list[tuple[float, Element]] = []
    for gap, ratio in zip(gaps, ratios, strict=True):
        r, g = abs(ratio), gap if ratio > 0 else -gap
        last = floor(high * r + NEAR)
        if last + len(found) > MOST_FOUND:
            raise NotCovered(f"More than {MOST_FOUND} exceptional intervals lie below the window's end.")
        for m in range(1, last + 1):
            share = field.rational(m) / g  # tau/(2 pi)
            if not any(share == other for _, other in found):
                found.append((m / r, share))
    found.sort(key=lambda pair: pair[0])
    kept = [(n, share) for n, (place, share) in enumerate(found, start=1) if place > low - NEAR]
    return [(n, _turned(field.formula(share))) for n, share in kept]


def _turned(share: Formula) -> Formula:
    """2 pi times a share of a turn, the rational in front."""
    return times(number(2), PI, share)


def _positive(field: Field, gap: Element, domains: Mapping[str, Domain]) -> Element:
    """The gap or its negative, whichever is surely above 0."""
    for x in (gap, -gap):
        shown = field.formula(x)
        if is_positive(shown, field.domains) or _is_above(shown, domains):
            return x
    raise NotCovered(NO_ORDER)


def _is_above(f: Formula, domains: Mapping[str, Domain]) -> bool:
    """A positive number without letters times positive factors."""
    factors = f.args if f.head == "times" else (f,)
    plain = [a for a in factors if not free_letters(a)]
    rest = [a for a in factors if free_letters(a)]
    return all(is_positive(a, domains) for a in rest) and approx_number(times(*plain)) > 0


def _ends(field: Field, window: tuple[Formula, Formula] | None, unit: Element, widest: float) -> tuple[float, float]:
    """The window in units of 2 pi/unit; left out, up to 2 pi over the widest gap."""
    if window is None:
        return 0.0, 1 / widest
    two_pi = field.rational(2) * field.element(PI)
    low, high = (approx_number(field.formula(field.element(f) * unit / two_pi)) for f in window)
    return min(abs(low), abs(high)), max(abs(low), abs(high))


def closest(
    energies: Sequence[Formula], length: Formula, domains: Mapping[str, Domain]
) -> tuple[Formula, Formula, Formula, float] | None:
    """(E, E', tau_c, |tau/tau_c - 1|) for the exceptional interval closest to `length`; None where none is near."""
    field = Field.of([*energies, length, PI], domains)
    turn = field.element(length) / field.element(PI)
    best: tuple[Formula, Formula, Formula, float] | None = None
    for k, a in enumerate(energies):
        for b in energies[k + 1 :]:
            gap = field.element(b) - field.element(a)
            turns = approx_number(field.formula((gap * turn).scaled(Fraction(1, 2))))
            m = round(turns)
            if m and (best is None or abs(turns / m - 1) < best[3]):
                share = field.rational(m) / gap
                best = (a, b, _turned(field.formula(share)), abs(turns / m - 1))
    return best


def approx_ratio(field: Field, a: Element, b: Element) -> float:
    """a/b where it is a number; `NotCovered` where it depends on letters."""
    return approx_number(field.formula(a / b))


def approx_number(f: Formula) -> float:
    """A real number without letters as a double."""
    if free_letters(f):
        raise NotCovered(NO_ORDER)
    if f.head == "number":
        return float(f.args[0])
    if f.head == "constant" and f.args[0] == "pi":
        return pi
    if f.head in ("plus", "times"):
        total = 0.0 if f.head == "plus" else 1.0
        for a in f.args:
            total = total + approx_number(a) if f.head == "plus" else total * approx_number(a)
        return total
    if f.head == "power":
        return approx_number(f.args[0]) ** approx_number(f.args[1])
    if f.head == "call" and f.args[0] in ("sqrt", "cos"):
        return (sqrt if f.args[0] == "sqrt" else cos)(approx_number(f.args[1]))
    raise NotCovered(NO_ORDER)
