"""A family at numeric sizes: the explicit graph, with the detector and the start where their words put them.

"centre" and "end" are looked up on the graph that comes out; `distance` is the lowest-numbered site so many steps
from the detector.  Sizes and places are formulas in integer letters.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace as changed
from fractions import Fraction

from derive.errors import NotCovered, OutsideValidity
from derive.formula.text import text
from derive.formula.tree import ONE, Formula, replace
from derive.problem.balls import centre, distances, end
from derive.problem.families import FAMILIES, Size
from derive.problem.graphs import MOST_EDGES, MOST_SITES, family_at
from derive.problem.setting import Family, Finite, Setting, Start, Watcher
from derive.problem.specialise import at_values


def sized(setting: Setting, values: Mapping[str, Formula]) -> Setting:
    """The setting at values of its letters, every size among them, on an explicit graph.

    `OutsideValidity` where a size or a place does not exist there.
    """
    at = at_values(setting, values)
    family = at.space
    if not isinstance(family, Family):
        return at
    put = dict(values)
    sizes = _sizes(family, put)
    placed = changed(
        family,
        energies=tuple((_number(x, put), f) for x, f in family.energies),
        bonds=tuple((_number(x, put), _number(y, put), f) for x, y, f in family.bonds),
    )
    space = family_at(placed, sizes, at.domains())
    watchers = tuple(_watcher(w, space, put) for w in at.detectors)
    return changed(at, space=space, detectors=watchers, start=_start(at.start, space, watchers, put))


def whole_value(f: Formula, values: Mapping[str, Formula]) -> int:
    """The integer that a formula of integer letters is."""
    q = _value(replace(f, dict(values)))
    if q.denominator != 1:
        raise OutsideValidity(f"{text(f)} is no integer here")
    return int(q)


def _value(f: Formula) -> Fraction:
    if f.head == "number":
        return Fraction(f.args[0])
    if f.head in ("plus", "times"):
        total = Fraction(0 if f.head == "plus" else 1)
        for a in f.args:
            total = total + _value(a) if f.head == "plus" else total * _value(a)
        return total
    if f.head == "power":
        base, exponent = _value(f.args[0]), _value(f.args[1])
        if exponent.denominator == 1 and abs(exponent) <= 64 and (base or exponent >= 0):
            return Fraction(base ** int(exponent))
    if f.head == "call" and f.args[0] == "floor":
        q = _value(f.args[1])
        return Fraction(q.numerator // q.denominator)
    raise NotCovered(f"the size or place {text(f)} is not made of integers by + - * / ^ alone")


def _number(f: Formula, values: Mapping[str, Formula]) -> Formula:
    return Formula("number", (Fraction(whole_value(f, values)),))


def _sizes(family: Family, values: Mapping[str, Formula]) -> dict[str, Size]:
    """Each size as an integer; a star's lengths, written one by one, as a tuple."""
    found: dict[str, Size] = {}
    lengths: list[int] = []
    for key, f in family.sizes:
        n = whole_value(f, values)
        if key.startswith("lengths"):
            lengths.append(n)
        else:
            found[key] = n
    if lengths:
        found["lengths"] = tuple(lengths)
    for key, low in FAMILIES[family.name].sizes:
        size = found.get(key, low)
        if not isinstance(size, int) or size < low:
            raise OutsideValidity(f"{key} is below {low} here")
    if any(n < 1 for n in lengths):
        raise OutsideValidity("an arm has no site here")
    sites, edges = FAMILIES[family.name].count(found)
    if sites > MOST_SITES or edges > MOST_EDGES:
        raise OutsideValidity("the graph is too large to be built here")
    return found


def _place(place: Formula | str, space: Finite, values: Mapping[str, Formula]) -> int:
    if isinstance(place, Formula):
        x: int | None = whole_value(place, values)
    else:
        x = {"centre": centre, "end": end}[place](space.rows) if place in ("centre", "end") else 0
    if x is None or not 0 <= x < space.size:
        raise OutsideValidity(f"{place if isinstance(place, str) else text(place)} is no site here")
    return x


def _watcher(w: Watcher, space: Finite, values: Mapping[str, Formula]) -> Watcher:
    if w.place is None:
        raise NotCovered("a detector by states on a graph whose size is a letter")
    return changed(w, vectors=(((_place(w.place, space, values), ONE),),), place=None)


def _start(
    start: Start | None, space: Finite, watchers: tuple[Watcher, ...], values: Mapping[str, Formula]
) -> Start | None:
    if start is None:
        return None
    if start.distance is not None:
        steps = whole_value(start.distance, values)
        away = distances(space.rows, [x for w in watchers for v in w.vectors for x, _ in v])
        there = min((x for x, d in away.items() if d == steps), default=None)
        if there is None:
            raise OutsideValidity(f"no site is {steps} steps from the detector here")
        return Start((((ONE, ((there, ONE),))),))
    if start.place is None:
        raise NotCovered("a start by states on a graph whose size is a letter")
    return Start((((ONE, ((_place(start.place, space, values), ONE),))),))
