"""Gamma intervals of any shape: the powers (1 - i Delta tau/s)^(-s), one a gap Delta, as complex letters.

The average of exp(i Delta t) over a gamma law of mean tau and shape s is x = (1 - i Delta tau/s)^(-s), the principal
power (the base has real part 1).  Moments are rational in the x of all gaps of seen energies and in their conjugates,
whatever the shape; so each x stands as a letter of its own, conj(x) being that of -Delta, and is put in at the end.
What holds for letters holds for what they stand for.  Derived here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from derive.algebra.levels import Levels
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, ONE, Formula, call, letter, number, power, rebuild, times
from derive.problem.setting import Domain, Letter, Setting

COMPLEX = Domain("complex", "complex")
NAME = "a power {}"  # no letter of a user's can be called so


def different_gaps(levels: Levels) -> int:
    """How many different gaps there are between energies, apart from their signs."""
    energies = [levels.field.element(e) for e in levels.energies]
    found: list[Element] = []
    for k, e in enumerate(energies):
        for f in energies[:k]:
            if not any(e - f in (known, -known) for known in found):
                found.append(e - f)
    return len(found)


class Powers:
    """x by gap: letters that hold the places, and what they stand for."""

    def __init__(self, setting: Setting, count: int):
        """Letters for `count` different gaps."""
        self.mean = setting.interval.length
        self.shape = setting.interval.shape or ONE
        self.names = [NAME.format(k) for k in range(count)]
        self.setting = replace(setting, letters=(*setting.letters, *(Letter(n, COMPLEX) for n in self.names)))
        self.letters = [letter(n) for n in self.names]
        self.gaps: list[Element] = []

    def of(self, field: Field, gap: Element) -> Element:
        """x for the gap, or the conjugate of that for minus the gap."""
        for known, held in zip(self.gaps, self.letters, strict=False):
            if gap == known:
                return field.element(held)
            if gap == -known:
                return field.conjugate(field.element(held))
        self.gaps.append(gap)
        return field.element(self.letters[len(self.gaps) - 1])

    def put_in(self, f: Formula) -> Formula:
        """The powers in place of their letters, those of minus a gap in place of the conjugates."""
        values: dict[Formula, Formula] = {}
        for held, gap in zip(self.letters, self.gaps, strict=False):
            values[held], values[call("conj", held)] = self._power(gap), self._power(-gap)
        return _exchanged(f, values)

    def _power(self, gap: Element) -> Formula:
        """(1 - i gap tau/s)^(-s)."""
        turn = times(number(-1), I_UNIT, gap.field.formula(gap), self.mean)
        return power(ONE + turn / self.shape, -self.shape)


def _exchanged(f: Formula, values: Mapping[Formula, Formula]) -> Formula:
    """f with whole parts exchanged, outermost first."""
    if f in values:
        return values[f]
    if f.head == "power" and f.args[0] in values:  # one power of a power
        inner = values[f.args[0]]
        return power(inner.args[0], times(inner.args[1], f.args[1]))
    return rebuild(f, tuple(_exchanged(a, values) if isinstance(a, Formula) else a for a in f.args))
