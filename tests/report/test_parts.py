"""Named parts: put back in, they give the formula again; every piece fits; nothing bound is torn out of its sum."""

from __future__ import annotations

import pytest

from derive.formula.grammar import parse
from derive.formula.tree import Formula, bound_letter, children, free_letters, letter, rebuild, replace, walk
from derive.problem.quantities import Quantity
from derive.record.said import Claim, Line, PerRoot
from derive.report.arrange import arrange
from derive.report.boxes import width
from derive.report.breaking import broken
from derive.report.context import LONGEST_LINE, WIDEST, Context
from derive.report.parts import Spread, closed_parts, spread

from . import gallery
from .sample import setting

CONTEXT = Context(setting(letters=gallery.LETTERS))
IMAGES = "sum(m from 1 to infinity: 1/sqrt(pi*m*(pi*m + 2*g*tau)) - 1/sqrt(pi*m*(pi*m - 2*g*tau)))"
INNER = "sum(m from 1 to 9: sum(k from 1 to m: (k + m + g + tau + Delta + x + y + z)/(k*m + g*tau + Delta*x + y*z)))"
TABLE = [
    f"(g*tau + Delta*({IMAGES})^2)/(1 + ({IMAGES})/(g^2 + tau^2 + ({IMAGES})^3))^2",
    f"sqrt((1 + g*({IMAGES}))/(2 + ({IMAGES})*tau) + sin(g*tau*n + ({IMAGES})^2/(1 + ({IMAGES}))))",
    f"1/(1 + x*{INNER} + y*{INNER.replace('9', '8')})",
]


def put_back(found: Spread) -> Formula:
    f, arguments = found.formula, dict(found.arguments)
    for name, part in found.parts * len(found.parts):  # parts may use each other, in no circle
        f = with_function(f, name, part) if arguments[name] else replace(f, {name: part})
    return f


def with_function(f: Formula, name: str, part: Formula) -> Formula:
    """X(q) replaced by what it stands for; q is the letter bound where X(q) stands."""
    if f.head == "call" and f.args[0] == name:
        return part
    args = tuple(with_function(a, name, part) if isinstance(a, Formula) else a for a in f.args)
    return rebuild(f, args) if children(f) else f


def unordered(f: Formula) -> str:
    """The text of f with the terms of sums and the factors of products in alphabetical order."""
    parts = [unordered(a) if isinstance(a, Formula) else str(a) for a in f.args]
    return f"{f.head}({', '.join(sorted(parts) if f.head in ('plus', 'times') else parts)})"


def pieces(source: str) -> Spread:
    return spread(parse(source), CONTEXT._fits, {"g", "tau"})


@pytest.mark.parametrize("source", TABLE)
def test_put_back_they_are_the_formula(source: str) -> None:
    found = pieces(source)
    assert found.parts
    assert unordered(put_back(found)) == unordered(arrange(parse(source)))
    names = [name for name, _ in found.parts]
    assert names == [f"X_{n}" for n in range(1, len(names) + 1)]


STEP = "sum(k from 1 to m: (k + m + g + tau + Delta + x + y + z)/(k*m + g*tau + Delta*x + y*z))"
DEEP = f"sum(m from 1 to 9: 1/(1 + x*{STEP} + y*{STEP.replace('k*m', 'k^2*m')}))"
WAVES = (
    "integral(q from 0 to pi: sin(q)*(cos(n*q)^2 + (g*sin(q)*sum(m from 1 to infinity: (2*g*tau/(2*pi*m + 2*g*cos(q) +"
    " sqrt((2*pi*m + 2*g*cos(q))^2 - 4)))^n/sqrt((2*pi*m + 2*g*cos(q))^2 - 4)))^2)/((1 + g*tau*sin(q))^2 + (2*g*tau*"
    "sum(m from 1 to infinity: 1/sqrt((2*pi*m + 2*g*cos(q))^2 - 4) - 1/sqrt((2*pi*m - 2*g*cos(q))^2 - 4)))^2))"
)


@pytest.mark.parametrize("source", [DEEP, WAVES], ids=["sum in a sum", "sums in an integral"])
def test_parts_with_bound_letters_become_functions_of_them(source: str) -> None:
    found = pieces(source)
    assert any(letters for _, letters in found.arguments)
    assert unordered(put_back(found)) == unordered(arrange(parse(source)))
    chain = broken(CONTEXT.line(Line(letter("f"), parse(source))), WIDEST)
    assert all(width(link.right) <= LONGEST_LINE for link in chain.links)
    for name, part in found.parts:  # what is bound outside is among the arguments, or bound inside
        assert free_letters(part) & {"q", "k", "m"} <= set(dict(found.arguments)[name])


@pytest.mark.parametrize("source", TABLE[:2])
def test_every_line_fits(source: str) -> None:
    chain = broken(CONTEXT.line(Line(letter("f"), parse(source))), WIDEST)
    assert all(width(link.right) <= LONGEST_LINE for link in chain.links)


@pytest.mark.parametrize("source", TABLE)
def test_what_is_bound_stays_in_its_sum(source: str) -> None:
    bound = {b for node in walk(parse(source)) if (b := bound_letter(node))}
    for _, part in pieces(source).parts:
        assert not free_letters(part) & bound


def test_a_torn_out_letter_would_be_seen() -> None:
    """The inner sum depends on m: it is no closed part, though it is the larger one."""
    inner = parse(INNER).args[3]
    assert free_letters(inner) >= {"m"} and inner not in set(closed_parts(parse(INNER)))


def test_a_short_formula_is_left_alone() -> None:
    assert pieces("g^2*tau/2").parts == ()


def test_letters_in_use_are_not_taken() -> None:
    found = spread(parse(TABLE[0]), CONTEXT._fits, {"X"})
    assert found.parts[0][0] == "Y_1"


def test_a_long_formula_for_every_root_is_spread_and_its_polynomial_stands_last() -> None:
    rate = Quantity("decay rate", (("level", "k"),))
    short = PerRoot(parse("E^3 - g"), "E", parse("g*E"))
    long = PerRoot(parse("E^3 - g"), "E", parse(f"E*({TABLE[1]})"))
    one = CONTEXT.claim(Claim("levels.k.rate", "levels", rate, short))
    many = CONTEXT.claim(Claim("levels.k.rate", "levels", rate, long))
    assert len(one.links) == 1 and len(many.links) > 2
    assert many.links[-1].left is None and max(width(x.right) for x in broken(many, WIDEST).links) <= LONGEST_LINE
