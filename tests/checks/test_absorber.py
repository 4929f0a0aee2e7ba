"""Absorbers checked: right ones pass on both roads, planted wrong ones are refuted by each road alone."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
import scipy.linalg

from derive.checks.absorber.road import check_absorber_exact, check_absorber_trend
from derive.checks.absorber.secular import inverse_of_one_minus_exp
from derive.checks.judge import verdict_of
from derive.formula.grammar import parse
from derive.formula.tree import ONE, Formula, negate, number, order, power, times
from derive.problem.setting import Check, Letter, Setting
from derive.record.said import Claim, Finding, Kind, Matrix
from tests.absorber_cases import ETA, altered, derived, detuned, of_efficiency, own, pair, ring
from tests.derivations.test_absorber import _at, at_point, hamiltonian_matrix
from tests.derivations.test_generator import columns
from tests.settings_of_graphs import POSITIVE, watched

QUICK = Check(samples=1)
CHAIN = watched("chain", {"sites": 5}, 2)
NAMES = [f"{name} {eta}" for name in ("detuned", "pair", "ring") for eta in ("1", "3/4", "1/4")]
NAMES += ["detuned eta", "pair 1/3"]


def both(setting: Setting, *claims: Claim) -> dict[str, tuple[Finding | None, Finding]]:
    exact = check_absorber_exact(setting, claims, QUICK).findings
    trend = check_absorber_trend(setting, claims, QUICK).findings
    return {c.id: (exact.get(c.id), trend[c.id]) for c in claims}


def refuted_by_each_road(setting: Setting, claim: Claim, *others: Claim) -> tuple[Finding, Finding]:
    exact, trend = both(setting, claim, *others)[claim.id]
    assert exact is not None
    assert (exact.verdict, trend.verdict) == ("refuted", "refuted"), (exact, trend)
    return exact, trend


@pytest.mark.parametrize("setting", [
    detuned(), detuned("3/4"), detuned("1/4"), pair(), pair("3/4"), pair("1/4"), ring(), ring("3/4"), ring("1/4"),
    detuned("eta", ETA), pair("1/3"),
], ids=NAMES)
def test_everything_derived_is_proved(setting: Setting) -> None:
    """Exact: residuals from sparse matrices; trend: certified eigenvalues and repeated steps in balls."""
    claims = derived(setting).values()
    found = both(setting, *claims)
    verdicts = {name: verdict_of(name, tuple(f for f in pair if f is not None)) for name, pair in found.items()}
    assert set(verdicts.values()) == {"proved"}, verdicts


def test_ratios_per_halving_are_what_the_orders_say() -> None:
    """Within 5 %: 4 and 8, 16 and 8, 16 and 32, 64 and 128 (derived here, confirmed by measurement)."""
    from flint import ctx

    from derive.checks.absorber.runs import Run
    from derive.numerics.points import sample_points

    wanted = {"plain": (4, 8), "dressed": (16, 8), "ancilla": (16, 32), "cascade": (64, 128)}
    for setting in (detuned("1/4"), ring("3/4")):
        with ctx.workprec(320):
            run = Run(setting, sample_points(setting, QUICK)[0])
            for kind, ratios in wanted.items():
                before, after = run.errors(kind, 3), run.errors(kind, 4)
                for a, b, ratio in zip(before, after, ratios, strict=True):
                    assert abs(float((a / b).mid()) / ratio - 1) < 0.05, (kind, a, b)


@pytest.mark.parametrize("name, wrong", [
    ("plain.strength", "1/tau"), ("plain.strength", "4/tau"), ("plain.strength", "2/tau + g"),
    ("dressed.strength", "2/tau"), ("dressed.coupling", "1"), ("dressed.coupling", "sqrt(2)"),
    ("ancilla.coupling", "sqrt(6)/tau"), ("ancilla.loss", "3/tau"),
])
def test_wrong_parameters(name: str, wrong: str) -> None:
    refuted_by_each_road(detuned(), replace(derived(detuned())[name], value=parse(wrong)))


def test_strength_and_loss_of_the_cascade() -> None:
    for about, right, wrong in (("strength", "2/tau", "1/tau"), ("loss", "10/tau", "6/tau")):
        claim = own(f"absorber {about}", parse(right), absorber="cascade")
        exact, trend = both(ring(), claim)[claim.id]
        assert exact is not None and (exact.verdict, trend.verdict) == ("proved", "agrees")
        refuted_by_each_road(ring(), replace(claim, value=parse(wrong)))


def test_perfect_strength_at_an_imperfect_detector() -> None:
    """2/tau whatever the efficiency: the factor is tanh(kappa/2), 1/3 at eta = 3/4."""
    setting = ring("3/4")
    exact, trend = refuted_by_each_road(setting, replace(derived(setting)["plain.strength"], value=parse("2/tau")))
    assert "0.333333 times the claimed value" in trend.evidence


@pytest.mark.parametrize("kind", ["dressed", "ancilla", "cascade"])
@pytest.mark.parametrize("setting", [detuned(), detuned("3/4"), ring("1/4")], ids=["1", "3/4", "1/4"])
def test_map_with_signs_minus_plus(kind: str, setting: Setting) -> None:
    """The right map with its tau^2 term's sign turned: 1 - tau^2 B_0/12 on the left, 1 + tau^2 B_0/12 on the right."""
    right = derived(setting)[f"{kind}.map.right"]
    turned = altered(right, lambda x, y, f: times(number(2), ONE if x == y else number(0)) + negate(f))
    refuted_by_each_road(setting, turned)


def test_no_map_at_all_is_right_to_second_order_only() -> None:
    setting = detuned()
    plain = derived(setting)["plain.map.left"].value
    claim = own("state map", plain, Kind("order", "up to O(tau^2)", 2), absorber="ancilla", side="left")
    exact, trend = both(setting, claim)[claim.id]
    assert exact is not None and (exact.verdict, trend.verdict) == ("proved", "agrees")
    refuted_by_each_road(setting, replace(claim, kind=Kind("order", "up to O(tau^3)", 3)))


def test_ancilla_map_without_the_efficiency_in_it() -> None:
    """tau^3 B_1/24 with coth(kappa/2) left out."""
    setting = detuned("3/4")
    claim = replace(derived(setting)["ancilla.map.left"], value=derived(detuned())["ancilla.map.left"].value)
    refuted_by_each_road(setting, claim)


def test_transposed_map_on_complex_bonds() -> None:
    setting = detuned()
    left = derived(setting)["ancilla.map.left"]
    cells = {(y, x): f for x, y, f in left.value.entries()}
    rows = {x: tuple((b, cells[a, b]) for a, b in sorted(cells) if a == x) for x in {a for a, _ in cells}}
    refuted_by_each_road(setting, replace(left, value=Matrix(7, (), tuple(sorted(rows.items())))))


@pytest.mark.parametrize("setting, factor", [(CHAIN, "4"), (of_efficiency(CHAIN, "3/4"), "16/9")], ids=["1", "3/4"])
def test_return_without_the_factor_is_refuted_with_the_ratio(setting: Setting, factor: str) -> None:
    """4: Phys. Rev. A 102, 012218 (2020); 16/9 at efficiency 3/4: 4/(1 + sqrt(1-eta))^2, derived here."""
    claim = own("return factor", number(1))
    exact, trend = refuted_by_each_road(setting, claim)
    shown = float(trend.evidence.split("the ratio being ")[1].split(";")[0])
    assert shown == pytest.approx(float(parse_number(factor)), rel=1e-3)


def parse_number(words: str) -> float:
    top, _, below = words.partition("/")
    return int(top) / int(below or 1)


def test_one_entry_of_a_map() -> None:
    """Judged inside the derived map: right it passes, with another sign it is refuted."""
    setting = ring()
    whole = derived(setting)["dressed.map.left"]
    right = next(f for x, y, f in whole.value.entries() if (x, y) == (1, 4))
    claim = own("state map", right, whole.kind, absorber="dressed", side="left", entry=(1, 4))
    exact, trend = both(setting, claim, whole)[claim.id]
    assert exact is not None and (exact.verdict, trend.verdict) == ("proved", "agrees")
    refuted_by_each_road(setting, replace(claim, value=negate(right)), whole)
    assert both(setting, claim)[claim.id][1].verdict == "untested"


def test_start_on_the_detector_fed_in_at_face_value() -> None:
    """The plain absorber's own -i tau V/2 in place of -i tau V."""
    setting = detuned()
    found = derived(setting)
    halved = altered(found["ancilla.map.from_detector"], lambda x, y, f: times(parse("1/2"), f))
    refuted_by_each_road(setting, halved, found["ancilla.map.left"])


def test_what_stays_on_the_detector() -> None:
    setting = detuned("3/4")
    found = derived(setting)
    turned = altered(found["ancilla.map.to_detector"], lambda x, y, f: negate(f))
    refuted_by_each_road(setting, turned, found["ancilla.map.left"])


def test_cascade_without_its_moments_falls_back() -> None:
    """b = 12, delta = 0: energies O(tau^4), rates O(tau^5) again."""
    setting = detuned()
    cascade = derived(setting)["cascade"]
    bare = {(1, 2): "sqrt(60)/tau", (2, 1): "sqrt(60)/tau", (1, 1): "Delta - 10*i/tau", (2, 2): "Delta"}
    changed = altered(cascade, lambda x, y, f: parse(bare[x, y]) if (x, y) in bare else f)
    exact, trend = refuted_by_each_road(setting, changed)
    assert "tau^4" in exact.evidence
    assert "falls by 16" in trend.evidence or "falls by 15.9" in trend.evidence


@pytest.mark.parametrize("about, kind, wrong", [
    ("energy error", "plain", 3), ("rate error", "plain", 4), ("energy error", "dressed", 5),
    ("rate error", "dressed", 4), ("energy error", "ancilla", 5), ("rate error", "cascade", 8),
])
def test_an_order_too_high_is_refuted(about: str, kind: str, wrong: int) -> None:
    claim = own(about, order(power(parse("tau"), number(wrong))), absorber=kind)
    exact, trend = both(detuned(), claim)[claim.id]
    assert exact is None
    assert trend.verdict == "refuted"


def test_an_order_too_low_is_true_all_the_same() -> None:
    claim = own("energy error", order(parse("tau")), absorber="ancilla")
    exact, trend = both(detuned(), claim)[claim.id]
    assert exact is not None and (exact.verdict, trend.verdict) == ("proved", "agrees")


def test_weak_measurement_takes_energies_and_rates_together() -> None:
    """kappa = g tau: ratios 4, 4 (plain) and 16, 16 (dressed, ancilla); strengths proved, orders measured."""
    setting = of_efficiency(CHAIN, "1 - exp(-2*gamma*tau)", Letter("gamma", POSITIVE))
    found = both(setting, *derived(setting).values())
    verdicts = {n: verdict_of(n, tuple(f for f in pair if f is not None)) for n, pair in found.items()}
    assert set(verdicts.values()) <= {"proved", "agrees"}
    assert verdicts["absorber.plain.strength"] == "proved"
    faster = own("rate error", order(parse("tau^3")), absorber="plain")
    assert both(setting, faster)[faster.id][1].verdict == "refuted"


@pytest.mark.parametrize("claim, words", [
    (own("state map", ONE, absorber="plain", side="left"), "up to O"),
    (own("energy error", parse("g*tau^2"), absorber="plain"), "O(tau^k)"),
    (own("absorber strength", parse("2/tau"), Kind("order", "up to O(tau)", 1), absorber="plain"), "exactly"),
    (own("absorber loss", parse("2/tau"), absorber="plain"), "no loss"),
    (own("absorber strength", parse("2/tau"), absorber="ancilla"), "no strength"),
    (own("absorber coupling", parse("1"), absorber="cascade"), "matrix"),
])
def test_what_no_road_can_see_is_untested(claim: Claim, words: str) -> None:
    exact, trend = both(CHAIN, claim)[claim.id]
    assert exact is None
    assert trend.verdict == "untested"
    assert words in trend.evidence


def test_coefficients_of_the_step_s_resolvent() -> None:
    """Bernoulli numbers B_n/n! with a sign, DLMF 24.2 (from memory): 1/(e^y - 1) = sum B_n y^(n-1)/n!."""
    import mpmath

    found = inverse_of_one_minus_exp(8)
    for n, c in enumerate(found):
        assert float(-mpmath.bernoulli(n) / mpmath.factorial(n)) == pytest.approx(float(c), abs=1e-15)


def test_a_formula_is_what_a_claim_may_say() -> None:
    assert isinstance(derived(CHAIN)["plain.strength"].value, Formula)


@pytest.mark.parametrize("eta", ["1", "3/4"])
def test_survival_of_a_start_on_both_sides(eta: str) -> None:
    """numpy and scipy: |K^n psi|^2 for psi partly on the detector, against the ancilla fed with R psi_Q + F psi_P and
    read through L and T; the error falls by 16 per halving at fixed t.  At face value it stays off."""
    setting = of_efficiency(watched("chain", {"sites": 4}, 1, (), hopping="-1"), eta)
    found = derived(setting)
    h, d = _at(hamiltonian_matrix(setting), {}), columns(setting)
    p = d @ d.conj().T
    kept = float(1 - Fraction(eta)) ** 0.5
    psi = np.array([0.5, 0.5j, 0.5, -0.5])
    errors, naive = [], []
    for k in range(3):
        tau, n = 0.02 / 2**k, 100 * 2**k
        step = (np.eye(4) - (1 - kept) * p) @ scipy.linalg.expm(-1j * tau * h)
        measured = np.linalg.norm(np.linalg.matrix_power(step, n) @ psi) ** 2
        at = {"tau": tau}
        left, right = (_at(found[f"ancilla.map.{side}"].value, at) for side in ("left", "right"))
        fed = right @ psi + _at(found["ancilla.map.from_detector"].value, at) @ psi
        stays = _at(found["ancilla.map.to_detector"].value, at) if kept else np.zeros((4, 4))
        beside = np.zeros((5, 5), dtype=complex)
        beside[:4, :4] = h
        beside[1, 4] = beside[4, 1] = at_point(found["ancilla.coupling"].value, at)
        beside[4, 4] = -1j * at_point(found["ancilla.loss"].value, at)
        evolved = (np.eye(4) - p) @ scipy.linalg.expm(-1j * beside * tau * n)[:4, :4] @ fed
        ours = np.linalg.norm(left @ evolved) ** 2 + np.linalg.norm(stays @ evolved) ** 2
        errors.append(abs(ours - measured))
        face = scipy.linalg.expm(-1j * beside * tau * n)[:4, :4] @ psi
        naive.append(abs(np.linalg.norm(face) ** 2 - measured))
    assert errors[0] < 1e-4
    assert errors[-1] < errors[0] / 180
    assert naive[-1] > 100 * errors[-1]
