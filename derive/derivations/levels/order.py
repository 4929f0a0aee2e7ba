"""In which order levels are counted, and what must be assumed of the letters for that order to hold.

Floating points only choose; a claim that brings an order along is checked where that order holds.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from derive.algebra.approx import approx_real_roots, approx_value
from derive.algebra.polynomial import polynomial_formula
from derive.derivations.spectrum import Level, Place
from derive.formula.tree import Formula, number, replace
from derive.problem.setting import Domain, Relation, Setting

ORDERS_TRIED = 9


def in_order(setting: Setting, levels: Sequence[Level]) -> list[tuple[int, Level]]:
    """(index of the lowest level it stands for, level): all levels are counted from 1, by energy, at one point.

    Letters take plain values there; the numbers only name the entries.
    """
    values = reference_values(setting)
    heights = [energies_at(level.place, values, level.zeroth) for level in levels]
    leading = [_leading_rate(level, values) for level in levels]
    every = sorted((round(e, 9), leading[k], k) for k, es in enumerate(heights) for e in es)
    first: dict[int, int] = {}
    for index, (_, _, k) in enumerate(every, start=1):
        first.setdefault(k, index)
    return sorted(((first[k], level) for k, level in enumerate(levels)), key=lambda pair: pair[0])


def _leading_rate(level: Level, values: Mapping[str, float]) -> float:
    """Levels of one energy are counted by rate."""
    if level.place.polynomial is not None or 1 not in level.rate:
        return 0.0
    return approx_value(level.rate[1], values).real


def counting(setting: Setting, places: Sequence[tuple[Place, Formula]]) -> tuple[Relation, ...]:
    """E_1 < E_2 < ... where the letters can change the order in which levels are counted, else nothing.

    The order is tried at a few floating points; what is assumed only narrows where the entries are checked.
    """
    ranks = [_ranked(places, reference_values(setting, k)) for k in range(ORDERS_TRIED)]
    if all(rank == ranks[0] for rank in ranks):
        return ()
    pairs = [(a, b) for a, b in zip(ranks[0], ranks[0][1:], strict=False) if a[0] != b[0]]
    return tuple(Relation(_named(places, a), "<", _named(places, b)) for a, b in pairs)


def _ranked(places: Sequence[tuple[Place, Formula]], values: Mapping[str, float]) -> list[tuple[int, int]]:
    """(place, which of its roots from 1) by energy; what coincides at every value keeps its order."""
    every = [
        (round(e, 9), n, i) for n, (place, zeroth) in enumerate(places)
        for i, e in enumerate(energies_at(place, values, zeroth), start=1)
    ]
    return [(n, i) for _, n, i in sorted(every)]


def _named(places: Sequence[tuple[Place, Formula]], one: tuple[int, int]) -> Formula:
    """The energy at tau = 0 of one root."""
    (place, zeroth), i = places[one[0]], one[1]
    if place.polynomial is None:
        return zeroth
    root = Formula("root", (polynomial_formula(place.polynomial, place.letter), place.letter, number(i)))
    return replace(zeroth, {place.letter: root})


def reference_values(setting: Setting, variant: int = 0) -> dict[str, float]:
    """Plain values of all letters, different from one another; another set for each `variant`."""
    return {x.name: reference_value(x.domain, n, variant) for n, x in enumerate(setting.letters)}


def reference_value(domain: Domain, n: int, variant: int = 0) -> float:
    """A plain value of the n-th letter."""
    stretch = 2.0 ** ((variant * (n + 2)) % 7 - 3) if variant else 1.0
    sign = -1 if (variant >> (n % 3)) & 1 else 1
    low = approx_value(domain.low, {}).real if domain.low is not None and domain.low.head == "number" else None
    high = approx_value(domain.high, {}).real if domain.high is not None and domain.high.head == "number" else None
    if low is not None and high is not None:
        return low + (high - low) * ((0.4 + 0.01 * n + 0.37 * variant) % 1)
    if low is not None:
        return low + stretch
    return (1 + n / 16) * stretch if domain.is_positive else (0.25 + n / 16) * sign * stretch


def energies_at(place: Place, values: Mapping[str, float], zeroth: Formula | None = None) -> list[float]:
    """The energies at tau = 0 that a place stands for, root by root ascending, in floating point.

    `zeroth` is the energy where it is not the root itself: a degenerate level that splits has roots for slopes.
    """
    energy = place.field.formula(place.root) if zeroth is None else zeroth
    if place.polynomial is None:
        return [approx_value(energy, values).real]
    roots = approx_real_roots([approx_value(c.field.formula(c), values).real for c in place.polynomial])
    return [approx_value(energy, {**values, place.letter: x}).real for x in roots]
