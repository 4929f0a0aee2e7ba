"""The experiment against claimed survivals: right laws pass, planted faults are refuted."""

from dataclasses import replace as changed

import pytest

from derive.checks.survival.road import check_survival, check_survival_exactly
from derive.derivations.survival.topic import derive_survival
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim
from tests.checks.test_levels_missed import missing
from tests.settings_of_graphs import cluster, family, watched

EFFORT = Check(samples=1)
STAR = watched("star", {"lengths": (1, 2, 3)}, 0, start=4)
PAIR = watched("chain", {"sites": 2}, 0, start=1)


def found(setting, claims):
    return check_survival(setting, claims, EFFORT).findings | check_survival_exactly(setting, claims, EFFORT).findings


@pytest.mark.parametrize("setting", [
    STAR, PAIR, watched("chain", {"sites": 4}, 0, start=0),
    family("chain", {"sites": "2*L + 1"}, "centre", {"L": 2, "j": 1}, distance="j", assume=[("j", "<=", "L")]),
    family("complete", {"sites": "N"}, 0, {"N": 3}, distance="1"),
])
def test_derived_laws_agree(setting):
    claims = [c for c in derive_survival(setting, Wish("survival", (("order", 1),))).claims if "regimes" not in c.id]
    findings = found(setting, claims)
    assert set(findings) == {c.id for c in claims} and {f.verdict for f in findings.values()} == {"agrees"}


@pytest.mark.parametrize("setting", [
    watched("chain", {"sites": 4}, 0, start=1), watched("chain", {"sites": 3}, 0, ("g", "Delta"), energies={1: "Delta"},
                                                        start=2),
])
def test_interference_of_order_tau(setting):
    """With order 2 the errors fall with tau^2; the same law without its sines does not."""
    claims = derive_survival(setting, Wish("survival", (("order", 2),))).claims
    findings = found(setting, claims)
    assert {f.verdict for f in findings.values()} == {"agrees"}
    plain = derive_survival(setting, Wish("survival", (("order", 1),))).claims
    bare = changed(next(c for c in plain if c.id == "survival.small_tau"),
                   kind=kind_of("up to O(tau^2) at fixed t*tau"))
    assert found(setting, (bare,))[bare.id].verdict == "refuted"


RING = watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")], start=2)
FOUR = watched("chain", {"sites": 4}, 0, start={0: "3/5", 1: "4*i/5"})
FURTHER = [
    watched("chain", {"sites": 7}, [2, 5], start=3), RING, FOUR, missing(FOUR, "3/4"),
    missing(watched("chain", {"sites": 7}, [2, 5], start=3), "1/2"),
    missing(watched("chain", {"sites": 3}, 0, start=2), "eta"),
    watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")], start={2: "3/5", 3: "4*i/5"}),
    watched("chain", {"sites": 9}, 0, start=4),  # roots of a quartic, by pairs
    watched("chain", {"sites": 8}, [0, 3], start={2: "3/5", 5: "4*i/5"}),
]


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("setting", FURTHER)
def test_laws_at_higher_rank_below_efficiency_one_and_with_complex_couplings(setting, order):
    claims = derive_survival(setting, Wish("survival", (("order", order),))).claims
    claims = [c for c in claims if "regimes" not in c.id]
    findings = found(setting, claims)
    assert set(findings) == {c.id for c in claims} and {f.verdict for f in findings.values()} == {"agrees"}


@pytest.mark.parametrize("start", [0, {0: "3/5", 3: "4*i/5"}])
@pytest.mark.parametrize("eta", ["1", "3/4"])
def test_returns_to_several_sites(start, eta):
    setting = missing(watched("chain", {"sites": 6}, [0, 3], start=start), eta)
    claims = derive_survival(setting, Wish("survival", (("order", 1),))).claims
    assert {f.verdict for f in found(setting, claims).values()} == {"agrees"}


def test_a_law_that_is_near_its_limit_late_only():
    """Errors fall by 5.5, 4.4, 6.5, 7.3, 7.7, 7.8, 7.9 as tau is halved: 8 in the end."""
    setting = missing(cluster([(0, 1, "-1"), (1, 2, "-i*g"), (2, 3, "-2"), (0, 2, "-2")], [2, 1], start=2), "2/3")
    claims = derive_survival(setting, Wish("survival", (("order", 1),))).claims
    assert {f.verdict for f in found(setting, claims).values()} == {"agrees"}


@pytest.mark.parametrize("setting", [FURTHER[0], FURTHER[1], FURTHER[3]])
@pytest.mark.parametrize("old, new", [
    ("tau*t", "2*tau*t"), (" + ", " - "), ("sin(", "cos("), ("tau*sin(", "2*tau*sin("),
])
def test_planted_faults_at_order_two(setting, old, new):
    claim = derive_survival(setting, Wish("survival", (("order", 2),))).claims[0]
    wrong = text(claim.value).replace(old, new)
    assert wrong != text(claim.value)
    assert found(setting, (changed(claim, value=parse(wrong)),))[claim.id].verdict == "refuted"


def test_a_perfect_detectors_law_is_refuted_below_efficiency_one():
    law = next(c for c in derive_survival(STAR, Wish("survival", (("order", 1),))).claims if c.id.endswith("small_tau"))
    assert found(missing(STAR, "3/4"), (law,))[law.id].verdict == "refuted"


def own(formula, holds="exactly", about="survival probability"):
    return Claim("claim.mine", "survival", Quantity(about), parse(formula), kind_of(holds), origin="user")


@pytest.mark.parametrize("setting, formula, holds, verdict", [
    (PAIR, "cos(g*tau)^(2*n)", "exactly", "agrees"),  # by hand
    (PAIR, "cos(g*t/n)^(2*n)", "exactly", "agrees"),
    (PAIR, "cos(g*tau)^n", "exactly", "refuted"),
    (PAIR, "exp(-g^2*tau*t)", "exactly", "refuted"),  # true only to the next order
    (PAIR, "exp(-g^2*tau*t)", "up to O(tau^2) at fixed t*tau", "agrees"),
    (PAIR, "exp(-g^2*tau*t)", "up to O(tau^3) at fixed t*tau", "refuted"),
    (PAIR, "exp(-2*g^2*tau*t)", "up to O(tau) at fixed t*tau", "refuted"),
    (STAR, "1/3 + exp(-g^2*tau*t/4)/2 + exp(-3*g^2*tau*t/2)/6", "up to O(tau) at fixed t*tau", "agrees"),
    (STAR, "1/3 + exp(-g^2*tau*t/4)/2 + exp(-3*g^2*tau*t/2)/6", "up to O(tau^2) at fixed t*tau", "refuted"),
    (STAR, "1/3 + exp(-g^2*tau*t/4)/6 + exp(-3*g^2*tau*t/2)/2", "up to O(tau) at fixed t*tau", "refuted"),
    (STAR, "1/2 + exp(-g^2*tau*t/4)/2", "up to O(tau) at fixed t*tau", "refuted"),
])
def test_claims_of_ones_own(setting, formula, holds, verdict):
    assert found(setting, (own(formula, holds),))["claim.mine"].verdict == verdict


@pytest.mark.parametrize("factor, verdict", [("1", "agrees"), ("2", "refuted"), ("(-1)", "refuted")])
def test_densities(factor, verdict):
    formula = f"{factor}*(g^2*tau*exp(-g^2*tau*t/4)/8 + g^2*tau*exp(-3*g^2*tau*t/2)/4)"
    claim = own(formula, "up to O(tau^2) at fixed t*tau", "survival density")
    assert found(STAR, (claim,))["claim.mine"].verdict == verdict


def test_without_fixed_time_it_is_not_compared():
    assert found(STAR, (own("1", "up to O(tau)"),))["claim.mine"].verdict == "untested"


def test_the_figure_has_both_curves():
    claims = derive_survival(STAR, Wish("survival", (("order", 1),))).claims
    (plot,) = check_survival(STAR, claims, EFFORT).plots
    assert [c.role for c in plot.curves] == ["derived", "measured"] and len(plot.curves[0].x) > 20
    assert changed(plot, says="") and plot.x_scale == plot.y_scale == "log"
