"""Road "exact" for levels, detectors of rank one: the secular equation, rebuilt from the setting.

With <d|(H - E)^(-1)|d> = -q/h (`resolvent.py`), tau = i x and c = coth(kappa/2) the secular equation is

    F(E, x) = q(E) + h(E) [c x/2 - sum_n B_2n/(2n)! x^(2n) <d|(H-E)^(2n-1)|d>] = 0.

At a claimed E_0 (q(E_0) = 0 must hold exactly, s = q'(E_0)) the series E = E_0 + s nu, x = s^2 z is inserted and
nu <- nu - F/s^2 repeated until F vanishes modulo z^(K+1): that has one solution, and no step divides.  Weights are
|r_psi|^2/(r_V q') at E_0.  A user's claim about level n is laid beside the derived energy of that number.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import comb, factorial

from derive.checks.levels.compare import sibling
from derive.checks.levels.resolvent import Resolvent, bernoulli, polynomial_over
from derive.checks.levels.resolvent_dense import DenseResolvent
from derive.errors import NotCovered
from derive.exact.adjoin import Fractions
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import I_UNIT, TAU, Formula, letter, number, power, replace, times
from derive.formula.tree import plus as total_of
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.efficiency import is_free_of_interval
from derive.problem.setting import Check, Domain, Family, Finite, Setting
from derive.record.said import Claim, Expansion, Finding, PerRoot, Value


def check_levels_exact(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each derived claim about a bright level of a rank-one detector, and for the secular function."""
    if not _served(setting):
        return {}
    try:
        resolvent = Resolvent(setting) if isinstance(setting.space, Finite) else DenseResolvent(setting)
    except NotCovered:
        return {}
    found: dict[str, Finding] = {}
    for claim in claims:
        finding = _judge(setting, claim, claims, resolvent, effort)
        if finding is not None:
            found[claim.id] = finding
    return found


def _served(setting: Setting) -> bool:
    if isinstance(setting.space, Family):
        return True
    one = len(setting.detectors) == 1 and setting.detectors[0].rank == 1
    return one and isinstance(setting.space, Finite) and is_free_of_interval(setting.detectors[0].efficiency)


def _judge(
    setting: Setting, claim: Claim, claims: Sequence[Claim], resolvent: Resolvent, effort: Check
) -> Finding | None:
    name = claim.quantity.name if claim.quantity else ""
    try:
        if name == "secular function":
            return _verdict(setting, claim, effort, *_secular_residual(claim, resolvent))
        named = sibling(claim, claims, "energy") or _named_by_itself(claim) or _numbered(claim, claims)
        if named is None or claim.quantity is None or name.startswith("dark"):
            return None
        level = Level(resolvent, named.value, _besides(claim))
        if level.misses:
            return _verdict(setting, claim, effort, level.misses, level)
        return _verdict(setting, claim, effort, level.residual(name, claim), level)
    except (NotCovered, ZeroDivisionError):
        return None


def _named_by_itself(claim: Claim) -> Claim | None:
    """A user's claim at the roots of a polynomial names its levels by them."""
    return claim if claim.origin != "derived" and isinstance(claim.value, PerRoot) else None


def _besides(claim: Claim) -> list[Formula]:
    """What the field must hold besides the level: the formula of a user's claim about one level."""
    return [] if claim.origin == "derived" or isinstance(claim.value, PerRoot) else [_as_formula(claim.value)]


def _numbered(claim: Claim, claims: Sequence[Claim]) -> Claim | None:
    """The derived energy of the level that a user's claim counts."""
    which = claim.quantity.key("level") if claim.quantity else None
    return next((c for c in claims if c.id == f"levels.{which}.energy" and not isinstance(c.value, PerRoot)), None)


def _verdict(setting: Setting, claim: Claim, effort: Check, residual: Formula | None, level: Level | None) -> Finding:
    if residual is None:
        return Finding("proved", "exact", evidence="the secular equation, rebuilt, is met exactly to the order claimed")
    shown = text(residual)
    shown = shown if len(shown) < 300 else shown[:297] + "..."
    for f in level.at_each_root(residual) if level else [replace(residual, {"E": number(1)})]:
        for point in sample_points(setting, effort, claim.assume):
            if is_surely_nonzero(f, point):
                evidence = f"claimed minus what the secular equation demands is {shown}"
                return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"the residual {shown} vanishes where tried")


# -- a claimed level


class Level:
    """The claimed root of q, in a field that holds it and everything claimed about it."""

    def __init__(self, resolvent: Resolvent, energy: Value, also: Sequence[Formula] = ()):
        self.resolvent = resolvent
        base = resolvent.field
        self.letter: str | None = None
        if isinstance(energy, PerRoot):
            self.letter = energy.letter
            self.polynomial = energy.polynomial
            p = polynomial_over(resolvent.setting, base, resolvent.formulas, self.polynomial, self.letter)
            self.field: Field = Fractions(base, self.letter, [c / p[-1] for c in p[:-1]])
            self.degree = len(p) - 1
        else:
            self.field = Field.of([*resolvent.formulas, _at_zero(energy), *also], resolvent.setting.domains())
        self.root = self.field.element(_at_zero(energy))
        self.q = self._taken(self.resolvent.q)
        self.slope = _value(self.field, _taylor(self.q, 1), self.root)
        off = _value(self.field, self.q, self.root)
        self.misses = self.field.formula(off) if off else None

    def _taken(self, p: Sequence[Element]) -> list[Element]:
        if isinstance(self.field, Fractions):
            return [self.field.lift(c) for c in p]
        return [self.field.element(c.field.formula(c)) for c in p]

    def residual(self, name: str, claim: Claim) -> Formula | None:
        """Claimed minus demanded, None where that is exactly zero."""
        if not self.slope:
            raise NotCovered("a root that is not simple")
        if name == "level multiplicity":
            return _none_if_zero(self.field, self.field.element(_as_formula(claim.value)) - self.field.one)
        if name == "level weight":
            return _none_if_zero(self.field, self.field.element(_as_formula(claim.value)) - self._weight())
        order = claim.value.remainder if isinstance(claim.value, Expansion) else claim.kind.order
        if order is None:
            raise NotCovered("a series is claimed with its order")
        return _below(self.field, self.field.element(_as_formula(claim.value)) - self._demanded(name, order - 1), order)

    def _weight(self) -> Element:
        r, field = self.resolvent, self.field
        seen = self._taken(r.numerator(r.outside(r.hamiltonian(r.d))))
        down = _value(field, seen, self.root) * self.slope
        total = field.zero
        for w, v in r.start:
            psi = {x: r.field.element(f) for x, f in v}
            one = _value(field, self._taken(r.numerator(psi)), self.root)
            total = total + self._taken([r.field.element(w)])[0] * one * field.conjugate(one)
        return total / down

    def _demanded(self, name: str, order: int) -> Element:
        """Energy or rate to tau^order, from nu."""
        field, total, down = self.field, self.field.zero, self.slope
        if name == "level energy":
            total = self.root
        tau, grown = field.element(TAU), field.one
        for k, n in enumerate(self._inserted(order)[1:], start=1):
            grown = grown * tau
            if n and (k % 2 == 1) == (name == "decay rate"):
                sign = Fraction(2 * (-1) ** (k // 2)) if k % 2 else Fraction((-1) ** (k // 2))
                total = total + (n * grown).scaled(sign) / down
            down = down * self.slope * self.slope
        return total

    def _inserted(self, order: int) -> list[Element]:
        """nu = sum n_k z^k with F(E_0 + s nu, s^2 z)/s^2 = 0 modulo z^(order+1)."""
        pushes = [self._taken(f) for f in self.resolvent.pushes(order)]
        nu = [self.field.zero] * (order + 1)
        for _ in range(order):
            off = self._left(nu, pushes)
            nu = [a - b for a, b in zip(nu, off, strict=True)]
        if any(self._left(nu, pushes)):
            raise NotCovered("the inserted series does not settle")
        return nu

    def _left(self, nu: list[Element], pushes: list[list[Element]]) -> list[Element]:
        """F(E_0 + s nu, s^2 z)/s^2, coefficient by coefficient."""
        field, length = self.field, len(nu)
        out = list(nu)
        raised = [field.one, *[field.zero] * (length - 1)]
        scale = [field.one]
        for _ in range(2 * length + len(self.q)):
            scale.append(scale[-1] * self.slope)
        for j in range(length):
            if j >= 2 and j < len(self.q):
                c = _value(field, _taylor(self.q, j), self.root) * scale[j - 2]
                out = [a + c * b for a, b in zip(out, raised, strict=True)]
            for m, f in enumerate(pushes, start=1):
                if j < len(f) and m < length:
                    c = _value(field, _taylor(f, j), self.root) * scale[j + 2 * m - 2]
                    out = [a if k < m else a + c * raised[k - m] for k, a in enumerate(out)]
            raised = _series_product(field, raised, nu)
        return out

    def at_each_root(self, f: Formula) -> list[Formula]:
        if self.letter is None:
            return [f]
        roots = [Formula("root", (self.polynomial, self.letter, number(j))) for j in range(1, self.degree + 1)]
        return [replace(f, {self.letter: r}) for r in roots]


def _with(setting: Setting, name: str) -> dict[str, Domain]:
    return {**setting.domains(), name: Domain("real", "real")}


def _at_zero(value: Value) -> Formula:
    """An energy at tau = 0."""
    if isinstance(value, Expansion):
        f = dict(zip(value.powers, value.terms, strict=True)).get(0, number(0))
        if isinstance(f, Formula):
            return f
    if isinstance(value, PerRoot):
        return letter(value.letter)
    if isinstance(value, Formula):
        return value
    raise NotCovered("an energy is a formula")


def _as_formula(value: Value) -> Formula:
    if isinstance(value, Expansion):
        terms = [
            times(t, power(TAU, number(k))) for k, t in zip(value.powers, value.terms, strict=True)
            if isinstance(t, Formula)
        ]
        return total_of(*terms)
    if isinstance(value, PerRoot):
        return value.formula
    if isinstance(value, Formula):
        return value
    raise NotCovered("a level is claimed by formulas")


def _value(field: Field, p: Sequence[Element], x: Element) -> Element:
    total = field.zero
    for c in reversed(p):
        total = total * x + c
    return total


def _taylor(p: Sequence[Element], j: int) -> list[Element]:
    return [c.scaled(Fraction(comb(k, j))) for k, c in enumerate(p) if k >= j]


def _series_product(field: Field, a: list[Element], b: list[Element]) -> list[Element]:
    out = [field.zero] * len(a)
    for i, x in enumerate(a):
        if x:
            for j in range(len(a) - i):
                if b[j]:
                    out[i + j] = out[i + j] + x * b[j]
    return out


def _none_if_zero(field: Field, x: Element) -> Formula | None:
    return field.formula(x) if x else None


def _below(field: Field, x: Element, order: int) -> Formula | None:
    """The terms of x below tau^order, None where there are none; the denominator is free of tau."""
    at = field.index["letter:tau"]
    if x.den is not None and int(x.den.degrees()[at]) > 0:
        raise NotCovered("tau stands in a denominator")
    kept = field.ring.from_dict({tuple(map(int, m)): c for m, c in x.num.terms() if int(m[at]) < order})
    return None if kept.is_zero() else field.formula(Element(field, kept))


# -- the secular function


def _secular_residual(claim: Claim, resolvent: Resolvent) -> tuple[Formula | None, Level | None]:
    """Claimed minus -q/h - Y(E, -i tau), below the order claimed."""
    if claim.kind.order is None or not isinstance(claim.value, Formula):
        raise NotCovered("the secular function is claimed as a formula up to an order in tau")
    domains = _with(resolvent.setting, "E")
    field = Field.of([*resolvent.formulas, claim.value, letter("E")], domains)

    def taken(p: Sequence[Element]) -> Element:
        return _value(field, [field.element(c.field.formula(c)) for c in p], field.element(letter("E")))

    total = field.element(claim.value) + taken(resolvent.q) / taken(resolvent.h)
    unit = field.element(I_UNIT) * field.element(TAU)
    total = total - unit.scaled(Fraction(1, 2)) * field.element(resolvent.coth)
    for m in range(2, claim.kind.order, 2):
        front = bernoulli(m) / factorial(m) * (-1) ** (m // 2)
        total = total - taken(resolvent.around(m - 1)).scaled(front) * field.element(power(TAU, number(m)))
    return _below(field, total, claim.kind.order), None
