"""Cascades of any length: energies O(tau^(2M+2)), rates O(tau^(2M+3)), proved and measured; wrong ones refuted."""

from __future__ import annotations

from dataclasses import replace

import pytest

from derive.checks.absorber.road import check_absorber_exact, check_absorber_trend
from derive.derivations.absorber.topic import derive_absorber
from derive.formula.text import text
from derive.formula.tree import number, times
from derive.problem.setting import Check, Setting, Wish
from derive.record.said import Claim
from tests.absorber_cases import ETA, altered, detuned, ring

QUICK = Check(samples=1)


def cascade(setting: Setting, sites: int) -> dict[str, Claim]:
    found = derive_absorber(setting, Wish("absorber", (("cascade", sites),))).claims
    return {c.id.removeprefix("absorber."): c for c in found if "cascade" in c.id}


@pytest.mark.parametrize("sites, setting", [(1, detuned()), (3, detuned()), (3, detuned("eta", ETA)), (4, ring("3/4"))],
                         ids=["1", "3", "3 eta", "4"])
def test_orders(sites: int, setting: Setting) -> None:
    claims = cascade(setting, sites)
    assert text(claims["cascade.energy_error"].value) == f"O(tau^{2 * sites + 2})"
    assert text(claims["cascade.rate_error"].value) == f"O(tau^{2 * sites + 3})"
    assert not any("map" in name for name in claims)
    exact = check_absorber_exact(setting, tuple(claims.values()), QUICK).findings
    trend = check_absorber_trend(setting, tuple(claims.values()), QUICK).findings
    assert {(exact[c.id].verdict, trend[c.id].verdict) for c in claims.values()} == {("proved", "agrees")}


def test_one_site_is_the_lossy_ancilla() -> None:
    entries = {(x, y): text(f) for x, y, f in cascade(detuned(), 1)["cascade"].value.entries()}
    assert entries == {(0, 1): "sqrt(12)/tau", (1, 0): "sqrt(12)/tau", (1, 1): "Delta - 6*i/tau"}


def test_a_hop_without_its_moments_is_refuted() -> None:
    """The innermost hop scaled by 99/100: levels fall back to the outer sites' order."""
    claim = cascade(detuned(), 3)["cascade"]
    places = ((2, 3), (3, 2))
    wrong = altered(claim, lambda x, y, f: times(number(99) / 100, f) if (x, y) in places else f)
    exact = check_absorber_exact(detuned(), (wrong,), QUICK).findings[wrong.id]
    trend = check_absorber_trend(detuned(), (wrong,), QUICK).findings[wrong.id]
    assert (exact.verdict, trend.verdict) == ("refuted", "refuted")


def test_a_longer_cascade_s_orders_beside_a_shorter_one_are_refuted() -> None:
    claims = cascade(ring(), 2)
    wrong = replace(claims["cascade.energy_error"], value=cascade(ring(), 3)["cascade.energy_error"].value)
    trend = check_absorber_trend(ring(), (claims["cascade"], wrong), QUICK).findings
    assert trend[wrong.id].verdict == "refuted"


def test_six_sites_are_measured_only() -> None:
    claims = cascade(ring(), 6)
    assert not check_absorber_exact(ring(), (claims["cascade"],), QUICK).findings
    assert check_absorber_trend(ring(), (claims["cascade"],), QUICK).findings["absorber.cascade"].verdict == "agrees"
