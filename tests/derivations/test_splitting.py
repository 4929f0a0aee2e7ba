"""Several detectors told apart, and steps given directly, against published walks and mpmath."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import mpmath
import networkx as nx
import numpy as np
import pytest

from derive.checks.detection.splitting import check_splitting
from derive.checks.summed import check_summed
from derive.derivations.detection.topic import derive_detection
from derive.derivations.moments.topic import derive_moments
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ONE, TAU, Formula, number
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Interval, Question, Setting, Shape, Start, Unitary, Watcher, Wish
from derive.record.said import Claim, Number
from tests.graphs import on_graph
from tests.strategies import POSITIVE, setting_of, site

QUICK = Check(samples=1, digits=20)


def coined_walk(last: int) -> Setting:
    """Hadamard coin on places 0 ... last (closed to a ring, so that the step is unitary), both ends watched.

    State 2x + c; the coin state 0 goes left, 1 right; start at place 1, going right.
    """
    size, s = last + 1, parse("1/sqrt(2)")
    rows: list[dict[int, Formula]] = [{} for _ in range(2 * size)]
    for x in range(size):
        for coin in range(2):
            rows[2 * ((x - 1) % size)][2 * x + coin] = s
            rows[2 * ((x + 1) % size) + 1][2 * x + coin] = -s if coin else s
    space = Unitary(tuple(tuple(sorted(r.items())) for r in rows), Shape("step"))
    ends = (Watcher((site(0), site(1)), name="left"), Watcher((site(2 * last), site(2 * last + 1)), name="right"))
    return Setting("a walk", (), space, ends, Start(((ONE, site(3)),)))


def values(setting: Setting) -> dict[str, Formula]:
    found = {c.id.removeprefix("detection."): c.value for c in derive_detection(setting, Wish("detection")).claims}
    return {k: v for k, v in found.items() if isinstance(v, Formula)}


@pytest.mark.parametrize(("last", "share"), [(2, "1/2"), (3, "2/3"), (4, "7/10"), (5, "12/17")])
def test_coined_walk_between_two_ends(last: int, share: str) -> None:
    """Probability to be absorbed at 0 from 1: p -> (1 + 2p)/(2 + 2p); J. Comput. Syst. Sci. 69, 562 (2004)."""
    found = values(coined_walk(last))
    assert text(found["splitting.left"]) == share and text(found["total"]) == "1"


def _two_ends(efficiency: str = "1") -> Setting:
    watchers = (Watcher((site(0),), name="a"), Watcher((site(2),), parse(efficiency), name="b"))
    return replace(on_graph(nx.path_graph(3), 0, 1), detectors=watchers)


def test_two_equal_ends_share_alike() -> None:
    """By the mirror."""
    found = values(_two_ends())
    assert text(found["splitting.a"]) == text(found["splitting.b"]) == "1/2"


def test_unequal_ends_against_mpmath() -> None:
    """A path of three, one end seeing three quarters: asks one after the other in mpmath."""
    found = values(_two_ends("3/4"))
    domains = {"g": POSITIVE, "tau": POSITIVE}
    assert vanishes(found["splitting.a"] + found["splitting.b"] - ONE, domains) is True
    with mpmath.workdps(30):
        u = mpmath.expm(mpmath.mpc(0, 1) * mpmath.matrix([[0, 1, 0], [1, 0, 1], [0, 1, 0]]) * mpmath.mpf("0.6"))
        psi, share = mpmath.matrix([0, 1, 0]), mpmath.mpf(0)
        for _ in range(400):
            psi = u * psi
            share += abs(psi[0]) ** 2
            psi[0], psi[2] = 0, psi[2] / 2
        x = mpmath.cos(mpmath.sqrt(2) * mpmath.mpf("0.6"))
        assert abs(share - (5 * x - 7) / (4 * (x - 3))) < mpmath.mpf("1e-20")
    assert vanishes(found["splitting.a"] - parse("(5*cos(sqrt(2)*g*tau) - 7)/(4*(cos(sqrt(2)*g*tau) - 3))"), domains)


@pytest.mark.parametrize("setting", [coined_walk(3), _two_ends("3/4")], ids=["walk", "path"])
def test_every_entry_is_proved(setting: Setting) -> None:
    """Roads: the state followed forward, and the experiment summed over all asks."""
    report = answer(Question(setting, (Wish("detection"),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"} and len(report.judged) == 6


def test_a_wrong_share_is_refuted_by_each_road() -> None:
    claim = Claim("claim.mine", "detection", Quantity("splitting probability", (("detector", "a"),)), parse("1/3"))
    assert check_splitting(_two_ends(), (claim,), QUICK)["claim.mine"].verdict == "refuted"
    assert check_summed(_two_ends(), (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


def _far_apart(sites: int) -> Setting:
    watchers = (Watcher((site(0),), name="a"), Watcher((site(sites - 1),), name="b"))
    return replace(on_graph(nx.path_graph(sites), 0, 3), detectors=watchers)


def test_a_larger_graph_says_what_is_left_out() -> None:
    derivation = derive_detection(_far_apart(14), Wish("detection"))
    assert not any("splitting" in c.id for c in derivation.claims)
    assert any("left out" in str(n[0]) for n in derivation.notes)


@pytest.mark.parametrize(("sites", "law"), [(9, "fixed"), (6, "exponential")])
def test_shares_left_to_an_equation(sites: int, law: str) -> None:
    """First clicks at site 0 of a row watched at both ends, from numpy's density matrices; g = 1, tau = 3/4."""
    setting = replace(_far_apart(sites), interval=Interval(TAU, law))
    there = Check(samples=0, digits=20, points=((("g", parse("1")), ("tau", parse("3/4"))),))
    claims = [c for c in derive_detection(setting, Wish("detection")).claims if "splitting" in c.id]
    seen = check_summed(setting, claims, there)
    assert {f.verdict for f in seen.findings.values()} == {"agrees"} and len(claims) == 2
    energies, states = np.linalg.eigh(-nx.to_numpy_array(nx.path_graph(sites)))
    gaps = (energies[:, None] - energies[None, :]) * 0.75
    factor = np.exp(-1j * gaps) if law == "fixed" else 1 / (1 + 1j * gaps)
    rho, share = np.zeros((sites, sites)), 0.0
    rho[3, 3] = 1
    no = np.diag([0.0] + [1.0] * (sites - 2) + [0.0])
    for _ in range(4000):
        rho = states @ (factor * (states.T @ rho @ states)) @ states.T
        share += float(rho[0, 0].real)
        rho = no @ rho @ no
    found = seen.values["detection.splitting.a"]
    assert isinstance(found, Number) and abs(float(found.value) - share) < 1e-9


@pytest.mark.parametrize(("last", "mean"), [(2, "1"), (3, "2"), (4, "3")])
def test_steps_until_the_coined_walk_is_absorbed(last: int, mean: str) -> None:
    """Mean number of steps by asking again and again in numpy, and proved by both roads."""
    setting = coined_walk(last)
    report = answer(Question(setting, (Wish("moments"),), check=QUICK))
    found = {j.claim.id: j for j in report.judged}
    assert {j.verdict for j in report.judged} == {"proved"}
    value = found["moments.mean"].claim.value
    assert isinstance(value, Formula) and text(value) == mean
    root = np.sqrt(0.5)
    u = np.zeros((2 * last + 2, 2 * last + 2))
    for x, row in enumerate(setting.space.rows):  # type: ignore[union-attr]
        for y, f in row:
            u[x, y] = -root if text(f).startswith("-") else root
    psi, total = np.eye(2 * last + 2)[3], 0.0
    for n in range(1, 400):
        psi = u @ psi
        ends = [0, 1, 2 * last, 2 * last + 1]
        total += n * float((psi[ends] ** 2).sum())
        psi[ends] = 0
    assert abs(total - int(mean)) < 1e-9


def test_moments_of_several_detectors_are_proved() -> None:
    report = answer(Question(_two_ends("3/4"), (Wish("moments"),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"} and len(report.judged) == 3


def test_a_subspace_returns_after_the_number_of_directions_seen() -> None:
    """Eigenphases 0.3, 1.7, 2.9 (twice), 4.1 (three times) on C^7, two detector states: 1 + 1 + 2 + 2 directions.

    Mean return over a basis: 6/2 = 3.  Source: Commun. Math. Phys. 329, 1031 (2014); the eigenbasis is a
    product of two reflections with small whole components.
    """
    energies = [Fraction(e, 10) for e in (3, 17, 29, 29, 41, 41, 41)]
    first, second = _mirror([1, -2, 3, 1, 2, -1, 1]), _mirror([2, 1, 1, -1, 0, 3, -2])
    basis = [[sum(first[x][m] * second[m][k] for m in range(7)) for k in range(7)] for x in range(7)]
    rows = [
        {y: number(sum(basis[x][k] * e * basis[y][k] for k, e in enumerate(energies))) for y in range(7)}
        for x in range(7)
    ]
    rows = [{y: f for y, f in r.items() if f != number(0)} for r in rows]
    start = Start(((ONE, site(0)),))
    setting = replace(setting_of(rows, (site(0), site(1))), start=start, interval=Interval(ONE))
    report = answer(Question(setting, (Wish("detection"),), check=QUICK))
    found = {j.claim.id: j for j in report.judged}
    assert {j.verdict for j in report.judged} == {"proved"}
    assert found["detection.bright_dimension"].claim.value == number(6)
    assert found["detection.phases"].claim.value == number(4)
    assert found["detection.bright_dimension"].numbers[0].value.startswith(("6", "5.99999999999999999"))


def _mirror(v: list[int]) -> list[list[Fraction]]:
    """1 - 2 v v^T/v.v."""
    length = sum(c * c for c in v)
    return [[Fraction(int(i == j)) - Fraction(2 * a * b, length) for j, b in enumerate(v)] for i, a in enumerate(v)]


def test_a_larger_bright_space_is_not_covered_in_one_sentence() -> None:
    wide = replace(on_graph(nx.path_graph(14), 0, 3), detectors=(Watcher((site(0), site(13))),))
    with pytest.raises(NotCovered, match="\\.$"):
        derive_moments(wide, Wish("moments"))
