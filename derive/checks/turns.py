"""Intervals at which phases of different energies may coincide, in rational arithmetic.

With tau H = pi H', H' rational, the step is exp(-i pi H'), and energies x, y of H' have one phase where x - y is an
even number.  A polynomial h takes one value on every phase where h(x) = h(x + 2k) at the common roots of mu(x) and
mu(x + 2k), for k = 1, 2, ... up to the width of H', mu the minimal polynomial of what is seen.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import fmpq, fmpq_mat, fmpq_poly

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import PI, free_letters
from derive.problem.setting import Finite, Setting

MOST_TURNS = 10_000


def rational_turns(setting: Setting) -> list[dict[int, Fraction]] | None:
    """Rows of tau H/pi; None where the interval keeps all phases apart.

    A free or random tau keeps them apart, and so does one for which tau/pi is no algebraic number (pi is
    transcendental, H algebraic).
    """
    length = setting.interval.length
    if setting.interval.law != "fixed" or "tau" in free_letters(length) or not isinstance(setting.space, Finite):
        return None
    rows = setting.space.rows
    field = Field.of([length, PI, *(f for row in rows for _, f in row)], setting.domains())
    turn = field.element(length) / field.element(PI)
    if _holds_free_number(field, turn):
        return None
    return [{y: _rational(field.element(f) * turn) for y, f in row} for row in rows]


def _holds_free_number(field: Field, x: Element) -> bool:
    places = [k for name, k in field.index.items() if name.startswith("free")]
    return any(int(f.degrees()[k]) for f in (x.num, x.den) if f is not None for k in places)


def _rational(x: Element) -> Fraction:
    if x.den is not None or not x.num.is_constant():
        raise NotCovered("at this interval tau H/pi is no matrix of rational numbers")
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
