"""What is printed has the value that was meant: read back from LaTeX and from MathML, and compared by sympy.

The road that could disagree: the readers in `readers.py`, written from the standards, and sympy's own reading of
the worksheet syntax.
"""

from __future__ import annotations

from fractions import Fraction

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, call, constant, letter, number, plus, power, times
from derive.report.arrange import arrange
from derive.report.emit_latex import latex
from derive.report.emit_mathml import mathml
from derive.report.layout import Layout

from .readers import read_latex, read_mathml, symbol

LETTERS = ("g", "tau", "Delta", "x", "L", "kappa")
LAYOUT = Layout({})

TABLE = [
    "-Delta*g^2/6",
    "4/5*g^2*tau*sin(pi/5)^2",
    "4*g^2*tau*sin(pi*x/(L+1))^2/(L+1)",
    "g^2*Delta/6 + i*g^3/12",
    "sqrt(1 + sqrt(2 + sqrt(3)))/2",
    "-x - L",
    "-(x + L)",
    "x - (L - g)",
    "(x + L)^2/2 - (x + L)/(g*tau)",
    "2*3^x*5^L",
    "2^x*(2/3)^L",
    "exp(-i*Delta*tau)*g/2",
    "exp(-x^2/(2*L))*sin(x)*cos(2*x)",
    "x^(3/2)/sqrt(g)",
    "log(2)/x",
    "sin(x)/2 + sin(2*x)/4",
    "tau^2*g^3*Delta/12 - tau*g/3 - i*g^2/2",
    "1/(1 + 1/(1 + 1/x))",
    "(x/L)^3",
    "(-1)^x*g",
    "x^(L/2)*x^(-1/3)",
    "tanh(kappa/2)*2/tau",
    "3*(x - L)*(-2)",
    "g*(Delta + g)*exp(i*x)",
    "i*g^2*(Delta^2 - 4*g^2)/24",
    "x^-2*L^2",
    "(2*x)^2",
    "exp(x)^2",
    "sin(x)^2*cos(x)^3",
    "1/2",
    "-7",
    "0*i*g",
]


def meant(f: Formula) -> sympy.Expr:
    """sympy's reading of the worksheet syntax of f."""
    names = {name: symbol(name) for name in LETTERS} | {"i": sympy.I, "pi": sympy.pi}
    return sympy.sympify(text(f).replace("^", "**"), locals=names)


def agree(left: sympy.Expr, right: sympy.Expr) -> bool:
    """Equal at three points, to 25 digits."""
    for k in range(3):
        values = {symbol(name): sympy.Rational(7 + 3 * n + k, 5 + n) for n, name in enumerate(LETTERS)}
        a, b = (sympy.N(e.subs(values), 30) for e in (left, right))
        if abs(a - b) > sympy.Float("1e-24") * (1 + abs(a)):
            return False
    return True


@pytest.mark.parametrize("source", TABLE)
def test_latex_says_what_was_meant(source: str) -> None:
    f = parse(source)
    assert agree(read_latex(latex(LAYOUT.box(f))), meant(f)), latex(LAYOUT.box(f))


@pytest.mark.parametrize("source", TABLE)
def test_mathml_says_what_was_meant(source: str) -> None:
    f = parse(source)
    assert agree(read_mathml(mathml(LAYOUT.box(f))), meant(f)), mathml(LAYOUT.box(f))


@pytest.mark.parametrize("source", TABLE)
def test_arranging_keeps_the_value(source: str) -> None:
    assert agree(meant(arrange(parse(source))), meant(parse(source)))


def test_a_planted_slip_is_seen() -> None:
    """A lost fence, a wrong sign and a swapped fraction are caught by this comparison."""
    assert not agree(read_latex("-x + L"), meant(parse("-(x + L)")))
    assert not agree(read_latex("\\frac{g}{x + L}"), meant(parse("(x + L)/g")))
    assert not agree(read_latex("\\sin 2x"), meant(parse("sin(2*x)")))


numbers = st.fractions(min_value=-9, max_value=9, max_denominator=12).map(number)
leaves = st.one_of(numbers, st.sampled_from([letter(n) for n in LETTERS]), st.just(constant("i")))


def larger(inner: st.SearchStrategy[Formula]) -> st.SearchStrategy[Formula]:
    small = st.sampled_from([number(2), number(3), number(Fraction(1, 2)), number(-2)])
    positive = st.sampled_from([letter(n) for n in LETTERS])
    return st.one_of(
        st.lists(inner, min_size=2, max_size=4).map(lambda a: plus(*a)),
        st.lists(inner, min_size=2, max_size=4).map(lambda a: times(*a)),
        st.tuples(positive, small).map(lambda a: power(*a)),
        st.tuples(inner, st.sampled_from([number(2), number(3)])).map(lambda a: power(*a)),
        positive.map(lambda a: call("sin", a)),
        st.tuples(positive, positive).map(lambda a: times(a[0], power(plus(a[1], number(1)), number(-1)))),
    )


@settings(max_examples=150)
@given(st.recursive(leaves, larger, max_leaves=8))
def test_any_formula_reads_back(f: Formula) -> None:
    box = LAYOUT.box(f)
    assert agree(read_latex(latex(box)), meant(f)), (text(f), latex(box))
    assert agree(read_mathml(mathml(box)), meant(f)), (text(f), latex(box))
