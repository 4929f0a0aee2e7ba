"""What a road brings back: findings by claim, and whatever numbers, figures and notes it made on the way."""

from __future__ import annotations

from dataclasses import dataclass, field

from derive.record.said import Finding, Number, Plot, Prose, Value


@dataclass(frozen=True)
class Seen:
    """Everything one road saw of one topic.  Plain records: it crosses process borders."""

    findings: dict[str, Finding] = field(default_factory=dict)
    numbers: dict[str, tuple[Number, ...]] = field(default_factory=dict)
    plots: tuple[Plot, ...] = ()
    notes: tuple[Prose, ...] = ()
    values: dict[str, Value] = field(default_factory=dict)
    """For an entry whose derivation is an equation: the value that this road certified, by claim id."""
