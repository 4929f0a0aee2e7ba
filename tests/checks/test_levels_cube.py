"""A hypercube of symbolic dimension watched at a corner: levels at the roots of its secular function."""

from dataclasses import replace as changed
from fractions import Fraction as F

import networkx
import numpy
import pytest

from derive.checks.levels.road import check_levels
from derive.derivations.levels.topic import derive_levels
from derive.formula.grammar import parse
from derive.formula.tree import number, times
from derive.numerics.evaluate import Values, enclose
from derive.numerics.fractions import numerator
from derive.numerics.roots import enclose_roots
from derive.problem.setting import Check, Wish
from derive.record.said import PerRoot
from tests.settings_of_graphs import family

EFFORT = Check(samples=3)
CUBE = family("hypercube", {"dimension": "d"}, 0, {"d": 2, "n": 1}, distance="n",
              assume=[("d", "<=", "5"), ("n", "<=", "d")])
TURNED = family("hypercube", {"dimension": "d"}, 0, {"d": 2}, hopping="g", assume=[("d", "<=", "5")])


def claims_of(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),))).claims


@pytest.mark.parametrize("order", [1, 3, 5])
@pytest.mark.parametrize("setting", [CUBE, TURNED], ids=["start", "turned"])
def test_every_entry_agrees_at_sizes(setting, order):
    claims = claims_of(setting, order)
    seen = check_levels(setting, claims, EFFORT).findings
    assert set(seen) == {c.id for c in claims} and {f.verdict for f in seen.values()} == {"agrees"}


@pytest.mark.parametrize("name", [
    "levels.1.energy", "levels.1.rate", "levels.1.weight", "levels.1.multiplicity", "levels.secular",
    "levels.dark.k.multiplicity",
])
def test_a_tenth_too_much_is_refuted(name):
    def spoiled(claim):
        if claim.id != name:
            return claim
        value, front = claim.value, number(F(11, 10))
        if isinstance(value, PerRoot):
            return changed(claim, value=changed(value, formula=times(front, value.formula)))
        return changed(claim, value=times(front, value))

    claims = tuple(map(spoiled, claims_of(CUBE)))
    assert check_levels(CUBE, claims, EFFORT).findings[name].verdict == "refuted"


@pytest.mark.parametrize("d", [2, 3, 4])
def test_leading_rates_and_weights_by_a_numerical_spectrum(d):
    """tau |<d|H|v>|^2 and |<v|psi>|^2 over numpy's eigenvectors on the space reached from the corner (networkx)."""
    H = -networkx.to_numpy_array(networkx.hypercube_graph(d))
    kept = range(1, 2**d)
    A, V, psi = H[1:, 1:], H[0, 1:], numpy.eye(2**d)[3][1:]  # nodes in binary order: 3 is two steps away
    assert sum(map(int, sorted(networkx.hypercube_graph(d))[3])) == 2 and len(kept) == len(V)
    energies, vectors = numpy.linalg.eigh(A)
    wanted = []
    for e in sorted(set(numpy.round(energies, 8))):
        space = vectors[:, abs(energies - e) < 1e-7]
        push = space.T @ V
        if push @ push > 1e-9:
            wanted.append((e, push @ push, (push @ (space.T @ psi)) ** 2 / (push @ push)))
    by_id = {c.id: c.value for c in claims_of(CUBE, 1)}
    values = Values.at({"g": number(1), "d": number(d), "n": number(2)})
    found = []
    for root in enclose_roots(by_id["levels.1.rate"].polynomial, "E", values):
        at = values.with_letter("E", root)
        rate = enclose(by_id["levels.1.rate"].formula, at.with_letter("tau", values.balls["g"]))
        found.append(tuple(float(x.real.mid()) for x in (root, rate, enclose(by_id["levels.1.weight"].formula, at))))
    assert numpy.allclose(sorted(found), wanted, atol=1e-7)


@pytest.mark.parametrize("source, roots", [
    ("1/(E - 1) + 1/(E + 1)", [0]), ("(E^2 - 4)/(E - 2)", [-2]),
    ("sum(j from 0 to d: binomial(d, j)/(d - 2*j - E))", numpy.roots([1, 0, -7, 0])),  # expanded by hand for d = 3
])
def test_roots_of_ratios(source, roots):
    found = enclose_roots(parse(source), "E", Values.at({"d": number(3)}))
    assert numpy.allclose([float(x.real.mid()) for x in found], sorted(roots))


def test_what_is_no_ratio_is_none():
    assert numerator(parse("sin(E)"), "E", {}) is None and numerator(parse("sum(j from 0 to d: E)"), "E", {}) is None
