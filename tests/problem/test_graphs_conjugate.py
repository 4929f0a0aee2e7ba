"""conj(f) carried inwards, against Python's complex numbers at random points of the letters' domains."""

from __future__ import annotations

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.conjugate import conjugate, surely_nonnegative, surely_real
from derive.problem.setting import Domain
from derive.worksheet.letters import approx_value

DOMAINS = {
    "g": Domain("positive", "positive"),
    "x": Domain("real", "real"),
    "c": Domain("complex", "complex"),
    "n": Domain("integer", "integer"),
}

INWARDS = [
    ("x", "x"),
    ("i", "-i"),
    ("c", "conj(c)"),
    ("conj(c)", "c"),
    ("exp(i*x)", "exp(-i*x)"),
    ("-g*exp(i*x) + 2", "-g*exp(-i*x) + 2"),
    ("exp(i*c)", "exp(-i*conj(c))"),
    ("(x + i)^3", "(x - i)^3"),
    ("1/(x + i)", "1/(x - i)"),
    ("sqrt(g)", "sqrt(g)"),
    ("sqrt(x)", "conj(sqrt(x))"),
    ("g^(i*x)", "g^(-i*x)"),
    ("(-1)^n", "(-1)^n"),
    ("i^n", "(-i)^n"),
    ("abs(c)", "abs(c)"),
    ("Re(c) + i*Im(c)", "Re(c) - i*Im(c)"),
    ("log(x)", "conj(log(x))"),
    ("log(1 + x^2)", "log(1 + x^2)"),
    ("sum(k from 1 to 3: i*k*c)", "sum(k from 1 to 3: -i*k*conj(c))"),
    ("rootsum(z in z^2 + i: exp(i*z))", "rootsum(z in z^2 - i: exp(-i*z))"),
    ("rootsum(z in z^2 + i: abs(z))", "conj(rootsum(z in z^2 + i: abs(z)))"),
    ("root(z^2 - 2, z, 1)", "root(z^2 - 2, z, 1)"),
    ("unknown", "conj(unknown)"),
]


@pytest.mark.parametrize(("source", "wanted"), INWARDS)
def test_carried_inwards(source, wanted):
    """The rules of complex conjugation, written out by hand."""
    assert conjugate(parse(source), DOMAINS) == parse(wanted), text(conjugate(parse(source), DOMAINS))


_leaf = st.sampled_from(["x", "g", "c", "i", "2", "1/3", "pi", "(-1)"])
_sources = st.recursive(
    _leaf,
    lambda inner: st.one_of(
        st.builds(lambda a, b: f"({a} + {b})", inner, inner),
        st.builds(lambda a, b: f"({a})*({b})", inner, inner),
        st.builds(lambda a, k: f"({a})^{k}", inner, st.sampled_from(["2", "3", "(1/2)", "i", "-1"])),
        st.builds(
            lambda f, a: f"{f}({a})",
            st.sampled_from(["exp", "sin", "sqrt", "cosh", "abs", "Re", "Im", "conj", "log", "atan"]),
            inner,
        ),
    ),
    max_leaves=6,
)


@given(_sources, st.complex_numbers(max_magnitude=2), st.floats(-2, 2), st.floats(0.1, 2))
def test_the_value_is_the_conjugate_value(source, c, x, g):
    f = parse(source)
    at = {"c": c, "x": x, "g": g, "n": 3.0}
    one, other = approx_value(f, at), approx_value(conjugate(f, DOMAINS), at)
    assume(one is not None and other is not None)
    assume(1e-6 < abs(one) < 1e6)
    # A cut hit exactly has no value on either side; stay off it.
    nearby = approx_value(f, {**at, "c": c + 1e-7j, "x": x})
    assume(nearby is not None and abs(nearby - one) < 1e-3 * abs(one))
    assert abs(other - one.conjugate()) < 1e-6 * abs(one)


def test_surely_is_never_said_of_what_may_fail():
    for source in ("x", "i", "c", "sqrt(x)", "g - 1", "x^3", "c^2"):
        assert not surely_nonnegative(parse(source), DOMAINS)
    for source in ("g", "x^2", "abs(c)", "g + x^2", "exp(x)", "sqrt(g)*pi"):
        assert surely_nonnegative(parse(source), DOMAINS)
    for source in ("i*x", "c", "sqrt(x)", "log(x)", "x^(1/2)"):
        assert not surely_real(parse(source), DOMAINS)
