"""The LaTeX of every derived formula, read back as a claim would be, has the formula's value.

Road: mpmath's values of both trees; they share nothing but the tree.
"""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import mpmath
import pytest

from derive.formula.grammar import LONGEST, parse
from derive.formula.latex_grammar import parse_latex
from derive.formula.text import text
from derive.formula.tree import Formula, constant, free_letters, number, plus, power, rebuild, replace, times, walk
from derive.record.said import Claim, Expansion, Matrix
from derive.report.context import Context
from derive.report.emit_latex import latex
from derive.worksheet import read
from derive.worksheet.showing import entries
from tests.trust.outside import Unknown, value

SHEETS = sorted((Path(__file__).parent.parent / "worksheets").glob("*.toml"))
UNREADABLE = {"operator", "root", "rootsum", "order"}
MOST = 6  # entries of one matrix
WEIGHTS = {"sum": 7, "integral": 11}


def formulas(claim: Claim) -> list[Formula]:
    v = claim.value
    if isinstance(v, Formula):
        return [v]
    if isinstance(v, Matrix):
        return [f for _, _, f in v.entries()][:MOST]
    if isinstance(v, Expansion):
        return [times(t, power(Formula("letter", ("tau",)), Formula("number", (k,)))) if k > 1 else t
                for k, t in zip(v.powers, v.terms, strict=True) if isinstance(t, Formula)]
    return []


@pytest.mark.parametrize("sheet", SHEETS, ids=lambda p: p.stem)
def test_printed_formulas_are_read_back(sheet: Path) -> None:
    question = read(sheet)
    context = Context(question.setting)
    known: dict[str, str | None] = {"tau": None, **{x.name: x.latex for x in question.setting.letters}}
    compared = unreadable = 0
    for claim in entries(question):
        for f in formulas(claim):
            if UNREADABLE & {n.head for n in walk(f)}:
                unreadable += 1
                continue
            written = latex(context.formula(f))
            if len(written) > LONGEST:  # the reader's own limit, tested elsewhere
                continue
            again = parse_latex(written, {**dict.fromkeys(free_letters(f)), **known})
            assert same(f, again), (claim.id, text(f), written)
            compared += 1
    assert compared or unreadable


@pytest.mark.parametrize("other", [
    "integral(x from 0 to 2: x*g)", "integral(x from 0 to 1: x*g^2)", "sum(x from 0 to 1: x*g)", "g/2",
])
def test_another_integral_is_not_the_same(other: str) -> None:
    assert not same(parse("integral(x from 0 to 1: x*g)"), parse(other))


@pytest.mark.parametrize("written", [
    "2*g*sum(m from 1 to infinity: -1/m^2)",
    "sum(m from 1 to infinity: -(1 + g)/(2*m^2) - 1/m^3)/4",
    "integral(x from 0 to 1: -x/2)",
])
def test_a_minus_behind_a_large_sign_is_fenced(written: str) -> None:
    f = parse(written)
    again = parse_latex(latex(Context(read(SHEETS[0]).setting).formula(f)), {"g": None})
    assert same(f, again), text(again)


def opened(f: Formula) -> Formula:
    """Sums and integrals as plain numbers made of what stands in them: the body at one value of the bound letter, and
    both ends.  Adding them up would take minutes, and printing does not."""
    args = tuple(opened(a) if isinstance(a, Formula) else a for a in f.args)
    if f.head in WEIGHTS:
        name, low, high, body = args
        first, last = (number(29) if end == constant("infinity") else end for end in (low, high))
        inside = replace(body, {name: number(Fraction(23, 17))})
        return plus(times(number(WEIGHTS[f.head]), inside), times(number(3), first), times(number(5), last))
    return rebuild(f, args) if any(isinstance(a, Formula) for a in args) else f


def same(f: Formula, again: Formula) -> bool:
    f, again = opened(f), opened(again)
    at = {name: mpmath.mpf(7 + 4 * k) / 19 for k, name in enumerate(sorted(free_letters(f)))}
    with mpmath.workdps(30):
        try:
            one, other = value(f, at), value(again, at)
        except (Unknown, KeyError):
            return bool(free_letters(f) == free_letters(again))
        return bool(abs(one - other) <= mpmath.mpf(10) ** -20 * (1 + abs(one)))
