"""The experiment at one sample point, kept so that S_n can be asked for at any interval and any number of asks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from flint import acb, arb, ctx, fmpq

from derive.checks.krylov import reach_pattern
from derive.checks.missed import missed_at
from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula, number
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.nullstep import perfected
from derive.numerics.precision import upper
from derive.numerics.spectrum import Reached, enclose_reached
from derive.numerics.survival import bits_for_survival, enclose_survival
from derive.numerics.system import State, finite_space, system
from derive.problem.points import Point
from derive.problem.setting import Setting
from derive.problem.sized import sized

LARGEST = 210
"""Sites up to which the space reached from the detector is built densely."""
ATTEMPTS = 4


@dataclass
class Experiment:
    """One point's measured system; the basis is made once, at high precision."""

    setting: Setting
    point: Point
    reached: Reached
    states: list[tuple[arb, State]]
    digits: int
    q: acb | None = None  # sqrt(1 - eta); None for a perfect detector

    def survival(self, tau: Fraction, asks: Sequence[int]) -> list[arb]:
        """S_n with about `digits` digits."""
        with ctx.workprec(bits_for_survival(self.digits, max(asks), self.reached.bright)):
            return enclose_survival(self.reached, _ball(tau), self.states, asks, self.q)

    @property
    def coth(self) -> arb:
        """coth(kappa/2) = (1 + q)/(1 - q)."""
        return arb(1) if self.q is None else ((1 + self.q) / (1 - self.q)).real

    @property
    def slowed(self) -> int:
        """An integer not below coth(kappa/2): intervals are that much shorter, and asks more."""
        return ceil(float(upper(acb(self.coth))))

    def first_interval(self) -> Fraction:
        """tau_0 = 1/(16 H c), H an integer or the inverse of one, not below h, c an integer not below coth(kappa/2)."""
        h = self.reached.h
        top = Fraction(int(float(upper(h))) + 1) if h > 1 else Fraction(1, max(int(1 / float(upper(h))), 1))
        return 1 / (16 * top * self.slowed)

    def values(self, tau: Fraction, n: int | None) -> Values:
        """The point's letters, with tau, and, where asks are told, n and t = n tau."""
        put = self.point.without("tau").mapping() | {"tau": number(tau)}
        if n is not None:
            put |= {"n": number(n), "t": number(n * tau)}
        return Values.at(put)


def experiment(setting: Setting, point: Point, digits: int) -> Experiment:
    still = point.without("tau")
    at = sized(setting, still.mapping())
    size = finite_space(at).size
    if size > LARGEST:
        raise NotCovered(f"the experiment is repeated on up to {LARGEST} sites")
    if at.start is None or not at.start.mixture:
        raise NotCovered("survival needs a start")
    pattern = reach_pattern(perfected(at))
    for attempt in range(ATTEMPTS):
        with ctx.workprec((400 + 4 * digits + 12 * len(pattern)) << attempt):
            try:
                values = Values.at(still.mapping())
                reached = enclose_reached(system(perfected(at), values), pattern)
                states = [(enclose_real(w, values), _state(v, size, values)) for w, v in at.start.mixture]
                return Experiment(at, point, reached, states, digits, missed_at(at, values))
            except NeedsPrecision:
                continue
    raise NeedsPrecision("a basis of what the detector reaches is not found at this precision")


def _state(v: Sequence[tuple[int, Formula]], size: int, values: Values) -> State:
    psi = [acb(0)] * size
    for x, f in v:
        psi[x] = enclose(f, values)
    return psi


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))
