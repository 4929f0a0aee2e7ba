"""Classical walks, measured: derived laws pass, planted faults are refuted."""

from dataclasses import replace as changed

import pytest

from derive.checks.classical.road import check_classical, check_classical_late
from derive.derivations.classical.topic import derive_classical
from derive.formula.grammar import parse
from derive.formula.tree import times
from derive.problem.setting import Check, Wish
from tests.settings_of_graphs import family, watched

EFFORT = Check(samples=2)
SETTINGS = [
    watched("star", {"lengths": (1, 2, 2)}, 0, bonds=[(0, 1, "-2*g")], start=3),
    watched("ring", {"sites": 5}, 0, start=2),
    family("chain", {"sites": "2*L + 1"}, "centre", {"L": 2, "j": 1}, distance="j", assume=[("j", "<=", "L")]),
    family("ring", {"sites": "N"}, 0, {"N": 3, "j": 1}, distance="j", assume=[("2*j", "<=", "N")]),
]


def claims_of(setting, walk):
    return derive_classical(setting, Wish("classical", (("walk", walk),))).claims


def found(setting, claims):
    exactly, late = check_classical(setting, claims, EFFORT), check_classical_late(setting, claims, EFFORT)
    return exactly.findings | late.findings


@pytest.mark.parametrize("walk", ["continuous", "discrete"])
@pytest.mark.parametrize("setting", SETTINGS)
def test_derived_walks_agree(setting, walk):
    claims = claims_of(setting, walk)
    findings = found(setting, claims)
    assert set(findings) == {c.id for c in claims} and {f.verdict for f in findings.values()} == {"agrees"}


@pytest.mark.parametrize("walk", ["continuous", "discrete"])
@pytest.mark.parametrize("part", ["survival", "density", "mean", "law"])
def test_planted_faults(walk, part):
    """Each formula a hundredth too large."""
    name = f"classical.{part}"
    claims = tuple(changed(c, value=times(parse("101/100"), c.value)) if c.id == name else c
                   for c in claims_of(SETTINGS[1], walk))
    assert found(SETTINGS[1], claims)[name].verdict == "refuted"


def test_the_figure_shows_both_walks():
    (plot,) = check_classical_late(SETTINGS[0], claims_of(SETTINGS[0], "continuous"), EFFORT).plots
    assert [c.label.split(",")[0] for c in plot.curves] == ["classical walk", "quantum"]
