"""A refuted formula and the right one as numbers at sampled points, side by side.

The right value is read from the derived entries about the same quantity, whatever their form: a formula, an expansion,
one formula for all roots of a polynomial.  A claim that holds exactly is compared by its values; one up to O(tau^k)
by its first k coefficients; a limit by values at n so large that what is left out does not show.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product

from flint import acb, arb

from derive.checks.levels.compare import claimed_series, named_energies
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU, Formula, free_letters, letter, number, plus, power, times, walk
from derive.formula.tree import replace as put
from derive.numerics.evaluate import Values, enclose, rational
from derive.numerics.points import decide, sample_points
from derive.numerics.precision import power_of_ten
from derive.numerics.roots import enclose_roots
from derive.numerics.series import enclose_series
from derive.problem.points import Point, holds
from derive.problem.quantities import QUANTITIES, Quantity
from derive.problem.setting import Check, Relation, Setting
from derive.record.said import Cases, Claim, Expansion, Matrix, Number, PerRoot

OPEN_ORDERS = 5
POINTS = 4
FEW = 2  # points where every value is an integral
_PARTS = {"level energy": "energy", "decay rate": "rate",
          "level multiplicity": "multiplicity", "level weight": "weight"}
_TRIED = {"k": (1, 2), "n": (2, 5)}
_TRIED_FRACTIONS = {"t": ("7/3", "1/2"), "E": ("11/5", "3/7"), "z": ("1/3", "2/5")}
LATE = 40  # decimal exponent of the n at which limits are compared

Blind = (NeedsPrecision, NotCovered, OutsideValidity, ZeroDivisionError, OverflowError)
Reading = Callable[[Formula, Values], list[acb]]


@dataclass(frozen=True)
class Sight:
    """One point: `seen` are the right values; `read` gives the same values of any formula."""

    point: Point
    values: Values
    seen: tuple[acb, ...]
    read: Reading
    goal: arb
    loose: bool = False  # a limit: what is left out is below the goal, and balls need not overlap

    def said(self, f: Formula) -> list[acb] | None:
        """The values of f, None where it has none."""
        try:
            return self.read(f, self.values)
        except Blind:
            return None

    def agrees(self, f: Formula) -> bool:
        said = self.said(f)
        return said is not None and all(self.same(a, b) for a, b in zip(said, self.seen, strict=True))

    def same(self, a: acb, b: acb) -> bool:
        """Whether two balls overlap and are narrow."""
        gap = a - b
        scale = arb(1) if b.contains(0) else b.abs_upper()
        return bool((self.loose or gap.contains(0)) and gap.abs_upper() < self.goal * scale)

    def padded(self, c: acb) -> acb:
        """c with what a limit leaves out."""
        return c * (1 + acb(arb(0, self.goal), arb(0, self.goal))) if self.loose else c


def reading_of(claim: Claim, known: int | None) -> tuple[Reading, int]:
    """How a claim's formula is read, and how many coefficients (0: values); `known`: orders the right one has."""
    if claim.kind.name == "order" or known is not None:
        orders = [k for k in (claim.kind.order if claim.kind.name == "order" else OPEN_ORDERS, known) if k is not None]
        count = min(orders)
        late = {"t": times(letter("t"), power(TAU, number(-1)))} if claim.kind.fixed is not None else {}
        return lambda f, values: enclose_series(put(f, late), values, count), count
    return lambda f, values: [enclose(f, values)], 0


def sights(
    setting: Setting, claim: Claim, derived: Sequence[Claim], effort: Check, besides: tuple[Relation, ...] = ()
) -> list[Sight]:
    """The claim beside the right value at every point drawn; none where no derived entry says the right value."""
    slow = isinstance(claim.value, Formula) and is_slow(claim.value)
    known = set(setting.domains())
    there = tuple(r for r in (*claim.assume, *besides) if free_letters(r.left) | free_letters(r.right) <= known)
    points = sample_points(setting, replace(effort, samples=max(POINTS, effort.samples)), there)
    found: list[Sight] = []
    for point in points[:FEW] if slow else points:
        try:
            found += _at(claim, derived, point, power_of_ten(-effort.digits))
        except Blind:
            continue
    return found


def _at(claim: Claim, derived: Sequence[Claim], point: Point, goal: arb) -> list[Sight]:
    """The sights at one point: several where the quantity brings letters along."""
    right = right_formula(claim, derived)
    values = Values.at(point.mapping())
    if right is None:
        return _certified(claim, derived, point, values, goal) or _by_level(claim, derived, point, values, goal)
    f, known = right
    read, _ = reading_of(claim, known)
    around = _with_brought(claim, values, point)
    loose = claim.kind.name == "limit"
    goal = goal.max(power_of_ten(-LATE // 2)) if loose else goal
    return [Sight(point, v, tuple(read(f, v)), read, goal, loose) for v in around]


def _certified(claim: Claim, derived: Sequence[Claim], point: Point, values: Values, goal: arb) -> list[Sight]:
    """A number that a road certified, at the point where it did."""
    for other in derived:
        if not _is_about(other, claim) or not isinstance(other.value, Number):
            continue
        if dict(other.value.at).items() <= dict(point.text()).items():
            seen = acb(arb(other.value.value, other.value.radius))
            read, _ = reading_of(claim, None)
            return [Sight(point, values, (seen,), read, goal)]
    return []


def _is_about(other: Claim, claim: Claim) -> bool:
    """The same quantity; what a claim leaves open (a tolerance, a time) is the derived entry's."""
    if other.quantity is None or claim.quantity is None or other.quantity.name != claim.quantity.name:
        return False
    return set(claim.quantity.keys) <= set(other.quantity.keys)


def _with_brought(claim: Claim, values: Values, point: Point) -> list[Values]:
    """The point with values for the letters that the quantity brings along, where the assumptions on them hold."""
    if claim.quantity is None:
        return [values]
    spec = QUANTITIES[claim.quantity.name]
    single = spec.which in ("ask", "level") and claim.quantity.key(spec.which) not in (None, "k")
    brings = () if single else spec.brings
    found = []
    for choice in product(*(_tried(claim, name) for name in brings)):
        brought = dict(zip(brings, choice, strict=True))
        exact = {**point.mapping(), **{n: number(q) for n, q in brought.items()}}
        if all(holds(r, exact, decide) is not False for r in claim.assume):
            inner = values
            for name, q in brought.items():
                inner = _with(inner, name, q)
            found.append(inner)
    return found


def _tried(claim: Claim, name: str) -> tuple[Fraction, ...]:
    if claim.kind.name == "limit":
        return tuple(Fraction(10**LATE + j) for j in (0, 1, 2))
    if name in _TRIED:
        return tuple(Fraction(q) for q in _TRIED[name])
    return tuple(Fraction(q) for q in _TRIED_FRACTIONS.get(name, ("1/3", "5/7")))


def _with(values: Values, name: str, q: Fraction) -> Values:
    return values.with_letter(name, rational(q), q)


# -- the right value as a formula


def right_formula(claim: Claim, derived: Sequence[Claim]) -> tuple[Formula, int | None] | None:
    """(formula, orders in tau it is known to, None where exact) of the derived entry about the same quantity."""
    if claim.quantity is None:
        return None
    place = claim.quantity.key("entry")
    bare = Quantity(claim.quantity.name, tuple(k for k in claim.quantity.keys if k[0] != "entry"))
    which = bare.key("level")
    for other in sorted(derived, key=lambda c: c.kind.name != claim.kind.name):  # the same kind first
        if other.quantity is None or (other.kind.name == "limit") != (claim.kind.name == "limit"):
            continue
        if other.quantity == bare and not (claim.quantity.name in _PARTS and isinstance(which, int)):
            return _formula_of(other, place)
        if isinstance(which, int) and other.quantity == Quantity(bare.name, (("level", "k"),)):
            found = _formula_of(other, place)
            return None if found is None else (put(found[0], {"k": number(which)}), found[1])
    return None


def _formula_of(claim: Claim, place: object) -> tuple[Formula, int | None] | None:
    value, known = claim.value, claim.kind.order if claim.kind.name == "order" else None
    if isinstance(value, Cases):
        value = value.pieces[-1][1]
    if isinstance(value, Matrix) and isinstance(place, (tuple, list)):
        return entry_of(value, place[0], place[1]), known
    if isinstance(value, Formula):
        return value, known
    if isinstance(value, Expansion):
        parts = [_part(t, place) for t in value.terms]
        if None in parts:
            return None
        terms = [times(p, power(letter(value.letter), number(k))) if k else p
                 for k, p in zip(value.powers, parts, strict=True) if p is not None]
        return plus(*terms), value.remainder
    return None


def _part(term: Formula | Matrix, place: object) -> Formula | None:
    if isinstance(term, Matrix):
        return entry_of(term, place[0], place[1]) if isinstance(place, (tuple, list)) else None
    return term


def entry_of(matrix: Matrix, x: int, y: int) -> Formula:
    """One entry, 0 where it is absent."""
    return next((f for a, b, f in matrix.entries() if (a, b) == (x, y)), number(0))


# -- the right value of the n-th level, or of all of them


def _by_level(claim: Claim, derived: Sequence[Claim], point: Point, values: Values, goal: arb) -> list[Sight]:
    name = claim.quantity.name if claim.quantity else ""
    which = claim.quantity.key("level") if claim.quantity else None
    if name not in _PARTS or which is None:
        return []
    known = min((c.kind.order or OPEN_ORDERS for c in derived if c.id.endswith(_PARTS[name])), default=0)
    moves = name in ("level energy", "decay rate")
    read, count = reading_of(claim, known if moves else None)
    lines = [_line(c, v, count) for _, c, v in _ordered(derived, _PARTS[name], values)]
    chosen = range(1, len(lines) + 1) if which == "k" else [which] if isinstance(which, int) else []
    around = [(_with(values, "k", Fraction(k)) if which == "k" else values, k) for k in chosen if k <= len(lines)]
    return [Sight(point, v, tuple(lines[k - 1]), read, goal) for v, k in around]


def _line(claim: Claim, values: Values, count: int) -> list[acb]:
    if count:
        return claimed_series(claim.value, values, count)
    value = claim.value.formula if isinstance(claim.value, PerRoot) else claim.value
    return [enclose(value, values)] if isinstance(value, Formula) else []


def _ordered(derived: Sequence[Claim], part: str, values: Values) -> list[tuple[acb, Claim, Values]]:
    """(energy at tau = 0, entry about the part, values with its root) of every bright level, by energy."""
    by_id = {c.id: c for c in derived}
    found: list[tuple[acb, Claim, Values]] = []
    for c in derived:
        stem, _, last = c.id.rpartition(".")
        if last != "energy" or ".dark." in c.id or f"{stem}.{part}" not in by_id:
            continue
        for v, e0 in named_energies(c.value, values):
            found.append((e0, by_id[f"{stem}.{part}"], v))
    return sorted(found, key=lambda item: float(item[0].real.mid()))


def root_sights(
    setting: Setting, claim: Claim, value: PerRoot, derived: Sequence[Claim], effort: Check
) -> list[Sight]:
    """A claim at every root of a polynomial beside the derived levels whose energies these roots are."""
    name = claim.quantity.name if claim.quantity else ""
    if name not in (*_PARTS, "pole"):
        return []
    if name == "pole":
        return _at_poles(setting, claim, value, derived, effort)
    known = min((c.kind.order or OPEN_ORDERS for c in derived if c.id.endswith(_PARTS[name])), default=0)
    read, count = reading_of(claim, known if name in ("level energy", "decay rate") else None)
    found: list[Sight] = []
    for point in sample_points(setting, replace(effort, samples=max(POINTS, effort.samples)), claim.assume):
        try:
            values = Values.at(point.mapping())
            levels = _ordered(derived, _PARTS[name], values)
            for root in enclose_roots(value.polynomial, value.letter, values):
                line = next((_line(c, v, count) for e0, c, v in levels if e0.overlaps(root)), None)
                if line is None:
                    return []
                inner = values.with_letter(value.letter, root)
                found.append(Sight(point, inner, tuple(line), read, power_of_ten(-effort.digits)))
        except Blind:
            continue
    return found


def _at_poles(
    setting: Setting, claim: Claim, value: PerRoot, derived: Sequence[Claim], effort: Check
) -> list[Sight]:
    """Poles at the roots of a polynomial that is the derived denominator, whatever is said of them."""
    right = next((c.value for c in derived if c.quantity == claim.quantity and isinstance(c.value, PerRoot)), None)
    if right is None:
        return []
    found: list[Sight] = []
    for point in sample_points(setting, effort, claim.assume):
        try:
            values = Values.at(point.mapping())
            poles = enclose_roots(right.polynomial, right.letter, values)
            for root in enclose_roots(value.polynomial, value.letter, values):
                if not any(root.overlaps(z) for z in poles):
                    return []
                read, _ = reading_of(claim, None)
                inner = values.with_letter(value.letter, root)
                found.append(Sight(point, inner, (root,), read, power_of_ten(-effort.digits)))
        except Blind:
            continue
    return found


def is_slow(f: Formula) -> bool:
    """Whether a value of f is an integral."""
    return any(node.head == "integral" for node in walk(f))
