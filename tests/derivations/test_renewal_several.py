"""Generating functions for several detector states and for steps given, against mpmath's matrices; poles as claims."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import networkx as nx
import pytest
from flint import acb, ctx

from derive.checks.renewal.road import check_renewal, check_renewal_exact
from derive.derivations.renewal.topic import derive_renewal
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Interval, Question, Setting, Watcher, Wish
from derive.record.said import Claim
from tests.derivations.test_splitting import coined_walk
from tests.graphs import on_graph
from tests.strategies import POSITIVE, site

QUICK = Check(samples=1)


def branched() -> nx.Graph:
    """Seven vertices whose seen energies have no closed form together."""
    graph = nx.path_graph(7)
    graph.add_edge(1, 3)
    return graph


def told_apart(graph: nx.Graph, sites: tuple[int, int], efficiencies: tuple[str, str], start: int) -> Setting:
    watchers = tuple(
        Watcher((site(x),), parse(eta), name) for x, eta, name in zip(sites, efficiencies, "ab", strict=True)
    )
    return replace(on_graph(graph, sites, start), detectors=watchers)


def claims(setting: Setting, terms: int = 3) -> dict[str, Claim]:
    return {c.id: c for c in derive_renewal(setting, Wish("renewal", (("terms", terms),))).claims}


@pytest.mark.parametrize(
    ("graph", "sites", "efficiencies", "start"),
    [
        (nx.path_graph(4), (0, 3), ("1", "1"), 1),
        (nx.path_graph(5), (0, 4), ("3/4", "1/2"), 1),
        (branched(), (0, 2), ("1", "1/3"), 5),
    ],
    ids=["closed", "two efficiencies", "sums over roots"],
)
def test_columns_against_mpmath(
    graph: nx.Graph, sites: tuple[int, int], efficiencies: tuple[str, str], start: int
) -> None:
    """phi_c(z) = sqrt(eta_c) <d_c| z U (1 - z K)^-1 |psi> and F_n with mpmath's expm and linear solver, g tau = 3/4."""
    found = claims(told_apart(graph, sites, efficiencies, start), 2)
    with mpmath.workdps(40), ctx.workprec(200):
        h = mpmath.matrix((-nx.to_numpy_array(graph)).tolist())
        size = h.rows
        u = mpmath.expm(mpmath.mpc(0, -1) * h * mpmath.mpf("0.75"))
        etas = [mpmath.mpf(parse(e).args[0].numerator) / parse(e).args[0].denominator for e in efficiencies]
        no = mpmath.eye(size)
        for x, eta in zip(sites, etas, strict=True):
            no[x, x] = mpmath.sqrt(1 - eta)
        z, psi = mpmath.mpc("0.25", "0.5"), mpmath.matrix(size, 1)
        psi[start] = 1
        column = u * mpmath.lu_solve(mpmath.eye(size) - z * no * u, psi) * z
        values = Values.at({"g": parse("1"), "tau": parse("3/4")})
        for c, (x, eta) in enumerate(zip(sites, etas, strict=True), start=1):
            ball = enclose(formula(found[f"renewal.amplitude.{c}"]), values.with_letter("z", acb("0.25", "0.5")))
            wanted = complex(column[x] * mpmath.sqrt(eta))
            assert abs(complex(float(ball.real.mid()), float(ball.imag.mid())) - wanted) < 1e-13
        for n in (1, 2):
            moved = u * psi
            clicked = sum(eta * abs(moved[x]) ** 2 for x, eta in zip(sites, etas, strict=True))
            assert abs(float(enclose(formula(found[f"renewal.F.{n}"]), values).real.mid()) - float(clicked)) < 1e-14
            psi = no * moved


def formula(claim: Claim) -> Formula:
    assert isinstance(claim.value, Formula)
    return claim.value


def test_square_watched_at_two_corners() -> None:
    """By symmetry both see half of F_n = 2 c^2 s^2 cos^(2n-2)(2 g tau) from a corner between them; by hand."""
    found = claims(on_graph(nx.cycle_graph(4), (0, 2), 1))
    for n in (1, 2, 3):
        wanted = parse(f"2*cos(g*tau)^2*sin(g*tau)^2*cos(2*g*tau)^{2 * n - 2}" if n > 1 else "sin(2*g*tau)^2/2")
        assert vanishes(formula(found[f"renewal.F.{n}"]) - wanted, {"g": POSITIVE, "tau": POSITIVE}) is True


def test_absorbed_coins() -> None:
    """A step given in place of H, both ends told apart."""
    report = answer(Question(coined_walk(3), (Wish("renewal"),), check=QUICK))
    verdicts = {j.claim.id: j.verdict for j in report.judged}
    assert verdicts and set(verdicts.values()) <= {"proved", "agrees"}
    assert verdicts["renewal.amplitude.1"] == verdicts["renewal.F.2"] == "proved"


@pytest.mark.parametrize(
    ("setting", "exact"),
    [
        (on_graph(nx.path_graph(4), (0, 3), 1), "proved"),
        (told_apart(nx.path_graph(5), (0, 4), ("3/4", "1/2"), 1), "proved"),
        (on_graph(nx.cycle_graph(6), (0, 1), 3), "proved"),
        (on_graph(nx.cycle_graph(4), (0, 2), 1), "proved"),  # one pole
        (on_graph(branched(), (0, 2), 5), "agrees"),
    ],
    ids=["path", "two efficiencies", "hexagon", "square", "sums over roots"],
)
def test_entries_pass(setting: Setting, exact: str) -> None:
    report = answer(Question(setting, (Wish("renewal", (("terms", 2),)),), check=QUICK))
    verdicts = {j.claim.id: j.verdict for j in report.judged}
    assert set(verdicts.values()) == {exact}
    assert {"renewal.amplitude.1", "renewal.amplitude.2", "renewal.F.1"} <= set(verdicts)


@pytest.mark.parametrize("which", [1, 2, None])
def test_wrong_columns_are_refuted(which: int | None) -> None:
    """The other state's function, twice the right one, and a fraction 0/0, which nothing can be read off."""
    setting = on_graph(nx.path_graph(4), (0, 3), 1)
    right = {c: formula(claims(setting)[f"renewal.amplitude.{c}"]) for c in (1, 2)}
    if which is None:
        hollow = user(parse("(z - z)/(z - z)"), "generating function", ("component", 1))
        assert not check_renewal_exact(setting, (hollow,), QUICK).findings
        return
    for wrong in (right[3 - which], 2 * right[which]):
        claim = user(wrong, "generating function", ("component", which))
        for road in (check_renewal, check_renewal_exact):
            assert road(setting, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


def user(value: Formula, about: str, *keys: tuple[str, object]) -> Claim:
    return Claim("claim.mine", "renewal", Quantity(about, keys), value, origin="user")


def test_one_state_needs_no_name_and_two_do() -> None:
    one, two = on_graph(nx.path_graph(2), 0, 1), on_graph(nx.path_graph(4), (0, 3), 1)
    claim = user(parse("-i*z*sin(g*tau)/(1 - z*cos(g*tau))"), "generating function")
    assert check_renewal(one, (claim,), QUICK).findings["claim.mine"].verdict in ("agrees", "refuted")
    found = check_renewal(two, (claim,), QUICK).findings["claim.mine"]
    assert found.verdict == "untested" and "which of the 2" in found.evidence


def test_more_states_than_are_written_out() -> None:
    graph = nx.path_graph(9)
    graph.add_edge(1, 3)
    with pytest.raises(NotCovered, match="3 detector states at most"):
        derive_renewal(on_graph(graph, (0, 2, 4, 8), 5), Wish("renewal"))
    with pytest.raises(NotCovered, match="fixed intervals"):
        random = replace(on_graph(nx.path_graph(4), (0, 3), 1), interval=Interval(parse("tau"), "exponential"))
        derive_renewal(random, Wish("renewal"))


# -- poles as claims


@pytest.mark.parametrize(
    ("which", "value", "verdict"),
    [
        (1, "1/cos(g*tau)", "proved"),  # K = Q U has the one eigenvalue cos(g tau) on the other site; by hand
        (1, "cos(g*tau)", "refuted"),
        (1, "2/cos(g*tau)", "refuted"),
    ],
)
def test_the_one_pole_of_two_levels(which: int, value: str, verdict: str) -> None:
    setting = on_graph(nx.path_graph(2), 0, 1)
    assert judged(setting, user(parse(value), "pole", ("pole", which))) == verdict


def judged(setting: Setting, claim: Claim) -> str:
    found = [road(setting, (claim,), QUICK).findings.get("claim.mine") for road in (check_renewal, check_renewal_exact)]
    verdicts = {f.verdict for f in found if f is not None}
    return "refuted" if "refuted" in verdicts else "proved" if verdicts == {"agrees", "proved"} else verdicts.pop()


@pytest.mark.parametrize(
    ("which", "value", "verdict"),
    [
        (1, "exp(i*g*tau)", "refuted"),
        (1, "POLE", "agrees"),
        (2, "POLE", "agrees"),  # a conjugate pair: both are as far out
        (3, "POLE", "refuted"),
    ],
)
def test_poles_of_a_path_of_three(which: int, value: str, verdict: str) -> None:
    """Path of three watched at its end, g tau = 1/2: trace and determinant of U's block on the other two, by hand."""
    setting = on_graph(nx.path_graph(3), 0, 2, length=parse("1/(2*g)"))
    c = "cos(sqrt(2)/2)"
    pole = f"2/((1 + 3*{c})/2 + sqrt((1 + 3*{c})^2/4 - 2*(1 + {c})))"
    claim = user(parse(value.replace("POLE", pole)), "pole", ("pole", which))
    found = check_renewal(setting, (claim,), QUICK).findings["claim.mine"]
    assert found.verdict == (verdict if which < 3 else "untested"), found.evidence
