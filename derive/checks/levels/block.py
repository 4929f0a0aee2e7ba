"""Road "exact" for levels of a detector of rank two or more: roots of the rebuilt secular determinant, counted.

F(E, x), tau = i x, is rebuilt from the setting (`resolvent_block.py`).  A claimed level, energy and rate together, is
a series a(x) = a_0 + a_1 x + ...; with F(a(x) + y, x) = sum_j G_j(x) y^j Newton's polygon counts the roots y that are
O(x^s): as many levels of the undetected step agree with the claimed one below x^s.  With v_j the lowest power in G_j

    count(s) = the largest j at which v_j + j s is least

(every level is a power series in x).  An energy or a rate is proved where count(s) is not zero at the order claimed,
and wrong where count first drops to zero at one of its own powers; a multiplicity is count(s) itself.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.checks.levels.compare import sibling
from derive.checks.levels.resolvent import polynomial_over
from derive.checks.levels.resolvent_block import Polynomial, ResolventBlock
from derive.errors import NotCovered
from derive.exact.adjoin import Fractions
from derive.exact.algebraic import rationalised
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import TAU, Formula, number, plus, power, replace, times
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.efficiency import is_free_of_interval
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Claim, Expansion, Finding, PerRoot, Value

Series = list[Element]
"""Coefficients of x^0, x^1, ..., all of one length."""
PARTS = {"level energy": "energy", "decay rate": "rate", "level multiplicity": "multiplicity"}


def check_levels_block(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about a bright level's energy, rate or multiplicity that this road can decide."""
    if not _served(setting):
        return {}
    try:
        resolvent = ResolventBlock(setting)
    except NotCovered:
        return {}
    known: dict[tuple[Value, Value, int], Level] = {}
    found: dict[str, Finding] = {}
    for claim in claims:
        if claim.quantity is not None and claim.quantity.name in PARTS:
            try:
                finding = _judged(setting, claim, claims, resolvent, effort, known)
            except (NotCovered, ZeroDivisionError):
                continue
            if finding is not None:
                found[claim.id] = finding
    return found


def _served(setting: Setting) -> bool:
    one = len(setting.detectors) == 1 and setting.detectors[0].rank > 1
    fixed = setting.interval.law == "fixed" and is_free_of_interval(setting.detectors[0].efficiency)
    return one and fixed and isinstance(setting.space, Finite)


# -- one claim


def _judged(
    setting: Setting, claim: Claim, claims: Sequence[Claim], resolvent: ResolventBlock, effort: Check,
    known: dict[tuple[Value, Value, int], Level],
) -> Finding | None:
    part = PARTS[claim.quantity.name] if claim.quantity else ""
    energy, rate = (_derived(claim, claims, p) for p in ("energy", "rate"))
    if energy is None or rate is None:
        return None
    orders = _orders_known(energy, rate)
    key = (energy.value, rate.value, orders)
    if key not in known:
        known[key] = Level(resolvent, energy.value, rate.value, orders)
    level = known[key]
    if part == "multiplicity":
        return _counted(setting, claim, level, effort)
    if claim.origin != "derived":
        return _compared(setting, claim, energy if part == "energy" else rate, level, effort)
    needed = _own_orders(claim, part == "rate")
    return _followed(setting, claim, level, needed, effort) if needed <= orders else None


def _followed(setting: Setting, claim: Claim, level: Level, needed: int, effort: Check) -> Finding | None:
    """An energy or a rate: proved, or refuted at a power of its own; where the other one fails first, nothing."""
    rate = claim.quantity is not None and claim.quantity.name == "decay rate"
    for s in range(1, needed + 1):
        count, proof = level.count(s)
        if not count:
            said = f"no level agrees with this one below tau^{s}"
            return _refuted(setting, claim, level, proof, said, effort) if (s % 2 == 0) == rate else None
    return _proved(level.count(needed)[0], _remainder(claim))


def _proved(count: int, orders: int) -> Finding:
    who, agrees = ("one root", "agrees") if count == 1 else (f"{count} roots", "agree")
    said = f"{who} of the secular determinant, rebuilt, {agrees} to the order claimed, tau^{orders} left out"
    return Finding("proved", "exact", evidence=said)


def _counted(setting: Setting, claim: Claim, level: Level, effort: Check) -> Finding | None:
    orders = level.orders
    count, proof = level.count(orders)
    if not count:
        return None  # energy or rate is wrong, and says so itself
    field = Field.of([*level.resolvent.formulas, as_formula(claim.value)], setting.domains())
    off = field.element(as_formula(claim.value)) - field.rational(count)
    if not off:
        return _proved(count, orders)
    said = f"{count} levels agree with this one below tau^{orders}"
    residuals = [*level.at_each_root(level.field.formula(proof)), field.formula(off)]
    return _shown(setting, claim, residuals, said, effort)


def _compared(setting: Setting, claim: Claim, derived: Claim, level: Level, effort: Check) -> Finding | None:
    """A user's energy or rate less the derived one, once that is found among the roots."""
    count, _ = level.count(level.orders)
    order = _remainder(claim)
    if not count or order > _remainder(derived):
        return None
    said, ours = as_formula(claim.value), as_formula(derived.value)
    field = Field.of([*level.resolvent.formulas, said, ours], setting.domains())
    gap = by_tau(field, field.element(said) - field.element(ours))
    off = next((c for k, c in sorted(gap.items()) if k < order and c), None)
    if off is None:
        return _proved(count, order)
    return _shown(setting, claim, [field.formula(off)], "claimed minus what the secular determinant demands", effort)


def _refuted(
    setting: Setting, claim: Claim, level: Level, proof: Element, said: str, effort: Check
) -> Finding | None:
    """Where the coefficient that decides the count is surely not zero at a point, at every root."""
    return _shown(setting, claim, level.at_each_root(level.field.formula(proof)), said, effort)


def _shown(
    setting: Setting, claim: Claim, residuals: Sequence[Formula], said: str, effort: Check
) -> Finding | None:
    for point in sample_points(setting, effort, claim.assume):
        if all(is_surely_nonzero(f, point) for f in residuals):
            shown = text(residuals[0])
            shown = shown if len(shown) < 300 else shown[:297] + "..."
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=f"{said}: {shown} is not zero")
    return None


def _derived(claim: Claim, claims: Sequence[Claim], part: str) -> Claim | None:
    """The derived claim about a part of the level that this one speaks of."""
    if claim.origin == "derived":
        return sibling(claim, claims, part)
    which = claim.quantity.key("level") if claim.quantity else None
    found = next((c for c in claims if c.id == f"levels.{which}.{part}" and not isinstance(c.value, PerRoot)), None)
    counted_alike = found is not None and set(found.assume) <= set(claim.assume)
    return found if counted_alike else None


def _remainder(claim: Claim) -> int:
    order = claim.value.remainder if isinstance(claim.value, Expansion) else claim.kind.order
    if order is None:
        raise NotCovered("a series is claimed with its order")
    return order


def _own_orders(claim: Claim, rate: bool) -> int:
    """s, the coefficients of x^0 ... x^(s-1) holding all that the claim says; parity takes care of the others."""
    order = _remainder(claim)
    return order - (order % 2 == 0) if not rate else order - order % 2


def _orders_known(energy: Claim, rate: Claim) -> int:
    """s, the coefficients of x^0 ... x^(s-1) being told by the two together."""
    even, odd = _remainder(energy), _remainder(rate)
    return min(even + even % 2, odd + 1 - odd % 2)


# -- a claimed level


@dataclass(frozen=True)
class Grown:
    """G_0 ... G_m as series in x to x^(length-1), m the number of levels that start at a_0."""

    lines: tuple[Series, ...]
    length: int


class Level:
    """A claimed level in a field that holds it, energy and rate together; a(x) to x^(orders-1)."""

    def __init__(self, resolvent: ResolventBlock, energy: Value, rate: Value, orders: int):
        self.resolvent = resolvent
        self.orders = orders
        self.polynomial: Formula | None = None
        e, r = as_formula(energy), as_formula(rate)
        if isinstance(energy, PerRoot):
            base, self.letter, self.polynomial = resolvent.field, energy.letter, energy.polynomial
            p = polynomial_over(resolvent.setting, base, resolvent.formulas, energy.polynomial, energy.letter)
            self.field: Field = Fractions(base, energy.letter, [c / p[-1] for c in p[:-1]])
            self.degree = len(p) - 1
        else:
            self.field = Field.of([*resolvent.formulas, e, r], resolvent.setting.domains())
        self.series = self._in_x(e, r)
        self._grown: Grown | None = None

    def _in_x(self, energy: Formula, rate: Formula) -> Series:
        """E - i Gamma/2 in powers of x, tau = i x: even powers from the energy, odd ones from the rate."""
        out = [self.field.zero] * self.orders
        for f, odd in ((energy, 0), (rate, 1)):
            for k, c in by_tau(self.field, self.field.element(f)).items():
                if k % 2 != odd and k < self.orders:
                    raise NotCovered("an energy with odd powers of tau, or a rate with even ones")
                if k < self.orders:
                    sign = Fraction((-1) ** (k // 2))
                    out[k] = c.scaled(sign / 2 if odd else sign)
        return out

    def _taken(self, p: Sequence[Element]) -> Polynomial:
        if isinstance(self.field, Fractions):
            return [self.field.lift(c) for c in p]
        return [self.field.element(c.field.formula(c)) for c in p]

    def grown(self) -> Grown:
        if self._grown is None:
            m = self._start()
            length = max(m, 1) * self.orders
            lines = [[self.field.zero] * length for _ in range(m + 1)]
            for k, p in enumerate(self.resolvent.terms(length)):
                for line, part in zip(lines, self._shifted(self._taken(p), m, length - k), strict=True):
                    line[k:] = [a + b for a, b in zip(line[k:], part, strict=True)]
            self._grown = Grown(tuple(lines), length)
        return self._grown

    def _start(self) -> int:
        """How many roots of F(E, 0) there are at a_0; the same at every root of the polynomial."""
        (p,) = self.resolvent.terms(1)
        found = self._shifted(self._taken(p), self.resolvent.rank, 1)
        for m, (value,) in enumerate(found):
            if value:
                if not self.is_unit(value):
                    raise NotCovered("levels of one polynomial with different multiplicities")
                return m
        raise NotCovered("more levels than the detector's rank start there")

    def _shifted(self, p: Polynomial, m: int, length: int) -> list[Series]:
        """p(a(x) + y) to y^m and x^(length-1), by Horner's rule."""
        field = self.field
        a = [*self.series, *[field.zero] * length][:length]
        found = [[field.zero] * length for _ in range(m + 1)]
        for c in reversed(p):
            moved = [_product(field, line, a) for line in found]
            for above, line in zip(moved[1:], found, strict=False):
                above[:] = [x + y for x, y in zip(above, line, strict=True)]
            moved[0][0] = moved[0][0] + c
            found = moved
        return found

    def count(self, s: int) -> tuple[int, Element]:
        """How many levels agree with this one below x^s, and the coefficient that says so by not being zero."""
        grown = self.grown()
        lowest = [next((k for k, c in enumerate(line) if c), grown.length) for line in grown.lines]
        least = min(v + j * s for j, v in enumerate(lowest))
        found = max(j for j, v in enumerate(lowest) if v + j * s == least)
        deciding = grown.lines[found][lowest[found]]
        if not self.is_unit(deciding):
            raise NotCovered("a count that differs from root to root")
        return found, deciding

    def is_unit(self, x: Element) -> bool:
        """Whether x is zero at no root; where no root is adjoined, whether it is not zero."""
        if not isinstance(self.field, Fractions):
            return bool(x)
        return not rationalised(self.field.one.num, x.num, self.field)[1].is_zero()

    def at_each_root(self, f: Formula) -> list[Formula]:
        if self.polynomial is None:
            return [f]
        roots = [Formula("root", (self.polynomial, self.letter, number(j))) for j in range(1, self.degree + 1)]
        return [replace(f, {self.letter: r}) for r in roots]


def by_tau(field: Field, x: Element) -> Mapping[int, Element]:
    """x = sum_k tau^k c_k."""
    at = field.index["letter:tau"]
    if x.den is not None and int(x.den.degrees()[at]) > 0:
        raise NotCovered("tau stands in a denominator")
    split: dict[int, dict[tuple[int, ...], object]] = {}
    for monomial, c in x.num.terms():
        bare = list(map(int, monomial))
        k, bare[at] = bare[at], 0
        split.setdefault(k, {})[tuple(bare)] = c
    return {k: field.quotient(field.ring.from_dict(p), x.den) for k, p in split.items()}


def as_formula(value: Value) -> Formula:
    """A level's series as one formula in tau."""
    if isinstance(value, Expansion):
        pairs = zip(value.powers, value.terms, strict=True)
        return plus(*(times(t, power(TAU, number(k))) for k, t in pairs if isinstance(t, Formula)))
    if isinstance(value, PerRoot):
        return value.formula
    if isinstance(value, Formula):
        return value
    raise NotCovered("a level is claimed by formulas")


def _product(field: Field, a: Series, b: Series) -> Series:
    out = [field.zero] * len(a)
    for i, x in enumerate(a):
        if x:
            for j in range(len(a) - i):
                if b[j]:
                    out[i + j] = out[i + j] + x * b[j]
    return out
