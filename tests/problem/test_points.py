"""Sample points: inside domains and relations, the same everywhere, exact, and none where none can be found."""

from __future__ import annotations

import subprocess
import sys
from fractions import Fraction

import mpmath
import pytest

from derive.errors import FormulaFault
from derive.formula.grammar import parse, parse_relations
from derive.formula.tree import number
from derive.numerics.points import decide, sample_points
from derive.problem.points import Point, draw_points, holds
from derive.problem.setting import (
    POSITIVE,
    Check,
    Domain,
    Finite,
    Interval,
    Letter,
    Relation,
    Setting,
    Shape,
)

REAL, COMPLEX, ANY_INTEGER = Domain("real", "real"), Domain("complex", "complex"), Domain("integer", "integer")
FROM_TWO = Domain("integer", "integer >= 2", low=number(2))
SHARE = Domain("interval", "in (0, 1]", number(0), number(1), low_open=True)
LETTERS = {"g": POSITIVE, "Delta": REAL, "z": COMPLEX, "L": FROM_TWO, "m": ANY_INTEGER, "eta": SHARE}


def relations(*sources: str) -> tuple[Relation, ...]:
    return tuple(Relation(*r) for source in sources for r in parse_relations(source))


def setting(*assume: str, interval: str | None = None) -> Setting:
    letters = tuple(Letter(name, domain) for name, domain in LETTERS.items())
    length = Interval(parse(interval)) if interval else Interval()
    return Setting("a test", letters, Finite(((),), Shape("edges")), (), None, length, relations(*assume))


def numbers(point: Point) -> dict[str, complex]:
    """Values by Python's own arithmetic, from the printed text."""
    names = {"i": 1j, "sqrt": mpmath.sqrt, "pi": mpmath.pi, "sin": mpmath.sin}
    return {name: complex(eval(value.replace("^", "**"), names)) for name, value in point.text()}


@pytest.mark.parametrize("seed", range(1, 6))
def test_domains_are_kept(seed: int) -> None:
    points = sample_points(setting(), Check(samples=6, seed=seed))
    assert len(points) == 6
    for point in points:
        v = numbers(point)
        assert v["g"].real > 0
        assert v["L"].real >= 2
        assert v["L"].real == int(v["L"].real)
        assert 0 < v["eta"].real <= 1
        assert v["tau"].real > 0
        assert v["z"].imag != 0
        assert all(v[name].imag == 0 for name in v if name != "z")


def test_letters_are_generic() -> None:
    """No letter is 0 or 1, where wrong powers and missing factors hide."""
    for point in sample_points(setting(), Check(samples=20)):
        v = numbers(point)
        assert all(abs(v[name]) not in (0, 1) for name in ("g", "Delta", "tau"))


RELATIONS = [
    ("Delta < 2*g", lambda v: v["Delta"].real < 2 * v["g"].real),
    ("Delta < g/1000", lambda v: v["Delta"].real < v["g"].real / 1000),
    ("Delta > 1000*g", lambda v: v["Delta"].real > 1000 * v["g"].real),
    ("2*g*tau < pi", lambda v: 2 * v["g"].real * v["tau"].real < 3.1416),
    ("0 < Delta < sin(g)", lambda v: 0 < v["Delta"].real < float(mpmath.sin(v["g"].real))),
    ("abs(z) < 1", lambda v: abs(v["z"]) < 1),
    ("Delta != g", lambda v: v["Delta"] != v["g"]),
    ("Delta = 2*g", lambda v: v["Delta"] == 2 * v["g"]),
    ("2*Delta + 3*g = 1", lambda v: abs(2 * v["Delta"] + 3 * v["g"] - 1) < 1e-14),
    ("Delta = sqrt(2)*g", lambda v: abs(v["Delta"] - 2**0.5 * v["g"]) < 1e-14),
    ("L = 4", lambda v: v["L"] == 4),
    ("g*Delta = 1", lambda v: abs(v["g"] * v["Delta"] - 1) < 1e-14),
]


@pytest.mark.parametrize(("source", "met"), RELATIONS)
def test_relations_are_kept(source: str, met) -> None:  # type: ignore[no-untyped-def]
    """Each relation by Python's floats at the drawn values."""
    points = sample_points(setting(source), Check())
    assert points
    assert all(met(numbers(p)) for p in points)


@pytest.mark.parametrize("source", ["g < 0", "Delta < 1 + g < Delta", "L = 1", "abs(z) < -1", "eta > 1"])
def test_none_where_none_can_be(source: str) -> None:
    assert sample_points(setting(source), Check(samples=2)) == ()


def test_what_is_not_decided_does_not_count() -> None:
    """A relation that nobody can decide gives no point, whatever it says."""
    assert draw_points(setting("sin(g) < 2"), Check(samples=1), lambda relation: None) == ()
    assert draw_points(setting("sin(g) < 2"), Check(samples=1), decide)


def test_a_claims_own_assumption_counts_besides() -> None:
    points = sample_points(setting("Delta < 2*g"), Check(), relations("Delta > g"))
    assert points
    assert all(numbers(p)["g"].real < numbers(p)["Delta"].real < 2 * numbers(p)["g"].real for p in points)


def test_points_of_the_users_own() -> None:
    own = (("g", number(1)), ("Delta", number(Fraction(1, 3))))
    first, *rest = sample_points(setting("Delta < 2*g"), Check(samples=2, points=(own,)))
    assert dict(first.text())["g"] == "1"
    assert dict(first.text())["Delta"] == "1/3"
    assert {name for name, _ in first.values} == {*LETTERS, "tau"}
    assert len(rest) == 2
    against = (("g", number(1)), ("Delta", number(5)))
    assert len(sample_points(setting("Delta < 2*g"), Check(samples=2, points=(against,)))) == 2


def test_a_given_interval_fixes_tau() -> None:
    for point in sample_points(setting(interval="1/(4*g)"), Check(samples=3)):
        v = numbers(point)
        assert v["tau"] == pytest.approx(0.25 / v["g"].real)


def test_values_are_exact_and_text_is_read_back() -> None:
    for point in sample_points(setting("Delta = sqrt(2)*g"), Check(samples=3)):
        for name, shown in point.text():
            try:
                assert parse(shown) == point.mapping()[name]
            except FormulaFault:
                pytest.fail(f"{name} = {shown} cannot be read")


def test_hash_seeds_and_processes_make_no_difference() -> None:
    script = (
        "from tests.problem.test_points import setting, sample_points, Check;"
        "print([p.text() for p in sample_points(setting('Delta < 2*g', 'abs(z) < 1'), Check(seed=7))])"
    )
    command = [sys.executable, "-c", script]
    runs = set()
    for seed in ("1", "2"):
        apart = {"PYTHONHASHSEED": seed, "PATH": ""}
        runs.add(subprocess.run(command, env=apart, capture_output=True, text=True, check=True).stdout)
    assert len(runs) == 1
    assert runs != {"[]\n"}
    other = sample_points(setting("Delta < 2*g", "abs(z) < 1"), Check(seed=8))
    assert str([p.text() for p in other]) + "\n" not in runs


def test_holds_by_three_means() -> None:
    """Over Q, in an exact field, in balls; a false equation is never true."""
    def ask(source: str) -> bool | None:
        (relation,) = relations(source)
        return holds(relation, {"g": number(Fraction(1, 2))}, decide)

    assert ask("2*g = 1") is True
    assert ask("g^2 < 1/3") is True
    assert ask("sqrt(8) = 2*sqrt(2)") is True
    assert ask("sqrt(2) = 3*g") is False
    assert ask("pi > 3") is True
    assert ask("pi < 3") is False
    assert ask("exp(g) = 2") is not True
    assert ask("sin(g) != 2") is True


def test_a_value_that_divides_by_zero_is_no_point() -> None:
    """tau = pi/(2 Delta) has no value where Delta = 0."""
    assert sample_points(setting("Delta = 0", interval="pi/(2*Delta)"), Check(samples=2)) == ()


def test_an_integer_that_hides_its_powers_is_no_first_point() -> None:
    """0 and 1 are their own squares."""
    letters = (Letter("n", Domain("integer", "integer >= 0", low=number(0))),)
    whole = Setting("t", letters, setting().space, ())
    drawn = [[p.mapping()["n"] for p in sample_points(whole, Check(samples=3, seed=seed))] for seed in range(30)]
    assert not {number(0), number(1)} & {row[0] for row in drawn}
    assert {number(0), number(1)} <= {n for row in drawn for n in row[1:]}


def test_positive_letters_take_both_sides_of_one() -> None:
    """On one side alone g^2 passes for g in a bound; two letters lie now on the same side, now on different ones."""
    letters = tuple(Letter(name, Domain("positive", "positive")) for name in ("g", "h"))
    at = Setting("t", letters, setting().space, ())
    for seed in range(20):
        first, second = (numbers(p) for p in sample_points(at, Check(samples=2, seed=seed)))
        for name in ("g", "h"):
            assert (first[name].real - 1) * (second[name].real - 1) < 0
