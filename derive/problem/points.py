"""Sample points: exact values for the letters, small, seeded, inside every domain and every assumed relation.

A point counts only where each relation is *decided* true: exactly over the rationals or in an exact field, else by
the caller's `decide` (balls).  What cannot be decided does not count.  Equations are solved for a letter that stands
in them linearly, so `Delta = 2*g` costs no luck; inequalities are met by drawing again, on wider and wider scales.
Nothing found means an empty result, and the caller says "untested".

The same seed gives the same points on every machine: only `Random(seed).random()`, whose sequence is guaranteed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from random import Random

from derive.errors import FormulaFault
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    ONE,
    TAU,
    ZERO,
    Formula,
    free_letters,
    letter,
    negate,
    number,
    plus,
    power,
    replace,
    times,
    walk,
)
from derive.problem.setting import Check, Domain, Relation, Setting

Decide = Callable[[Relation], "bool | None"]
"""Whether a relation without letters holds: True, False, or None where it stays open."""

FREE_AFTER = 20
"""Attempts at one point that keep to the pattern of signs and sizes."""
BEYOND = 2
"""Added to the size of every second value of a real letter: beyond pi/2, short of 3 pi/2."""
TRIES = 400
"""Draws for one point before it is given up."""


@dataclass(frozen=True, slots=True)
class Point:
    """Exact values of letters, in the order they were declared, tau last."""

    values: tuple[tuple[str, Formula], ...]

    def text(self) -> tuple[tuple[str, str], ...]:
        """(letter, value in worksheet syntax)."""
        return tuple((name, text(value)) for name, value in self.values)

    def mapping(self) -> dict[str, Formula]:
        return dict(self.values)

    def without(self, *names: str) -> Point:
        """The same point without some letters."""
        return Point(tuple((n, v) for n, v in self.values if n not in names))


def draw_points(
    setting: Setting, effort: Check, decide: Decide, extra_assume: Iterable[Relation] = ()
) -> tuple[Point, ...]:
    """The user's own points that meet every relation, then `effort.samples` drawn ones.

    A letter that a point of the user's leaves open is drawn.  Points are all different; where no letter is free
    one point is all there is.
    """
    relations = (*setting.assume, *extra_assume)
    domains = setting.domains()
    sampler = _Sampler(setting, relations, decide, Random(effort.seed))
    found: list[Point] = []
    for own in effort.points:
        given = {name: value for name, value in own if name in domains}
        _keep(found, sampler.draw(given))
    for _ in range(effort.samples):
        _keep(found, sampler.draw({}))
    return tuple(found)


def _keep(found: list[Point], point: Point | None) -> None:
    if point is not None and point not in found:
        found.append(point)


class _Sampler:
    """Everything that stays the same from draw to draw."""

    def __init__(self, setting: Setting, relations: tuple[Relation, ...], decide: Decide, source: Random):
        self.domains = setting.domains()
        self.names = [x.name for x in setting.letters] + ["tau"]
        self.relations = relations
        self.decide = decide
        self.source = source
        self.drawn = 0
        self.fixed = {} if setting.interval.length == TAU else {"tau": setting.interval.length}

    def draw(self, given: Mapping[str, Formula]) -> Point | None:
        """One point with the given values in it, None where `TRIES` draws did not meet the relations."""
        solved = _solved_letters(self.relations, set(given) | set(self.fixed), self.domains)
        tries = 1 if set(given) >= set(self.names) else TRIES
        turn, self.drawn = self.drawn, self.drawn + 1
        for attempt in range(tries):
            values = {name: given.get(name) or self._value(name, turn, attempt) for name in self.names}
            try:
                for name, expression in {**solved, **self.fixed}.items():
                    values[name] = _tidy(replace(expression, {k: v for k, v in values.items() if k != name}))
            except FormulaFault:  # a value that divides by zero here
                continue
            if self._allowed(values, set(solved)):
                return Point(tuple((name, values[name]) for name in self.names))
        return None

    def _value(self, name: str, turn: int, attempt: int) -> Formula:
        """A drawn value; a real letter takes both signs, and sizes on both sides of pi/2, within two points.

        Without that, `abs(x)` passes for `x` and `sqrt(1 - sin(x)^2)` for `cos(x)` by luck of the draw.  Attempts
        that fail the relations fall back to free draws.  An integer is neither 0 nor 1 at every second point: there
        j^2 passes for j.  A positive letter takes both sides of 1: on one side g^2 passes for g in a bound.
        """
        value = _drawn(name, self.domains[name], self.source, attempt)
        if self.domains[name].kind == "integer" and attempt < FREE_AFTER and turn % 2 == 0 and value in (ZERO, ONE):
            return value + number(2)
        if attempt >= FREE_AFTER or value.head != "number":
            return value
        odd_letter = self.names.index(name) % 2
        if self.domains[name].kind in ("positive", "nonnegative") and name != "tau":
            above = (turn + odd_letter) % 2 == 0
            return value if (value.args[0] > 1) == above else number(1 / Fraction(value.args[0]))
        if self.domains[name].kind != "real":
            return value
        late = (turn + odd_letter) // 2 % 2 if odd_letter else turn % 2  # +-+- and +--+: relative signs vary too
        size = abs(value.args[0]) + (BEYOND if late else 0)
        return number(-size if late else size)

    def _allowed(self, values: Mapping[str, Formula], solved: set[str]) -> bool:
        """Whether domains and relations are surely met."""
        for name in self.names:
            if not _in_domain(values[name], self.domains[name], values, self.decide):
                return False
        return all(holds(r, values, self.decide) for r in self.relations)


def holds(relation: Relation, values: Mapping[str, Formula], decide: Decide) -> bool | None:
    """Whether the relation holds at exact values of its letters; None where that stays open."""
    known = dict(values)
    left, right = replace(relation.left, known), replace(relation.right, known)
    if relation.op in ("=", "!="):
        same = _same(left, right)
        if same is not None:
            return same if relation.op == "=" else not same
    a, b = rational_value(left), rational_value(right)
    if a is not None and b is not None:
        return {"<": a < b, "<=": a <= b, ">": a > b, ">=": a >= b}[relation.op]
    return decide(Relation(left, relation.op, right))


def _same(left: Formula, right: Formula) -> bool | None:
    """left = right without letters: over Q, by structure, or in an exact field; None where none of them knows."""
    a, b = rational_value(left), rational_value(right)
    if a is not None and b is not None:
        return a == b
    if left == right:
        return True
    from derive.exact.zero import vanishes  # flint is loaded only where a surd or a phase asks for it

    return vanishes(left - right, {})


def rational_value(f: Formula) -> Fraction | None:
    """The rational number that f is by + * and whole powers alone, else None."""
    if f.head == "number":
        return Fraction(f.args[0])
    if f.head in ("plus", "times"):
        total = Fraction(0 if f.head == "plus" else 1)
        for a in f.args:
            q = rational_value(a)
            if q is None:
                return None
            total = total + q if f.head == "plus" else total * q
        return total
    if f.head == "power":
        q, n = rational_value(f.args[0]), rational_value(f.args[1])
        small = n is not None and n.denominator == 1 and abs(n) <= 1000
        return q ** int(n) if small and q is not None and n is not None and (q or n >= 0) else None
    return None


def _tidy(f: Formula) -> Formula:
    q = rational_value(f)
    return f if q is None else number(q)


def _solved_letters(
    relations: Iterable[Relation], given: set[str], domains: Mapping[str, Domain]
) -> dict[str, Formula]:
    """letter -> formula in the letters that stay free, from the equations among the relations."""
    solved: dict[str, Formula] = {}
    for r in relations:
        if r.op != "=":
            continue
        left, right = replace(r.left, solved), replace(r.right, solved)
        found = solve_equation(left, right, given | set(solved), domains)
        if found is not None:
            name, expression = found
            solved = {k: replace(v, {name: expression}) for k, v in solved.items()}
            solved[name] = expression
    return solved


def solve_equation(
    left: Formula, right: Formula, taken: set[str], domains: Mapping[str, Domain]
) -> tuple[str, Formula] | None:
    """A letter, not taken, and what it equals, from left = right; None where none stands there linearly."""
    for lone, other in ((left, right), (right, left)):
        if lone.head == "letter" and lone.args[0] not in taken | free_letters(other):
            return str(lone.args[0]), other
    difference = left - right
    for name in sorted(free_letters(difference) - taken, key=lambda n: (n != "tau", n)):  # H does not depend on tau
        if name in domains and domains[name].kind != "integer":
            expression = _linear_root(difference, name, domains)
            if expression is not None:
                return name, expression
    return None


def _linear_root(f: Formula, name: str, domains: Mapping[str, Domain]) -> Formula | None:
    """The zero of f in the letter `name`, where f is surely linear in it (its second difference vanishes)."""
    from derive.exact.zero import vanishes

    at = [replace(f, {name: number(k)}) for k in range(3)]
    slope = at[1] - at[0]
    second = replace(f, {name: letter(name) + ONE}) - f - slope
    if vanishes(second, domains) is not True or vanishes(slope, domains) is not False:
        return None
    return times(negate(at[0]), power(slope, number(-1)))


def _in_domain(value: Formula, domain: Domain, values: Mapping[str, Formula], decide: Decide) -> bool:
    """Whether an exact value surely lies in a domain."""
    if domain.kind == "complex":
        return True
    if any(node == I_UNIT for node in walk(value)):
        return False
    if domain.kind == "integer":
        q = rational_value(value)
        if q is None or q.denominator != 1:
            return False
    return all(holds(r, values, decide) for r in bounds_of(value, domain))


def bounds_of(value: Formula, domain: Domain) -> list[Relation]:
    """A domain as relations."""
    if domain.kind in ("positive", "nonnegative"):
        return [Relation(value, ">" if domain.kind == "positive" else ">=", ZERO)]
    bounds = []
    if domain.low is not None:
        bounds.append(Relation(value, ">" if domain.low_open else ">=", domain.low))
    if domain.high is not None:
        bounds.append(Relation(value, "<" if domain.high_open else "<=", domain.high))
    return bounds


def _drawn(name: str, domain: Domain, source: Random, attempt: int) -> Formula:
    """A small exact value; later attempts reach further out and closer to 0."""
    if domain.kind == "integer":
        return number(_whole(domain, source, attempt))
    if domain.kind == "interval" and domain.low is not None and domain.high is not None:
        share = _between(source, 1, 11)
        return _tidy(domain.low + (domain.high - domain.low) * Fraction(share, 12))
    size = _size(source, attempt)
    if name == "tau":
        return number(size / _between(source, 12, 40))
    if domain.kind in ("positive", "nonnegative"):
        return number(size)
    if domain.kind == "interval":
        return _half_open(domain, size)
    real = size * _sign(source)
    if domain.kind == "complex":
        return plus(number(real), times(number(_size(source, attempt) * _sign(source)), I_UNIT))
    return number(real)


def _half_open(domain: Domain, size: Fraction) -> Formula:
    if domain.low is not None:
        return _tidy(domain.low + size)
    return _tidy(domain.high - size) if domain.high is not None else number(size)


def _whole(domain: Domain, source: Random, attempt: int) -> int:
    low = rational_value(domain.low) if domain.low is not None else None
    reach = 6 + attempt // 10
    if low is None:
        return _between(source, -reach, reach)
    first = -((-low.numerator) // low.denominator)
    return _between(source, first + (1 if domain.low_open and low == first else 0), first + reach)


def _size(source: Random, attempt: int) -> Fraction:
    """p/q with q <= 13 and about 1 in size, times a power of two that widens with the attempts."""
    value = Fraction(1)
    while value.denominator == 1:  # a letter equal to 1 hides its own powers
        below = _between(source, 3, 13)
        value = Fraction(_between(source, 1, 2 * below - 1), below)
    reach = attempt // 40
    return value * Fraction(2) ** _between(source, -reach, reach)


def _sign(source: Random) -> int:
    return 1 if source.random() < 0.5 else -1


def _between(source: Random, low: int, high: int) -> int:
    return low + int(source.random() * (high - low + 1))
