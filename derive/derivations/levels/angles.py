"""How the level of a path's angle moves: the secular equation around it, order by order, every size left a letter.

Paths of M_a - 1 sites hang on a watched site of energy C, hopping -T.  With E = -2 T cos(theta)

    1/<d|(H-E)^(-1)|d> = C - E - T sum_a [cos(theta) - sin(theta) cot(M_a theta)]

(a ring adds - 2 T cos(Phi) sin(theta)/sin(M theta)).  At an angle theta_k some paths S have a level: M_a theta_k is a
multiple of pi there; the others are apart from it.  With theta = theta_k + u, u = v sin(theta_k), s and c for
sin(theta_k) and cos(theta_k), the secular equation 1/<d|(H-E)^(-1)|d> = 1/Y of `levels.py` is, multiplied by v Y,

    v = Y { v [C - E - m T cos(theta)]
            + T (sin(theta)/s) [ sum_(a in S) u cot(M_a u) - 2 p u/sin(M u) + v sum_(b apart) g_b(v) ] }

with m paths in all, p = (-1)^k cos(Phi), and g_b = s cot(M_b theta): g_b' = - M_b (s^2 + g_b^2), g_b(0) = s cot(M_b
theta_k).  Everything is a power series in v and x = -i tau over Q(M_a)[c, s^2, g_b(0)].  Derived here.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb, factorial

from derive.derivations.levels.topic import bernoulli
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    Formula,
    call,
    children,
    free_letters,
    letter,
    number,
    power,
    rebuild,
    times,
    walk,
)
from derive.problem.setting import Domain, Setting

COS, SQUARE, PHASE, APART, WIDTH = "cosine of theta_k", "square of sine", "phase", "cotangent", "M"
"""Names of generators; no worksheet can declare them."""

Series = list[Element]


@dataclass(frozen=True)
class Bundle:
    """`count` equal paths of M - 1 sites."""

    count: Formula
    M: Formula


@dataclass(frozen=True)
class Joint:
    """Paths at a watched site, seen from one angle: those that have a level there, and the others.

    `phase`: the factors of p on a ring, whose one path counts twice, none for p = -1.  `returns`: <d|H^n|d>,
    n = 0, 1, ...  `turns`: M_b theta_k for those apart.
    """

    shared: tuple[Bundle, ...]
    apart: tuple[Bundle, ...]
    T: Formula
    C: Formula
    angle: Formula
    returns: tuple[Formula, ...]
    phase: tuple[Formula, ...] | None = None
    turns: tuple[Formula, ...] = ()


def moved(setting: Setting, joint: Joint, order: int) -> tuple[dict[int, Formula], dict[int, Formula]]:
    """Coefficients of tau^n in energy and rate, formulas in k and the sizes."""
    near = Near(setting, joint, order)
    series = near.energy_series()
    energy: dict[int, Formula] = {0: times(number(-2), joint.T, call("cos", joint.angle))}
    rate: dict[int, Formula] = {}
    for n in range(1, order + 1):
        sign = Fraction((-1) ** (n // 2) * (2 if n % 2 else 1))
        if series[n]:
            (rate if n % 2 else energy)[n] = near.written(series[n].scaled(sign))
    return energy, rate


class Near:
    """The secular equation around theta_k, as a series in v and x."""

    def __init__(self, setting: Setting, joint: Joint, order: int):
        self.joint, self.order = joint, order
        bundles = (*joint.shared, *joint.apart)
        self.widths = {b.M: f"{WIDTH} {n}" for n, b in enumerate(bundles) if b.M.head != "number"}
        own = [SQUARE, PHASE, *(f"{APART} {n}" for n in range(len(joint.apart))), *self.widths.values()]
        domains = {**setting.domains(), **{name: Domain("real", "") for name in own}}
        known = [f for b in bundles for f in (b.count, b.M) if f not in self.widths]
        base = Field.of([*known, joint.T, joint.C, *joint.returns, *map(letter, own)], domains)
        square = base.element(letter(SQUARE))
        self.field = WithRoot(base, COS, [square - base.one, base.zero])
        self.S, self.c = self.field.lift(square), self.field.root
        self.T, self.C = self.field.element(joint.T), self.field.element(joint.C)
        self.returns = [self.field.element(f) for f in joint.returns]
        self.p = self._phase()

    def _phase(self) -> Element:
        if self.joint.phase is None:
            return self.field.zero
        return self.field.element(letter(PHASE)) if self.joint.phase else -self.field.one

    def written(self, x: Element) -> Formula:
        """Back to k: the generators replaced by what they stand for."""
        theta = self.joint.angle
        sine = call("sin", theta)
        meaning = {COS: (call("cos", theta),), SQUARE: (sine, sine)}
        meaning |= {name: (M,) for M, name in self.widths.items()}
        if self.joint.phase is not None:
            meaning[PHASE] = self.joint.phase
        for n, turn in enumerate(self.joint.turns):
            meaning[f"{APART} {n}"] = (sine, call("cot", turn))
        return _put(self.field.formula(x), meaning)

    def energy_series(self) -> Series:
        """E as a series in x: -2 T (c cos(u) - s sin(u))."""
        v = self._constant(self.field.zero)
        for _ in range(self.order):
            v = self._pushed(v)
        return self._energy(*self._circular(v))

    def _pushed(self, v: Series) -> Series:
        """The right-hand side: one order more is right each time, because Y starts with x."""
        even, odd = self._circular(v)
        energy = self._energy(even, odd)
        slope = [self.T * (a + self.c * b) for a, b in zip(even, odd, strict=True)]  # T sin(theta)/s
        half = self._all_paths().scaled(Fraction(1, 2))
        inner = [half * e - e for e in energy]  # C - E - m T cos(theta)
        inner[0] = inner[0] + self.C
        ends = self._ends(v)
        total = [a + b for a, b in zip(self._times(v, inner), self._times(slope, ends), strict=True)]
        return self._times(self._y(energy), total)

    def _width(self, bundle: Bundle) -> Element:
        """M as a letter of its own, so that its powers stay together."""
        name = self.widths.get(bundle.M)
        return self.field.element(bundle.M if name is None else letter(name))

    def _all_paths(self) -> Element:
        total = self.field.zero
        for b in (*self.joint.shared, *self.joint.apart):
            total = total + self.field.element(b.count)
        return total

    def _ends(self, v: Series) -> Series:
        """sum u cot(M u) - 2 p u/sin(M u) + v sum g_b(v)."""
        square = [self.S * a for a in self._times(v, v)]
        total = self._constant(self.field.zero)
        for b in self.joint.shared:
            M, count = self._width(b), self.field.element(b.count)
            for n in range(self.order // 2 + 1):
                front = count.scaled(_cotangent(n)) - (self.p + self.p).scaled(_inverse_sine(n))
                scale = front * self._whole(M, 2 * n) / M
                total = [t + scale * a for t, a in zip(total, self._raised(square, n), strict=True)]
        for n, b in enumerate(self.joint.apart):
            count, g = self.field.element(b.count), self._composed(self._apart(n, self._width(b)), v)
            total = [t + count * a for t, a in zip(total, self._times(v, g), strict=True)]
        return total

    def _apart(self, n: int, M: Element) -> Series:
        """Taylor coefficients of g_b in v."""
        g = [self.field.element(letter(f"{APART} {n}"))]
        for j in range(self.order):
            inner = self.S if j == 0 else self.field.zero
            for i in range(j + 1):
                inner = inner + g[i] * g[j - i]
            g.append((M * inner).scaled(Fraction(-1, j + 1)))
        return g

    def _y(self, energy: Series) -> Series:
        """Y = x/2 - sum_n B_2n/(2n)! x^(2n) <d|(H - E)^(2n-1)|d>."""
        out = self._constant(self.field.zero)
        if self.order >= 1:
            out[1] = self.field.rational(Fraction(1, 2))
        for n in range(2, self.order + 1, 2):
            front = -bernoulli(n) / factorial(n)
            for k, a in enumerate(self._around(energy, n - 1)[: self.order + 1 - n]):
                out[n + k] = out[n + k] + a.scaled(front)
        return out

    def _around(self, energy: Series, n: int) -> Series:
        """<d|(H - E)^n|d>."""
        total, raised = self._constant(self.field.zero), self._constant(self.field.one)
        for j in range(n + 1):
            front = self.returns[n - j].scaled(Fraction((-1) ** j * comb(n, j)))
            total = [t + front * a for t, a in zip(total, raised, strict=True)]
            raised = self._times(raised, energy)
        return total

    def _energy(self, even: Series, odd: Series) -> Series:
        return [(self.S * b - self.c * a).scaled(Fraction(2)) * self.T for a, b in zip(even, odd, strict=True)]

    def _circular(self, v: Series) -> tuple[Series, Series]:
        """cos(s v) and sin(s v)/s: series in s^2 v^2."""
        square = [self.S * a for a in self._times(v, v)]
        even, odd = self._constant(self.field.zero), self._constant(self.field.zero)
        for n in range(self.order // 2 + 1):
            raised = self._raised(square, n)
            even = [t + a.scaled(Fraction((-1) ** n, factorial(2 * n))) for t, a in zip(even, raised, strict=True)]
            further = self._times(raised, v)
            odd = [t + a.scaled(Fraction((-1) ** n, factorial(2 * n + 1))) for t, a in zip(odd, further, strict=True)]
        return even, odd

    # -- truncated series in x

    def _constant(self, a: Element) -> Series:
        return [a, *[self.field.zero] * self.order]

    def _whole(self, a: Element, n: int) -> Element:
        out = self.field.one
        for _ in range(n):
            out = out * a
        return out

    def _raised(self, a: Series, n: int) -> Series:
        out = self._constant(self.field.one)
        for _ in range(n):
            out = self._times(out, a)
        return out

    def _composed(self, coefficients: Sequence[Element], v: Series) -> Series:
        total = self._constant(self.field.zero)
        for a in reversed(coefficients):
            total = self._times(total, v)
            total[0] = total[0] + a
        return total

    def _times(self, a: Series, b: Series) -> Series:
        out = [self.field.zero] * len(a)
        for i, x in enumerate(a):
            if x:
                for j in range(len(a) - i):
                    if b[j]:
                        out[i + j] = out[i + j] + x * b[j]
        return out


def _put(f: Formula, meaning: Mapping[str, tuple[Formula, ...]]) -> Formula:
    """f with products for its letters; a power of one is taken factor by factor, equal ones together."""
    whole_power = f.head == "power" and f.args[1].head == "number"
    base, n = (f.args[0], f.args[1].args[0]) if whole_power else (f, Fraction(1))
    if base.head == "letter" and base.args[0] in meaning:
        factors = meaning[str(base.args[0])]
        counted = {g: n * factors.count(g) for g in factors}
        return times(*(_powered(g, m) for g, m in counted.items()))
    if not children(f):
        return f
    return _gathered(rebuild(f, tuple(_put(a, meaning) if isinstance(a, Formula) else a for a in f.args)))


def _powered(f: Formula, n: Fraction) -> Formula:
    """f^n; of (-1)^k only whether n is odd counts."""
    if f.head == "power" and f.args[0] == MINUS_ONE and n.denominator == 1 and n > 0:
        return f if n % 2 else ONE
    return f if n == 1 else power(f, number(n))


def _gathered(f: Formula) -> Formula:
    """A sum of sizes and numbers alone, p + 1 + N - p, as N + 1."""
    if f.head != "plus" or any(node.head in ("call", "power") for node in walk(f)):
        return f
    field = Field.of([f], {name: Domain("real", "") for name in free_letters(f)})
    return field.formula(field.element(f))


def _cotangent(n: int) -> Fraction:
    """Coefficient of y^(2n) in y cot(y)."""
    return Fraction((-4) ** n, factorial(2 * n)) * bernoulli(2 * n)


def _inverse_sine(n: int) -> Fraction:
    """Coefficient of y^(2n) in y/sin(y)."""
    return Fraction((-1) ** n * (2 - 4**n), factorial(2 * n)) * bernoulli(2 * n)
