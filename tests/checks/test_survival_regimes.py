"""Regimes of survival: derived laws and crossovers pass, planted faults are refuted; limits of single survivals.

Power laws and crossovers for a chain watched at its end agree with an independent set of formulas: bulk (pi a)^(-1/2),
near the ends l^2 a^(-3/2)/sqrt(pi), a = 2 tau t/N, from N/(2 tau) to N^3/(2 pi^2 tau) (made for this project).
"""

from dataclasses import replace as changed

import mpmath as mp
import pytest

from derive.checks.survival.limit import check_survival_limit
from derive.checks.survival.regimes import check_crossovers, check_regimes
from derive.derivations.survival.topic import derive_survival
from derive.formula.grammar import parse
from derive.formula.tree import times
from derive.numerics.evaluate import Values, enclose
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim
from tests.settings_of_graphs import family, watched

EFFORT = Check(samples=1)
ODD = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 2, "j": 1}, distance="j", assume=[("j", "<=", "L")])
END = family("chain", {"sites": "N"}, "end", {"N": 3, "j": 1}, distance="j", assume=[("j", "<", "N")])


def claims_of(setting):
    return derive_survival(setting, Wish("survival", (("order", 1),))).claims


def found(setting, claims):
    return check_regimes(setting, claims, EFFORT) | check_crossovers(setting, claims, EFFORT)


@pytest.mark.parametrize("setting, regimes", [
    (ODD, 3), (END, 3), (family("star", {"arms": "m", "length": "L"}, 0, {"m": 2, "L": 3}, distance="2"), 2)])
def test_derived_regimes_agree(setting, regimes):
    claims = [c for c in claims_of(setting) if "regimes" in c.id]
    findings = found(setting, claims)
    assert set(findings) == {c.id for c in claims} and {f.verdict for f in findings.values()} == {"agrees"}
    assert sum(c.id.endswith(".law") for c in claims) == regimes


@pytest.mark.parametrize("name", ["1.law", "1.from", "1.to", "2.law", "2.to", "3.law", "3.from"])
def test_planted_faults(name):
    """The whole law, or time, a third too large."""
    claims = [changed(c, value=times(parse("4/3"), c.value)) if c.id == f"survival.regimes.{name}" else c
              for c in claims_of(END)]
    assert found(END, claims)[f"survival.regimes.{name}"].verdict == "refuted"


def test_power_laws_in_other_letters():
    """a = 2 tau t/N for hopping 1; l the start's distance."""
    laws = {c.id: c.value for c in claims_of(END)}
    put = {"N": "90", "j": "4", "g": "1", "tau": "1/10", "t": "5000"}
    at = Values.at({k: parse(v) for k, v in put.items()})

    def value(name):
        return mp.mpf(enclose(laws[f"survival.regimes.{name}"], at).real.str(15, radius=False))

    a = mp.mpf(2) / 10 * 5000 / 90
    assert abs(value("1.law") - 1 / mp.sqrt(mp.pi * a)) < 1e-12
    assert abs(value("2.law") - 16 * a ** mp.mpf("-1.5") / mp.sqrt(mp.pi)) < 1e-12
    assert abs(value("1.from") - 90 / (2 * mp.mpf(1) / 10)) < 1e-9
    assert abs(value("3.from") / (mp.mpf(90) ** 3 / (2 * mp.pi**2 / 10)) - 1) < 1e-3


def own(formula, holds):
    return Claim("claim.mine", "survival", Quantity("survival probability"), parse(formula), kind_of(holds),
                 origin="user")


@pytest.mark.parametrize("formula, holds, verdict", [
    ("1/2", "as n -> infinity", "agrees"),  # half is dark by reflection
    ("1/2 + tau^2*exp(-t)", "as t -> infinity", "agrees"),
    ("1/3", "as n -> infinity", "refuted"),
    ("1/2", "as tau -> 0", "untested"),
])
def test_survival_in_a_limit(formula, holds, verdict):
    setting = watched("ring", {"sites": 6}, 0, start=2)
    seen = check_survival_limit(setting, (own(formula, holds),), EFFORT)
    assert seen.findings["claim.mine"].verdict == verdict
