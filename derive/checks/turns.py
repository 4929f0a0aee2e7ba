"""Intervals at which phases of different energies may coincide, in rational arithmetic.

With tau H = pi u H', H' rational, the step is exp(-i pi u H'), and energies x, y of H' have one phase where u (x - y)
is an even number.  A polynomial h takes one value on every phase where h(x) = h(x + 2k/u) at the common roots of mu(x)
and mu(x + 2k/u), for k = 1, 2, ... up to the width of H', mu the minimal polynomial of what is seen.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import arb, ctx, fmpq, fmpq_mat, fmpq_poly

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import PI, Formula, free_letters
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Finite, Setting

MOST_TURNS = 10_000


@dataclass(frozen=True)
class Turns:
    """tau H = pi u H': the unit u, 1 or an irrational number, and the rational rows of H'."""

    unit: Formula
    rows: list[dict[int, Fraction]]

    @property
    def width(self) -> Fraction:
        """A bound on |H'|."""
        return max(sum((abs(q) for q in row.values()), Fraction(0)) for row in self.rows)


def rational_turns(setting: Setting) -> Turns | None:
    """tau H/pi taken apart; None where the interval keeps all phases apart.

    A free or random tau keeps them apart, and so does one for which tau/pi is no algebraic number (pi is
    transcendental, H algebraic).
    """
    length = setting.interval.length
    if setting.interval.law != "fixed" or "tau" in free_letters(length) or not isinstance(setting.space, Finite):
        return None
    rows = setting.space.rows
    field = Field.of([length, PI, *(f for row in rows for _, f in row)], setting.domains())
    turn = field.element(length) / field.element(PI)
    if _holds(field, turn, "free"):
        return None
    shares = [{y: field.element(f) * turn for y, f in row} for row in rows]
    unit = next((x for row in shares for x in row.values()), field.one)
    if _holds(field, unit, "letter:") and all(_is_rational(x / unit) for row in shares for x in row.values()):
        return None  # tau H/pi is a letter times numbers: generic values of the letter keep phases apart
    scale = field.one if _is_rational(unit) else unit
    return Turns(field.formula(scale), [{y: _rational(x / scale) for y, x in row.items()} for row in shares])


def _is_rational(x: Element) -> bool:
    return x.den is None and bool(x.num.is_constant())


def _holds(field: Field, x: Element, kind: str) -> bool:
    """Whether a generator of the kind stands in x: a number of unknown relations, or a letter."""
    places = [k for name, k in field.index.items() if name.startswith(kind)]
    return any(int(f.degrees()[k]) for f in (x.num, x.den) if f is not None for k in places)


def _rational(x: Element) -> Fraction:
    if not _is_rational(x):
        raise NotCovered("at this interval tau H/pi is no rational matrix times one number")
    return _fraction(x.num.leading_coefficient()) if x else Fraction(0)


def _fraction(q: fmpq) -> Fraction:
    return Fraction(int(q.p), int(q.q))


def combinations(mu: Sequence[Fraction], width: Fraction) -> list[list[Fraction]]:
    """A basis of the polynomials of degree below deg(mu) with one value on every set of roots that differ by 2k.

    `width` bounds |H'|, so roots differ by 2 width at most.
    """
    polynomial, degree = _polynomial(mu), len(mu) - 1
    if width > MOST_TURNS:
        raise NotCovered("too many turns of the phase within one interval")
    lines: list[list[fmpq]] = []
    for k in range(1, int(width) + 1):
        common = polynomial.gcd(polynomial(_polynomial([Fraction(2 * k), Fraction(1)])))
        if common.degree() > 0:
            lines += _equal_values(degree, 2 * k, common)
    if not lines:
        return [[Fraction(int(i == j)) for j in range(degree)] for i in range(degree)]
    return _kernel(fmpq_mat(len(lines), degree, [q for line in lines for q in line]))


def combinations_over(field: Field, mu: Sequence[Fraction], turns: Turns) -> list[list[Element]]:
    """The same where roots that differ by 2k/u have one phase, u irrational: over the field that holds u."""
    p, degree = [field.rational(c) for c in mu], len(mu) - 1
    unit = field.element(turns.unit)
    rows: list[list[Element]] = []
    for k in range(1, _largest_turn(turns) + 1):
        shift = field.rational(2 * k) / unit
        common = _gcd(p, _moved(field, p, shift))
        if len(common) > 1:
            columns = [_rest(_difference(field, j, shift), common) for j in range(degree)]
            rows += [[c[i] if i < len(c) else field.zero for c in columns] for i in range(len(common) - 1)]
    return _null_space(field, rows, degree)


def _largest_turn(turns: Turns) -> int:
    """|u| times the width of H', rounded down."""
    with ctx.workprec(64):
        reach = abs(enclose(turns.unit, Values({}))).upper() * arb(turns.width.numerator) / turns.width.denominator
        if not reach < MOST_TURNS:
            raise NotCovered("too many turns of the phase within one interval")
        return int(reach.upper().floor().unique_fmpz() or 0)


def _moved(field: Field, p: list[Element], shift: Element) -> list[Element]:
    """p(x + shift), by Horner's rule."""
    out: list[Element] = []
    for c in reversed(p):
        grown = [field.zero, *out]
        out = [a + (shift * out[k] if k < len(out) else field.zero) for k, a in enumerate(grown)] or [field.zero]
        out[0] = out[0] + c
    return out


def _difference(field: Field, j: int, shift: Element) -> list[Element]:
    """x^j - (x + shift)^j."""
    plain = [field.zero] * j + [field.one]
    return [a - b for a, b in zip(plain, _moved(field, plain, shift), strict=True)]


def _rest(a: list[Element], b: list[Element]) -> list[Element]:
    """a modulo b, zeros on top left out."""
    out = list(a)
    while len(out) >= len(b):
        c = out[-1] / b[-1]
        if c:
            for k, y in enumerate(b):
                out[len(out) - len(b) + k] = out[len(out) - len(b) + k] - c * y
        out.pop()
    while out and not out[-1]:
        out.pop()
    return out


def _gcd(a: list[Element], b: list[Element]) -> list[Element]:
    while b:
        a, b = b, _rest(a, b)
    return a


def _null_space(field: Field, rows: list[list[Element]], degree: int) -> list[list[Element]]:
    """A basis of the solutions of rows h = 0."""
    held: dict[int, list[Element]] = {}
    for row in rows:
        for p, other in held.items():
            if row[p]:
                row = [a - row[p] * b for a, b in zip(row, other, strict=True)]
        pivot = next((j for j, x in enumerate(row) if x), None)
        if pivot is not None:
            row = [x / row[pivot] for x in row]
            for p, other in held.items():
                held[p] = [a - other[pivot] * b for a, b in zip(other, row, strict=True)]
            held[pivot] = row
    out = []
    for free in (j for j in range(degree) if j not in held):
        v = [field.zero] * degree
        v[free] = field.one
        for p, row in held.items():
            v[p] = -row[free]
        out.append(v)
    return out


def _polynomial(coefficients: Sequence[Fraction]) -> fmpq_poly:
    return fmpq_poly([fmpq(c.numerator, c.denominator) for c in coefficients])


def _equal_values(degree: int, shift: int, common: fmpq_poly) -> list[list[fmpq]]:
    """h(x) = h(x + shift) modulo `common`, one line a power of x."""
    x, beyond = _polynomial([Fraction(0), Fraction(1)]), _polynomial([Fraction(shift), Fraction(1)])
    columns = [(x**j - beyond**j) % common for j in range(degree)]
    return [[c[i] for c in columns] for i in range(common.degree())]


def _kernel(m: fmpq_mat) -> list[list[Fraction]]:
    reduced, rank = m.rref()
    pivots = [next(j for j in range(m.ncols()) if reduced[i, j] != 0) for i in range(rank)]
    out = []
    for free in (j for j in range(m.ncols()) if j not in pivots):
        v = [Fraction(0)] * m.ncols()
        v[free] = Fraction(1)
        for i, p in enumerate(pivots):
            v[p] = -_fraction(reduced[i, free])
        out.append(v)
    return out
