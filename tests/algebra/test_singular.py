"""Singular expansions: arithmetic against known series, transfer against coefficients computed outright."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest

from derive.algebra.singular import GammaSeries, Singular, Tail, root_series, transferred
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import PI, Formula, constant, letter, number, power
from derive.problem.setting import POSITIVE

EULER = constant("euler_gamma")


@pytest.fixture(scope="module")
def field() -> Field:
    formulas: list[Formula] = [PI, letter("w"), EULER, letter("log2"), letter("zeta3")]
    domains = dict.fromkeys(("w", "log2", "zeta3"), POSITIVE)
    return Field.of(formulas, domains)


@pytest.fixture(scope="module")
def gamma(field: Field) -> GammaSeries:
    """w stands for sqrt(pi), log2 and zeta3 for the numbers they are called after."""
    zeta2 = field.element(power(PI, number(2))).scaled(Fraction(1, 6))
    named = [field.element(f) for f in (EULER, letter("log2"), letter("w"))]
    return GammaSeries(field, *named, [zeta2, field.element(letter("zeta3"))])


def value(x: Element) -> mpmath.mpf:
    names = {"w": mpmath.sqrt(mpmath.pi), "log2": mpmath.log(2), "zeta3": mpmath.zeta(3)}
    names |= {"pi": mpmath.pi, "euler_gamma": mpmath.euler}
    source = text(x.field.formula(x)).replace("^", "**")
    return eval(source, {"__builtins__": {}}, names)


def test_derivatives_of_the_inverse_gamma_function(gamma: GammaSeries) -> None:
    """Outside oracle: mpmath.taylor of rgamma."""
    with mpmath.workdps(40):
        for s in (Fraction(1), Fraction(3), Fraction(0), Fraction(-2), Fraction(1, 2), Fraction(5, 2), Fraction(-3, 2)):
            wanted = mpmath.taylor(mpmath.rgamma, mpmath.mpf(s.numerator) / s.denominator, 3)
            for j, d in enumerate(gamma.derivatives(s, 3)):
                assert abs(value(d) - wanted[j] * mpmath.factorial(j)) < 1e-12, (s, j)


def test_inverse_undoes_itself(field: Field) -> None:
    one = field.one
    f = Singular(
        field,
        {(Fraction(-1, 2), 0): one.scaled(Fraction(3)), (Fraction(0), 1): one, (Fraction(1, 2), -1): -one},
        (Fraction(2), 0),
    )
    back = f * f.inverse()
    assert back.terms == {(Fraction(0), 0): one}
    assert back.remainder[0] == Fraction(5, 2)
    assert f.inverse().inverse().terms == f.terms


def test_a_square_root_squared(field: Field) -> None:
    slope = field.element(letter("w"))
    r = root_series(field, slope, Fraction(1, 2), 6)
    assert (r * r).terms == {(Fraction(0), 0): field.one, (Fraction(1), 0): slope}


def test_remainders_travel(field: Field) -> None:
    f = Singular.powers(field, [field.one, field.one])
    assert (f * f).remainder == (Fraction(2), 0)
    assert (f.moved(Fraction(-1, 2)) * f).remainder == (Fraction(3, 2), 0)
    with pytest.raises(ValueError, match="beyond"):
        f.coefficient(2)


def total(tails: list[Tail], n: int) -> mpmath.mpf:
    def one(t: Tail) -> mpmath.mpf:
        power = mpmath.mpf(t.power.numerator) / t.power.denominator
        return value(t.factor) * mpmath.mpf(n) ** power * mpmath.log(n) ** t.logs

    return sum(one(t) for t in tails)


def _local(field: Field, length: int) -> Singular:
    """(1 - exp(-x))/x = 1 - x/2 + x^2/6 - ..."""
    return Singular.powers(
        field, [field.rational(Fraction((-1) ** k, int(mpmath.factorial(k + 1)))) for k in range(length)]
    )


def test_binomial_coefficients(field: Field, gamma: GammaSeries) -> None:
    """[z^n] (1 - z)^(1/2) = binomial(1/2, n)(-1)^n exactly; its expansion siam-j-discrete-math-3-216 (from memory)."""
    u = _local(field, 5)
    delta = u + Singular.powers(field, [-field.one] + [field.zero] * 4)
    grown = Singular.powers(field, [field.one] + [field.zero] * 4)
    power_of = grown
    for k in range(1, 5):  # (1 + delta)^(1/2)
        power_of = power_of * delta
        c = Fraction(1)
        for j in range(k):
            c *= (Fraction(1, 2) - j) / (j + 1)
        grown = grown + power_of.scaled(field.rational(c))
    tails, last = transferred(grown.moved(Fraction(1, 2)), gamma, 3)
    assert last == (Fraction(-13, 2), 0)
    with mpmath.workdps(30):
        for n in (50, 100):
            wanted = mpmath.binomial(mpmath.mpf(1) / 2, n) * (-1) ** n
            assert abs(total(tails, n) / wanted - 1) < 2 * mpmath.mpf(n) ** -5
            assert abs(total(tails[:-1], n) / wanted - 1) > 1e-3 * mpmath.mpf(n) ** -5


def test_gregory_coefficients(field: Field, gamma: GammaSeries) -> None:
    """z/log(1/(1-z)) = 1 - z/2 - z^2/12 - z^3/24 - 19 z^4/720 - ..., the coefficients from the recurrence
    sum_k G_k/(n + 1 - k) = 0; their law -1/(n log^2 n) + 2 gamma_E/(n log^3 n) - ... (textbook)."""
    with mpmath.workdps(30):
        g = [mpmath.mpf(1)]
        for n in range(1, 13):
            g.append(-sum(g[k] / (n + 1 - k) for k in range(n)))
        assert abs(g[6] * 60480 + 863) < 1e-20
        assert abs(g[12] - _gregory(12)) < 1e-15
        f = Singular(field, {(Fraction(0), -1): field.one}, (Fraction(1), 2))
        tails, last = transferred(f, gamma, 3)
        assert last == (Fraction(-1), -5) and [t.logs for t in tails] == [-2, -3, -4]
        n = 10**40
        misses = [abs(total(tails[:k], n) / _gregory(n) - 1) * mpmath.log(n) ** k for k in (1, 2, 3)]
        assert all(miss < 8 for miss in misses)
        wrong = [tails[0], Tail(tails[1].power, tails[1].logs, -tails[1].factor)]
        assert abs(total(wrong, n) / _gregory(n) - 1) * mpmath.log(n) ** 2 > 100


def _gregory(n: int) -> mpmath.mpf:
    """G_n = -integral over (0, infinity) of (1 + y)^-n/(log(y)^2 + pi^2) dy (published integral, from memory)."""
    scale = mpmath.log(n)

    def inside(t: mpmath.mpf) -> mpmath.mpf:
        y = mpmath.exp(t - scale)
        return mpmath.exp(-n * mpmath.log1p(y)) * y / ((t - scale) ** 2 + mpmath.pi**2)

    return -mpmath.quad(inside, [-60, -20, -5, 0, 2, 4, 6])


def test_logarithms_with_positive_powers(field: Field, gamma: GammaSeries) -> None:
    """[z^n] of log(1/(1-z))^2/2 is H_(n-1)/n (textbook); with x for 1 - z the harmonic number loses 1/n terms only."""
    f = Singular(field, {(Fraction(0), 2): field.rational(Fraction(1, 2))}, (Fraction(1), 2))
    tails, _ = transferred(f, gamma, 3)
    n = 10**6
    with mpmath.workdps(30):
        wanted = mpmath.harmonic(n - 1) / n
        assert abs(total(tails, n) / wanted - 1) < 1e-6
