"""The roads of the levels: right answers pass, each planted fault is refuted by either road alone."""

from dataclasses import replace as changed
from fractions import Fraction as F

import pytest

from derive.checks.judge import verdict_of
from derive.checks.levels.block import check_levels_block
from derive.checks.levels.dark_exact import check_dark_exact
from derive.checks.levels.exact import check_levels_exact
from derive.checks.levels.road import check_levels
from derive.derivations.levels.topic import derive_levels
from derive.formula.grammar import parse
from derive.formula.tree import letter, number, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.said import Claim, Expansion, Kind, PerRoot
from tests.settings_of_graphs import cluster, watched

EFFORT = Check(samples=2)
CHAIN = watched("chain", {"sites": 6}, 0, ("g", "Delta"), energies={0: "Delta", 3: "Delta"}, start=2)
NINE = watched("chain", {"sites": 9}, 4, start=2)
RING = watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")], start=2)


def claims_of(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),))).claims


def roads(setting, claims):
    """(enclosure, exact) verdict by claim id."""
    seen, exact = check_levels(setting, claims, EFFORT).findings, check_levels_exact(setting, claims, EFFORT)
    return ({k: f.verdict for k, f in seen.items()}, {k: f.verdict for k, f in exact.items()})


@pytest.mark.parametrize("setting", [
    CHAIN, RING, watched("star", {"lengths": (1, 2, 3)}, 0, start=4),
    watched("hypercube", {"dimension": 3}, 0, start=6),
    watched("chain", {"sites": 5}, {2: "1/sqrt(2)", 3: "i/sqrt(2)"}, start=0),
])
def test_right_levels_are_proved(setting):
    claims = claims_of(setting)
    seen, exact = roads(setting, claims)
    assert set(seen) == {c.id for c in claims} and set(seen.values()) == {"agrees"}
    bright = {c.id for c in claims if ".dark." not in c.id}
    dark = check_dark_exact(setting, claims)
    assert set(dark) == {c.id for c in claims} - bright and {f.verdict for f in dark.values()} <= {"proved"}
    assert set(exact) == bright and set(exact.values()) == {"proved"}


SEVEN = watched("chain", {"sites": 7}, [2, 5])
FLUX = watched("ring", {"sites": 6}, [0, 2], ("g", "phi"), loops=[(range(6), "phi")])
PAIRS = [
    SEVEN, FLUX, watched("complete", {"sites": 5}, [0, 1]), watched("chain", {"sites": 10}, [0, 4, 8]),
    watched("grid", {"rows": 3, "columns": 3}, [0, {4: "1/sqrt(2)", 8: "i/sqrt(2)"}]),
    watched("tree", {"branching": 2, "depth": 3}, [1, 2]),  # levels +-sqrt(2) g split at the second order
    watched("chain", {"sites": 12}, [3, 7]),  # +-sqrt(2) g, with rates in Q(sqrt(5))
    cluster([(0, 1, "-2"), (0, 2, "-g"), (1, 3, "-g"), (3, 4, "-1")], [0, 3]),  # two levels without a bond between them
    cluster([(0, 1, "-1"), (1, 2, "-g"), (3, 4, "-1"), (4, 5, "-g"), (0, 6, "-1"), (3, 6, "-1"), (2, 7, "-1"),
             (5, 7, "-2")], [6, 7]),  # +-sqrt(g^2 + 1), with rates whose polynomial has denominators
]


@pytest.mark.parametrize("setting", PAIRS)
def test_higher_rank_is_proved_also_where_levels_coincide(setting):
    claims = claims_of(setting)
    seen, exact = check_levels(setting, claims, EFFORT).findings, check_levels_block(setting, claims, EFFORT)
    assert set(seen) == {c.id for c in claims} and {f.verdict for f in seen.values()} == {"agrees"}
    assert set(exact) == {c.id for c in claims if ".dark." not in c.id}
    assert {f.verdict for f in exact.values()} == {"proved"}


@pytest.mark.parametrize("setting", PAIRS[:3])
@pytest.mark.parametrize("part, k, q", [("energy", 0, F(3, 2)), ("energy", 2, F(-1)), ("rate", 1, F(2)),
                                        ("rate", 3, F(-1)), ("multiplicity", 0, F(2))])
def test_each_planted_fault_of_higher_rank_is_refuted_exactly(setting, part, k, q):
    """The other parts of the level are never refuted for it."""
    name = f"levels.1.{part}"
    claims = tuple(changed(c, value=_scaled(c.value, k, q)) if c.id == name else c for c in claims_of(setting))
    exact = check_levels_block(setting, claims, EFFORT)
    assert exact[name].verdict == "refuted"
    assert all(f.verdict == "proved" for n, f in exact.items() if n != name)


def _scaled(value, k, q):
    """The value with its k-th coefficient in tau multiplied by q."""
    if isinstance(value, Expansion):
        terms = [times(number(q), f) if p == k else f for p, f in zip(value.powers, value.terms, strict=True)]
        return changed(value, terms=tuple(terms))
    if isinstance(value, PerRoot):
        wrong = value.formula + times(number(q - 1), letter("g"), parse(f"tau^{k}"))
        return changed(value, formula=wrong)
    return times(number(q), value)


FAULTS = [("levels.2.energy", 0, F(3, 2)), ("levels.2.energy", 2, F(-1)), ("levels.2.rate", 1, F(2)),
          ("levels.2.rate", 3, F(-1)), ("levels.1.rate", 1, F(2)), ("levels.1.energy", 2, F(2)),
          ("levels.2.weight", 0, F(4)), ("levels.1.multiplicity", 0, F(2)), ("levels.secular", 0, F(1, 2))]


@pytest.mark.parametrize("name, k, q", FAULTS)
def test_each_planted_fault_is_refuted_by_either_road(name, k, q):
    """Level 1 stands for three roots at once, level 2 is written out."""
    claims = tuple(changed(c, value=_scaled(c.value, k, q)) if c.id == name else c for c in claims_of(CHAIN))
    seen, exact = roads(CHAIN, claims)
    assert seen[name] == "refuted" and exact[name] == "refuted"


@pytest.mark.parametrize("name, q", [("levels.dark.1.energy", F(2)), ("levels.dark.1.multiplicity", F(2))])
def test_planted_dark_faults(name, q):
    setting = watched("star", {"arms": 3, "length": 1}, 0)
    claims = claims_of(setting)
    if name.endswith("energy"):
        claims = tuple(changed(c, value=parse("g")) if c.id == name else c for c in claims)
    else:
        claims = tuple(changed(c, value=number(q * 2)) if c.id == name else c for c in claims)
    seen, _ = roads(setting, claims)
    assert seen[name] == "refuted"


@pytest.mark.parametrize("setting", [
    watched("star", {"arms": 2, "length": 1}, 0, ("g", "Delta"), energies={1: "Delta"}, start=1),
    watched("star", {"arms": 3, "length": 1}, 0, ("g", "Delta"), energies={3: "Delta"}),
    watched("chain", {"sites": 7}, [2, 5]), NINE,
])
def test_what_is_derived_is_accepted_as_a_users_own(setting):
    """Also where letters change the order of the levels: then the claim brings the order along."""
    plain = [c for c in claims_of(setting) if not isinstance(c.value, PerRoot)]
    again = tuple(changed(c, id=f"claim.{n}", origin="user") for n, c in enumerate(plain))
    found = check_levels(setting, again, EFFORT).findings
    assert {found[c.id].verdict for c in again} == {"agrees"}


def own(about, which, formula, order):
    kind = Kind("order", f"up to O(tau^{order})", order) if order else Kind()
    return Claim("claim.mine", "levels", Quantity(about, (("level", which),)), parse(formula), kind, origin="user")


@pytest.mark.parametrize("claim, verdict", [
    (own("decay rate", 1, "g^2*tau*(3 - sqrt(5))/4", 3), "proved"),
    (own("decay rate", 1, "g^2*tau*(3 + sqrt(5))/4", 3), "refuted"),  # the other level of this energy
    (own("decay rate", 3, "g^2*tau", 3), "proved"),
    (own("level energy", 1, "-g", 2), "proved"),
    (own("level energy", 1, "-g", 3), "refuted"),
    (own("level multiplicity", 1, "2", 0), "refuted"),
    (own("level multiplicity", 1, "g/g", 0), "proved"),
])
def test_claims_of_ones_own_about_two_watched_sites(claim, verdict):
    """By hand: V† Pi V = g^2/2 [[2, 1], [1, 1]] where both pairs of sites have the energy -g."""
    claims = (*claims_of(SEVEN), claim)
    seen, exact = check_levels(SEVEN, claims, EFFORT).findings, check_levels_block(SEVEN, claims, EFFORT)
    found = tuple(f for f in (exact.get(claim.id), seen.get(claim.id)) if f)
    assert verdict_of(claim.id, found) == verdict


@pytest.mark.parametrize("claim, verdict", [
    (own("decay rate", 1, "4/5*g^2*tau*sin(pi/5)^2", 3), "proved"),  # path states, textbook
    (own("decay rate", 2, "4/5*g^2*tau*sin(2*pi/5)^2", 3), "proved"),
    (own("decay rate", "k", "4/5*g^2*tau*sin(pi*k/5)^2", 3), "agrees"),
    (own("level energy", "k", "-2*g*cos(pi*k/5)", 2), "agrees"),
    (own("decay rate", 2, "4/5*g^2*tau*sin(pi/5)^2", 3), "refuted"),  # the neighbour's
    (own("decay rate", 1, "4/5*g^2*tau*sin(pi/5)^2", 4), "refuted"),  # true one order less far
    (own("decay rate", 5, "g^2*tau", 3), "refuted"),  # there are four
    (own("level weight", 1, "(5 - sqrt(5))/40 + 1/1000", 0), "refuted"),
    (own("level multiplicity", 1, "1", 0), "proved"),
    (own("level energy", 1, "-g*(1 + sqrt(5))/2", 2), "proved"),
    (own("level energy", 1, "-g*(1 + sqrt(5))/2", 3), "refuted"),
])
def test_claims_of_ones_own(claim, verdict):
    claims = (*claims_of(NINE), claim)
    seen, exact = check_levels(NINE, claims, EFFORT).findings, check_levels_exact(NINE, claims, EFFORT)
    found = tuple(f for f in (exact.get(claim.id), seen.get(claim.id)) if f)
    assert verdict_of(claim.id, found) == verdict


def test_a_claim_about_all_orders_is_never_confirmed():
    claim = changed(own("level energy", 1, "-g*(1 + sqrt(5))/2", 2), kind=Kind())
    assert check_levels(NINE, (claim,), EFFORT).findings["claim.mine"].verdict == "refuted"
    setting = cluster([(0, 1, "-g")], 1)
    exactly = Claim("claim.mine", "levels", Quantity("level energy", (("level", 1),)), number(0), origin="user")
    assert check_levels(setting, (exactly,), EFFORT).findings["claim.mine"].verdict == "undecided"
