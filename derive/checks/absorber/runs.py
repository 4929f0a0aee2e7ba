"""One point of the letters, tau halved again and again: the measured step and the absorbers beside it, in balls.

Every parameter an absorber needs is recomputed here from the secular equation's first coefficients (y_1 = -i c/2,
y_2 = 1/12); a claim puts its own in place of one of them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cached_property

from flint import acb, acb_mat, arb

from derive.checks.absorber.secular import inverse_of_one_minus_exp
from derive.checks.krylov import reach_pattern
from derive.errors import NotCovered, OutsideValidity
from derive.formula.tree import ONE, Formula
from derive.numerics import nullstep
from derive.numerics.evaluate import Values, enclose, rational
from derive.numerics.system import system
from derive.problem.efficiency import is_free_of_interval, missed
from derive.problem.points import Point
from derive.problem.setting import Finite, Setting
from derive.record.said import Matrix

MOST_SITES = 64
FIRST_SIZE = 4  # h tau c <= 1/4 at the first interval
FAST = {"plain": 1, "dressed": 1, "ancilla": 2, "cascade": 3}  # fast levels by detector vector, kappa fixed
Cells = list[list[acb]]
Parameters = dict[str, "acb | Cells"]


class Run:
    """A point without its tau; everything is asked for by the number j of halvings."""

    def __init__(self, setting: Setting, point: Point):
        if not isinstance(setting.space, Finite) or setting.space.size > MOST_SITES:
            raise NotCovered(f"levels are measured on finite graphs of at most {MOST_SITES} sites")
        self.setting, self.point = setting, point.without("tau")
        self.values = Values.at(self.point.mapping())
        eta = setting.detectors[0].efficiency
        self.weak = not is_free_of_interval(eta)
        self.missed = missed(eta, setting.domains())
        self.bare = replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))
        self.m = nullstep.measured_at(setting, self.values)
        self.seen, self.basis = nullstep.reached(self.m, reach_pattern(self.bare))
        if self.seen.size == self.seen.rank:
            raise NotCovered("the detector is joined to nothing, and there is no level that it sees")
        self.kept: dict[tuple[str, int], acb_mat] = {}  # what several claims repeat: K^n, absorbers' evolutions
        self._levels: dict[int, list[acb]] = {}
        self._absorbed: dict[tuple[str, int, str], list[acb]] = {}

    @cached_property
    def first(self) -> arb:
        """The first interval: a power of two with h tau c <= 1/4 (c left out where it grows as tau falls)."""
        c = arb(1) if self.weak else self._coth(enclose(self.missed, self.values))
        h = self.m.h if self.m.h > 0 else arb(1)
        tau = arb(1)
        while not tau * h * c * FIRST_SIZE <= 1:
            tau = tau / 2
        while tau * h * c * FIRST_SIZE * 2 <= 1:
            tau = tau * 2
        return tau

    def tau(self, j: int) -> arb:
        return self.first / 2**j

    def at(self, j: int) -> Values:
        return self.values.with_letter("tau", acb(self.tau(j)))

    def q(self, j: int) -> acb:
        """sqrt(1 - eta), in [0, 1)."""
        q = enclose(self.missed, self.at(j))
        if not (q.imag.contains(0) and q.real < 1 and q.real > arb("-1e-30")):
            raise OutsideValidity("the efficiency is not between 0 and 1 here")
        return acb(q.real)

    def _coth(self, q: acb) -> arb:
        return ((1 + q) / (1 - q)).real

    def coth(self, j: int) -> arb:
        return self._coth(self.q(j))

    @cached_property
    def shift(self) -> acb:
        """E0, which energies are counted from."""
        return acb(system(self.bare, self.values).E0)

    # -- the two evolutions

    def step(self, j: int) -> acb_mat:
        return nullstep.null_step(self.m, self.tau(j), self.q(j))

    def levels(self, j: int) -> list[acb]:
        if j not in self._levels:
            fast = 0 if self.weak else self.m.rank
            step, q = nullstep.null_step(self.seen, self.tau(j), self.q(j)), self.q(j)
            if q.is_zero():
                step, fast = nullstep.off_detector(self.seen, step), 0
            self._levels[j] = nullstep.step_levels(step, self.tau(j), fast)
        return self._levels[j]

    def own(self, kind: str, j: int) -> Parameters:
        """Parameters by name, from y_1 tau and y_2 tau^2."""
        tau, c = self.tau(j), self.coth(j)
        second = rational(-inverse_of_one_minus_exp(2)[2]).real
        if kind == "plain":
            return {"strength": acb(2 / (tau * c))}
        if kind == "dressed":
            square = 1 / (1 - 4 * second / (c * c))
            return {"strength": acb(2 * square / (tau * c)), "coupling": acb(square.sqrt())}
        if kind == "ancilla":
            return {"coupling": acb(1 / (second.sqrt() * tau)), "loss": acb(c / (2 * second * tau))}
        return {"coupling": self._network(j)}

    def _network(self, j: int) -> Cells:
        """The two-site cascade, b = 12/(1 + tau^2 mu_0/20), delta = tau^3 (mu_1 - C mu_0)/60."""
        if self.m.rank != 1:
            raise NotCovered("a cascade stands beside a detector of rank one")
        tau, th = self.tau(j), 1 / self.coth(j)
        v = self.m.q * self.m.hamiltonian * self.m.d
        bar = nullstep.dagger(v)
        c = (nullstep.dagger(self.m.d) * self.m.hamiltonian * self.m.d)[0, 0]
        mu0, mu1 = (bar * v)[0, 0], (bar * self.m.hamiltonian * v)[0, 0]
        b, delta = 12 / (1 + tau * tau * mu0 / 20), tau**3 * (mu1 - c * mu0) / 60
        entry, hop = acb(0, 1) * 2 * arb(5).sqrt() * th / tau, (5 * b - delta * delta).sqrt() / tau
        zero, i, own = acb(0), acb(0, 1), c + self.shift
        return [
            [-2 * i * th / tau, entry, zero],
            [entry, own - delta / tau - 10 * i * th / tau, hop],
            [zero, hop, own + delta / tau],
        ]

    def absorber(self, kind: str, parameters: Parameters, m: nullstep.Measured | None = None) -> acb_mat:
        """The absorber's matrix on all sites, or on the sites and states of `m`."""
        p, m = parameters, m or self.m
        if kind == "plain":
            return nullstep.plain(m, _number(p["strength"]))
        if kind == "dressed":
            return nullstep.dressed(m, _number(p["strength"]), _number(p["coupling"]))
        if kind == "ancilla":
            return nullstep.ancilla(m, _number(p["coupling"]), _number(p["loss"]))
        cells = p["coupling"]
        if isinstance(cells, acb):
            raise NotCovered("a cascade is claimed as a matrix")
        return nullstep.network(m, cells, self.shift)

    def errors(self, kind: str, j: int, claimed: Mapping[str, Formula | Matrix] | None = None) -> tuple[arb, arb]:
        """Largest differences of energies and of rates over bright levels, with some parameters as claimed."""
        parameters = self.own(kind, j)
        for name, value in (claimed or {}).items():
            self._put(kind, parameters, name, self._claimed(value, j), j)
        attached = len(p) - 1 if isinstance(p := parameters.get("coupling"), list) else FAST[kind] - 1
        fast = (attached if self.weak else attached + 1) * self.m.rank
        key = (kind, j, str(sorted((n, str(v)) for n, v in parameters.items())))
        if key not in self._absorbed:
            matrix = self.absorber(kind, parameters, self.seen)
            self._absorbed[key] = nullstep.absorber_levels(matrix, fast)
        return nullstep.level_errors(self.levels(j), self._absorbed[key])

    def due_over_claimed(self, kind: str, j: int, claimed: Mapping[str, Formula | Matrix]) -> str | None:
        """The ratio of the parameter recomputed here to a claimed one; None where there is no single number."""
        own = self.own(kind, j)
        for name, value in claimed.items():
            due = own.get(name)
            if isinstance(due, acb) and not isinstance(value, Matrix):
                ratio = due / enclose(value, self.at(j))
                return str(ratio.real.mid().str(6, radius=False)) if ratio.is_finite() else None
        return None

    def _put(self, kind: str, parameters: Parameters, name: str, value: acb | Cells, j: int) -> None:
        """A claimed parameter in its place; a cascade's strength and loss stand in its matrix."""
        cells = parameters.get("coupling")
        if kind != "cascade" or name == "coupling" or not isinstance(cells, list):
            parameters[name] = value
        elif name == "strength":
            cells[0][0] = acb(0, -1) * _number(value)
        else:
            lossless = cells[1][1] + acb(0, 10) / (self.coth(j) * self.tau(j))
            cells[1][1] = lossless - acb(0, 1) * _number(value)

    def _claimed(self, value: Formula | Matrix, j: int) -> acb | Cells:
        at = self.at(j)
        if not isinstance(value, Matrix):
            return enclose(value, at)
        entries = list(value.entries())
        size = 1 + max((max(x, y) for x, y, _ in entries), default=0)
        cells = [[acb(0) for _ in range(size)] for _ in range(size)]
        for x, y, f in entries:
            cells[x][y] = enclose(f, at)
        return cells


def _number(x: acb | Cells) -> acb:
    if not isinstance(x, acb):
        raise NotCovered("a number is needed here, not a matrix")
    return x
