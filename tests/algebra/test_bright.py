"""Bright space, characteristic polynomials, factors and moving roots, against sympy and textbook spectra."""

from fractions import Fraction as F

import pytest
import sympy

from derive.algebra.bright import dark_pieces, outside, reached
from derive.algebra.factor import factored
from derive.algebra.implicit import truncated_root
from derive.algebra.polynomial import at, characteristic, polynomial_formula
from derive.exact.adjoin import WithRoot
from derive.exact.field import Field
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.setting import Domain

REAL = Domain("real", "real")
DOMAINS = {"g": Domain("positive", "positive"), "D": REAL, "phi": REAL}


class Plain:
    """A Hermitian matrix of formulas, as an action and an inner product on sparse vectors."""

    def __init__(self, rows):
        formulas = [[parse(str(f)) for f in row] for row in rows]
        self.field = Field.of([f for row in formulas for f in row], DOMAINS)
        self.rows = [[self.field.element(f) for f in row] for row in formulas]
        self.size = len(rows)

    def act(self, v):
        out = {}
        for x, row in enumerate(self.rows):
            total = self.field.zero
            for y, f in v.items():
                total = total + row[y] * f
            if total:
                out[x] = total
        return out

    def inner(self, a, b):
        total = self.field.zero
        for x, f in a.items():
            if x in b:
                total = total + self.field.conjugate(f) * b[x]
        return total

    def unit(self, *sites):
        return dict.fromkeys(sites, self.field.one)

    def reached(self, *vectors):
        return reached(self.field, self.act, self.inner, vectors)


def path(n, hop="-1"):
    return [[hop if abs(i - j) == 1 else "0" for j in range(n)] for i in range(n)]


@pytest.mark.parametrize("n", [3, 4, 7, 8])
def test_path_from_its_middle_reaches_the_even_half(n):
    """A reflection-symmetric start stays in the symmetric space; path spectra 2 cos(pi j/(n+1)) (textbook)."""
    m = Plain(path(n))
    space = m.reached(m.unit(*({n // 2, (n - 1) // 2})))
    assert space.size == (n + 1) // 2
    x = sympy.symbols("x")
    p = sympy.sympify(text(polynomial_formula(characteristic(space), "x")).replace("^", "**"))
    for j in range(1, n + 1, 2):
        assert abs(p.subs(x, -2 * sympy.cos(sympy.pi * j / (n + 1))).evalf(30)) < 1e-25


def test_rank_two_block_against_sympy():
    """dim span{A^m v1, A^m v2} is the rank of the stacked powers (sympy), and the polynomial divides det(E - A)."""
    rows = [[0, 1, 0, 0, 1, 0], [1, 0, 1, 0, 0, 0], [0, 1, 0, 1, 0, 0], [0, 0, 1, 0, 1, 0], [1, 0, 0, 1, 0, 0],
            [0, 0, 0, 0, 0, 2]]
    m = Plain(rows)
    space = m.reached(m.unit(0), m.unit(2))
    a = sympy.Matrix(rows)
    e0, e2 = sympy.zeros(6, 1), sympy.zeros(6, 1)
    e0[0], e2[2] = 1, 1
    stack = sympy.Matrix.hstack(*(a**k * v for k in range(6) for v in (e0, e2)))
    assert space.size == stack.rank() == 5
    x = sympy.symbols("x")
    mine = sympy.sympify(text(polynomial_formula(characteristic(space), "x")).replace("^", "**"))
    assert sympy.expand(mine * (x - 2) - a.charpoly(x).as_expr()) == 0


def test_action_in_the_basis_is_the_action():
    m = Plain([["D", "-g", "0"], ["-g", "0", "-g*exp(i*phi)"], ["0", "-g*exp(-i*phi)", "g"]])
    space = m.reached(m.unit(0))
    assert space.size == 3
    for j, column in enumerate(space.columns):
        left = m.act(space.basis[j])
        for x in range(3):
            total = m.field.zero
            for i, a in column.items():
                total = total + space.basis[i].get(x, m.field.zero) * a
            assert not total - left.get(x, m.field.zero)


def test_dark_pieces_fill_the_rest():
    """Star of three equal arms seen from its centre: two dark copies of each arm's level."""
    rows = [["0"] * 7 for _ in range(7)]
    for x, y in ((0, 1), (1, 2), (0, 3), (3, 4), (0, 5), (5, 6)):
        rows[x][y] = rows[y][x] = "-1"
    m = Plain(rows)
    bright = m.reached(m.unit(0))
    assert bright.size == 3
    pieces = dark_pieces(m.field, m.act, m.inner, [bright], [m.unit(x) for x in range(7)], 4)
    polynomials = [text(polynomial_formula(characteristic(p), "E")) for p in pieces]
    assert polynomials == ["E^2 - 1", "E^2 - 1"]
    assert not outside(bright.basis[0], bright, m.inner)


def test_factors_over_letters_and_phases():
    field = Field.of([parse("g*exp(i*phi)")], DOMAINS)
    g, c = field.element(parse("g")), field.element(parse("2*cos(phi)"))
    q = [g * g * c, -(g * c) - g, field.one]  # (E - g)(E - g*2cos)
    found = [[text(field.formula(x)) for x in f] for f, _ in factored(field, q)]
    assert sorted(found) == sorted([["-g", "1"], ["-2*g*cos(phi)", "1"]])


def test_square_free_parts_where_nothing_is_factored():
    """(E - sqrt(2))^2 (E + 1), multiplied out by hand."""
    field = Field.of([parse("sqrt(2)")], {})
    r, one = field.element(parse("sqrt(2)")), field.one
    p = [field.rational(2), field.rational(2) - (r + r), one - (r + r), one]
    found = [([text(field.formula(x)) for x in f], m) for f, m in factored(field, p)]
    assert found == [(["-sqrt(2)", "1"], 2), (["1", "1"], 1)] or found == [(["1", "1"], 1), (["-sqrt(2)", "1"], 2)]


def test_moving_root_against_sympy_series():
    """E^3 - 3E + 1 + x(E^2 + 2) + x^2 E = 0 on all three roots at once; sympy differentiates implicitly."""
    base = Field.of([parse("1")], {})
    q = [base.rational(k) for k in (1, -3, 0, 1)]
    ring = WithRoot(base, "E", q[:-1])
    lifted = [ring.lift(c) for c in q]
    further = [[ring.rational(2), ring.zero, ring.one], [ring.zero, ring.one]]
    moving = truncated_root(lifted, further, ring.root, 5)
    E, x = sympy.symbols("E x")
    numerators = [sympy.sympify(text(ring.formula(n)).replace("^", "**"), locals={"E": E})
                  for n in moving.numerators]
    slope = 3 * E**2 - 3
    root = sympy.Poly(E**3 - 3 * E + 1, E).nroots(n=40)[1]
    a = [(n / slope ** (2 * k - 1)).subs(E, root) for k, n in enumerate(numerators, start=1)]
    value = root + sum(c * x**k for k, c in enumerate(a, start=1))
    f = sympy.expand((value**3 - 3 * value + 1) + x * (value**2 + 2) + x**2 * value)
    assert all(abs(sympy.N(f.coeff(x, k), 40)) < 1e-30 for k in range(6))
    assert text(ring.formula(moving.coefficient(1) * ring.element(parse("3*E^2 - 3")))) == "-(E^2 + 2)"


def test_adjoined_root_is_a_field():
    base = Field.of([parse("g")], DOMAINS)
    g = base.element(parse("g"))
    ring = WithRoot(base, "E", [-(g * g * g), base.zero, base.zero])
    x = ring.root + ring.lift(g)
    assert not x * (ring.one / x) - ring.one
    assert not at([ring.lift(-(g * g * g)), ring.zero, ring.zero, ring.one], ring.root)
    back = ring.coefficients(x * x)
    assert [text(base.formula(c)) for c in back] == ["g^2", "2*g", "1"]
    assert F(text(ring.formula(ring.root * ring.root * ring.root / ring.lift(g * g * g)))) == 1
