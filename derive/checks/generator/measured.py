"""The measured generator at one point, and how a claim is laid beside it: entrywise, or by its action on vectors."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from flint import acb, arb

from derive.checks.gauge import Gauge
from derive.checks.generator.whole import Start
from derive.checks.reading import Claimed, Entries, Reading, claimed_at
from derive.errors import NotCovered
from derive.numerics.contour import Circle, choose_circle, dense_cost, enclose_generators
from derive.numerics.evaluate import Values
from derive.numerics.evolution import norm
from derive.numerics.probe import enclose_actions, probe_cost
from derive.numerics.system import State, System, finite_space, system
from derive.problem.setting import Row, Setting

DENSE_WORK = 8e7
"""Products of two complex numbers a point, about 3 s (measured); above it vectors are probed."""
PROBE_WORK = 4e7
"""The same a vector, in sparse rows, about 12 s (measured); above it nothing is measured."""
PROBES = 2
_DIGITS = "31415926535897932384626433832795028841971693993751058209749445923078164062862089986280348253421"


@dataclass
class Measured:
    """G_0 .. G_order in balls on the system's sites: `matrices`, or None where only vectors are affordable."""

    setting: Setting
    values: Values
    s: System
    order: int
    circle: Circle
    matrices: list[list[acb]] | None

    def scale(self, k: int) -> arb:
        """h^(k+1), energy^(k+1); where H is constant |E0|^(k+1), and 1 where it is 0."""
        unit = self.s.h if self.s.h > 0 else abs(self.s.E0)
        return unit ** (k + 1) if unit > 0 else arb(1)

    @property
    def note(self) -> str:
        n = self.s.size
        if self.matrices is not None:
            return f"contour samples of log(Q U Q) on the {n} sites within {self.order + 1} steps of the detector"
        return f"probed: G_k v for {PROBES} fixed vectors v on {n} sites, from contour samples of log(Q U Q)"

    @cached_property
    def start(self) -> Start:
        return Start(self.setting, self.values)

    @cached_property
    def near(self) -> frozenset[int]:
        return frozenset(self.s.sites)

    @cached_property
    def local(self) -> dict[int, int]:
        return self.s.local()

    @cached_property
    def probes(self) -> list[tuple[State, list[State]]]:
        """Vectors v with their G_0 v, G_1 v, ..."""
        vectors = [probe_vector(self.s.size, p) for p in range(PROBES)]
        return [(v, enclose_actions(self.s, self.order, self.circle, v)) for v in vectors]

    def skip(self, x: int, row: Row) -> bool:
        return x not in self.near and self.start.is_plain(x, row)

    def name(self, k: int, x: int, y: int) -> str:
        space = finite_space(self.setting)
        return f"entry ({space.name(x)}, {space.name(y)}) of G_{k}"


def probe_vector(size: int, which: int) -> State:
    """Small whole complex components without a pattern (digits of pi), so that no error hides in a null space."""
    n = len(_DIGITS)
    step = 2 * which + 1
    parts = [int(_DIGITS[(step * x + 7 * which) % n]) - 4 for x in range(2 * size)]
    return [acb(parts[2 * x] + (x % 3), parts[2 * x + 1]) for x in range(size)]


def suitable_circle(order: int, digits: int, size: int) -> Circle:
    """A circle for matrices where those are affordable, else one for actions on vectors."""
    circle = choose_circle(order, digits, size)
    affordable = dense_cost(size, circle) <= DENSE_WORK
    return circle if affordable else choose_circle(order, digits, size, probing=True)


def measure(setting: Setting, values: Values, sites: tuple[int, ...], order: int, circle: Circle) -> Measured:
    """Everything that claims at one point share, at the working precision."""
    s = system(setting, values, sites)
    if not circle.probing:
        matrices = [m.entries() for m in enclose_generators(s, order, circle)]
        return Measured(setting, values, s, order, circle, matrices)
    if probe_cost(s, circle) > PROBE_WORK:
        raise NotCovered(
            f"{s.size} sites lie within {order + 1} steps of the detector, too many to measure order {order} directly"
        )
    return Measured(setting, values, s, order, circle, None)


def lay_beside(reading: Reading, measured: Measured, digits: int) -> Gauge:
    """Every number of the claim against the measured one; what is not written down is claimed zero."""
    gauge = Gauge(digits)
    claimed = claimed_at(reading, measured.values, measured.skip)
    if 0 in reading.orders:
        _whole_start(reading, claimed, measured, gauge)
    for k in reading.orders:
        if k:
            _beyond(k, claimed.entries[k], measured, gauge)
        if reading.entry is not None:
            _one_entry(k, reading.entry, claimed.entries[k], measured, gauge)
        elif measured.matrices is not None:
            _entrywise(k, claimed.entries[k], measured, gauge)
        else:
            _by_action(k, claimed.entries[k], measured, gauge)
    return gauge


def _whole_start(reading: Reading, claimed: Claimed, measured: Measured, gauge: Gauge) -> None:
    """G_0 against Q H Q, everywhere."""
    by_row: dict[int, dict[int, acb]] = {}
    for (x, y), value in claimed.entries[0].items():
        by_row.setdefault(x, {})[y] = value
    rows = range(len(measured.start.rows)) if reading.entry is None else (reading.entry[0],)
    for x in rows:
        if x in claimed.skipped:
            continue
        here, there = by_row.get(x, {}), measured.start.row(x)
        for y in sorted(here.keys() | there.keys()):
            if reading.entry in (None, (x, y)):
                found = there.get(y, acb(0))
                scale = measured.scale(0).max(found.abs_upper())  # a far bond may be larger than any near one
                gauge.compare(measured.name(0, x, y), here.get(y, acb(0)), found, scale)


def _beyond(k: int, entries: Entries, measured: Measured, gauge: Gauge) -> None:
    """Claimed entries of G_k, k >= 1, outside the ball of sites, where the true ones are zero."""
    for x, y in sorted(entries):
        if x not in measured.near or y not in measured.near:
            gauge.compare(measured.name(k, x, y), entries[x, y], acb(0), measured.scale(k))


def _entrywise(k: int, entries: Entries, measured: Measured, gauge: Gauge) -> None:
    found = iter((measured.matrices or [])[k])
    scale, zero = measured.scale(k), acb(0)
    for x in measured.s.sites:
        for y in measured.s.sites:
            gauge.compare(measured.name(k, x, y), entries.get((x, y), zero), next(found), scale)


def _one_entry(k: int, place: tuple[int, int], entries: Entries, measured: Measured, gauge: Gauge) -> None:
    """<x|G_k|y>; without matrices, row x of G_k applied to the vector |y>."""
    x, y = place
    local = measured.local
    if x not in local or y not in local:
        return  # beyond the ball: compared with 0 already, or with Q H Q
    if measured.matrices is not None:
        found = measured.matrices[k][local[x] * measured.s.size + local[y]]
    else:
        unit = [acb(int(n == local[y])) for n in range(measured.s.size)]
        found = enclose_actions(measured.s, k, measured.circle, unit)[k][local[x]]
    gauge.compare(measured.name(k, x, y), entries.get(place, acb(0)), found, measured.scale(k))


def _by_action(k: int, entries: Entries, measured: Measured, gauge: Gauge) -> None:
    local = measured.local
    space = finite_space(measured.setting)
    for n, (v, actions) in enumerate(measured.probes):
        image = [acb(0)] * measured.s.size
        for (x, y), value in entries.items():
            if x in local and y in local:
                image[local[x]] += value * v[local[y]]
        scale = measured.scale(k) * norm(v)
        for x in measured.s.sites:
            what = f"component {space.name(x)} of G_{k} v, v = probe {n + 1}"
            gauge.compare(what, image[local[x]], actions[k][local[x]], scale)
