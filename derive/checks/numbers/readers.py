"""The experiment at one point and one precision, of which numbers after n asks are read off.

    detection probability         F_n = sum_psi w |sqrt(eta) P U K^(n-1) psi|^2
    detection amplitude           phi_n,c = sqrt(eta_c) <d_c|U K^(n-1)|psi>, d_c the states of all detectors in turn
    absorber strength             S_n, beside which the plain absorber's survival stands
    survival probability          S_n = 1 - F_1 - ... - F_n, from |K^n psi|^2 where intervals are fixed
    total detection probability   within n asks, 1 - S_n; splitting: one detector's clicks summed up to n
    classical survival, density   the walk's own clock: t, or n steps

K is one undetected interval (`numerics/asks.py`); powers are shared (`numerics/after_asks.py`).  On infinite lattices
the renewal equation is divided out once (`numerics/inversion.py`).  Which reader serves which quantity stands in one
table at the end.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Protocol

from flint import acb, acb_mat, arb

from derive.checks.asymptotics.density import is_density, own_amplitudes
from derive.checks.asymptotics.road import experiment as lattice_experiment
from derive.checks.asymptotics.road import size_squared
from derive.checks.classical.road import Walk, is_discrete, walk_at
from derive.checks.numbers.clocks import Clock
from derive.checks.summed import Bench, Experiment
from derive.errors import NotCovered
from derive.formula.tree import Formula
from derive.numerics.after_asks import Doublings, enclose_states
from derive.numerics.asks import expectation
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.system import State
from derive.problem.points import Point
from derive.problem.setting import Lattice, Setting, Vector
from derive.problem.sized import sized
from derive.record.said import Claim

MOST_ON_LATTICES = 100_000
LARGEST = 210
"""Dimensions that are followed through many asks."""


class Course(Protocol):
    """What the detectors see of one start, ask by ask."""

    def click(self, n: int) -> arb: ...

    def amplitude(self, n: int, component: int | None) -> acb: ...

    def left(self, n: int) -> arb:
        """S_n."""
        ...

    def within(self, n: int, detector: str | None) -> arb: ...


def course(setting: Setting, point: Point, asks: Sequence[int], digits: int) -> Course:
    """The experiment on the setting's space, ready to be read at `asks`."""
    if isinstance(setting.space, Lattice):
        return OnLattice(setting, point, max(asks), digits)
    at = sized(setting, point.without("tau").mapping())
    experiment = Bench(1, digits).at(at, point)
    if experiment.step.size > LARGEST:
        raise NotCovered(f"asks are followed in at most {LARGEST} dimensions, and there are {experiment.step.size}")
    if experiment.step.averaged is not None:
        return Averaged(experiment)
    return Stepwise(experiment, tuple(asks))


@dataclass
class _Followed:
    """A finite experiment with its start as (weight, state)."""

    e: Experiment

    @cached_property
    def states(self) -> list[tuple[arb, State]]:
        start = self.e.setting.start
        if start is None or not start.mixture:
            raise NotCovered("no start is given")
        return [(enclose(w, self.e.values).real, self.e.step.state(v, self.e.values)) for w, v in start.mixture]

    @cached_property
    def doublings(self) -> Doublings:
        return Doublings([self.e.step.undetected])

    def over_start(self, x: acb_mat) -> arb:
        return sum((w * expectation(x, psi) for w, psi in self.states), arb(0))

    def clicks(self, detector: str | None) -> acb_mat:
        if detector is None:
            return self.e.step.all_clicks
        places = [k for k, w in enumerate(self.e.setting.detectors) if w.name == detector]
        if len(places) != 1:
            raise NotCovered("which detector is not said")
        return self.e.step.clicks[places[0]]

    def within(self, n: int, detector: str | None) -> arb:
        name = "all" if detector is None else f"detector {detector}"
        return self.over_start(self.doublings.within(name, self.clicks(detector), n))


@dataclass
class Averaged(_Followed):
    """Random intervals: observables are carried back, each step an average."""

    def click(self, n: int) -> arb:
        return self.over_start(self.doublings.carried(self.clicks(None), n - 1))

    def amplitude(self, n: int, component: int | None) -> acb:
        raise NotCovered("at random intervals there is no amplitude of the n-th ask")

    def left(self, n: int) -> arb:
        return arb(1) - self.within(n, None)


@dataclass
class Stepwise(_Followed):
    """Fixed intervals: states are carried forward to the asks that are read."""

    asks: tuple[int, ...]

    @cached_property
    def moved(self) -> list[tuple[arb, dict[int, acb_mat]]]:
        """(weight, n -> K^n psi)."""
        wanted = {m for n in self.asks for m in (n, max(n - 1, 0))} | {0}
        size = self.e.step.size
        return [(w, enclose_states(self.e.step.k, acb_mat(size, 1, psi), wanted)) for w, psi in self.states]

    def click(self, n: int) -> arb:
        clicks = self.e.step.all_clicks
        return sum((w * expectation(clicks, at[n - 1].entries()) for w, at in self.moved), arb(0))

    def amplitude(self, n: int, component: int | None) -> acb:
        """With the phase exp(-i E0 tau n) that the step leaves out."""
        vector, efficiency = _detector_state(self.e.setting, component)
        bra = [x.conjugate() for x in self.e.step.state(vector, self.e.values)]
        moved = self.e.step.u * self.moved[0][1][n - 1]
        root = acb(enclose_real(efficiency, self.e.values).sqrt())
        return sum((a * b for a, b in zip(bra, moved.entries(), strict=True)), acb(0)) * root * self._phase**n

    @property
    def _phase(self) -> acb:
        if self.e.step.frame is None:
            return acb(1)
        return (acb(0, -1) * self.e.step.frame.system.E0 * enclose(self.e.tau, self.e.values)).exp()

    def left(self, n: int) -> arb:
        """What K^n leaves, and what the frame has cut off because no detector reaches it."""
        frame = self.e.step.frame
        whole = frame is None or frame.basis is None
        dark = arb(0) if whole else arb(1) - sum((w * _squared(at[0]) for w, at in self.moved), arb(0))
        return dark + sum((w * _squared(at[n]) for w, at in self.moved), arb(0))

    def _gone(self, n: int) -> arb:
        return sum((w * (_squared(at[0]) - _squared(at[n])) for w, at in self.moved), arb(0))

    def within(self, n: int, detector: str | None) -> arb:
        return self._gone(n) if detector is None else super().within(n, detector)


def _detector_state(setting: Setting, component: int | None) -> tuple[Vector, Formula]:
    """The component-th state of all detectors, counted from 1, and its efficiency."""
    states = [(v, w.efficiency) for w in setting.detectors for v in w.vectors]
    place = component if component is not None else 1 if len(states) == 1 else 0
    if not 1 <= place <= len(states) or setting.start is None or len(setting.start.mixture) != 1:
        raise NotCovered("an amplitude needs one state of the detectors and one start state")
    return states[place - 1]


def _squared(v: acb_mat) -> arb:
    return sum((x.real * x.real + x.imag * x.imag for x in v.entries()), arb(0))


class OnLattice:
    """phi_1, ..., phi_n on an infinite lattice, all at once."""

    def __init__(self, setting: Setting, point: Point, last: int, digits: int):
        if last > MOST_ON_LATTICES:
            raise NotCovered(f"on an infinite lattice at most {MOST_ON_LATTICES} asks are followed")
        self.phi, self.factor = _on_lattice(setting, point, max(last, 1), digits)

    def click(self, n: int) -> arb:
        return size_squared(self.phi[n])

    def amplitude(self, n: int, component: int | None) -> acb:
        return acb(self.phi[n]) * self.factor

    def left(self, n: int) -> arb:
        return arb(1) - self.within(n, None)

    def within(self, n: int, detector: str | None) -> arb:
        return sum((self.click(m) for m in range(1, n + 1)), arb(0))


def _on_lattice(setting: Setting, point: Point, last: int, digits: int) -> tuple[Sequence[arb | acb], acb]:
    """Amplitudes, and the factor before them."""
    if is_density(setting):
        return own_amplitudes(setting, point, last, digits), acb(1)
    run = lattice_experiment(setting, point, digits)
    return run.up_to(last), run.waves.factor


# -- readings


@dataclass
class Readings:
    """Everything that can be read at one point and one precision; what is not asked for is not made."""

    setting: Setting
    point: Point
    asks: tuple[int, ...]
    digits: int

    @cached_property
    def course(self) -> Course:
        return course(self.setting, self.point, self.asks, self.digits)

    @cached_property
    def walks(self) -> dict[bool, Walk]:
        return {}

    def walk(self, claim: Claim) -> Walk:
        """In steps or in time, as the claim's letter says."""
        discrete = is_discrete(claim)
        if discrete not in self.walks:
            self.walks[discrete] = walk_at(self.setting, self.point.without("tau"), discrete)
        return self.walks[discrete]

    def walked(self, clock: Clock, claim: Claim) -> Fraction | arb:
        """The walk's own clock."""
        return Fraction(clock.n) if is_discrete(claim) else enclose_real(clock.t, Values({}))


@dataclass(frozen=True)
class Reader:
    """How a claim's quantity is read at a clock; `first`: the lowest n at which it exists."""

    read: Callable[[Readings, Clock, Claim], arb | acb]
    first: int = 1


def _share(r: Readings, clock: Clock, claim: Claim) -> arb:
    return r.course.within(clock.n, str(claim.quantity.key("detector")) if claim.quantity else None)


def _amplitude(r: Readings, clock: Clock, claim: Claim) -> acb:
    component = claim.quantity.key("component") if claim.quantity else None
    return r.course.amplitude(clock.n, component if isinstance(component, int) else None)


READERS: dict[str, Reader] = {
    "detection probability": Reader(lambda r, clock, claim: r.course.click(clock.n)),
    "detection amplitude": Reader(_amplitude),
    "generating function": Reader(_amplitude),
    "survival probability": Reader(lambda r, clock, claim: r.course.left(clock.n), 0),
    "absorber strength": Reader(lambda r, clock, claim: r.course.left(clock.n), 0),
    "total detection probability": Reader(lambda r, clock, claim: r.course.within(clock.n, None), 0),
    "splitting probability": Reader(_share, 0),
    "classical survival": Reader(lambda r, clock, claim: r.walk(claim).survival(r.walked(clock, claim)), 0),
    "classical density": Reader(lambda r, clock, claim: r.walk(claim).density(r.walked(clock, claim))),
}
