"""The grammar: what is read, how it binds, what is refused and how it is said."""

from fractions import Fraction

import pytest
from hypothesis import given

from derive.errors import FormulaFault
from derive.formula.grammar import parse, parse_relations
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    Formula,
    call,
    free_letters,
    letter,
    number,
    plus,
    power,
    replace,
    times,
)
from tests.strategies import formulas

x, y, g, n = (letter(name) for name in "xygn")


@given(formulas)
def test_text_reads_back_to_the_same_formula(f: Formula) -> None:
    """Road: the grammar against the writer, which share no code."""
    assert parse(text(f)) == f


@pytest.mark.parametrize(
    ("source", "meaning"),
    [
        ("-x^2", times(number(-1), power(x, number(2)))),
        ("2^3^2", power(number(2), power(number(3), number(2)))),
        ("n^-5", power(n, number(-5))),
        ("2^n!", power(number(2), call("factorial", n))),
        ("x**2", power(x, number(2))),
        ("0.02", number(Fraction(1, 50))),
        ("x/(2*y)", times(number(Fraction(1, 2)), x, power(y, number(-1)))),
        ("x - (y - g)", plus(x, times(number(-1), plus(y, times(number(-1), g))))),
        ("3*i*2", times(number(6), I_UNIT)),
        ("+x", x),
        ("1/(1/x)", x),
        ("binomial(n, 2)", call("binomial", n, number(2))),
    ],
)
def test_binding(source: str, meaning: Formula) -> None:
    assert parse(source) == meaning


@pytest.mark.parametrize(
    "source", ["2*3 - 4/5*2^3", "(1 - 2)^3 - 2^-2", "-2^2 + 7/3/2", "3 - 2 - 1 + 10/5*3", "(2/3)^-2*6"]
)
def test_numbers_mean_what_python_means(source: str) -> None:
    """Outside oracle: Python's own precedence, on Fractions."""
    assert _value(parse(source)) == _fraction_value(source)


def _fraction_value(source: str) -> Fraction:
    """The same source through Python's own parser, numbers as Fractions."""
    import ast
    import operator

    ops = {ast.Add: operator.add, ast.Sub: operator.sub, ast.Mult: operator.mul, ast.Div: operator.truediv}

    def walk(node: ast.expr) -> Fraction:
        if isinstance(node, ast.Constant):
            return Fraction(node.value)
        if isinstance(node, ast.UnaryOp):
            return -walk(node.operand)
        if isinstance(node, ast.BinOp):
            if isinstance(node.op, ast.Pow):
                return walk(node.left) ** int(walk(node.right))
            return ops[type(node.op)](walk(node.left), walk(node.right))
        raise TypeError(node)

    return walk(ast.parse(source.replace("^", "**"), mode="eval").body)


def _value(f: Formula) -> Fraction:
    if f.head == "number":
        return f.args[0]
    parts = [_value(a) for a in f.args]
    if f.head == "plus":
        return sum(parts, Fraction(0))
    if f.head == "power":
        return parts[0] ** int(parts[1])
    out = Fraction(1)
    for p in parts:
        out *= p
    return out


@pytest.mark.parametrize(
    ("source", "position", "word"),
    [
        ("2g", 1, "2*g"),
        ("(x)(y)", 3, "*"),
        (".5", 0, "0.5"),
        ("1e-3", 0, "0.001"),
        ("n!!", 2, "(n!)!"),
        ("2*-x", 2, "*(-"),
        ("f(x)", 0, "no function"),
        ("sinn(x)", 0, "sin"),
        ("sin", 0, "sin(...)"),
        ("sin(x, y)", 0, "1 argument"),
        ("e^x", 0, "exp"),
        ("__import__('os')", 0, "meaning"),
        ("x.real", 1, "point"),
        ("x y", 2, "x*y"),
        ("1/0", 0, "zero"),
        ("x +", 2, "ends"),
        ("(x", 0, "closed"),
        ("x)", 1, ")"),
        ("", 0, "no formula"),
        ("x\x00", 1, "meaning"),
        ("9^9^9^9", 0, "large"),
        ("10^10^10", 0, "large"),
        ("(" * 5000 + "1" + ")" * 4999, 200, "parentheses"),
        ("(" * 5000 + "1" + ")" * 5000, 0, "characters"),
        ("(" * 300 + "1" + ")" * 300, 200, "parentheses"),
        ("1" * 1001, 0, "digits"),
        ("x < y", 2, "assume"),
        ("sum(k=1 to 3: k)", 5, "from"),
        ("sin()", 3, "between"),
        ("2*π", 2, "pi"),
        ("ln(x)", 0, "log"),
        ("|x|", 0, "abs"),
        ("sum(i from 1 to 2: i)", 4, "reserved"),
        ("lambda: x", 6, ":"),
    ],
)
def test_refused_with_place_and_reason(source: str, position: int, word: str) -> None:
    with pytest.raises(FormulaFault) as caught:
        parse(source)
    said = f"{caught.value.message} {caught.value.mend}"
    assert any(w in said for w in word.split("|")), said
    assert caught.value.position == position


def test_a_chain_of_powers_ends_before_it_is_too_deep() -> None:
    with pytest.raises(FormulaFault, match="nests"):
        parse("x" + "^x" * 500)


def test_relations_and_chains() -> None:
    assert parse_relations("0 < x <= 1") == ((number(0), "<", x), (x, "<=", number(1)))
    assert parse_relations("n != 2") == ((n, "!=", number(2)),)
    with pytest.raises(FormulaFault, match="no comparison"):
        parse_relations("x + y")


def test_bound_letters_are_not_free_and_not_replaced() -> None:
    f = parse("x*sum(k from 1 to x: k*y)")
    assert free_letters(f) == {"x", "y"}
    assert text(replace(f, {"k": g, "y": n})) == "x*sum(k from 1 to x: k*n)"


def test_where_a_letter_stood_is_kept() -> None:
    f = parse("2*g + J")
    assert [a.span for a in f.args[1:]] == [(6, 7)]
