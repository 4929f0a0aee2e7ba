"""Absorbers beside large graphs: measured near the detector; right ones agree, planted wrong ones are refuted there.

The parameters of the plain absorber, Gamma tau = 2, and its maps are the published ones (Phys. Rev. A 102, 012218
(2020), from memory); what a cut keeps is counted by hand.
"""

from __future__ import annotations

from dataclasses import replace

import pytest

from derive.checks.absorber.road import check_absorber_trend
from derive.checks.neighbourhood import cut_near
from derive.formula.grammar import parse
from derive.formula.tree import ONE, times
from derive.problem.setting import Check, Interval
from derive.record.said import Matrix
from tests.absorber_cases import altered, derived, own
from tests.settings_of_graphs import watched

QUICK = Check(samples=1)
ROW = watched("chain", {"sites": 90}, 40)


def judged(claim, setting=ROW):
    return check_absorber_trend(setting, (claim,), QUICK).findings[claim.id]


def test_what_is_kept() -> None:
    """Eleven steps to both sides of site 40 of a chain are 23 sites; twelve would be 25, too many."""
    cut = cut_near(ROW, 24, 4)
    assert cut is not None and cut.sites == tuple(range(29, 52)) and cut.steps == 11
    assert cut.setting.detectors[0].vectors == (((11, ONE),),) and cut.setting.space.size == 23
    assert cut_near(watched("star", {"arms": 40, "length": 1}, 0), 24, 4) is None


@pytest.mark.parametrize(("value", "verdict"), [("2/tau", "agrees"), ("4/tau", "refuted"), ("2/tau + g", "refuted")])
def test_strengths(value: str, verdict: str) -> None:
    found = judged(own("absorber strength", parse(value), absorber="plain"))
    assert found.verdict == verdict and "23 sites within 11 steps" in found.evidence


def test_maps() -> None:
    """The map on the left as derived, with one entry doubled, and with an entry far from the detector."""
    claims = derived(ROW)
    right = claims["dressed.map.left"]
    assert judged(right).verdict == "agrees"
    wrong = altered(right, lambda x, y, f: times(parse("2"), f) if (x, y) == (39, 41) else f)
    assert judged(wrong).verdict == "refuted"
    far = replace(right, value=Matrix(90, (), ((0, ((1, ONE),)),)))
    assert judged(far).verdict == "untested" and "site 0" in judged(far).evidence


@pytest.mark.parametrize(("value", "verdict"), [("tau/2", "agrees"), ("tau", "refuted")])
def test_random_intervals(value: str, verdict: str) -> None:
    """Exponential intervals of mean tau: dephasing (m2 - m1^2)/(2 m1) = tau/2, by hand, on twelve sites."""
    row = replace(watched("chain", {"sites": 12}, 0), interval=Interval(law="exponential"))
    found = judged(own("averaged dephasing", parse(value)), row)
    assert found.verdict == verdict and "8 sites within 7 steps" in found.evidence
