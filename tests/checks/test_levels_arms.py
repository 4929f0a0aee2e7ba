"""Levels of unequal arms, sizes as letters: proved, measured at sizes, and every planted fault refuted."""

from dataclasses import replace as changed
from fractions import Fraction as F

import networkx
import numpy
import pytest

from derive.checks.levels.arms import arm_sites, level_points
from derive.checks.levels.arms_every import check_arms_every
from derive.checks.levels.road import check_levels
from derive.derivations.levels.topic import derive_levels
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.tree import number, times
from derive.numerics.evaluate import Values, enclose
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Relation, Wish
from derive.problem.sized import sized
from derive.record.said import Claim, Expansion, Kind
from tests.settings_of_graphs import family, watched

EFFORT = Check(samples=3)
INSIDE = family("chain", {"sites": "N"}, "p", {"N": 4, "p": 1, "j": 1}, distance="j",
                assume=[("p", "<", "N - 1"), ("j", "<=", "p")])
DETUNED = family("chain", {"sites": "N"}, "2", {"N": 4}, known=("g", "Delta"), energies=[("2", "Delta")])
HUB = family("star", {"lengths[0]": 3, "lengths[1]": 5, "lengths[2]": "L"}, 0, {"L": 1})
TWINS = family("star", {"lengths[0]": "L", "lengths[1]": "2*L + 1", "lengths[2]": "L"}, 0, {"L": 1, "j": 1},
               hopping="g", distance="j", assume=[("j", "<=", "L")])


def claims_of(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),))).claims


@pytest.mark.parametrize("order", [3, 5])
@pytest.mark.parametrize("setting", [INSIDE, DETUNED, HUB, TWINS], ids=["inside", "detuned", "hub", "twins"])
def test_every_entry_is_proved_and_agrees_at_sizes(setting, order):
    claims = claims_of(setting, order)
    exact, seen = check_arms_every(setting, claims, EFFORT), check_levels(setting, claims, EFFORT).findings
    assert {f.verdict for f in exact.values()} == {"proved"} and {f.verdict for f in seen.values()} == {"agrees"}
    assert set(seen) == {c.id for c in claims} and set(exact) == set(seen) - {"levels.secular"}


def spoiled(claims, name, power, q):
    """The claim of that name with its coefficient of tau^power multiplied."""
    for claim in claims:
        if claim.id != name:
            yield claim
        elif isinstance(claim.value, Expansion):
            pairs = zip(claim.value.powers, claim.value.terms, strict=True)
            terms = tuple(times(number(q), f) if k == power else f for k, f in pairs)
            yield changed(claim, value=changed(claim.value, terms=terms))
        else:
            yield changed(claim, value=times(number(q), claim.value))


@pytest.mark.parametrize("name, power, q", [
    ("levels.k.arm.1.energy", 0, F(2)), ("levels.k.arm.1.energy", 2, F(-1)), ("levels.k.arm.2.rate", 1, F(1, 2)),
    ("levels.k.arm.2.rate", 3, F(3, 2)), ("levels.k.arms.1.2.rate", 1, F(2)), ("levels.k.arms.1.2.rate", 3, F(-1)),
    ("levels.k.arm.1.weight", 0, F(2)), ("levels.k.arms.1.2.weight", 0, F(1, 2)),
    ("levels.k.arms.1.2.multiplicity", 0, F(2)), ("levels.dark.k.arms.1.2.multiplicity", 0, F(2)),
])
def test_planted_faults(name, power, q):
    claims = tuple(spoiled(claims_of(INSIDE), name, power, q))
    assert check_levels(INSIDE, claims, EFFORT).findings[name].verdict == "refuted"
    assert check_arms_every(INSIDE, claims, EFFORT)[name].verdict == "refuted"


@pytest.mark.parametrize("was, now, verdict", [("=", "!=", "refuted"), ("!=", "=", "undecided")])
def test_the_other_condition_does_not_pass(was, now, verdict):
    """What holds for a shared level is wrong for one arm's alone; the other way round a cotangent has no value."""
    claims = claims_of(INSIDE)
    stem = "levels.k.arm.1" if was == "!=" else "levels.k.arms.1.2"
    turned = tuple(
        changed(c, assume=tuple(Relation(r.left, now, r.right) if r.op == was else r for r in c.assume), id="claim.x",
                origin="user")
        for c in claims if c.id == f"{stem}.rate")
    assert check_levels(INSIDE, turned, EFFORT).findings["claim.x"].verdict == verdict
    said = check_arms_every(INSIDE, turned, EFFORT).get("claim.x")
    assert said is None or said.verdict == "refuted"


def own(formula, arm, assume=(), holds="up to O(tau^3), for every N"):
    kind = Kind("order", holds, 3, every="N" if "every" in holds else None)
    relations = tuple(Relation(parse(a), op, parse(b)) for a, op, b in assume)
    return Claim("claim.mine", "levels", Quantity("decay rate", (("level", "k"), ("arm", arm))), parse(formula), kind,
                 relations, origin="user")


ALONE = [("sin(pi*k*(N-p)/(p+1))", "!=", "0")]


@pytest.mark.parametrize("formula, arm, assume, verdict", [
    ("2*g^2*tau*sin(pi*k/(p+1))^2/(p+1)", 1, ALONE, "proved"),
    ("g^2*tau*(1 - cos(2*pi*k/(p+1)))/(p+1)", 1, ALONE, "proved"),
    ("2*g^2*tau*sin(pi*k/(p+1))^2/(p+1)", 2, [("sin(pi*k*(p+1)/(N-p))", "!=", "0")], "refuted"),
    ("2*g^2*tau*sin(pi*k/p)^2/(p+1)", 1, ALONE, "refuted"),
    ("2*g^2*tau*sin(pi*k/(p+1))^2*(1/(p+1) + 1/(N-p))", 1, [("sin(pi*k*(N-p)/(p+1))", "=", "0")], "proved"),
])
def test_own_rates(formula, arm, assume, verdict):
    claim = own(formula, arm, assume)
    assert check_arms_every(INSIDE, (claim,), EFFORT)["claim.mine"].verdict == verdict
    measured = check_levels(INSIDE, (claim,), EFFORT).findings["claim.mine"].verdict
    assert measured == {"proved": "agrees"}.get(verdict, verdict)


def test_a_rate_that_forgets_shared_levels_is_refuted():
    """Without the condition: nothing is proved, and sizes with a common level refute."""
    claim = own("2*g^2*tau*sin(pi*k/(p+1))^2/(p+1)", 1)
    assert check_arms_every(INSIDE, (claim,), EFFORT) == {}
    assert check_levels(INSIDE, (claim,), Check(samples=8)).findings["claim.mine"].verdict == "refuted"


def test_points_with_shared_levels_are_looked_for():
    """N = 6, p = 1 has two parts of 2 and 5 sites' width and nothing shared; the points drawn all have gcd > 1."""
    from math import gcd

    relation = Relation(parse("sin(pi*k*(N-p)/(p+1))"), "=", parse("0"))
    points = level_points(INSIDE, Check(samples=4), (relation,), 1)
    sizes = [{n: int(v.args[0]) for n, v in p.values if n in ("N", "p")} for p in points]
    assert len(points) == 4 and all(gcd(s["p"] + 1, s["N"] - s["p"]) > 1 for s in sizes)


def test_arms_are_counted_by_their_lowest_site():
    hub = watched("star", {"lengths": (2, 1, 3)}, 0)
    assert [arm_sites(hub, n) for n in (1, 2, 3)] == [[1, 2], [3], [4, 5, 6]]
    row = watched("chain", {"sites": 5}, 0)
    assert [arm_sites(row, n) for n in (1, 2)] == [[], [1, 2, 3, 4]]
    with pytest.raises(NotCovered):
        arm_sites(watched("ring", {"sites": 5}, 0), 1)


@pytest.mark.parametrize("N, p", [(7, 2), (8, 2), (11, 3), (12, 3)])
def test_leading_rates_by_a_numerical_spectrum(N, p):
    """tau |<d|H|v>|^2 over numpy's eigenvectors of the two parts (networkx path graphs), degenerate ones added up."""
    H = -networkx.to_numpy_array(networkx.path_graph(N))
    kept = [x for x in range(N) if x != p]
    energies, vectors = numpy.linalg.eigh(H[numpy.ix_(kept, kept)])
    push = (H[p][kept] @ vectors) ** 2
    wanted = {}
    for e, w in zip(energies, push, strict=True):
        near = next((x for x in wanted if abs(x - e) < 1e-9), e)
        wanted[near] = wanted.get(near, 0) + w
    found = {}
    put = {"g": number(1), "N": number(N), "p": number(p)}
    by_id = {c.id: c for c in claims_of(INSIDE, 1)}
    for stem, size, other in (("k.arm.1", p + 1, N - p), ("k.arm.2", N - p, p + 1), ("k.arms.1.2", p + 1, N - p)):
        for k in range(1, size):
            if (k * other % size == 0) == (stem == "k.arms.1.2"):
                values = Values.at({**put, "k": number(k)})
                e, r = (by_id[f"levels.{stem}.{part}"].value.terms[0] for part in ("energy", "rate"))
                found[float(enclose(e, values).real.mid())] = float(enclose(r, values).real.mid())
    assert len(found) == len(wanted)
    assert numpy.allclose(sorted(found.items()), sorted(wanted.items()), atol=1e-9)


def test_at_a_size_the_sums_of_weights_are_the_explicit_graphs():
    """The start's weights on all bright levels add up to its bright part, by the derivation at that size."""
    sizes = {"N": number(9), "p": number(3), "j": number(2)}
    special = {c.id: c.value for c in claims_of(sized(INSIDE, sizes))}
    weights = [v for name, v in special.items() if name.endswith(".weight")]
    values = Values.at({"g": number(1)})
    total = sum(float(enclose(w, values).real.mid()) for w in weights)
    by_id = {c.id: c.value for c in claims_of(INSIDE)}
    ours = 0.0
    for k in (1, 2, 3):
        name = "levels.k.arms.1.2.weight" if k * 6 % 4 == 0 else "levels.k.arm.1.weight"
        ours += float(enclose(by_id[name], Values.at({**sizes, "g": number(1), "k": number(k)})).real.mid())
    assert abs(ours - total) < 1e-12
