"""Which roads check a topic.  A new topic adds one line here.

A road takes the setting, the claims and the effort, and recomputes the quantity from the setting; it never sees how
a claim was derived.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from derive.checks.absorber.line import check_line_enclosed, check_line_trend
from derive.checks.absorber.road import check_absorber_exact, check_absorber_trend
from derive.checks.asymptotics.bound import check_bound
from derive.checks.asymptotics.density import check_density, is_density
from derive.checks.asymptotics.finite import check_late_finite
from derive.checks.asymptotics.finite_plot import tail_plot
from derive.checks.asymptotics.poles import check_late_poles
from derive.checks.asymptotics.rates import check_late_rates
from derive.checks.asymptotics.road import check_late
from derive.checks.asymptotics.survival import check_late_survival
from derive.checks.asymptotics.total import check_total
from derive.checks.classical.road import check_classical, check_classical_late
from derive.checks.detection.road import check_detection
from derive.checks.detection.splitting import check_splitting
from derive.checks.exceptional.road import check_divergence, check_exceptional, check_exceptional_exact
from derive.checks.exceptional.values import check_values_enclosed, check_values_exact
from derive.checks.generator.coefficient import check_coefficient
from derive.checks.generator.exact import check_exact
from derive.checks.generator.experiment import check_order
from derive.checks.generator.interval_note import note_interval
from derive.checks.generator.slow import check_slow_coefficient, check_slow_order
from derive.checks.generator.weak import check_weak_coefficient, check_weak_exact, check_weak_order
from derive.checks.generator.words import check_words
from derive.checks.generator.words_exact import check_words_exact
from derive.checks.levels.arms_every import check_arms_every
from derive.checks.levels.block import check_levels_block
from derive.checks.levels.dark_exact import check_dark_exact
from derive.checks.levels.every import check_levels_every
from derive.checks.levels.exact import check_levels_exact
from derive.checks.levels.road import check_levels
from derive.checks.moments.plot import plot_moments
from derive.checks.moments.road import check_moments
from derive.checks.renewal.road import check_renewal, check_renewal_exact
from derive.checks.seen import Seen
from derive.checks.summed import check_summed
from derive.checks.survival.limit import check_survival_limit
from derive.checks.survival.regimes import check_crossovers, check_regimes
from derive.checks.survival.road import check_survival, check_survival_exactly
from derive.checks.validity.majorant import check_majorant
from derive.checks.validity.radius import check_radius_trend
from derive.checks.validity.road import check_validity
from derive.checks.values import check_values
from derive.formula.tree import ONE
from derive.problem.efficiency import vanishes_with_interval
from derive.problem.setting import Check, Lattice, Setting
from derive.record.said import Claim

Claims = tuple[Claim, ...]
Road = Callable[[Setting, Claims, Check], Seen]


def _is_weak(setting: Setting) -> bool:
    return vanishes_with_interval(setting.detectors[0].efficiency, setting.domains())


def _exact(setting: Setting, claims: Claims, effort: Check) -> Seen:
    if _is_weak(setting):
        return Seen(check_weak_exact(setting, claims, effort))
    return Seen({**check_exact(setting, claims, effort), **check_words_exact(setting, claims, effort)})


def _coefficient(setting: Setting, claims: Claims, effort: Check) -> Seen:
    if _is_weak(setting):
        return check_weak_coefficient(setting, claims, effort)
    if setting.detectors[0].efficiency != ONE:
        return check_slow_coefficient(setting, claims, effort)
    return Seen({**check_coefficient(setting, claims, effort), **check_words(claims, effort)})


def _order(setting: Setting, claims: Claims, effort: Check) -> Seen:
    for claim in claims:
        if claim.id == "generator.truncated":
            seen = _falls(setting, claim, effort)
            return replace(seen, notes=(*seen.notes, *note_interval(setting, effort)))
    return Seen()


def _falls(setting: Setting, claim: Claim, effort: Check) -> Seen:
    if _is_weak(setting):
        return check_weak_order(setting, claim, effort)
    if setting.detectors[0].efficiency != ONE:
        return check_slow_order(setting, claim, effort)
    return check_order(setting, claim, effort)


def _moments(setting: Setting, claims: Claims, effort: Check) -> Seen:
    return Seen(check_moments(setting, claims, effort), plots=plot_moments(setting, claims, effort))


def _detection(setting: Setting, claims: Claims, effort: Check) -> Seen:
    if isinstance(setting.space, Lattice):
        return Seen()
    return Seen({**check_detection(setting, claims, effort), **check_splitting(setting, claims, effort)})


def _summed(setting: Setting, claims: Claims, effort: Check) -> Seen:
    return Seen() if isinstance(setting.space, Lattice) else check_summed(setting, claims, effort)


def _absorber_exact(setting: Setting, claims: Claims, effort: Check) -> Seen:
    return Seen() if isinstance(setting.space, Lattice) else check_absorber_exact(setting, claims, effort)


def _absorber_trend(setting: Setting, claims: Claims, effort: Check) -> Seen:
    return (check_line_trend if isinstance(setting.space, Lattice) else check_absorber_trend)(setting, claims, effort)


def _levels_exact(setting: Setting, claims: Claims, effort: Check) -> Seen:
    known = {**check_levels_exact(setting, claims, effort), **check_levels_block(setting, claims, effort)}
    known |= {**check_levels_every(setting, claims, effort), **check_arms_every(setting, claims, effort)}
    return Seen({**known, **check_dark_exact(setting, claims)})


def _survival_exactly(setting: Setting, claims: Claims, effort: Check) -> Seen:
    seen = check_survival_exactly(setting, claims, effort)
    return Seen({**seen.findings, **check_crossovers(setting, claims, effort)}, plots=seen.plots)


def _survival_trend(setting: Setting, claims: Claims, effort: Check) -> Seen:
    if isinstance(setting.space, Lattice):
        return check_late_survival(setting, claims, effort)
    seen, late = check_survival(setting, claims, effort), check_survival_limit(setting, claims, effort)
    return Seen({**seen.findings, **late.findings, **check_regimes(setting, claims, effort)}, plots=seen.plots)


def _late(setting: Setting, claims: Claims, effort: Check) -> Seen:
    if is_density(setting):
        return check_density(setting, claims, effort)
    if isinstance(setting.space, Lattice):
        seen, left = check_late(setting, claims, effort), check_late_survival(setting, claims, effort)
        return replace(seen, findings={**seen.findings, **left.findings})
    laws, rates = check_late_finite(setting, claims, effort), check_late_rates(setting, claims, effort)
    return Seen({**laws.findings, **rates.findings}, plots=tail_plot(setting, claims, effort))


def _late_enclosed(setting: Setting, claims: Claims, effort: Check) -> Seen:
    poles, asked = check_late_poles(setting, claims, effort), check_renewal(setting, claims, effort)
    left, bound = check_survival_exactly(setting, claims, effort), check_bound(setting, claims, effort)
    findings = {**poles.findings, **asked.findings, **left.findings, **bound.findings}
    return Seen(findings, {**poles.numbers, **asked.numbers}, values=poles.values)


def _exceptional_exact(setting: Setting, claims: Claims, effort: Check) -> Seen:
    found = check_exceptional_exact(setting, claims, effort).findings
    return Seen({**found, **check_values_exact(setting, claims, effort).findings})


def _exceptional(setting: Setting, claims: Claims, effort: Check) -> Seen:
    seen, values = check_exceptional(setting, claims, effort), check_values_enclosed(setting, claims, effort)
    return Seen({**seen.findings, **values.findings}, {**seen.numbers, **values.numbers})


PUBLISHED = "published"
"""Printed numbers instead of a formula, whatever they are about."""

ROADS: dict[str, dict[str, Road]] = {
    PUBLISHED: {"enclosure": check_values},
    "generator": {"exact": _exact, "coefficient": _coefficient, "trend": _order},
    "absorber": {"exact": _absorber_exact, "enclosure": check_line_enclosed, "trend": _absorber_trend},
    "levels": {"exact": _levels_exact, "enclosure": check_levels},
    "validity": {"enclosure": check_validity, "coefficient": check_majorant, "trend": check_radius_trend},
    "survival": {"enclosure": _survival_exactly, "trend": _survival_trend},
    "classical": {"enclosure": check_classical, "trend": check_classical_late},
    "detection": {"exact": _detection, "enclosure": _summed, "trend": check_total},
    "exceptional": {
        "exact": _exceptional_exact,
        "enclosure": _exceptional,
        "trend": check_divergence,
    },
    "moments": {"exact": _moments, "enclosure": check_summed},
    "asymptotics": {"enclosure": _late_enclosed, "trend": _late},
    "renewal": {"exact": check_renewal_exact, "enclosure": check_renewal, "trend": _late},
}
