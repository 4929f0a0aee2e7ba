"""What the detector sees of the system, exactly: the bright space, its energies as factors, the start's share of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

from derive.algebra.bright import Krylov, dark_pieces
from derive.algebra.conditions import conditions
from derive.algebra.factor import Factor, factored
from derive.algebra.levels import Groups, Levels, groups_at, levels_of, merged
from derive.algebra.polynomial import characteristic
from derive.algebra.spectral import energies_of
from derive.algebra.stepwise import spanned
from derive.derivations.explored import Explored
from derive.derivations.special import special_interval
from derive.derivations.turning import closest
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.exact.sparse import Vector
from derive.formula.tree import Formula, free_letters
from derive.problem.setting import Setting, Unitary
from derive.record.said import Prose

CLOSE, SAME = 1e-2, 1e-13
"""Relative distance from an exceptional interval at which a warning is due; below the second it is that interval."""
NO_ENERGIES = "At this interval phases of different energies may coincide, and these energies have no closed form here."
ONE_STATE = "At an interval given as a fraction of pi, one detector state is served, and this detector has several."


@dataclass(frozen=True)
class Part:
    """One state of the start's mixture: its weight and <u_j|psi> for every bright basis vector u_j."""

    weight: Element
    overlaps: tuple[Element, ...]


class Sight:
    """A setting as the detector sees it."""

    def __init__(self, setting: Setting):
        self.setting = setting
        self.explored = Explored(setting)
        self.field = self.explored.field
        self.space: Krylov = self.explored.bright()

    @property
    def size(self) -> int:
        return self.explored.space.size

    @cached_property
    def parts(self) -> tuple[Part, ...]:
        inner, basis = self.explored.inner, self.space.basis
        return tuple(Part(w, tuple(inner(u, psi) for u in basis)) for w, psi in self.explored.start())

    @cached_property
    def factors(self) -> tuple[Factor, ...]:
        """Irreducible factors of the bright characteristic polynomial of H, with multiplicities; none for a step."""
        if self.is_step:
            return ()
        return tuple(factored(self.field, characteristic(self.space)))

    @cached_property
    def energies(self) -> list[Formula] | None:
        if self.is_step:
            return None
        return energies_of(self.field, self.factors)

    @cached_property
    def conditions(self) -> tuple[Formula, ...]:
        """What must not vanish for the bright space to be what it is at generic letters."""
        return conditions(self.field, self.space.norms)

    @property
    def is_step(self) -> bool:
        """Whether U is given in place of H."""
        return isinstance(self.setting.space, Unitary)

    def _reached_together(self) -> int:
        """Different phases of a step: the dimension that all detector states reach when they move together."""
        explored, n = self.explored, self.size
        together = {x + k * n: f for k, d in enumerate(explored.d) for x, f in d.items()}

        def act(v: Vector) -> Vector:
            out: Vector = {}
            for k in range(len(explored.d)):
                part = explored.hamiltonian({x - k * n: f for x, f in v.items() if x // n == k})
                out.update({x + k * n: f for x, f in part.items()})
            return out

        return spanned(self.field, act, explored.inner, [together]).size

    @property
    def generic(self) -> bool:
        """Whether the interval leaves all phases apart."""
        if special_interval(self.setting) is None:
            return True
        return len(self.groups) == sum(len(f) - 1 for f, _ in self.factors)

    @cached_property
    def groups(self) -> Groups:
        """Energies, by place, that have one phase at the worksheet's interval."""
        if self.energies is None:
            raise NotCovered(NO_ENERGIES)
        return groups_at(self.energies, self.setting.interval.length, self.setting.domains())

    def levels(self, tau: Formula | None, also: Sequence[Formula] = ()) -> Levels:
        """Weights and amplitudes by energy, for one detector state."""
        if len(self.explored.d) != 1:
            raise NotCovered(ONE_STATE)
        if self.energies is None:
            raise NotCovered(NO_ENERGIES)
        overlaps = [p.overlaps for p in self.parts] if self.explored.mixture else []
        return levels_of(self.space, self.energies, overlaps, tau, also, self.setting.domains())

    @cached_property
    def at_interval(self) -> Levels:
        """Levels at a special interval, those of one phase put together."""
        return merged(self.levels(None, [w for w, _ in self.explored.mixture]), self.groups)

    def with_phases(self, also: Sequence[Formula]) -> Levels:
        """Levels with exp(-i E tau), those of one phase put together."""
        levels = self.levels(self.setting.interval.length, also)
        return levels if self.generic else merged(levels, self.groups)

    @cached_property
    def phases(self) -> int:
        """w: the number of different phases that are seen."""
        if self.is_step:
            return self._reached_together()
        return sum(len(f) - 1 for f, _ in self.factors) if self.generic else self.at_interval.size

    @property
    def bright(self) -> int:
        """Dimension of the bright space, the detector's states included."""
        return self.space.size if self.generic else self.phases

    def warning(self) -> tuple[Prose, ...]:
        """A sentence where the worksheet's own interval lies next to an exceptional one."""
        length = self.setting.interval.length
        if self.setting.interval.law != "fixed" or "tau" in free_letters(length) or self.energies is None:
            return ()
        try:
            found = closest(self.energies, length, self.setting.domains())
        except NotCovered:
            return ()
        if found is None or found[3] > CLOSE or found[3] < SAME:
            return ()
        a, b, tau_c, distance = found
        near = f"This interval is but {distance:.1e} of itself away from "
        return ((near, tau_c, ", where the seen energies ", a, " and ", b,
                 " have one phase: the variance is large here, and at that point itself answers jump."),)

    def dark_spaces(self) -> list[Krylov]:
        """What H never connects with the detector, as cyclic pieces."""
        explored = self.explored
        if self.is_step:
            return []
        units: list[Vector] = [{x: self.field.one} for x in range(self.size)]
        room = self.size - self.space.size
        return dark_pieces(self.field, explored.hamiltonian, explored.inner, [self.space], units, room)

    def alike(self) -> list[list[int]]:
        """Sites with the same overlap with every bright vector."""
        groups: dict[tuple[str, ...], list[int]] = {}
        for x in range(self.size):
            overlaps = tuple(f"{u[x].num}/{u[x].den}" if x in u else "" for u in self.space.basis)
            if any(overlaps):
                groups.setdefault(overlaps, []).append(x)
        return [g for g in groups.values() if len(g) > 1]
