"""Levels below efficiency 1: both roads, planted faults, and eigenvalues of the step by mpmath."""

from dataclasses import replace as changed
from fractions import Fraction as F

import mpmath as mp
import pytest

from derive.checks.levels.block import check_levels_block
from derive.checks.levels.exact import check_levels_exact
from derive.checks.levels.road import check_levels
from derive.derivations.levels.topic import derive_levels
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ZERO
from derive.problem.setting import Check, Domain, Letter, Wish
from derive.record.said import Expansion
from tests.checks.test_levels import _scaled
from tests.settings_of_graphs import family, watched

EFFORT = Check(samples=2)
SHARE = Letter("eta", Domain("interval", "in (0, 1]", ZERO, parse("1"), low_open=True))


def missing(setting, eta):
    """The same, clicking with probability eta; a letter is declared."""
    letters = (*setting.letters, SHARE) if eta == "eta" else setting.letters
    return changed(setting, letters=letters, detectors=(changed(setting.detectors[0], efficiency=parse(eta)),))


THREE = watched("chain", {"sites": 3}, 0, start=2)
PAIR = watched("chain", {"sites": 7}, [2, 5])
CASES = [
    missing(THREE, "eta"), missing(watched("chain", {"sites": 6}, 0, start=2), "1/2"), missing(PAIR, "eta"),
    missing(watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")], start=2), "3/4"),
    missing(watched("tree", {"branching": 2, "depth": 3}, [1, 2]), "2/3"),
]


def claims_of(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),))).claims


def exactly(setting, claims):
    return {**check_levels_exact(setting, claims, EFFORT), **check_levels_block(setting, claims, EFFORT)}


@pytest.mark.parametrize("setting", CASES)
def test_right_levels_are_proved(setting):
    claims = claims_of(setting)
    seen, exact = check_levels(setting, claims, EFFORT).findings, exactly(setting, claims)
    assert set(seen) == {c.id for c in claims} and {f.verdict for f in seen.values()} == {"agrees"}
    assert set(exact) == {c.id for c in claims if ".dark." not in c.id}
    assert {f.verdict for f in exact.values()} == {"proved"}


@pytest.mark.parametrize("setting", [CASES[0], CASES[2]])
@pytest.mark.parametrize("name, k, q", [("energy", 2, F(-1)), ("rate", 1, F(2)), ("rate", 3, F(-1))])
def test_each_planted_fault_is_refuted_by_either_road(setting, name, k, q):
    name = f"levels.1.{name}"
    claims = tuple(changed(c, value=_scaled(c.value, k, q)) if c.id == name else c for c in claims_of(setting))
    seen, exact = check_levels(setting, claims, EFFORT).findings, exactly(setting, claims)
    assert seen[name].verdict == exact[name].verdict == "refuted"


@pytest.mark.parametrize("setting", [THREE, PAIR])
def test_levels_of_a_perfect_detector_are_refuted_below_efficiency_one(setting):
    weaker = missing(setting, "3/4")
    seen = check_levels(weaker, claims_of(setting), EFFORT).findings
    assert all(f.verdict == "refuted" for n, f in seen.items() if n.endswith("rate"))


@pytest.mark.parametrize("eta", ["3/4", "1/2", "1"])
def test_the_series_nears_the_steps_eigenvalues(eta):
    """Slow eigenvalues of (1 - (1 - sqrt(1 - eta)) P) exp(-i H tau) by mpmath.eig: the error falls as tau^4."""
    claims = {c.id: c.value for c in claims_of(missing(THREE, eta))}
    errors = []
    for tau in (mp.mpf(1) / 20, mp.mpf(1) / 40):
        with mp.workdps(40):
            H = mp.matrix([[0, -1, 0], [-1, 0, -1], [0, -1, 0]])
            step = mp.expm(-1j * tau * H)
            for x in range(3):
                step[0, x] *= mp.sqrt(1 - mp.mpf(F(eta).numerator) / F(eta).denominator)
            slow = sorted(mp.eig(step, left=False, right=False), key=abs)[1:]
            levels = sorted((1j * mp.log(x) / tau for x in slow), key=lambda e: e.real)
            said = _sum(claims["levels.1.energy"], tau) - 0.5j * _sum(claims["levels.1.rate"], tau)
            errors.append(abs(said - levels[0]))
    assert 14 < errors[0] / errors[1] < 18


def _sum(value: Expansion, tau):
    terms = zip(value.powers, value.terms, strict=True)
    return mp.fsum(mp.mpf(mp.mpmathify(eval_at(t))) * tau**k for k, t in terms)


def eval_at(f):
    """A formula in g = 1 by sympy."""
    import sympy

    return sympy.sympify(text(f).replace("^", "**").replace("g", "1")).evalf(40)


def test_rates_grow_with_coth():
    """Rate tau coth(kappa/2) |V† v|^2, and coth(kappa/2) = 3 at eta = 3/4 (by hand)."""
    perfect, weaker = claims_of(PAIR, 1), claims_of(missing(PAIR, "3/4"), 1)
    rates = [(a, b) for a, b in zip(perfect, weaker, strict=True) if a.id.endswith("rate")]
    pairs = [(a.value.terms[0], b.value.terms[0]) for a, b in rates]
    assert pairs and all(abs(eval_at(b) - 3 * eval_at(a)) < 1e-30 for a, b in pairs)


def test_what_is_not_served_is_one_sentence():
    with pytest.raises(NotCovered, match="does not depend on the interval"):
        claims_of(missing(THREE, "1 - exp(-g*tau)"))
    with pytest.raises(NotCovered, match="size is a letter"):
        claims_of(missing(family("chain", {"sites": "N"}, "end", {"N": 2}), "3/4"))
