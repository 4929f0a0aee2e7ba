"""The late-time law written out: reason, lines, what each line earns."""

from __future__ import annotations

from typing import TYPE_CHECKING

from derive.record.said import Step

if TYPE_CHECKING:
    from derive.derivations.asymptotics import Law


def written(law: Law, terms: int) -> tuple[Step, ...]:
    return ()
