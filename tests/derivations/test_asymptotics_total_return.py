"""Probability of return beside an impurity and to the end of a half line: added up outside, limits, plants."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.special

from derive.checks.asymptotics.total import check_total
from derive.derivations.asymptotics.total import derive_total
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Check, Setting, Wish
from derive.record.said import Claim
from tests.lattices import by_evolution, lattice

EFFORT = Check(samples=0, points=((("Delta", parse("3/4")), ("g", parse("1")), ("tau", parse("2/5"))),))


def claim(setting: Setting, which: int = 0) -> Claim:
    return derive_total(setting, Wish("detection")).claims[which]


def total(setting: Setting, energy: str = "3/4") -> float:
    value = claim(setting).value
    assert isinstance(value, Formula) and parse(text(value)) == value
    at = Values.at({"g": parse("1"), "tau": parse("2/5"), "Delta": parse(energy)})
    return float(enclose(value, at).real.mid())


@pytest.mark.parametrize(
    ("name", "energy"), [("line", "3/4"), ("line", "-2"), ("half line", "1/3"), ("half line", "-3/2")]
)
def test_added_up_by_evolution(name: str, energy: str) -> None:
    """Outside oracle: evolving and asking on a long piece (scipy.linalg.expm), 240 asks; the rest is below 2/N^2."""
    top, _, below = energy.partition("/")
    phi = by_evolution(name, 0, 0, 0.4, 240, (0, int(top) / int(below or "1")))
    added = (np.abs(phi) ** 2).sum()
    assert added < total(lattice(name, impurity=(0, "Delta")), energy) < added + 4e-5


def test_the_end_of_a_uniform_half_line() -> None:
    """u_n = J_0 + J_2 = 2 J_1(a n)/(a n): the renewal recursion with scipy's Bessel function, 1500 asks."""
    x = 0.8 * np.arange(1, 1501)
    u = np.concatenate([[1.0], 2 * scipy.special.jv(1, x) / x])
    phi = np.zeros(1501)
    for n in range(1, 1501):
        phi[n] = u[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    assert abs(total(lattice("half line")) - (phi**2).sum()) < 1e-6


def test_without_an_impurity_it_is_the_uniform_law() -> None:
    """Delta = 0 in both formulas."""
    for name in ("line", "half line"):
        assert abs(total(lattice(name, impurity=(0, "Delta")), "0") - total(lattice(name))) < 1e-15


def test_the_road_agrees_and_refutes() -> None:
    setting = lattice(impurity=(0, "Delta"))
    right, small = claim(setting), claim(setting, 1)
    assert isinstance(right.value, Formula) and isinstance(small.value, Formula)
    wrong = (right.value + parse("1/10^7"), parse(text(right.value).replace("m from 1", "m from 2")))
    claims = (right, small, *(replace(right, id=f"wrong.{k}", value=f) for k, f in enumerate(wrong)),
              replace(small, id="wrong.small", value=small.value + parse("g^3*tau^3")))
    verdicts = {n: f.verdict for n, f in check_total(setting, claims, EFFORT).findings.items()}
    assert verdicts == {c.id: "refuted" if c.id.startswith("wrong") else "agrees" for c in claims}


def test_what_is_not_covered_says_so() -> None:
    base = lattice(impurity=(0, "Delta"))
    for setting in (replace(base, assume=()), lattice(impurity=(1, "Delta")), lattice("half line", 2, 2),
                    lattice("half line", 0, 1), lattice("half line", impurity=(1, "Delta"))):
        with pytest.raises(NotCovered):
            derive_total(setting, Wish("detection"))
