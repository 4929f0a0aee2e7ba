"""The Python face: the same language with keywords for sections, and objects of other libraries taken exactly.

sympy, numpy and networkx are the outside: what they hold must arrive unchanged.
"""

from __future__ import annotations

import math
from fractions import Fraction
from pathlib import Path

import networkx as nx
import numpy as np
import pytest
import sympy

from derive import Derived, Problem
from derive.errors import BadInput, NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.worksheet import served
from derive.worksheet.incoming import formula_from_sympy

DEMO = Path(__file__).parents[1] / "worksheets" / "nine-cavities.toml"
CHAIN = {"family": "chain", "sites": 5, "hopping": "-g", "energies": {2: "Delta"}}


def problem(**more) -> Problem:
    sections = {"graph": CHAIN, "detector": {"at": 2}, "symbols": {"g": "positive", "Delta": "real"}, **more}
    return Problem(**sections)


def matrix(p: Problem) -> dict[tuple[int, int], str]:
    return {(x, y): text(v) for x, row in enumerate(p.setting.space.rows) for y, v in row}


def test_derive():
    d = problem().derive("generator", order=2)
    assert isinstance(d, Derived)
    assert d.steps
    assert d["generator.1"].entries == {(x, y): "-i*g^2/2" for x in (1, 3) for y in (1, 3)}
    assert "frac" in d["generator.2"].latex
    assert d["generator.1"].number(g=Fraction(1, 2), digits=10)[0].startswith("[1, 1]  imaginary part -0.125")
    with pytest.raises(KeyError, match="generator.2"):
        d["generator.22"]


def test_check_and_judge():
    p = problem()
    checked = p.derive("generator", order=1).check(digits=35)
    assert checked.verdict == "proved"
    assert checked["generator.1"].verdict == "proved"
    assert all(f.digits is None or f.digits >= 35 for f in checked["generator.1"].judged.findings)
    assert p.judge("generator", "-g^2*Delta/6", which=2, entry=[1, 3]).verdict == "proved"
    wrong = p.judge("generator", "g^2*Delta/6", which=2, entry=[1, 3])
    assert wrong.verdict == "refuted"
    assert p.judge("generator", which=1, matrix=[[1, 1, "-i*g^2/2"]]).verdict == "refuted"
    with pytest.raises(TypeError, match="no truth value"):
        bool(wrong)
    with pytest.raises(TypeError, match="no truth value"):
        bool(checked)


def test_it_shows_itself():
    p = problem()
    d = p.derive("generator", order=1)
    assert "a chain of 5 sites" in repr(p) and "a chain of 5 sites" in p._repr_html_()
    assert d._repr_html_().count("<math") == len(d)
    assert d["generator.1"]._repr_latex_().startswith("$")
    assert "<script" not in problem(title="<script>")._repr_html_()


def test_read():
    p = Problem.read(DEMO)
    assert p.question.name == "nine-cavities"
    with pytest.raises(BadInput, match="there is no such file"):
        Problem.read("nothing.toml")


def test_write(tmp_path):
    folder = problem().derive("generator", order=1).check().write(tmp_path / "out")
    assert {"ledger.json", "derivation.tex", "report.html"} <= {p.name for p in folder.iterdir()}


def test_sections_check_as_a_worksheet_does():
    p = problem(claim={"mine": {"about": "generator", "which": 1, "entry": [1, 1], "formula": "-i*g^2/2"}})
    checked = p.check()
    assert checked.ids == ("claim.mine",)
    assert checked["claim.mine"].verdict == "proved"


FAULTS = [
    (lambda: Problem(grap={}, detector={"at": 0}), "Did you mean graph?"),
    (lambda: problem(detector={"at": 9}), "detector.at: site 9 is not on this graph"),
    (lambda: problem(detector={"at": 2, "efficiency": 0.9}), '0.9 is a decimal without quotes(.|\n)*"9/10"'),
    (lambda: problem(start={"state": {0: 1.5}}), r"start.state.0: 1.5 is a decimal"),
    (lambda: problem(graph={"family": "chain", "sites": 5.0, "hopping": 1}), "graph.sites: 5.0 is a decimal"),
    (lambda: problem(graph={"family": "chain", "sites": 5, "hopping": float("nan")}), "nan is no number"),
    (lambda: problem(graph={"family": "chain", "sites": 5, "hopping": 1j}), "a value of type complex"),
    (lambda: problem(graph={"hamiltonian": np.array([[0, 1.5], [1.5, 0]])}), r"graph.hamiltonian\[0\]\[1\]: 1.5 is"),
    (lambda: problem(graph={"hamiltonian": np.array([[0, 1], [2, 0]])}), "H is not Hermitian"),
    (lambda: problem(graph={"hamiltonian": np.array([[False, True], [True, False]])}), "true stands here|false stands"),
    (lambda: problem(graph={"hamiltonian": sympy.Matrix([[0, 0.5], [0.5, 0]])}), "is a decimal without quotes"),
    (lambda: problem(graph={"hamiltonian": sympy.Matrix([[0, sympy.I], [sympy.I, 0]])}), "H is not Hermitian"),
    (lambda: problem(graph={"edges": nx.DiGraph([(0, 1)]), "hopping": 1}), "directed"),
    (lambda: problem(graph={"edges": nx.MultiGraph([(0, 1), (0, 1)]), "hopping": 1}), "parallel"),
    (lambda: problem(graph={"edges": nx.Graph([(1, 2), (2, 3)]), "hopping": 1}), "Counted from 1?"),
    (lambda: problem(graph={"edges": nx.empty_graph(2), "hopping": 1}), "has no edge"),
    (lambda: problem(graph={"edges": nx.Graph([(0, 1, {"weight": 2})]), "hopping": 1}), "Name the attribute hopping"),
    (lambda: problem(graph={"edges": nx.Graph([(0, 1, {"hopping": "i*g"})])}), "may be complex"),
    (
        lambda: problem(graph={"family": "chain", "sites": 5, "hopping": sympy.zeta(sympy.Symbol("g"))}),
        "no counterpart",
    ),
    (lambda: problem().derive("generator", order=99), "derive.generator.order: order 99 is above the limit"),
    (lambda: problem().derive("generator", odrer=9), "Did you mean order?"),
    (lambda: problem().derive("genrator"), "Did you mean generator?"),
    (
        lambda: problem().judge("generator", "q", which=1, entry=[1, 1]),
        "claim.mine.formula: the letter q is not declared",
    ),
    (lambda: problem().judge("generator", 0.5, which=1, entry=[1, 1]), "0.5 is a decimal"),
    (lambda: problem().derive("generator", order=1).check(digits=5), "digits is 5"),
    (lambda: problem().derive("generator", order=1)["generator.1"].number(g=0.5), "0.5 is not exact"),
    (lambda: problem().derive("survival"), "depends on the start"),
]


@pytest.mark.parametrize(("do", "words"), FAULTS, ids=[w for _, w in FAULTS])
def test_faults_name_their_key(do, words):
    with pytest.raises(BadInput, match=words.replace("?", r"\?") if "Did you" in words or "from 1" in words else words):
        do()


def test_what_is_not_served_yet(monkeypatch):
    monkeypatch.setattr(served, "TOPICS", {"generator": ("set",)})
    with pytest.raises(NotCovered, match="the topic levels is not served yet"):
        problem().derive("levels")
    lazy = problem(detector={"at": 2, "efficiency": "1/2"})  # accepted, as `read` does
    with pytest.raises(NotCovered, match="efficiency"):
        lazy.derive("generator")


def test_networkx_graphs():
    p = problem(graph={"edges": nx.petersen_graph(), "hopping": "-g"})
    assert {(x, y) for x, y in matrix(p) if x < y} == {tuple(sorted(e)) for e in nx.petersen_graph().edges}
    one = nx.Graph([("b", "a"), ("c", "a")])
    other = nx.Graph([("a", "c"), ("a", "b")])
    spaces = [problem(graph={"edges": g, "hopping": "-g"}, detector={"at": "a"}).setting.space for g in (one, other)]
    assert spaces[0] == spaces[1]  # the order of building plays no part
    assert spaces[0].names == ("a", "b", "c")
    weighted = nx.Graph([(0, 1, {"hopping": "-2*g"}), (1, 2, {"weight": 1})])
    assert matrix(problem(graph={"edges": weighted, "hopping": "-g"}))[0, 1] == "-2*g"
    square = problem(graph={"edges": nx.grid_2d_graph(2, 2), "hopping": 1}, detector={"at": "0,0"})
    assert square.setting.space.names == ("0,0", "0,1", "1,0", "1,1")


def test_matrices_of_other_libraries():
    g, delta = sympy.symbols("g Delta")
    h = sympy.Matrix(
        [[0, -g, 0], [-g, delta, sympy.I * g * sympy.sqrt(2)], [0, -sympy.I * g * sympy.sqrt(2), sympy.Rational(1, 3)]]
    )
    p = problem(graph={"hamiltonian": h})
    assert matrix(p)[2, 2] == "1/3"
    assert parse(matrix(p)[2, 1]) in (parse("-sqrt(2)*i*g"), parse("-sqrt(2)*g*i"))
    q = problem(graph={"hamiltonian": np.array([[0, 2], [2, -1]])}, detector={"at": 0})
    assert matrix(q) == {(0, 1): "2", (1, 0): "2", (1, 1): "-1"}


x, n = sympy.symbols("x n")
EXPRESSIONS = [
    (x**2 + 1, "x^2 + 1"),
    (sympy.exp(sympy.I * x), "exp(i*x)"),
    (sympy.sqrt(x) / 3, "sqrt(x)/3"),
    (1 / sympy.sqrt(x), "x^(-1/2)"),
    (sympy.pi * sympy.EulerGamma, "euler_gamma*pi"),
    (sympy.E**2, "exp(2)"),
    (sympy.E, "exp(1)"),
    (sympy.Abs(x) + sympy.re(x) + sympy.conjugate(x), "Re(x) + conj(x) + abs(x)"),
    (sympy.besselj(0, x), "bessel_J(0, x)"),
    (sympy.factorial(n), "n!"),
    (sympy.binomial(n, 2), "binomial(n, 2)"),
    (sympy.Sum(n * x, (n, 1, 3)), "sum(n from 1 to 3: n*x)"),
    (sympy.Integral(x**2, (x, 0, 1)), "integral(x from 0 to 1: x^2)"),
    (sympy.Rational(-2, 3), "-2/3"),
]


@pytest.mark.parametrize(("expression", "wanted"), EXPRESSIONS, ids=[w for _, w in EXPRESSIONS])
def test_sympy_expressions(expression, wanted):
    """Term by term in any order: compared as numbers at a point, by sympy on one side, by doubles on the other."""
    from collections import Counter

    got = formula_from_sympy(expression)
    want = parse(wanted)
    if got.head in ("plus", "times") and want.head == got.head:
        assert Counter(got.args) == Counter(want.args)
    else:
        assert got == want


def test_numbers_at_asks():
    """Two levels: F_n = sin(g tau)^2 cos(g tau)^(2 n - 2), by hand; where no formula stands it is measured."""
    pair = Problem(graph={"family": "chain", "sites": 2, "hopping": "-g"}, detector={"at": 0}, start={"at": 1},
                   symbols={"g": "positive"})
    derived = pair.derive("renewal", asks=[9])
    told = derived["renewal.F.9"].number(g=1, tau="1/2")[0]
    assert abs(float(told.split()[0]) - math.sin(0.5) ** 2 * math.cos(0.5) ** 16) < 1e-15
    assert {n.road for n in derived.check()["renewal.F.9"].numbers} == {"derived", "enclosure"}
    with pytest.raises(KeyError, match="no entry"):
        derived["renewal.F.10"]
