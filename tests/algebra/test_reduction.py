"""The reduction process against published series, exactly as rationals.

Mathieu: DLMF 28.6.1-28.6.14; splitting a_m - b_m: DLMF 28.6.15 with its neighbours.  Hydrogen, n = 2: the published
series in a static field, from memory, recomputed here in parabolic coordinates (textbook separation).  The two-by-two
families: textbook "Perturbation theory for linear operators", II 1.1, from memory.  Random families: sympy.
"""

from fractions import Fraction as F
from math import factorial

import pytest

from derive.algebra.reduction import truncated_eigenvalues
from derive.exact.field import Field
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.setting import Domain

Q = Field.of([parse("1")], {})


def dense(field, rows):
    return [[field.element(parse(str(x))) if not isinstance(x, F) else field.rational(x) for x in row] for row in rows]


def rationals(branch):
    return [F(text(branch.field.formula(c))) for c in branch.coefficients]


def mathieu(numbers, order, fold):
    """diag(n^2) and q between n and n +- 2; `fold` is +1, -1 for even, odd functions on n >= 0, None for both."""
    size = len(numbers)
    zero, one = [[F(0)] * size for _ in range(size)], [[F(0)] * size for _ in range(size)]
    for i, n in enumerate(numbers):
        zero[i][i] = F(n * n)
        for j, m in enumerate(numbers):
            if abs(n - m) == 2:
                one[i][j] = F(1)
    if fold == 1:  # cos basis with n = 0: not normalised, so not symmetric, and still exact
        one[numbers.index(0)][numbers.index(2)] = F(1)
        one[numbers.index(2)][numbers.index(0)] = F(2)
    rest = [[[F(0)] * size for _ in range(size)] for _ in range(order - 1)]
    return [dense(Q, t) for t in (zero, one, *rest)]


A0 = {2: F(-1, 2), 4: F(7, 128), 6: F(-29, 2304), 8: F(68687, 18874368)}
A1 = {0: F(1), 1: F(1), 2: F(-1, 8), 3: F(-1, 64), 4: F(-1, 1536), 5: F(11, 36864), 6: F(49, 589824),
      7: F(55, 9437184), 8: F(-83, 35389440)}
A2 = {0: F(4), 2: F(5, 12), 4: F(-763, 13824), 6: F(1002401, 79626240), 8: F(-1669068401, 458647142400)}
B2 = {0: F(4), 2: F(-1, 12), 4: F(5, 13824), 6: F(-289, 79626240), 8: F(21391, 458647142400)}


def series(known, order=8):
    return [known.get(k, F(0)) for k in range(order + 1)]


def test_mathieu_even_periods_to_q8():
    """The level 4 is double and splits at order 2; 0 is simple.  Numbers beyond 10 first act beyond q^8."""
    found = truncated_eigenvalues(Q, mathieu(list(range(-10, 11, 2)), 8, None))
    low = {tuple(rationals(b)) for b in found if rationals(b)[0] in (0, 4)}
    assert low == {tuple(series(A0)), tuple(series(A2)), tuple(series(B2))}


def test_mathieu_odd_periods_to_q8():
    """The level 1 is double and splits at first order; b_1 is a_1 with q -> -q."""
    found = truncated_eigenvalues(Q, mathieu(list(range(-9, 10, 2)), 8, None))
    low = {tuple(rationals(b)) for b in found if rationals(b)[0] == 1}
    b1 = [c * (-1) ** k for k, c in enumerate(series(A1))]
    assert low == {tuple(series(A1)), tuple(b1)}


@pytest.mark.parametrize("m", [3, 4, 5])
def test_mathieu_pair_splits_at_order_m(m):
    """a_m - b_m = 2 q^m/(2^(m-1) (m-1)!)^2 (1 + O(q^2))."""
    numbers = list(range(-m - 4, m + 5, 2))
    pair = [rationals(b) for b in truncated_eigenvalues(Q, mathieu(numbers, m, None)) if rationals(b)[0] == m * m]
    assert len(pair) == 2
    gap = [abs(x - y) for x, y in zip(*pair, strict=True)]
    assert gap[:m] == [F(0)] * m and gap[m] == F(2, (2 ** (m - 1) * factorial(m - 1)) ** 2)


def test_unsplit_pair_is_said_to_be_double():
    found = truncated_eigenvalues(Q, mathieu(list(range(-9, 10, 2)), 2, None))
    assert [b.multiplicity for b in found if rationals(b)[0] == 9] == [2]


def parabolic(n, order):
    """lambda_n(s): eigenvalue of -(x f')' + x f/4 + s x^2 f, m = 0; x in Laguerre's basis is tridiagonal."""
    size = n + 2 * order + 3
    x = [[F(2 * i + 1) if i == j else F(-max(i, j)) if abs(i - j) == 1 else F(0) for j in range(size)]
         for i in range(size)]
    square = [[sum(x[i][k] * x[k][j] for k in range(size)) for j in range(size)] for i in range(size)]
    zero = [[F(2 * i + 1, 2) if i == j else F(0) for j in range(size)] for i in range(size)]
    empty = [[F(0)] * size for _ in range(size)]
    found = truncated_eigenvalues(Q, [dense(Q, t) for t in (zero, square, *[empty] * (order - 1))])
    return next(rationals(b) for b in found if rationals(b)[0] == F(2 * n + 1, 2))


def product(a, b, order):
    out = [F(0)] * (order + 1)
    for i, x in enumerate(a):
        for j, y in enumerate(b[: order + 1 - i]):
            out[i + j] += x * y
    return out


def test_hydrogen_second_level_to_fourth_order():
    """Separation: lambda_1(s) + lambda_0(-s) = 1/k, s = F/(4 k^3), E = -k^2/2; solved for k as a series in F."""
    order = 4
    up, down = parabolic(1, order), parabolic(0, order)
    total = [u + d * (-1) ** j for j, (u, d) in enumerate(zip(up, down, strict=True))]
    inverse_k = [total[0]] + [F(0)] * order  # w = 1/k = total(F w^3/4)
    for _ in range(order):
        cube = product(product(inverse_k, inverse_k, order), inverse_k, order)
        s = [F(0), *(c / 4 for c in cube[:order])]
        grown, power = [F(0)] * (order + 1), [F(1)] + [F(0)] * order
        for c in total:
            grown = [a + c * b for a, b in zip(grown, power, strict=True)]
            power = product(power, s, order)
        inverse_k = grown
    square = product(inverse_k, inverse_k, order)
    energy = [F(-1, 2) / square[0]]  # -1/(2 w^2)
    for k in range(1, order + 1):
        energy.append(-sum(square[j] * energy[k - j] for j in range(1, k + 1)) / square[0])
    assert energy == [F(-1, 8), F(3), F(-84), F(1560), F(-257856)]


def test_two_site_hubbard_singlet():
    """(U - sqrt(U^2 + 16 t^2))/2, expanded by hand."""
    field = Field.of([parse("U")], {"U": Domain("positive", "positive")})
    zero, one = dense(field, [["0", "0"], ["0", "U"]]), dense(field, [["0", "2"], ["2", "0"]])
    empty = dense(field, [["0", "0"], ["0", "0"]])
    found = truncated_eigenvalues(field, [zero, one, *[empty] * 6 + [empty]])
    low = next(b for b in found if not b.coefficients[0])
    assert [text(field.formula(c)) for c in low.coefficients] == [
        "0", "0", "-4/U", "0", "16/U^3", "0", "-128/U^5", "0", "1280/U^7"]


def test_two_by_two_with_power_series():
    """[[1, x], [x, -1]]: +-sqrt(1 + x^2)."""
    family = [dense(Q, t) for t in ([[1, 0], [0, -1]], [[0, 1], [1, 0]], *[[[0, 0], [0, 0]]] * 5)]
    found = sorted(rationals(b) for b in truncated_eigenvalues(Q, family))
    root = [F(1), F(0), F(1, 2), F(0), F(-1, 8), F(0), F(1, 16)]
    assert found == [[-c for c in root], root]


def test_square_root_is_reported_as_such():
    """[[0, 1], [x, 0]]: +-sqrt(x), no power series."""
    family = [dense(Q, t) for t in ([[0, 1], [0, 0]], [[0, 0], [1, 0]])]
    (branch,) = truncated_eigenvalues(Q, family)
    (side,) = branch.fractional
    assert branch.multiplicity == 2 and side.exponent == F(1, 2)
    assert [text(Q.formula(c)) for c in side.polynomial] == ["-1", "0", "1"]


def test_cube_root_beside_a_plain_eigenvalue():
    """A 3 x 3 Jordan block closed by x: mu^3 = x (Newton's polygon by hand)."""
    rows = [[0, 1, 0, 0], [0, 0, 1, 0], [0, 0, 0, 0], [0, 0, 0, 5]]
    closed = [[0, 0, 0, 0], [0, 0, 0, 0], [1, 0, 0, 1], [1, 0, 0, 0]]
    found = truncated_eigenvalues(Q, [dense(Q, rows), dense(Q, closed), dense(Q, [[0] * 4] * 4)])
    exponents = [side.exponent for b in found for side in b.fractional]
    assert exponents == [F(1, 3)]
    assert [b.multiplicity for b in found] == [3, 1] or [b.multiplicity for b in found] == [1, 3]


def test_irrational_levels_keep_one_formula_for_all_roots():
    """Random 4 x 4 integer family: the series satisfy the characteristic polynomial modulo x^5 (sympy)."""
    import sympy

    t0 = [[1, 2, 0, 1], [2, -1, 1, 0], [0, 1, 3, 1], [1, 0, 1, 0]]
    t1 = [[0, 1, 3, 0], [1, 2, 0, -1], [3, 0, 0, 1], [0, -1, 1, 1]]
    family = [dense(Q, t0), dense(Q, t1), *[dense(Q, [[0] * 4] * 4)] * 3]
    found = truncated_eigenvalues(Q, family)
    (branch,) = found
    (name, low), = branch.adjoined
    x, E, y = sympy.symbols("x E y")
    p = sympy.Poly(E**4 + sum(sympy.Rational(text(Q.formula(c))) * E**k for k, c in enumerate(low)), E)
    terms = [text(branch.field.formula(c)).replace("^", "**") for c in branch.coefficients]
    value = sum(sympy.sympify(term, locals={"E": E}) * x**k for k, term in enumerate(terms))
    f = (sympy.Matrix(t0) + x * sympy.Matrix(t1)).charpoly(y).as_expr().subs(y, value)
    for k in range(5):
        residual = sympy.Poly(sympy.expand(f), x).coeff_monomial(x**k)
        assert sympy.rem(sympy.Poly(residual, E), p).is_zero
