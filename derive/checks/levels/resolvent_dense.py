"""<d|(H - E)^(-1)|d> of a complete or complete bipartite graph, sizes as letters, from the matrix of ones.

complete     H = t (J - 1) + C |d><d|, J all ones.  (a J - b)^(-1) = -(1/b) (1 + a J/(b - a N)) gives
                 q = E - (N - 2) t,      h = (E + t) (E + t - N t) - C (E + 2 t - N t)
bipartite    without the watched left site A^2 has the uniform states of either side at w^2 = (a - 1) b t^2:
                 q = E^2 - w^2,          h = (E - C) q - b t^2 E

with the resolvent -q/h; moments T_k are the coefficients of q/h = sum T_k E^(-k-1).  All sites n steps from the
detector are alike, so that a vector is written by steps: {n: amplitude on one of them}, and <V|(E-A)^(-1)|n> is r_n/q,

complete     r_1 = t                          bipartite    r_1 = t E,   r_2 = b t^2

Dark is what is orthogonal to the uniform states: -t, N - 2 times, or 0, a + b - 3 times.  Sherman-Morrison's formula
is textbook; put together here.
"""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property
from math import comb

from derive.checks.levels.resolvent import Resolvent
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.exact.zero import vanishes
from derive.formula.tree import I_UNIT, ONE, TAU, ZERO, Formula, negate, number
from derive.problem.setting import Family, Setting
from derive.problem.setting import Vector as Ket


class DenseResolvent(Resolvent):
    """The same questions as on an explicit graph, answered in closed form."""

    def __init__(self, setting: Setting):
        family = setting.space
        if not isinstance(family, Family) or family.name not in ("complete", "complete bipartite") or family.bonds:
            raise NotCovered("a complete or complete bipartite graph is needed here")
        self.setting, self.family = setting, family
        if len(setting.detectors) != 1 or setting.detectors[0].efficiency != ONE:
            raise NotCovered("one detector that misses nothing")
        self.coth = ONE
        self.sizes = dict(family.sizes)
        self.energy = self._own_energy()
        self.start: tuple[tuple[Formula, Ket], ...] = self._begin()
        self.formulas = tuple(dict.fromkeys((TAU, I_UNIT, family.hopping, self.energy, *self.sizes.values())))
        self.field = Field.of(self.formulas, setting.domains())
        self.t, self.C = self.field.element(family.hopping), self.field.element(self.energy)
        self.d = {0: self.field.one}
        self.h = self._below_the_line()

    def _own_energy(self) -> Formula:
        """The watched site's energy; no other site has one, and on two sides it is site 0 that is watched."""
        place, domains = self.setting.detectors[0].place, self.setting.domains()
        if not isinstance(place, Formula) or (self.family.name != "complete" and place != ZERO):
            raise NotCovered("which site is watched must be said")
        if any(vanishes(x - place, domains) is not True for x, _ in self.family.energies):
            raise NotCovered("energies beside the detector")
        return self.family.energies[0][1] if self.family.energies else ZERO

    def _begin(self) -> tuple[tuple[Formula, Ket], ...]:
        start = self.setting.start
        if start is None or start.distance is None or start.distance.head != "number":
            return ()
        return ((ONE, ((int(start.distance.args[0]), ONE),)),)

    @property
    def _neighbours(self) -> Element:
        if self.family.name == "complete":
            return self.field.element(self.sizes["sites"]) - self.field.one
        return self.field.element(self.sizes["right"])

    @cached_property
    def q(self) -> list[Element]:
        one, t, m = self.field.one, self.t, self._neighbours
        if self.family.name == "complete":
            return [-((m - one) * t), one]
        return [-((self.field.element(self.sizes["left"]) - one) * m * t * t), self.field.zero, one]

    def _below_the_line(self) -> list[Element]:
        one, t, m = self.field.one, self.t, self._neighbours
        if self.family.name == "complete":
            low = t - (m + one) * t  # (E + t)(E + low) - C q
            return [t * low - self.C * self.q[0], t + low - self.C, one]
        q = self.q
        return [-(self.C * q[0]), q[0] - m * t * t, -self.C, one]

    def _returns(self, highest: int) -> list[Element]:
        """T_0 ... T_highest: the quotient of q by h in powers of 1/E."""
        top, bottom = self.q[::-1], self.h[::-1]
        found: list[Element] = []
        for k in range(highest + 1):
            value = top[k] if k < len(top) else self.field.zero
            for j in range(1, min(k, len(bottom) - 1) + 1):
                value = value - bottom[j] * found[k - j]
            found.append(value)
        return found

    def around(self, n: int) -> list[Element]:
        """<d|(H - E)^n|d> in powers of E."""
        returns = self._returns(n)
        return [returns[n - k].scaled(Fraction((-1) ** k * comb(n, k))) for k in range(n + 1)]

    def hamiltonian(self, v: Vector) -> Vector:
        """H |d>, by steps: the only vector asked for."""
        if set(v) != {0}:
            raise NotCovered("H on the detector's state is all that is known here")
        return {0: self.C * v[0], 1: self.t * self._neighbours * v[0]}

    def outside(self, psi: Vector) -> Vector:
        return {n: a for n, a in psi.items() if n}

    def numerator(self, psi: Vector) -> list[Element]:
        """sum_n psi_n r_n."""
        steps = self._by_steps()
        total = [self.field.zero] * len(self.q)
        for n, a in psi.items():
            if n not in steps:
                raise NotCovered(f"no site is {n} steps away")
            total = [x + a * y for x, y in zip(total, steps[n], strict=True)]
        return total

    def _by_steps(self) -> dict[int, list[Element]]:
        zero, t = self.field.zero, self.t
        if self.family.name == "complete":
            return {1: [t, zero]}
        return {1: [zero, t, zero], 2: [self._neighbours * t * t, zero, zero]}

    def dark(self) -> tuple[Formula, Formula]:
        """(energy, multiplicity) of what is orthogonal to the uniform states."""
        if self.family.name == "complete":
            return negate(self.family.hopping), self.sizes["sites"] - number(2)
        return ZERO, self.sizes["left"] + self.sizes["right"] - number(3)
