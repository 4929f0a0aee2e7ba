"""Slow subspaces by plain sparse matrices, from the setting: what the exact road compares state maps with.

Near the detector, in an exact field, both evolutions are power series in tau over range(Q) and a fast space F,

    K = (1 - (1 - q) P) exp(-i H tau)  on  Q + P,         -i tau H_abs  on  Q + (detector and what is attached),

and each has one invariant graph (1; X), X(0) = 0, and one from the left (1, Z).  Coefficients follow one after the
other, the fast block at tau = 0 being a matrix of numbers.  No words, no moments: sites and matrices alone.

Sites are labels 0, 1, ...; the fast component c of the detector's vector a is the label -1 - c r - a.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from math import factorial

from derive.exact.field import Element, Field
from derive.exact.inverse import inverted
from derive.exact.sparse import Sparse, accumulate, added, multiplied, scaled
from derive.formula.tree import I_UNIT, Formula
from derive.problem.balls import ball
from derive.problem.efficiency import missed
from derive.problem.setting import Finite, Setting

Series = list[Sparse]


class Near:
    """The graph within `reach` steps of the detector, cut off there, with q = sqrt(1 - eta) in its field."""

    def __init__(self, setting: Setting, reach: int, also: Iterable[Formula] = ()):
        space = setting.space
        if not isinstance(space, Finite):
            raise TypeError("a finite graph is needed here")
        watcher = setting.detectors[0]
        self.rank = watcher.rank
        self.support = sorted({x for v in watcher.vectors for x, _ in v})
        self.sites = ball(space.rows, self.support, reach)
        q = missed(watcher.efficiency, setting.domains())
        seen: dict[Formula, None] = {I_UNIT: None, q: None}
        seen.update((f, None) for v in watcher.vectors for _, f in v)
        seen.update((f, None) for x in self.sites for _, f in space.rows[x])
        seen.update((f, None) for f in also)
        self.formulas = tuple(seen)
        self.field = Field.of(self.formulas, setting.domains())
        element = self.field.element
        self.q, self.i = element(q), element(I_UNIT)
        inside = set(self.sites)
        self.h: Sparse = {x: {y: element(f) for y, f in space.rows[x] if y in inside} for x in self.sites}
        self.h = {x: row for x, row in self.h.items() if row}
        self.d: Sparse = {}
        for a, v in enumerate(watcher.vectors):
            for x, f in v:
                self.d.setdefault(x, {})[-1 - a] = element(f)
        self.d_dagger = self.dagger(self.d)
        self.outside = added(
            {x: {x: self.field.one} for x in self.sites},
            scaled(multiplied(self.d, self.d_dagger), Fraction(-1)),
        )

    def dagger(self, a: Sparse) -> Sparse:
        out: Sparse = {}
        for x, row in a.items():
            for y, f in row.items():
                out.setdefault(y, {})[x] = self.field.conjugate(f)
        return out

    def number(self, q: Fraction | int) -> Element:
        return self.field.rational(q)

    def coth(self) -> Element:
        """coth(kappa/2) = (1 + q)/(1 - q)."""
        return (self.field.one + self.q) / (self.field.one - self.q)


def times(a: Sparse, factor: Element) -> Sparse:
    return {x: {y: f * factor for y, f in row.items()} for x, row in a.items()} if factor else {}


@dataclass
class Step:
    """T as series: qq[k], qf[k], fq[k], ff[k] for k >= 1; theta = T_QQ(0), `fast` = T_FF(0) by component."""

    theta: Element
    fast: list[list[Element]]
    qq: Series
    qf: Series
    fq: Series
    ff: Series


@dataclass
class Slow:
    """y, x, z from order 1 on (index 0 empty) and N = 1 + Z X (index 0 is Q)."""

    y: Series
    x: Series
    z: Series
    overlap: Series


def solved(near: Near, step: Step, n: int) -> Slow:
    """The slow subspace of a step through order n."""
    lead = [[f - step.theta if a == b else f for b, f in enumerate(row)] for a, row in enumerate(step.fast)]
    inverse = _spread(near, inverted(lead))
    y: Series = [{}]
    left: Series = [{}]
    x: Series = [{}]
    z: Series = [{}]
    for k in range(1, n + 1):
        right_source, left_source = _negative(step.fq[k]), _negative(step.qf[k])
        for m in range(1, k):
            right_source = added(right_source, multiplied(x[k - m], y[m]))
            right_source = added(right_source, _negative(multiplied(step.ff[m], x[k - m])))
            left_source = added(left_source, multiplied(left[m], z[k - m]))
            left_source = added(left_source, _negative(multiplied(z[k - m], step.ff[m])))
        x.append(multiplied(inverse, right_source))
        z.append(multiplied(left_source, inverse))
        y.append(_gathered(step.qq[k], [(step.qf[m], x[k - m]) for m in range(1, k)]))
        left.append(_gathered(step.qq[k], [(z[k - m], step.fq[m]) for m in range(1, k)]))
    overlap = [near.outside] + [_gathered({}, [(z[m], x[k - m]) for m in range(1, k)]) for k in range(1, n + 1)]
    return Slow(y, x, z, overlap)


def _spread(near: Near, numbers: list[list[Element]]) -> Sparse:
    """A matrix of numbers between fast components, times the unit matrix of the detector's vectors."""
    r = near.rank
    return {
        -1 - a * r - v: {-1 - b * r - v: f for b, f in enumerate(row) if f}
        for a, row in enumerate(numbers) for v in range(r)
    }


def _negative(a: Sparse) -> Sparse:
    return scaled(a, Fraction(-1))


def _gathered(first: Sparse, products: list[tuple[Sparse, Sparse]]) -> Sparse:
    total = first
    for a, b in products:
        total = added(total, multiplied(a, b))
    return total


def measured_step(near: Near, n: int) -> Step:
    """K = (1 - (1 - q) P) exp(-i H tau): the blocks of (-i H)^k/k!, those that end on the detector times q."""
    outside, d, bar = near.outside, near.d, near.d_dagger
    step = Step(near.field.one, [[near.q]], [{}], [{}], [{}], [{}])
    power: Sparse = {x: {x: near.field.one} for x in near.sites}
    for k in range(1, n + 1):
        power = times(multiplied(power, near.h), -near.i)
        term = scaled(power, Fraction(1, factorial(k)))
        step.qq.append(multiplied(multiplied(outside, term), outside))
        step.qf.append(multiplied(multiplied(outside, term), d))
        step.fq.append(times(multiplied(multiplied(bar, term), outside), near.q))
        step.ff.append(times(multiplied(multiplied(bar, term), d), near.q))
    return step


def absorber_step(near: Near, kind: str, n: int) -> Step:
    """-i tau H_abs; what couples to an attached site stands on one side squared, on the other as 1."""
    field, one, zero, c = near.field, near.field.one, near.field.zero, near.coth()
    th = one / c
    weight = one
    if kind == "plain":
        fast = [[-th.scaled(Fraction(2))]]
    elif kind == "dressed":
        weight = (c * c).scaled(Fraction(3)) / ((c * c).scaled(Fraction(3)) - one)
        fast = [[-(th * weight).scaled(Fraction(2))]]
    elif kind == "ancilla":
        fast = [[zero, field.rational(-12)], [one, -c.scaled(Fraction(6))]]
    else:
        fast = [
            [-th.scaled(Fraction(2)), (th * th).scaled(Fraction(20)), zero],
            [one, -th.scaled(Fraction(10)), field.rational(-60)],
            [zero, one, zero],
        ]
    step = _around(near, weight, fast, n)
    if kind == "cascade":
        _cascade_orders(near, step, n)
    return step


def _around(near: Near, weight: Element, fast: list[list[Element]], n: int) -> Step:
    """-i tau times A, V (weighted), V† and, on every component, C."""
    step = Step(near.field.zero, fast, *(_empty(n) for _ in range(4)))
    turned = times(near.h, -near.i)
    step.qq[1] = multiplied(multiplied(near.outside, turned), near.outside)
    step.qf[1] = times(multiplied(multiplied(near.outside, turned), near.d), weight)
    step.fq[1] = multiplied(multiplied(near.d_dagger, turned), near.outside)
    own = multiplied(multiplied(near.d_dagger, turned), near.d)
    r = near.rank
    step.ff[1] = {
        x - a * r: {y - a * r: f for y, f in row.items()} for a in range(len(fast)) for x, row in own.items()
    }
    return step


def _empty(n: int) -> Series:
    return [{} for _ in range(n + 1)]


def _cascade_orders(near: Near, step: Step, n: int) -> None:
    """+-i delta on sites 1 and 2, -(5 b - delta^2) between them, b = 12/(1 + tau^2 mu_0/20), rank one."""
    inner = multiplied(multiplied(near.d_dagger, near.h), near.outside)
    mu0 = _entry(near, multiplied(inner, multiplied(near.h, near.d)))
    mu1 = _entry(near, multiplied(multiplied(inner, near.h), multiplied(near.outside, multiplied(near.h, near.d))))
    c = _entry(near, multiplied(near.d_dagger, multiplied(near.h, near.d)))
    delta = (mu1 - c * mu0).scaled(Fraction(1, 60))
    bent = near.field.rational(-60)
    for k in range(2, n + 1, 2):
        bent = -(bent * mu0).scaled(Fraction(1, 20))
        _put(step.ff[k], -2, -3, bent)
    if n >= 3:
        _put(step.ff[3], -2, -2, near.i * delta)
        _put(step.ff[3], -3, -3, -(near.i * delta))
    if n >= 6:
        _put(step.ff[6], -2, -3, delta * delta)


def _entry(near: Near, block: Sparse) -> Element:
    return block.get(-1, {}).get(-1, near.field.zero)


def _put(matrix: Sparse, x: int, y: int, value: Element) -> None:
    if value:
        accumulate(matrix.setdefault(x, {}), {y: value})


# -- series of matrices


def series_product(a: Series, b: Series, n: int) -> Series:
    """Orders 0 ... n of a b."""
    return [
        _gathered({}, [(a[m], b[k - m]) for m in range(k + 1) if m < len(a) and k - m < len(b)])
        for k in range(n + 1)
    ]


def series_inverse(a: Series, n: int) -> Series:
    """1/a through order n for a = Q + O(tau) on range(Q)."""
    out = [a[0]]
    for k in range(1, n + 1):
        out.append(_negative(_gathered({}, [(a[m], out[k - m]) for m in range(1, k + 1) if m < len(a)])))
    return out


def series_exponential(near: Near, a: Series, n: int) -> Series:
    """exp(a) = sum_p a^p/p! through order n, a = O(tau) on range(Q); nothing commutes."""
    total: Series = [near.outside, *a[1 : n + 1]]
    power = a
    for p in range(2, n + 1):
        power = series_product(power, a, n)
        total = [added(t, scaled(f, Fraction(1, factorial(p)))) for t, f in zip(total, power, strict=True)]
    return total
