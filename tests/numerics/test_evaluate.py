"""Values of formulas against mpmath, and what happens on cuts and poles."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest
from flint import acb, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.tree import number, operator
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.precision import retry
from tests.numerics.oracle import as_ball, by_mpmath, log10_of

POINT = {"g": Fraction(1, 3), "x": Fraction(7, 5), "w": Fraction(-5, 4)}


def value(source: str, bits: int = 200) -> acb:
    with ctx.workprec(bits):
        return enclose(parse(source), Values.at({k: number(v) for k, v in POINT.items()}))


EVERY_FUNCTION = [
    "exp(g + 2*i*x)", "log(w + i*g)", "log(w)", "sqrt(w)", "sqrt(x - i)", "sin(x + i)", "cos(w)", "tan(x)",
    "cot(g - i)",
    "sinh(g)", "cosh(x + i*g)", "tanh(w)", "coth(g)", "asin(g)", "acos(w*i)", "acos(g)", "atan(x)", "atan(w + 3*i)",
    "Gamma(g)", "Gamma(w + i)", "bessel_J(2, x)", "bessel_J(g, x)", "bessel_J(3, -x)", "bessel_I(0, x)",
    "bessel_I(1/2, g)", "elliptic_K(g)", "elliptic_K(w)", "binomial(7, 3)", "binomial(x, 2)", "binomial(x, g)",
    "floor(10*g)", "floor(w)", "abs(w + i*g)", "Re(exp(i*x))", "Im(exp(i*x))", "conj(exp(i*x))", "x^(1/3)", "w^(1/3)",
    "w^-3", "x^g", "2^(-x)", "pi*euler_gamma", "(1 + i)^5", "g/x - w^2", "0^2",
]  # fmt: skip


@pytest.mark.parametrize("source", EVERY_FUNCTION)
def test_functions_against_mpmath(source: str) -> None:
    """Every function of the grammar, principal branches (mpmath's own functions)."""
    with mpmath.workdps(60):
        exact = {k: mpmath.mpf(v.numerator) / v.denominator for k, v in POINT.items()}
    found = value(source)
    assert found.overlaps(as_ball(by_mpmath(source, exact)))
    assert log10_of(found.rad()) < -45


def test_factorial_against_mpmath() -> None:
    assert value("5!").contains(120)
    with mpmath.workdps(60):
        wanted = by_mpmath("factorial(x)", {"x": mpmath.mpf(7) / 5})
    assert value("x!").overlaps(as_ball(wanted))


def test_sums_against_closed_forms() -> None:
    """Orthogonality of sines and the geometric series (textbook identities, from memory)."""
    assert value("sum(k from 1 to 7: sin(pi*k/8)^2)").contains(4)
    assert (value("sum(k from 0 to 9: g^k)") - value("(1 - g^10)/(1 - g)")).contains(0)
    assert value("sum(k from 3 to 2: k)").is_zero()


def test_integrals_against_mpmath_quad() -> None:
    for source, f, a, b in [
        ("integral(y from 0 to 2: exp(-y^2)*cos(g*y))", lambda y: mpmath.exp(-y * y) * mpmath.cos(y / 3), 0, 2),
        ("integral(y from 0 to 1: sqrt(y))", mpmath.sqrt, 0, 1),
        ("integral(y from 0 to pi: 1/(2 + cos(y)))", lambda y: 1 / (2 + mpmath.cos(y)), 0, mpmath.pi),
    ]:
        with mpmath.workdps(40):
            slack = "1e-9" if "sqrt" in source else "1e-25"  # mpmath's quadrature feels the branch point
            wanted = as_ball(mpmath.mpc(mpmath.quad(f, [a, (a + b) / 2, b])), slack)
        assert value(source, 150).overlaps(wanted)


def test_nested_integral() -> None:
    """int_0^1 int_0^1 x*y = 1/4."""
    assert value("integral(y from 0 to 1: integral(z from 0 to 1: y*z))", 100).contains(0.25)


def test_roots_against_mpmath_polyroots() -> None:
    with mpmath.workdps(50):
        wanted = sorted(r.real for r in mpmath.polyroots([1, 0, -2, mpmath.mpf(1) / 3], maxsteps=200, extraprec=200))
        balls = [as_ball(mpmath.mpc(r), "1e-40") for r in wanted]
    for n, r in enumerate(balls, start=1):
        assert value(f"root(y^3 - 2*y + g, y, {n})").overlaps(r)
    assert not value("root(y^3 - 2*y + g, y, 1)").overlaps(balls[1])


def test_repeated_roots_count_once() -> None:
    assert value("root((y - g)^2*(y - 5), y, 2)").contains(5)
    with pytest.raises(OutsideValidity, match="1 real root|2 real roots"):
        value("root((y - g)^2*(y - 5), y, 3)")


def test_roots_of_polynomials_with_surds() -> None:
    """x^2 - sqrt(2) x - 1: the quadratic formula."""
    gap = value("root(y^2 - sqrt(2)*y - 1, y, 1) - (sqrt(2) - sqrt(6))/2")
    assert gap.contains(0)
    assert log10_of(gap.abs_upper()) < -40


def test_rootsum_against_vieta() -> None:
    """Power sums of the roots of y^3 - 2y + 1/3 by Newton's identities: p_1 = 0, p_2 = 4, sum 1/y = 2/(1/3) = 6."""
    assert value("rootsum(y in y^3 - 2*y + g: y)").contains(0)
    assert value("rootsum(y in y^3 - 2*y + g: y^2)").contains(4)
    assert value("rootsum(y in y^3 - 2*y + g: 1/y)").contains(6)


@pytest.mark.parametrize("source", ["sqrt(-1 + 0*i*sin(g))", "log(-2 + exp(i*g)*exp(-i*g) - 1)"])
def test_exactly_on_the_cut_is_not_refused_or_says_so(source: str) -> None:
    """A value on the cut is either principal or undecided, never the other branch."""
    try:
        found = value(source)
    except NeedsPrecision:
        return
    assert found.imag > 0


def test_a_cut_inside_a_ball_is_undecided() -> None:
    with ctx.workprec(100):
        around = Values({"z": acb(arb(-1), arb(0, "1e-10"))})
        below = ("sqrt(z)", "log(z)", "z^(1/3)", "bessel_J(1/2, z)")
        for source in (*below, "asin(2*z)", "acos(2*z)", "elliptic_K(-2*z)"):
            with pytest.raises(NeedsPrecision):
                enclose(parse(source), around)
        with pytest.raises(NeedsPrecision):
            enclose(parse("atan(z)"), Values({"z": acb(arb(0, "1e-10"), arb(2))}))


def test_poles_and_zero_divisors() -> None:
    with pytest.raises(OutsideValidity):
        value("1/tan(0*x)")
    for source in ("log(0*g)", "Gamma(-3)", "cot(0*g)", "1/sin(0*g)"):
        with pytest.raises(OutsideValidity):
            value(source)
    with pytest.raises(NeedsPrecision):
        value("1/(sqrt(2)^2 - 2)")


def test_what_has_no_number() -> None:
    with pytest.raises(NotCovered):
        value("infinity")
    with pytest.raises(NotCovered):
        value("integral(y from infinity to 0: exp(-y))")
    with pytest.raises(NotCovered):
        value("unknown + 1")
    with pytest.raises(NotCovered), ctx.workprec(100):
        enclose(operator("A"), Values({}))
    with pytest.raises(NotCovered):
        value("sum(k from 1 to 10^9: k)")


def test_real_parts_only_where_real() -> None:
    with ctx.workprec(100):
        assert enclose_real(parse("exp(i*pi)"), Values({})).contains(-1)
        with pytest.raises(OutsideValidity):
            enclose_real(parse("1 + i"), Values({}))


def test_precision_rises_until_it_suffices_and_stops_at_the_cap() -> None:
    """exp(1000 pi) - its own value to 300 digits needs more than the first 64 bits."""
    tried: list[int] = []

    def difficult(bits: int) -> int:
        tried.append(bits)
        assert ctx.prec == bits
        if bits < 500:
            raise NeedsPrecision
        return bits

    before = ctx.prec
    assert retry(difficult, 64) == 512
    assert tried == [64, 128, 256, 512]
    assert ctx.prec == before
    with pytest.raises(NeedsPrecision):
        retry(difficult, 64, cap=200)
    assert ctx.prec == before
