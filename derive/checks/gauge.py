"""Two balls for one number: disjoint, too wide, or in agreement, and to how many digits.

"Narrow" is relative to a scale given with every comparison, because an entry that is zero has no relative accuracy.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

from flint import acb, arb

from derive.numerics.decimals import spoken
from derive.numerics.precision import digits_of, power_of_ten


@dataclass(frozen=True, slots=True)
class Miss:
    """A claimed and a measured ball that have no number in common."""

    what: str
    claimed: acb
    measured: acb

    def text(self) -> str:
        shown, other = spoken(self.claimed), spoken(self.measured)
        digits = 10
        while shown == other and digits < 2000:
            digits *= 2
            shown, other = spoken(self.claimed, digits), spoken(self.measured, digits)
        return f"{self.what}: claimed {shown}, measured {other}"


@dataclass
class Gauge:
    """Comparisons of one claim at one point: those that miss, whether some are too wide, the worst agreement."""

    digits: int
    misses: list[Miss] = field(default_factory=list)
    wide: str = ""
    worst: arb | None = None
    compared: int = 0

    @cached_property
    def goal(self) -> arb:
        return power_of_ten(-self.digits)

    def compare(self, what: str, claimed: acb, measured: acb, scale: arb) -> None:
        """One number by two roads; `scale` is what its digits are counted from."""
        self.compared += 1
        if not claimed.overlaps(measured):
            self.misses.append(Miss(what, claimed, measured))
            return
        gap = (claimed - measured).abs_upper() / scale
        if self.worst is None or not gap < self.worst:
            self.worst = gap
        if not gap < self.goal:
            self.wide = self.wide or f"{what}: balls too wide for {self.digits} digits"

    @property
    def shared(self) -> int | None:
        """Digits that claim and measurement share at the scale; None where nothing but exact zeros was compared."""
        return None if self.worst is None else digits_of(self.worst, arb(1))

    def first_miss(self) -> str:
        """One sentence about the first entry that misses, and how many do."""
        text, others = self.misses[0].text(), len(self.misses) - 1
        if not others:
            return text
        return f"{text}; {others} more {'entries miss' if others > 1 else 'entry misses'}"
