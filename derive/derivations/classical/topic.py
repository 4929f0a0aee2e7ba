"""Topic `classical`: the same graph walked classically, absorbed at the detector.

continuous   a walker hops along the edge x-y at the rate |H_xy|, both ways; t is the time
discrete     at each step it goes to one of its neighbours, all alike; n counts the steps

Off the detector the distribution obeys p' = -L p (L the Laplacian without the detector's rows and columns) or
p_(n+1) = W p_n (W_xy = 1/deg y there).  Both are self-adjoint, L as it stands and W for <a|b> = sum_x a_x b_x/deg x, so

    S = sum_k w_k exp(-lambda_k t)    or    S = sum_k w_k lambda_k^n,      w(E) = r(E)/q'(E)

q the characteristic polynomial on what p_0 and the all-ones vector both see, r/q = <1|(E - L)^(-1)|p_0>.  The mean is
the integral, or the sum, of S: -r(0)/q(0), or r(1)/q(1).  Units: rates are energies, hbar = 1.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from derive.algebra.bright import Krylov, reached
from derive.algebra.factor import factored
from derive.algebra.polynomial import (
    Polynomial,
    added,
    at,
    characteristic,
    continuants,
    polynomial_formula,
    taylor,
)
from derive.derivations.classical import steps
from derive.derivations.classical.families import Walk, family_walk
from derive.derivations.levels.order import energies_at, reference_values
from derive.derivations.levels.topic import free_letter
from derive.derivations.spectrum import Place, places_in
from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.formula.text import text
from derive.formula.tree import ONE, Formula, call, constant, letter, negate, number, power, replace, times
from derive.formula.tree import plus as total_of
from derive.problem.quantities import Quantity
from derive.problem.setting import Family, Finite, Setting, Wish
from derive.record.said import Claim, Derivation, Kind

T, N = letter("t"), letter("n")
NEAR = 1e-9
"""Floating values closer than this are taken for the same size when the slowest modes are picked."""


def derive_classical(setting: Setting, wish: Wish) -> Derivation:
    """Survival, first-passage density, mean and long-time law of the walk asked for."""
    discrete = wish.option("walk", "continuous") == "discrete"
    if setting.start is None:
        raise NotCovered("a classical walk needs a start")
    if isinstance(setting.space, Family):
        walk, opening, every = family_walk(setting, discrete)
    else:
        walk, opening = _finite(setting, discrete)
        every = ""
    lines = (*steps.equation(discrete), *opening, *steps.laws(walk, discrete))
    notes = () if walk.mean is not None else (("Part of the graph is cut off from the detector: there is no mean.",),)
    return Derivation("classical", _claims(walk, discrete, every), lines, notes=notes)


def _claims(walk: Walk, discrete: bool, every: str) -> tuple[Claim, ...]:
    tail = f", for every {every}" if every else ""
    exactly = Kind("exactly", "exactly" + tail, every=every or None)
    clock = "n" if discrete else "t"
    late = Kind("limit", f"as {clock} -> infinity" + tail, toward=((clock, constant("infinity")),), every=every or None)
    mean = "classical mean of steps" if discrete else "classical mean"
    return tuple(
        Claim(f"classical.{part}", "classical", Quantity(quantity), value, how, walk.assume, valid)
        for part, quantity, value, how, valid in (
            ("survival", "classical survival", walk.survival, exactly, "every time"),
            ("density", "classical density", walk.density, exactly, "every time"),
            ("mean", mean, walk.mean, exactly, "the detector is reached with certainty"),
            ("law", "classical survival", walk.law, late, "the slowest rate is simple"),
        ) if value is not None
    )


# -- an explicit graph


class Graph:
    """L or W off the detector, over an exact field."""

    def __init__(self, setting: Setting, discrete: bool):
        space = setting.space
        if not isinstance(space, Finite) or len(setting.detectors) != 1:
            raise NotCovered("a classical walk is followed on a finite graph with one detector")
        self.setting, self.discrete = setting, discrete
        self.watched = _sites(setting)
        self.rates = {x: {y: self._rate(f) for y, f in row if y != x} for x, row in enumerate(space.rows)}
        start = _distribution(setting)
        formulas = [f for row in self.rates.values() for f in row.values()] + list(start.values())
        self.formulas = [*formulas, ONE]
        self.field = Field.of(self.formulas, setting.domains())
        self.start = {x: self.field.element(p) for x, p in start.items()}
        self.rest = [x for x in self.rates if x not in self.watched]
        self.degree = {x: sum(1 for _ in row) for x, row in self.rates.items()}

    def _rate(self, f: Formula) -> Formula:
        if self.discrete:
            return ONE
        domains = self.setting.domains()
        if is_positive(f, domains):
            return f
        opposite = Field.of([f], domains)
        plain = opposite.formula(-opposite.element(f))
        if is_positive(plain, domains):
            return plain
        raise NotCovered(f"the rate |{text(f)}| of a classical walk needs a hopping of known sign")

    def act(self, p: Vector) -> Vector:
        """L p or W p."""
        out: Vector = {}
        for x in self.rest:
            total = self.field.zero
            for y, rate in self.rates[x].items():
                flow = self.field.element(rate)
                if self.discrete:
                    if y in p and y not in self.watched:
                        total = total + p[y] / self.field.rational(self.degree[y])
                else:
                    total = total + (flow * p[x] if x in p else self.field.zero)
                    if y in p and y not in self.watched:
                        total = total - flow * p[y]
            if total:
                out[x] = total
        return out

    def inner(self, a: Vector, b: Vector) -> Element:
        total = self.field.zero
        for x, f in a.items():
            if x in b:
                term = f * b[x]
                total = total + (term / self.field.rational(self.degree[x]) if self.discrete else term)
        return total

    def everything(self) -> Vector:
        """The vector whose overlap with p is sum_x p_x."""
        return {x: self.field.rational(self.degree[x] if self.discrete else 1) for x in self.rest if self.degree[x]}


def _sites(setting: Setting) -> set[int]:
    vectors = setting.detectors[0].vectors
    if any(len(v) != 1 for v in vectors):
        raise NotCovered("a classical walk is absorbed on sites, not in superpositions")
    return {v[0][0] for v in vectors}


def _distribution(setting: Setting) -> dict[int, Formula]:
    """Probabilities by site: each of the start's states must stand on one site."""
    out: dict[int, Formula] = {}
    for weight, v in setting.start.mixture if setting.start else ():
        if len(v) != 1:
            raise NotCovered("a classical walk starts on sites, not in superpositions")
        out[v[0][0]] = total_of(out[v[0][0]], weight) if v[0][0] in out else weight
    return out


def _finite(setting: Setting, discrete: bool) -> tuple[Walk, tuple[steps.Step, ...]]:
    graph = Graph(setting, discrete)
    field = graph.field
    p0 = {x: p for x, p in graph.start.items() if x not in graph.watched}
    space = reached(field, graph.act, graph.inner, [graph.everything()])
    q = characteristic(space)
    r = _numerator(field, space, graph, p0)
    edge = field.one if discrete else field.zero
    below = at(q, edge)
    mean = at(r, edge) / below if below else None
    name = free_letter(setting)
    modes = [m for p, _ in factored(field, q) for m in _modes(graph, p, q, r, name)]
    walk = Walk(
        total_of(*(m.law(discrete) for m in modes)), total_of(*(m.density(discrete) for m in modes)),
        None if mean is None else field.formula(mean if discrete else -mean), _last(setting, modes, discrete),
    )
    return walk, steps.on_this_graph(polynomial_formula(q, name), name)


def _numerator(field: Field, space: Krylov, graph: Graph, p0: Vector) -> Polynomial:
    """r(E) = sum_i <p_0|u_i> q^(i+1)(E), u_0 the all-ones vector."""
    total: Polynomial = [field.zero]
    for i, u in enumerate(space.basis):
        overlap = graph.inner(p0, u)
        if overlap:
            tail = continuants(space, i + 1) if i + 1 < space.size else [field.one]
            total = added(total, [overlap * c for c in tail]) or [field.zero]
    return total


@dataclass(frozen=True)
class Mode:
    """One rate, or one step's factor, and its weight; `over` where all roots of a polynomial share a formula."""

    place: Place
    value: Formula
    weight: Formula
    over: tuple[str, Formula] | None

    def law(self, discrete: bool) -> Formula:
        return self._summed(times(self.weight, self._fading(discrete)))

    def density(self, discrete: bool) -> Formula:
        """-dS/dt, or S_(n-1) - S_n."""
        if discrete:
            before = power(self.value, total_of(N, number(-1)))
            return self._summed(times(self.weight, total_of(ONE, negate(self.value)), before))
        return self._summed(times(self.weight, self.value, self._fading(False)))

    def single(self, index: int, discrete: bool) -> Formula:
        """The term of one root; a root of a polynomial is named by its number."""
        body = times(self.weight, self._fading(discrete))
        if self.over is None:
            return body
        root = Formula("root", (self.over[1], self.over[0], number(index)))
        return replace(body, {self.over[0]: root})

    def _fading(self, discrete: bool) -> Formula:
        return power(self.value, N) if discrete else call("exp", times(number(-1), self.value, T))

    def _summed(self, body: Formula) -> Formula:
        return body if self.over is None else Formula("rootsum", (self.over[0], self.over[1], body))


def _modes(graph: Graph, factor: Polynomial, q: Polynomial, r: Polynomial, name: str) -> Sequence[Mode]:
    found = []
    for place in places_in(graph.setting, graph.formulas, graph.field, factor, name):
        top = at(place.taken(r), place.root)
        if top:
            over = None if place.polynomial is None else (name, polynomial_formula(place.polynomial, name))
            weight = place.ratio(top, at(place.taken(taylor(q, 1)), place.root), 1)
            found.append(Mode(place, place.field.formula(place.root), weight, over))
    return found


def _last(setting: Setting, modes: Sequence[Mode], discrete: bool) -> Formula:
    """What fades slowest: one mode, or, on a graph of two colours, the two of opposite sign."""
    values = reference_values(setting)
    ranked = []
    for mode in modes:
        for i, e in enumerate(energies_at(mode.place, values), start=1):
            ranked.append((-abs(e) if discrete else e, i, mode))
    slowest = min(e for e, _, _ in ranked)
    return total_of(*(mode.single(i, discrete) for e, i, mode in ranked if abs(e - slowest) < NEAR))
