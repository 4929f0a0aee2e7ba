"""Exact fields: identities hold, non-identities do not, elements go back to formulas of the same value.

Outside oracle for values: mpmath at a generic point.  The identities are textbook ones (common practice, no source).
"""

from __future__ import annotations

import mpmath
import pytest

from derive.errors import NotCovered
from derive.exact.field import Field
from derive.exact.sparse import applied, from_entries, multiplied
from derive.exact.tower import scan
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.problem.setting import Domain
from tests.strategies import COMPLEX, POSITIVE, REAL

DOMAINS = {"g": POSITIVE, "Delta": REAL, "phi": REAL, "z": COMPLEX, "w": COMPLEX}
POINT = {
    "g": mpmath.mpf("1.37"),
    "Delta": mpmath.mpf("-0.83"),
    "phi": mpmath.mpf("0.71"),
    "z": mpmath.mpc("0.3", "1.9"),
    "w": mpmath.mpc("-1.1", "0.4"),
}


def value(f: Formula) -> mpmath.mpc:
    """f at POINT by mpmath: the tests' own walk."""
    if f.head == "number":
        return mpmath.mpf(f.args[0].numerator) / f.args[0].denominator
    if f.head == "letter":
        return POINT[f.args[0]]
    if f.head == "constant":
        return {"i": mpmath.mpc(0, 1), "pi": +mpmath.pi, "euler_gamma": +mpmath.euler}[f.args[0]]
    if f.head == "plus":
        return mpmath.fsum(value(a) for a in f.args)
    if f.head == "times":
        return mpmath.fprod(value(a) for a in f.args)
    if f.head == "power":
        return mpmath.power(value(f.args[0]), value(f.args[1]))
    names = {"conj": mpmath.conj, "Re": mpmath.re, "Im": mpmath.im, "abs": abs}
    return (names.get(f.args[0]) or getattr(mpmath, f.args[0]))(value(f.args[1]))


IDENTITIES = [
    "sin(phi)^2 + cos(phi)^2 - 1",
    "cos(2*phi) - 2*cos(phi)^2 + 1",
    "sin(phi/2)^2 - (1 - cos(phi))/2",
    "tan(phi)*cot(phi) - 1",
    "cosh(g)^2 - sinh(g)^2 - 1",
    "exp(i*phi)*conj(exp(i*phi)) - 1",
    "sqrt(2)*sqrt(3) - sqrt(6)",
    "sqrt(8) - 2*sqrt(2)",
    "sqrt(3/2) - sqrt(6)/2",
    "sqrt(-4) - 2*i",
    "sqrt(g^2) - g",
    "g^(3/2) - g*sqrt(g)",
    "1/(1 + sqrt(2)) - sqrt(2) + 1",
    "1/(g + i) - (g - i)/(g^2 + 1)",
    "cos(pi/5) - (1 + sqrt(5))/4",
    "sqrt(3) - 2*sin(pi/3)",
    "sqrt(7) - 2*(sin(2*pi/7) + sin(4*pi/7) - sin(6*pi/7))",
    "tan(pi/8) - sqrt(2) + 1",
    "exp(i*pi/4) - (1 + i)/sqrt(2)",
    "(2^(1/3))^3 - 2",
    "sqrt(Delta^2 + 4*g^2)^2 - Delta^2 - 4*g^2",
    "sqrt(5 + 2*sqrt(3))^4 - (5 + 2*sqrt(3))^2",
    "1/sqrt(5 + 2*sqrt(3)) - sqrt(5 + 2*sqrt(3))*(5 - 2*sqrt(3))/13",
    "Re(z) + i*Im(z) - z",
    "conj(z*w) - conj(z)*conj(w)",
    "1/(exp(i*phi) + 2) - exp(-i*phi)/(1 + 2*exp(-i*phi))",
    "abs(g) - g",
]


@pytest.mark.parametrize("source", IDENTITIES)
def test_identities_vanish(source: str) -> None:
    f = parse(source)
    assert abs(value(f)) < 1e-12
    assert vanishes(f, DOMAINS) is True


@pytest.mark.parametrize("source", IDENTITIES)
def test_spoilt_identities_do_not(source: str) -> None:
    """The checker is shown to fail: every identity with 10^-9 added."""
    assert vanishes(parse(source + " + 1/10^9"), DOMAINS) is False


@pytest.mark.parametrize(
    "source",
    [
        "-g*exp(i*phi)*(Delta - g)/(g + 1)",
        "(z + conj(w))^2/(g*sqrt(2) + i)",
        "g*exp(i*phi/2) + g*exp(-i*phi/2) + Delta",
        "i*(exp(i*phi) - exp(-i*phi))*i*g",
        "cos(pi/7)*g/(cos(pi/7) + g)",
        "sqrt(Delta^2 + g^2)*(1 + sqrt(Delta^2 + g^2))/(Delta + i)",
        "pi*g - 3*log(2)",
        "2^(2/3)*g^(1/3)/sqrt(5)",
        "tanh(g)*exp(2*i*phi) - sinh(g)",
    ],
)
def test_elements_go_back_to_formulas_of_the_same_value(source: str) -> None:
    """Outside oracle: mpmath at a generic point."""
    f = parse(source)
    field = Field.of([f], DOMAINS)
    back = field.formula(field.element(f))
    assert abs(value(back) - value(f)) < 1e-12 * (1 + abs(value(f)))
    bar = field.formula(field.conjugate(field.element(f)))
    assert abs(value(bar) - mpmath.conj(value(f))) < 1e-12 * (1 + abs(value(f)))
    assert parse(text(back)) == back


def test_written_as_a_person_would() -> None:
    shown = {
        "g*exp(i*phi) + g*exp(-i*phi) + Delta": "2*g*cos(phi) + Delta",
        "-2*g*Delta - 2*g^2/3": "-2*g*(g + 3*Delta)/3",
        "i*i*g": "-g",
        "Delta*g/6*i": "i*g*Delta/6",
        "cos(pi/5)*g": "g*cos(pi/5)",
        "cos(pi/7)*sqrt(2)*g": "sqrt(2)*g*cos(pi/7)",
        "i*sqrt(3)*sin(pi/3) + i*cos(pi/5)": "i*(3 + 2*cos(pi/5))/2",
        "g*exp(i*pi/4)": "g*exp(i*pi/4)",
        "exp(2*i*pi/3) + exp(-2*i*pi/3) + i": "-1 + i",
    }
    for source, wanted in shown.items():
        field = Field.of([parse(source)], DOMAINS)
        assert text(field.formula(field.element(parse(source)))) == wanted


@pytest.mark.parametrize(
    "source", ["sqrt(3 + 2*sqrt(2))", "abs(Delta)", "floor(g)", "sqrt(Delta)", "g^Delta", "exp(z)", "infinity"]
)
def test_what_has_no_place_is_said_and_never_guessed(source: str) -> None:
    with pytest.raises(NotCovered):
        scan([parse(source)], DOMAINS)
        Field.of([parse(source)], DOMAINS)
    assert vanishes(parse(source + " - 1"), DOMAINS) is None


def test_free_numbers_leave_a_zero_test_open() -> None:
    """log 2 and pi could be related for all the field knows: not zero is not claimed."""
    assert vanishes(parse("log(2) - pi"), DOMAINS) is None
    assert vanishes(parse("pi - 3"), DOMAINS) is False
    assert vanishes(parse("log(2) - log(2)"), DOMAINS) is True


def test_what_was_divided_by_is_kept() -> None:
    field = Field.of([parse("1/(g - Delta)")], DOMAINS)
    field.element(parse("1/(g - Delta)"))
    assert [text(f) for f in field.excluded] == ["g - Delta"]
    with pytest.raises(ZeroDivisionError):
        field.element(parse("1/(g - g)"))


def test_sparse_product_is_the_dense_one() -> None:
    """Outside oracle: the textbook triple sum."""
    field = Field.of([parse("i*g")], DOMAINS)
    entries = [(0, 1, field.element(parse("g"))), (1, 0, field.element(parse("i"))), (1, 2, field.one)]
    a = from_entries(entries)
    square = multiplied(a, a)
    assert {(x, y): text(field.formula(v)) for x, r in square.items() for y, v in r.items()} == {
        (0, 0): "i*g", (0, 2): "g", (1, 1): "i*g"
    }
    assert applied(a, {0: field.one, 2: field.one}) == {1: field.element(parse("i + 1"))}


def test_phases_of_whole_numbers_are_left_open() -> None:
    """cos(2 pi L) = 1 for every integer L, which no ring of free phases can see: not "no", but "not known"."""
    domains = {"L": Domain("integer", "integer")}
    assert vanishes(parse("cos(2*pi*L) - 1"), domains) is None
    assert vanishes(parse("cos(2*pi*L) - cos(2*pi*L)"), domains) is True
    assert vanishes(parse("cos(2*L) - 1"), domains) is False
