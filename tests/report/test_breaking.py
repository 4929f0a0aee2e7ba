"""Broken lines: whole at sums, at factors where nothing else helps; nothing lost, every fence closed again."""

from __future__ import annotations

import re

import pytest

from derive.formula.grammar import parse
from derive.report.boxes import Chain, Link, width
from derive.report.breaking import broken
from derive.report.context import Context
from derive.report.emit_latex import latex

from . import gallery
from .sample import setting

CONTEXT = Context(setting(letters=gallery.LETTERS))
WIDEST = 28.0


def long_sum(x: str) -> str:
    return f"(cos({x}*n)^2 + sin({x}*n)/(1 + {x}^2) + tau*{x}^4 + g*Delta*{x}*cos(2*g*tau) + {x}^7)"


def lines_of(source: str, seams: bool = True) -> list[str]:
    chain = Chain((Link(None, "=", CONTEXT.formula(parse(source))),))
    return [latex(link.right) for link in broken(chain, WIDEST, seams).links]


PRODUCTS = {
    "powers": f"{long_sum('x')}^2*{long_sum('y')}^3",
    "quotient": f"{long_sum('x')}*{long_sum('y')}/({long_sum('z')}*(1 + {long_sum('x')}))",
    "integral": f"integral(q from 0 to pi: {long_sum('q')}*{long_sum('y')}/(1 + {long_sum('q')}^2))",
    "sum": f"g*sum(m from 1 to infinity: {long_sum('m')}^2*{long_sum('x')}/{long_sum('y')})",
}


@pytest.mark.parametrize("name", PRODUCTS)
def test_products_of_long_factors_are_broken_between_them(name: str) -> None:
    """Every line fits, continuation lines begin with a sign, and what is opened is closed."""
    chain = Chain((Link(None, "=", CONTEXT.formula(parse(PRODUCTS[name]))),))
    found = broken(chain, WIDEST)
    assert len(found.links) > 1 and all(width(link.right) <= WIDEST for link in found.links)
    lines = [latex(link.right) for link in found.links]
    assert all(line.startswith(("\\times ", "+ ", "- ")) for line in lines[1:])
    joined = "".join(lines)
    assert len(re.findall(r"\\bigl", joined)) == len(re.findall(r"\\bigr", joined))
    assert len(re.findall(r"\\left", joined)) == len(re.findall(r"\\right", joined))


def test_without_seams_a_product_stays_whole() -> None:
    """Shown to fail: at + and - alone no line of the quotient ends."""
    assert len(lines_of(PRODUCTS["quotient"], seams=False)) < len(lines_of(PRODUCTS["quotient"]))


def test_a_broken_chain_is_not_broken_again() -> None:
    """What follows a sign of a sum or an integral is its body, no factor beside it."""
    chain = broken(Chain((Link(None, "=", CONTEXT.formula(parse(PRODUCTS["integral"]))),)), WIDEST)
    assert broken(chain, WIDEST) == chain
    assert not re.search(r"\\int[^ ]* \\times", latex(chain))


@pytest.mark.parametrize("source", ["sin(x/y)*cos(x/y)", "bessel_J(0, x/y)*(x + y)", "x*y/(g*tau)", "(x + y)*(x - y)"])
def test_short_products_have_no_sign_between(source: str) -> None:
    """A function and its argument are no factors; what fits is printed as before."""
    assert lines_of(source) == [latex(CONTEXT.formula(parse(source)))]
