"""First and last rate of survival on explicit graphs: numpy's eigenvectors agree, planted faults are refuted."""

from dataclasses import replace as changed

import numpy as np
import pytest

from derive.checks.survival.regimes import check_crossovers, check_regimes
from derive.derivations.survival.topic import derive_survival
from derive.formula.grammar import parse
from derive.formula.tree import times
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from tests.settings_of_graphs import cluster, watched

EFFORT = Check(samples=1)
BONDS = [(0, 1, -1), (1, 2, -2), (2, 3, -1), (3, 0, -1), (2, 4, -1), (4, 5, -3), (5, 6, -1)]
UNEVEN = cluster([(x, y, str(f)) for x, y, f in BONDS], 0, (), start=4)
NINE = watched("chain", {"sites": 9}, 4, start=2)
IDS = [f"survival.regimes.{part}" for part in ("1.law", "1.to", "2.law", "2.from")]


def claims_of(setting):
    claims = derive_survival(setting, Wish("survival", (("order", 1),))).claims
    return [c for c in claims if "regimes" in c.id]


def found(setting, claims):
    return check_regimes(setting, claims, EFFORT) | check_crossovers(setting, claims, EFFORT)


@pytest.mark.parametrize("setting", [UNEVEN, NINE, watched("star", {"lengths": (1, 2, 3)}, 0, start=4)])
def test_derived_rates_agree(setting):
    claims = claims_of(setting)
    findings = found(setting, claims)
    assert [c.id for c in claims] == IDS
    assert {name: f.verdict for name, f in findings.items()} == dict.fromkeys(IDS, "agrees")


@pytest.mark.parametrize("name", IDS)
@pytest.mark.parametrize("setting", [UNEVEN, NINE])
def test_planted_faults(setting, name):
    """The whole law, or time, a third too large."""
    claims = [changed(c, value=times(parse("4/3"), c.value)) if c.id == name else c for c in claims_of(setting)]
    assert found(setting, claims)[name].verdict == "refuted"


@pytest.mark.parametrize("name, formula", [
    ("survival.regimes.1.law", "1/2 + exp(-tau*t*g^2/2)/2"),  # the mean rate is 2/5
    ("survival.regimes.2.law", "1/2 + (5 + sqrt(5))/20*exp(-g^2*tau*t*(5 + sqrt(5))/10)"),  # the fastest rate
    ("survival.regimes.2.law", "1/2 + exp(-g^2*tau*t*(5 - sqrt(5))/10)/2"),  # the whole weight
])
def test_a_wrong_rate_or_weight_is_refuted(name, formula):
    claims = [changed(c, value=parse(formula)) if c.id == name else c for c in claims_of(NINE)]
    assert found(NINE, claims)[name].verdict == "refuted"


def test_against_eigenvectors():
    """numpy.linalg.eigh of H without the watched site: mean and slowest rate at tau = 1.  Of the levels of one energy
    the detector sees one state, along b = (projection) H|d>: rate |b|^2, weight |<b|psi>|^2/|b|^2."""
    H = np.zeros((7, 7))
    for x, y, f in BONDS:
        H[x, y] = H[y, x] = f
    energies, vectors = np.linalg.eigh(H[1:, 1:])
    weights, rates = [], []
    for energy in sorted(set(np.round(energies, 9))):
        level = vectors[:, abs(energies - energy) < 1e-8]
        b = level @ (level.T @ H[1:, 0])
        if b @ b > 1e-12:
            rates.append(b @ b)
            weights.append(b[3] ** 2 / (b @ b))
    mean = np.dot(weights, rates) / sum(weights)
    least = min(r for w, r in zip(weights, rates, strict=True) if w > 1e-12)
    at = Values.at({"tau": parse("1")})
    said = {c.id: c.value for c in claims_of(UNEVEN)}
    assert abs(float(enclose(said["survival.regimes.1.to"], at).real) * mean - 1) < 1e-9
    assert abs(float(enclose(said["survival.regimes.2.from"], at).real) * least - 1) < 1e-9


@pytest.mark.parametrize("setting", [
    watched("ring", {"sites": 6}, 0, start=2),  # one rate only
    watched("chain", {"sites": 3}, 0, start=1),  # two levels, one rate
    cluster([(0, 1, "-g"), (1, 2, "-kappa")], 0, ("g", "kappa"), start=1),  # one rate
    cluster([(0, 1, "-g"), (1, 2, "-kappa"), (2, 3, "-g")], 0, ("g", "kappa"), start=2),  # letters decide
    watched("chain", {"sites": 5}, 0, start=0),  # on the detector
])
def test_no_regimes_are_told(setting):
    assert claims_of(setting) == []


def test_a_slow_level_that_holds_little():
    """The last law is compared only once the slowest level outweighs the others; it starts with 1/4000 here."""
    bonds = [(0, 1, "-1"), (1, 2, "-1/5"), (2, 3, "-1/3")]
    setting = cluster(bonds, 0, (), {3: "2"}, start=1)
    claims = claims_of(setting)
    assert {f.verdict for f in found(setting, claims).values()} == {"agrees"} and len(claims) == 4


@pytest.mark.parametrize("name, holds", [(IDS[0], "exactly"), (IDS[0], "as t -> infinity"), (IDS[2], "as t -> 0")])
def test_another_limit_is_not_passed(name, holds):
    claims = [changed(c, kind=kind_of(holds)) if c.id == name else c for c in claims_of(NINE)]
    assert found(NINE, claims)[name].verdict == "untested"


def test_what_the_laws_say_is_read_back():
    """The report's words for a limit are a worksheet's words."""
    for claim in claims_of(NINE)[::2]:
        assert changed(kind_of(claim.kind.phrase), phrase=claim.kind.phrase) == claim.kind
