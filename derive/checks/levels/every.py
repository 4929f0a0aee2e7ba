"""Road "exact" for levels of symbolic size: claims "for every L" about paths, proved with the size as a letter.

With xi = -E/(2 T) a path's resolvents are ratios of Chebyshev's polynomials of the second kind,

    <d|(H-E)^(-1)|d> = W/D,    D = (C - E) W - T (m W_ - 2 p),    W ~ U_L(xi),  W_ ~ U_(L-1)(xi),  p = (-1)^k cos(Phi),

scaled so that W_ = 1 at the root xi_k = cos(theta_k) of U_L.  Around it the Taylor coefficients of W follow from

    (1 - xi^2) W'' - 3 xi W' + L (L + 2) W = 0,    (L + 1) W_ = (1 - xi^2) W' + L xi W         (DLMF 18.8, 18.9)

with W = 0, W' = (L + 1)/(1 - xi_k^2) there: L enters as a letter, and no sine of it.  W - Y D = 0 is solved for xi as
a series in x = -i tau, and the claim is compared with E = -2 T xi in a field that holds L, k's angle and the letters.
Y is that of `levels_series.py`; on a ring of three sites a triangle changes it.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from derive.checks.levels.series import (
    K,
    Series,
    below,
    composed,
    formula_of,
    highest_demanded,
    holds_always,
    product,
    y_series,
)
from derive.checks.paths import Arms, arms_of
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    Formula,
    call,
    children,
    free_letters,
    inverse,
    number,
    plus,
    power,
    rebuild,
    times,
)
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.setting import Check, Domain, Setting
from derive.record.said import Claim, Finding


def check_levels_every(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim "for every ..." in k about the bright levels of equal paths."""
    try:
        arms = arms_of(setting)
    except NotCovered:
        return {}
    found: dict[str, Finding] = {}
    for claim in claims:
        quantity = claim.quantity
        if claim.kind.every and quantity is not None and quantity.key("level") == "k":
            judge = _judge_dark if quantity.name.startswith("dark") else _judge
            finding = judge(setting, arms, claim, effort)
            if finding is not None:
                found[claim.id] = finding
    return found


def _judge(setting: Setting, arms: Arms, claim: Claim, effort: Check) -> Finding | None:
    try:
        for sign in (1, -1) if arms.ring and arms.flux is not None else (1,):
            residual = _residual(setting, arms, claim, sign)
            if residual is not None:
                return _refuted(setting, claim, effort, residual)
    except (NotCovered, ZeroDivisionError):
        return None
    return Finding("proved", "exact", evidence="the secular equation is met exactly with the size as a letter")


def _judge_dark(setting: Setting, arms: Arms, claim: Claim, effort: Check) -> Finding | None:
    """Every arm has sin(l theta_k), which ends in sin(theta_k): what of m such ends adds up to 0 is m - 1 states.

    On a ring without flux the path's two ends cancel at the even multiples of pi/N, in one state.
    """
    if arms.ring and arms.flux is not None:
        return None
    try:
        front = times(number(2), K) if arms.ring else K
        theta = times(PI, front, inverse(plus(arms.length, ONE)))
        energy = times(number(-2), arms.T, call("cos", theta))
        count = ONE if arms.ring else arms.count - 1
        demanded = energy if claim.quantity is not None and claim.quantity.name == "dark level energy" else count
        domains = {**setting.domains(), "k": Domain("integer", "integer >= 1", ONE)}
        field = Field.of([formula_of(claim.value), demanded], domains)
        left = field.element(formula_of(claim.value)) - field.element(demanded)
    except (NotCovered, ZeroDivisionError):
        return None
    if left:
        return _refuted(setting, claim, effort, field.formula(left))
    return Finding("proved", "exact", evidence="ends of equal paths cancel, with the size as a letter")


def _refuted(setting: Setting, claim: Claim, effort: Check, residual: Formula) -> Finding:
    for point in sample_points(setting, effort, claim.assume):
        at_one = point.mapping() | {"k": ONE}
        if is_surely_nonzero(residual, type(point)(tuple(at_one.items()))):
            evidence = f"claimed minus what the secular equation demands is {text(residual)[:300]}, not zero at k = 1"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"the residual {text(residual)[:300]} vanishes where tried")


def _residual(setting: Setting, arms: Arms, claim: Claim, sign: int) -> Formula | None:
    """Claimed minus demanded below the order claimed, with (-1)^k put to `sign`; None where that is zero."""
    name = claim.quantity.name if claim.quantity else ""
    value = _signed(formula_of(claim.value), _parity(arms), sign)
    near = Near(setting, arms, value, sign)
    if name == "level multiplicity":
        return below(near.field, near.claimed - near.field.one, 1)
    if name == "level weight":
        return below(near.field, near.claimed - near.weight(), 1)
    order = claim.kind.order
    if order is None:
        raise NotCovered("a series is claimed with its order")
    _enough(setting, arms, claim, highest_demanded(name, order))
    return below(near.field, near.claimed - near.demanded(name, order), order)


def _enough(setting: Setting, arms: Arms, claim: Claim, highest: int) -> None:
    """Whether the moments in Y are those of a large graph, up to the highest coefficient that is demanded."""
    if highest < 4:
        return
    size, least = (arms.length + 1, 4) if arms.ring else (arms.length, 1)
    if not holds_always(size, least, (*setting.assume, *claim.assume), setting.domains()):
        raise NotCovered("small sizes are not kept out")


def _parity(arms: Arms) -> Formula:
    """(-1)^k, or, where the hopping is positive, (-1)^(k + N)."""
    return power(MINUS_ONE, plus(K, arms.length, ONE) if arms.positive else K)


def _signed(f: Formula, parity: Formula, sign: int) -> Formula:
    """f with (-1)^k replaced by its value."""
    if f.head == "power" and f.args[0] == MINUS_ONE and _same_exponent(parity.args[1], f.args[1]):
        return number(sign)
    if not children(f):
        return f
    return rebuild(f, tuple(_signed(a, parity, sign) if isinstance(a, Formula) else a for a in f.args))


def _same_exponent(a: Formula, b: Formula) -> bool:
    domains = {name: Domain("integer", "integer") for name in free_letters(a) | free_letters(b)}
    field = Field.of([a, b], domains)
    return not field.element(a) - field.element(b)


class Near:
    """Everything around one root xi_k, in a field with the size and the angle in it."""

    def __init__(self, setting: Setting, arms: Arms, value: Formula, sign: int):
        domains = {**setting.domains(), "k": Domain("integer", "integer >= 1", ONE)}
        base = Field.of([arms.length], domains)
        M = base.formula(base.element(arms.length) + base.one)
        odd = arms.ring and arms.flux is None
        front = plus(times(number(2), K), MINUS_ONE) if odd else K
        self.theta = times(PI, front, inverse(M))
        cosine = call("cos", arms.flux) if arms.flux is not None else ONE
        formulas = [value, call("cos", self.theta), arms.count, arms.length, arms.T, arms.C, cosine, TAU]
        weight = _weight_formula(setting, arms, self.theta, M)
        self.field = F = Field.of([*formulas, *([weight] if weight is not None else [])], domains)
        self.xi = F.element(call("cos", self.theta))
        self.S = F.one - self.xi * self.xi
        self.count, self.L, self.T, self.C = (
            F.element(f) for f in (arms.count, arms.length, arms.T, arms.C)
        )
        self.claimed = F.element(value)
        p = -1 if odd else sign
        self.p = F.element(cosine).scaled(Fraction(p)) if arms.ring else F.zero
        self._weight = weight

    def weight(self) -> Element:
        """(2/(m M)) sin^2(j theta_k), by the sum of U_i(xi_k)^2 (DLMF 18.2.12, Christoffel and Darboux)."""
        if self._weight is None:
            raise NotCovered("a start at a distance is needed")
        return self.field.element(self._weight)

    def demanded(self, name: str, order: int) -> Element:
        """Energy or rate below tau^order."""
        field, tau = self.field, self.field.element(TAU)
        total, grown = field.zero, field.one
        for n, x in enumerate(self._roots(order)):
            if n:
                grown = grown * tau
            else:
                x = self.xi
            energy = (x * self.T).scaled(Fraction(-2))
            if (n % 2 == 1) == (name == "decay rate"):
                sign = Fraction((-1) ** (n // 2) * (2 if n % 2 else 1))
                total = total + (energy * grown).scaled(sign)
        return total

    def _roots(self, order: int) -> Series:
        """xi - xi_k as a series in x, below x^order."""
        f = self.field
        w = self._chebyshev(order + 1)
        lower = self._lower(w, order + 1)
        d = [f.zero] * order
        slope = f.one / w[1]
        for _ in range(order - 1):
            d = [a - b * slope for a, b in zip(d, self._off(d, w, lower), strict=True)]
        return d

    def _chebyshev(self, length: int) -> Series:
        """Taylor coefficients of W around xi_k, from its differential equation."""
        f, L = self.field, self.L
        w = [f.zero, (L + f.one) / self.S]
        for n in range(length - 2):
            rest = w[n + 1] * self.xi.scaled(Fraction(2 * (n + 1) * n + 3 * (n + 1)))
            rest = rest + w[n].scaled(Fraction(n * (n - 1) + 3 * n)) - w[n] * L * (L + f.rational(2))
            w.append((rest / self.S).scaled(Fraction(1, (n + 2) * (n + 1))))
        return w

    def _lower(self, w: Series, length: int) -> Series:
        """((1 - xi^2) W' + L xi W)/(L + 1), xi = xi_k + delta."""
        f = self.field
        slope = [c.scaled(Fraction(n)) for n, c in enumerate(w)][1:] + [f.zero]
        square = [self.S, self.xi.scaled(Fraction(-2)), -f.one]
        out = []
        for n in range(length - 1):
            total = self.L * (self.xi * w[n] + (w[n - 1] if n else f.zero))
            for j, c in enumerate(square):
                if n >= j:
                    total = total + c * slope[n - j]
            out.append(total / (self.L + f.one))
        return out

    def _off(self, d: Series, w: Series, lower: Series) -> Series:
        """W - Y [(C - E) W - T (m W_ - 2 p)] as a series in x."""
        f = self.field
        W, under = composed(f, w, d), composed(f, lower, d)
        gap = [(x * self.T).scaled(Fraction(2)) for x in d]
        gap[0] = gap[0] + (self.xi * self.T).scaled(Fraction(2)) + self.C
        ends = [self.count * u for u in under]
        ends[0] = ends[0] - self.p.scaled(Fraction(2))
        inner = [a - self.T * b for a, b in zip(product(f, gap, W), ends, strict=True)]
        energy = [-x for x in gap]
        energy[0] = energy[0] + self.C
        y = y_series(f, gap, energy, self.count * self.T * self.T)
        return [a - b for a, b in zip(W, product(f, y, inner), strict=True)]

def _weight_formula(setting: Setting, arms: Arms, theta: Formula, M: Formula) -> Formula | None:
    start = setting.start
    if start is None or start.distance is None:
        return None
    sine = call("sin", times(start.distance, theta))
    shared = ONE if arms.ring else inverse(arms.count)
    return times(number(2), sine, sine, shared, inverse(M))
