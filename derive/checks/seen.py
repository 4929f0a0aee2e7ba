"""What a road brings back: findings by claim, and whatever numbers, figures and notes it made on the way."""

from __future__ import annotations

from dataclasses import dataclass, field

from derive.record.said import AtAsk, Claim, Finding, Number, Plot, Prose, Value


@dataclass(frozen=True)
class Seen:
    """Everything one road saw of one topic.  Plain records: it crosses process borders."""

    findings: dict[str, Finding] = field(default_factory=dict)
    numbers: dict[str, tuple[Number, ...]] = field(default_factory=dict)
    plots: tuple[Plot, ...] = ()
    notes: tuple[Prose, ...] = ()
    values: dict[str, Value] = field(default_factory=dict)
    """For an entry whose derivation is an equation: the value that this road certified, by claim id."""
    claims: tuple[Claim, ...] = ()
    """Entries of their own: numbers that were asked for and for which no formula stands."""
    rows: tuple[AtAsk, ...] = ()
    """Laws and measurements side by side, at the asks and times that were asked for."""
