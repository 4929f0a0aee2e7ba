"""Road "enclosure" for the topic `validity`: radius, bounds and intervals together, since the figure shows them all."""

from __future__ import annotations

from collections.abc import Sequence

from derive.checks.seen import Seen
from derive.checks.validity.bounds import bound_figure, check_bounds
from derive.checks.validity.radius import check_radius
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Number


def check_validity(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    radius, bounds = check_radius(setting, claims, effort), check_bounds(setting, claims, effort)
    known = radius.values.get("validity.radius")
    figure = bound_figure(setting, claims, effort, known if isinstance(known, Number) else None)
    return Seen(
        {**radius.findings, **bounds.findings},
        {**radius.numbers, **bounds.numbers},
        figure,
        values={**radius.values, **bounds.values},
    )
