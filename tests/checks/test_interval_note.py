"""A note where the worksheet's own interval lies beyond what the series is known to reach, and only there."""

from __future__ import annotations

from dataclasses import replace

import pytest

from derive.checks.generator.interval_note import note_interval
from derive.formula.grammar import parse
from derive.problem.setting import Check, Interval
from tests.strategies import chain


@pytest.mark.parametrize(("length", "notes"), [("3*pi/g", 1), ("1/(100*g)", 0), ("tau", 0)])
def test_the_note_stands_where_it_is_needed(length: str, notes: int) -> None:
    """h is at most 2 g for a chain with hopping g (Gershgorin; textbook)."""
    setting = replace(chain(5, 2), interval=Interval(parse(length)))
    assert len(note_interval(setting, Check(samples=1))) == notes
