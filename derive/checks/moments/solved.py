"""Moments that a derivation leaves to Stein's equation: the equation solved in balls, to be met by the experiment.

What the derivation states is the equation; `numerics/stein.py` solves it at a point, on what the detectors reach, and
`summed.py` compares that with the experiment summed over all asks, by doubling.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

from flint import acb_mat, arb

from derive.checks.observed import Observed
from derive.checks.powers import stirling
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import TAU, Formula
from derive.numerics.asks import Step, averaged_step, expectation, measured_step
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.frame import hamiltonian, reached_frame
from derive.numerics.stein import Eigenstates, amplitudes, by_levels, form_value, solved, solved_sums
from derive.problem.setting import Finite, Interval, Setting
from derive.record.said import Claim

MOST_SOLVED = 12
"""Dimensions of the linear system, at fixed intervals; at random ones `asks.py` draws the line."""


def is_open(claim: Claim) -> bool:
    """Whether the claim waits for its number."""
    return claim.origin == "derived" and isinstance(claim.value, Formula) and claim.value.head == "operator"


@dataclass
class Solved:
    """The equation at one point: no letters are left in the setting."""

    setting: Setting
    observed: Observed
    highest: int

    @cached_property
    def rising(self) -> list[arb]:
        """b_1 ... b_highest over the start's mixture."""
        self._require_generic()
        watchers = self.setting.detectors
        one = len(watchers) == 1 and watchers[0].rank == 1 and self.setting.interval.law == "fixed"
        return self._level_by_level() if one else self._by_elimination()

    def _require_generic(self) -> None:
        if not isinstance(self.setting.space, Finite):
            raise NotCovered("Stein's equation is solved for a Hamiltonian")
        if self.observed.bright != Observed(replace(self.setting, interval=Interval(TAU))).bright:
            raise OutsideValidity("phases of seen energies merge there")

    def value(self, claim: Claim, total: arb) -> arb:
        """The claim's quantity, `total` being the total probability."""
        name = claim.quantity.name if claim.quantity else ""
        if name == "splitting probability":
            return self._share(claim.quantity.key("detector") if claim.quantity else None)
        power = claim.quantity.key("power") if claim.quantity else None
        if total.contains(0):
            raise NeedsPrecision("the total probability is not told from 0")
        if name == "variance":
            return self.moment(2) / total - (self.moment(1) / total) ** 2
        if name == "conditional mean":
            return self.moment(1) / total
        return self.moment(power if isinstance(power, int) else 1)

    def moment(self, p: int) -> arb:
        """sum_n n^p F_n."""
        return sum((self.rising[i - 1] * c for i, c in enumerate(stirling(p)) if i and c), arb(0))

    def _level_by_level(self) -> list[arb]:
        values, watcher = Values({}), self.setting.detectors[0]
        frame = reached_frame(self.setting, values, self.observed.bright)
        states = Eigenstates.of(hamiltonian(frame))
        d = frame.state(watcher.vectors[0], values)
        a = 1 - (1 - enclose(watcher.efficiency, values).real).nonnegative_part().sqrt()
        found = by_levels(states, d, enclose_real(self.setting.interval.length, values), a).sums(self.highest)
        q = [(w, amplitudes(states, d, frame.state(v, values))) for w, v in self._mixture()]
        return [sum((w * form_value(t, x) for w, x in q), arb(0)) for t in found]

    def _share(self, name: object) -> arb:
        """The probability that the named detector clicks first, with its clicks on the right side."""
        self._require_generic()
        place = [w.name for w in self.setting.detectors].index(str(name))
        return self._over_start(solved(self._step, self._step.clicks[place]))

    def _by_elimination(self) -> list[arb]:
        return [self._over_start(y) for y in solved_sums(self._step, self.highest)]

    @cached_property
    def _step(self) -> Step:
        """The step on what the detectors reach."""
        values = Values({})
        frame = reached_frame(self.setting, values, self.observed.bright)
        if self.setting.interval.law != "fixed":
            return averaged_step(self.setting, values, frame, self.observed.phases)
        if frame.size > MOST_SOLVED:
            raise NotCovered(f"Stein's equation is solved in at most {MOST_SOLVED} dimensions")
        return measured_step(self.setting, values, enclose_real(self.setting.interval.length, values), frame)

    def _over_start(self, y: acb_mat) -> arb:
        """<psi|Y|psi> over the start's mixture."""
        psi = [(w, self._step.state(v, Values({}))) for w, v in self._mixture()]
        return sum((w * expectation(y, v) for w, v in psi), arb(0))

    def _mixture(self) -> list[tuple[arb, tuple[tuple[int, Formula], ...]]]:
        start = self.setting.start
        if start is None or not start.mixture:
            raise NotCovered("no start is given")
        return [(enclose(w, Values({})).real, v) for w, v in start.mixture]
