"""Claims "for every L": proved with the size as a letter, sampled sizes agree, planted faults refuted."""

from dataclasses import replace as changed
from fractions import Fraction as F

import pytest

from derive.checks.levels.dark_exact import check_dark_exact
from derive.checks.levels.every import check_levels_every
from derive.checks.levels.exact import check_levels_exact
from derive.checks.levels.road import check_levels
from derive.derivations.levels.topic import derive_levels
from derive.formula.grammar import parse
from derive.formula.tree import number, replace, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Relation, Wish
from derive.record.said import Claim, Expansion, Kind
from tests.settings_of_graphs import family

EFFORT = Check(samples=3)
ODD = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 1, "j": 1}, distance="j", assume=[("j", "<=", "L")])
DETUNED = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 2}, known=("g", "Delta"), energies=[("L", "Delta")])
FAMILIES = [
    ODD, DETUNED, family("chain", {"sites": "N"}, 0, {"N": 2}),
    family("star", {"arms": "m", "length": "L"}, 0, {"m": 2, "L": 1}),
    family("ring", {"sites": "N"}, 0, {"N": 3, "j": 1}, distance="j", assume=[("2*j", "<=", "N")]),
    family("ring", {"sites": "N"}, 0, {"N": 3}, known=("g", "phi"), flux="phi"),
    family("ring", {"sites": "N"}, 0, {"N": 3}, known=("g", "phi"), flux="phi", hopping="g"),
]


def claims_of(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),))).claims


def spoiled(name, k, q):
    """Multiplies the claim of that name, or its coefficient of tau^k."""
    def spoil(claim):
        if claim.id != name:
            return claim
        value = claim.value
        if isinstance(value, Expansion):
            pairs = zip(value.powers, value.terms, strict=True)
            return changed(claim, value=changed(value, terms=tuple(times(number(q), f) if p == k else f
                                                                   for p, f in pairs)))
        return changed(claim, value=times(number(q), value))

    return spoil


@pytest.mark.parametrize("order", [3, 5])
@pytest.mark.parametrize("setting", FAMILIES)
def test_families_are_proved_in_the_size_and_agree_at_sizes(setting, order):
    claims = claims_of(setting, order)
    exact, seen = check_levels_every(setting, claims, EFFORT), check_levels(setting, claims, EFFORT).findings
    assert {f.verdict for f in exact.values()} == {"proved"} and {f.verdict for f in seen.values()} == {"agrees"}
    assert set(seen) == {c.id for c in claims} and set(exact) == set(seen) - {"levels.secular"}


@pytest.mark.parametrize("setting", [
    family("star", {f"lengths[{n}]": f for n, f in enumerate(("1", "2", "3", "L"))}, 0, {"L": 4}),
])
def test_secular_functions_alone_agree_at_sizes(setting):
    """Where levels have no closed form in the size; a function a tenth too large is refuted."""
    claims = claims_of(setting)
    assert [c.id for c in claims] == ["levels.secular"]
    assert check_levels(setting, claims, EFFORT).findings["levels.secular"].verdict == "agrees"
    wrong = (changed(claims[0], value=times(number(F(11, 10)), claims[0].value)),)
    assert check_levels(setting, wrong, EFFORT).findings["levels.secular"].verdict == "refuted"


@pytest.mark.parametrize("order", [3, 5])
@pytest.mark.parametrize("setting", [
    family("complete", {"sites": "N"}, 0, {"N": 2}, distance="1"),
    family("complete", {"sites": "N"}, 1, {"N": 3}, known=("g", "Delta"), energies=[("1", "Delta")]),
    family("complete bipartite", {"left": "a", "right": "b"}, 0, {"a": 1, "b": 1}, distance="1"),
    family("complete bipartite", {"left": "a", "right": "b"}, 0, {"a": 2, "b": 1}, known=("g", "Delta"),
           energies=[("0", "Delta")], distance="2"),
])
def test_layers_are_proved_and_agree_at_sizes(setting, order):
    """Also with the smallest sizes, where a layer or a dark level is missing: these are kept out of the entries."""
    claims = claims_of(setting, order)
    seen = check_levels(setting, claims, Check(samples=8)).findings
    assert {f.verdict for f in seen.values()} == {"agrees"} and set(seen) == {c.id for c in claims}
    exact = {**check_levels_exact(setting, claims, EFFORT), **check_dark_exact(setting, claims)}
    assert {f.verdict for f in exact.values()} == {"proved"} and set(exact) == set(seen)


BANKS = family("complete bipartite", {"left": "a", "right": "b"}, 0, {"a": 2, "b": 1}, distance="2")


@pytest.mark.parametrize("name, k, q", [
    ("levels.1.energy", 0, F(2)), ("levels.1.rate", 1, F(1, 2)), ("levels.2.rate", 3, F(-1)),
    ("levels.2.weight", 0, F(2)), ("levels.secular", 0, F(11, 10)), ("levels.dark.1.multiplicity", 0, F(2)),
])
def test_planted_faults_in_layers(name, k, q):
    claims = tuple(map(spoiled(name, k, q), claims_of(BANKS)))
    assert check_levels(BANKS, claims, EFFORT).findings[name].verdict == "refuted"
    exact = {**check_levels_exact(BANKS, claims, EFFORT), **check_dark_exact(BANKS, claims)}
    assert name not in exact if "dark" in name else exact[name].verdict == "refuted"


@pytest.mark.parametrize("name, k, q", [
    ("levels.k.energy", 0, F(2)), ("levels.k.energy", 2, F(-1)), ("levels.k.rate", 1, F(1, 2)),
    ("levels.k.rate", 3, F(3, 2)), ("levels.k.weight", 0, F(2)), ("levels.dark.k.energy", 0, F(2)),
    ("levels.dark.k.multiplicity", 0, F(2)),
])
def test_planted_faults(name, k, q):
    claims = tuple(map(spoiled(name, k, q), claims_of(ODD)))
    assert check_levels_every(ODD, claims, EFFORT)[name].verdict == "refuted"
    assert check_levels(ODD, claims, EFFORT).findings[name].verdict == "refuted"


def test_a_ring_of_three_is_kept_out_of_the_fourth_order():
    """Its triangle adds to <d|H^3|d>: without the assumption nothing is proved, and three sites refute."""
    ring = family("ring", {"sites": "N"}, 0, {"N": 3}, known=("g", "phi"), flux="phi")
    claims = claims_of(ring, 5)
    assert {c.id for c in claims if c.assume} == {"levels.k.energy", "levels.k.rate", "levels.secular"}
    bare = tuple(changed(c, assume=()) for c in claims)
    assert set(check_levels_every(ring, bare, EFFORT)) == {"levels.k.multiplicity"}
    three = changed(ring, assume=(Relation(parse("N"), "=", number(3)),))
    seen = check_levels(three, bare, EFFORT).findings
    assert seen["levels.k.rate"].verdict == seen["levels.secular"].verdict == "refuted"


def test_an_energy_one_order_further_is_not_taken_as_known():
    """tau^6 of an energy is beyond what the exact road demands: no proof, and the measured road refutes."""
    wanted = next(c for c in claims_of(ODD, 5) if c.id == "levels.k.energy")
    far = Kind("order", "up to O(tau^8), for every L", 8, every="L")
    claim = changed(wanted, kind=far, value=changed(wanted.value, remainder=8))
    assert check_levels_every(ODD, (claim,), EFFORT) == {}
    assert check_levels(ODD, (claim,), EFFORT).findings["levels.k.energy"].verdict == "refuted"


def own(formula, holds="up to O(tau^3), for every L", order=3):
    kind = Kind("order", holds, order, every="L")
    return Claim("claim.mine", "levels", Quantity("decay rate", (("level", "k"),)), parse(formula), kind, origin="user")


@pytest.mark.parametrize("formula, verdict", [
    ("4*g^2*tau*sin(pi*k/(L+1))^2/(L+1)", "proved"),
    ("2*g^2*tau*(1 - cos(2*pi*k/(L+1)))/(L+1)", "proved"),
    ("4*g^2*tau*sin(pi*k/(L+1))^2/L", "refuted"),
    ("4*g^2*tau*sin(pi*k/L)^2/(L+1)", "refuted"),
])
def test_own_rates_for_every_size(formula, verdict):
    found = check_levels_every(ODD, (own(formula),), EFFORT)
    assert found["claim.mine"].verdict == verdict
    measured = check_levels(ODD, (own(formula),), EFFORT).findings["claim.mine"].verdict
    assert measured == {"proved": "agrees"}.get(verdict, verdict)


def test_without_for_every_no_proof_is_tried():
    claim = changed(own("4*g^2*tau*sin(pi*k/(L+1))^2/(L+1)"), kind=Kind("order", "up to O(tau^3)", 3))
    assert check_levels_every(ODD, (claim,), EFFORT) == {}


@pytest.mark.parametrize("L", range(2, 13))
def test_chain_at_its_centre_from_two_to_twelve(L):
    """The rate at each size, 30 digits, by the measured road."""
    from derive.problem.sized import sized

    setting = sized(ODD, {"L": number(L), "j": number(1)})
    claim = Claim(
        "claim.mine", "levels", Quantity("decay rate", (("level", "k"),)),
        replace(parse("4*g^2*tau*sin(pi*k/(L+1))^2/(L+1)"), {"L": number(L)}), Kind("order", "up to O(tau^3)", 3),
        origin="user",
    )
    finding = check_levels(setting, (claim,), Check(samples=1)).findings["claim.mine"]
    assert finding.verdict == "agrees" and finding.digits >= 30
