"""Road "exact" for the levels of unequal paths: claims "for every N" about one arm, every size left a letter.

With xi = -E/(2 T) a path of l sites gives the watched site r = U_(l-1)/U_l (Chebyshev, second kind), and the secular
equation is 1 = Y [C - E - T sum r].  From U_l' and U_(l-1)' (DLMF 18.9.17 and its mirror image) r obeys an equation of
Riccati's, and so does q = 1/r, which is 0 at the arm's own levels:

    (1 - xi^2) r' = (2 l + 1) xi r - l - (l + 1) r^2,      (1 - xi^2) q' = l + 1 - (2 l + 1) xi q + l q^2

Around xi_k = cos(pi k/(l_a + 1)) their Taylor coefficients follow from r(xi_k) or from q(xi_k) = 0, with l a letter.
With xi = xi_k + (1 - xi_k^2) nu the secular equation, times nu Y, is solved as a series in x = -i tau:

    nu = Y { nu [C - E - T sum_apart r] - T sum_shared nu/q }

Which arms share the level is what the claim assumes: sin(pi k M_b/M_a) is 0, or is not.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from derive.checks.levels.arms import arm_of, level_points, number_of, numbers_meant
from derive.checks.levels.series import (
    K,
    Series,
    below,
    by_power,
    composed,
    formula_of,
    highest_demanded,
    holds_always,
    product,
    y_series,
)
from derive.checks.paths import Hanging, hanging_of
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import (
    ONE,
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    children,
    inverse,
    letter,
    number,
    plus,
    power,
    rebuild,
    replace,
    times,
    walk,
)
from derive.numerics.nonzero import is_surely_nonzero
from derive.problem.setting import Check, Domain, Setting
from derive.record.said import Claim, Finding


def check_arms_every(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim "for every ..." about the levels of one arm that exact algebra decides."""
    try:
        paths = hanging_of(setting)
    except NotCovered:
        return {}
    found: dict[str, Finding] = {}
    for claim in claims:
        if claim.kind.every and arm_of(claim) is not None:
            finding = _judge(setting, paths, claim, effort)
            if finding is not None:
                found[claim.id] = finding
    return found


def _judge(setting: Setting, paths: Hanging, claim: Claim, effort: Check) -> Finding | None:
    try:
        residual = _residual(setting, paths, claim)
    except (NotCovered, ZeroDivisionError):
        return None
    if residual is None:
        return Finding("proved", "exact", evidence="the secular equation is met exactly with every size as a letter")
    return _refuted(setting, claim, effort, residual)


def _refuted(setting: Setting, claim: Claim, effort: Check, residual: Formula) -> Finding | None:
    """Refuted where the residual is surely not zero; a whole number behind a sine may hide a zero: then nothing."""
    arm = arm_of(claim) or 1
    for point in level_points(setting, effort, claim.assume, arm):
        for k in numbers_meant(setting, point, claim.assume, arm):
            at = type(point)((*point.values, ("k", number(k))))
            if number_of(claim) in (None, k) and is_surely_nonzero(residual, at):
                said = f"claimed minus what the secular equation demands is {text(residual)[:300]}, not zero at k = {k}"
                return Finding("refuted", "exact", points=1, point=point.text(), evidence=said)
    return None


def _residual(setting: Setting, paths: Hanging, claim: Claim) -> Formula | None:
    """Claimed minus demanded, None where that is zero."""
    name = claim.quantity.name if claim.quantity else ""
    near = Near(setting, paths, claim)
    if name in ("level energy", "decay rate"):
        order = claim.kind.order
        if order is None:
            raise NotCovered("a series is claimed with its order")
        near.must_be_deep(highest_demanded(name, order))
        return near.moving(name, order)
    value = near.field.element(formula_of(claim.value))
    return below(near.field, value - near.still(name), 1)


XI, SINE, COT = "cosine of theta_k", "sine of theta_k", "cotangent at"
"""Names of letters that no worksheet can declare."""


class Near:
    """What is demanded around one arm's xi_k, and the field in which a claim is compared with it.

    The equations are solved with letters for xi_k, sin(theta_k) and, for the other paths, cot(M_b theta_k).
    """

    def __init__(self, setting: Setting, paths: Hanging, claim: Claim):
        self.setting, self.paths, self.claim = setting, paths, claim
        arm = arm_of(claim) or 0
        if not 1 <= arm <= len(paths.lengths):
            raise NotCovered("there is no such arm")
        self.domains = {**setting.domains(), "k": Domain("integer", "integer >= 1", ONE)}
        widths = [self._tidy(plus(f, ONE)) for f in paths.lengths]
        own, level = widths[arm - 1], number_of(claim)
        self.k = K if level is None else number(level)
        self.theta = times(PI, self.k, inverse(own))
        ratios = [self._tidy(times(M, inverse(own))) for M in widths]
        self.turns = [times(PI, self.k, f) if f.head == "number" else times(PI, self.k, M, inverse(own))
                      for f, M in zip(ratios, widths, strict=True)]
        sides = [f for r in claim.assume for f in (r.left, r.right)]
        circular = [call(name, f) for name in ("sin", "cos") for f in (self.theta, *self.turns)]
        known = (formula_of(claim.value), *paths.lengths, paths.T, paths.C, TAU)
        self.field = Field.of([*known, *sides, *self._start(), *circular], self.domains)
        self.shared = [n for n, f in enumerate(ratios) if self._shares(n, f, own)]
        first = {f: n for n, f in reversed(list(enumerate(self.turns)))}  # paths of one length have one cotangent
        self.apart = {n: first[f] for n, f in enumerate(self.turns) if n not in self.shared}

    def _tidy(self, f: Formula) -> Formula:
        field = Field.of([f], self.domains)
        return field.formula(field.element(f))

    def _shares(self, n: int, ratio: Formula, own: Formula) -> bool:
        """Whether path n has the level too: always, never, or as the claim assumes."""
        if ratio.head == "number":
            least = Fraction(ratio.args[0]).denominator
            if self.k != K:
                return int(self.k.args[0]) % least == 0
            if least == 1 or self._tidy(own - least) == number(0):
                return least == 1
        sine = self.field.element(call("sin", self.turns[n]))
        for r in self.claim.assume:
            gap = self.field.element(r.left) - self.field.element(r.right)
            if r.op in ("=", "!=") and (not gap - sine or not gap + sine):
                return r.op == "="
        raise NotCovered("whether another arm has the level is not said")

    # -- what does not move

    def still(self, name: str) -> Element:
        """Multiplicity, weight, and what is said of dark levels."""
        if name == "level multiplicity":
            return self.field.one
        if name == "level weight":
            return self._weight()
        if len(self.shared) < 2:
            raise NotCovered("no level is dark there")
        if name == "dark level energy":
            return self.field.element(times(number(-2), self.paths.T, call("cos", self.theta)))
        return self.field.rational(len(self.shared) - 1)

    def _start(self) -> tuple[Formula, ...]:
        start = self.setting.start
        if start is None or start.distance is None:
            return ()
        return call("sin", times(start.distance, self.theta)), start.distance

    def _weight(self) -> Element:
        """(2/M_0) sin^2(j theta_k), from sum_i U_i(xi_k)^2 (DLMF 18.2.12), times the path's share (1/M_0)/sum 1/M."""
        started = self._start()
        if not started:
            raise NotCovered("a start at a distance is needed")
        sine, j = started
        assume = (*self.setting.assume, *self.claim.assume)
        if not holds_always(self.paths.lengths[0] - j, 0, assume, self.domains):
            raise NotCovered("the first arm is not known to reach that far")
        if 0 not in self.shared:
            return self.field.zero
        M = [self.field.element(plus(f, ONE)) for f in self.paths.lengths]
        total = self.field.zero
        for n in self.shared:
            total = total + self.field.one / M[n]
        s = self.field.element(sine)
        return (s * s).scaled(Fraction(2)) / (M[0] * M[0] * total)

    # -- what moves

    def must_be_deep(self, highest: int) -> None:
        """<d|(H-E)^3|d> knows that every path has a site."""
        assume = (*self.setting.assume, *self.claim.assume)
        if highest >= 4 and not all(holds_always(f, 1, assume, self.domains) for f in self.paths.lengths):
            raise NotCovered("small sizes are not kept out")

    def moving(self, name: str, order: int) -> Formula | None:
        """Claimed minus demanded below tau^order: power by power in letters where the claim is written in them."""
        solved = Solved(self.setting, self.paths, self.shared, self.apart)
        wanted = solved.demanded(name, highest_demanded(name, order))
        claimed = {n: self._lettered(f) for n, f in by_power(self.claim.value).items()}
        if self.k != K or any(TAU in walk(f) or K in walk(f) for f in claimed.values()):
            parts = [times(self._spelt(solved.field.formula(x)), power(TAU, number(n))) for n, x in wanted.items()]
            left = self.field.element(formula_of(self.claim.value)) - self.field.element(plus(*parts))
            return below(self.field, left, order)
        for n in range(order):
            left = solved.field.element(claimed.get(n, ZERO)) - wanted.get(n, solved.field.zero)
            if left:
                return times(self._spelt(solved.field.formula(left)), power(TAU, number(n)))
        return None

    def _lettered(self, f: Formula) -> Formula:
        """Letters for cos(theta_k), sin(theta_k) and the others' cotangents."""
        for name, what in self._meaning().items():
            if f == what:
                return letter(name)
        if not children(f):
            return f
        return rebuild(f, tuple(self._lettered(a) if isinstance(a, Formula) else a for a in f.args))

    def _spelt(self, f: Formula) -> Formula:
        """Letters back to what they stand for."""
        return replace(f, self._meaning())

    def _meaning(self) -> dict[str, Formula]:
        others = {f"{COT} {n}": call("cot", self.turns[n]) for n in sorted(set(self.apart.values()))}
        return {XI: call("cos", self.theta), SINE: call("sin", self.theta), **others}


class Solved:
    """E as a series in x, over the sizes, xi_k, its sine and the others' cotangents."""

    def __init__(self, setting: Setting, paths: Hanging, shared: Sequence[int], apart: Mapping[int, int]):
        self.shared, self.apart = shared, apart
        own = [XI, *dict.fromkeys(f"{COT} {n}" for n in apart.values())]
        domains = {**setting.domains(), **{name: Domain("real", "real") for name in own}}
        base = Field.of([*paths.lengths, paths.T, paths.C, TAU, *map(letter, own)], domains)
        xi = base.element(letter(XI))
        self.field = F = WithRoot(base, SINE, [xi * xi - base.one, base.zero])
        self.xi, self.T, self.C = (F.element(f) for f in (letter(XI), paths.T, paths.C))
        self.lengths = [F.element(f) for f in paths.lengths]
        self.S = F.one - self.xi * self.xi

    def demanded(self, name: str, highest: int) -> dict[int, Element]:
        """Coefficients of tau^n in energy or rate, n up to the highest."""
        series = self.energy(highest + 1)
        return {n: series[n].scaled(Fraction((-1) ** (n // 2) * (2 if n % 2 else 1)))
                for n in range(highest + 1) if (n % 2 == 1) == (name == "decay rate")}

    def energy(self, order: int) -> Series:
        """Below x^order; each round makes one order more right."""
        slopes = [self._upside_down(self._riccati(n, True, order + 1), order) for n in self.shared]
        curves = [self._riccati(n, False, order) for n in self.apart]
        nu = [self.field.zero] * order
        for _ in range(order - 1):
            nu = self._pushed(nu, slopes, curves)
        return self._energies(nu)

    def _energies(self, nu: Series) -> Series:
        """-2 T (xi_k + (1 - xi_k^2) nu)."""
        energy = [-(x * self.S * self.T).scaled(Fraction(2)) for x in nu]
        energy[0] = energy[0] - (self.xi * self.T).scaled(Fraction(2))
        return energy

    def _pushed(self, nu: Series, slopes: list[Series], curves: list[Series]) -> Series:
        F, energy = self.field, self._energies(nu)
        gap = [-e for e in energy]
        gap[0] = gap[0] + self.C
        m, inner = F.rational(len(self.lengths)), list(gap)
        for r in curves:
            inner = [a - self.T * b for a, b in zip(inner, composed(F, r, nu), strict=True)]
        total = product(F, nu, inner)
        for p in slopes:
            total = [a - self.T * b for a, b in zip(total, composed(F, p, nu), strict=True)]
        return product(F, y_series(F, gap, energy, m * self.T * self.T), total)

    def _riccati(self, n: int, upside_down: bool, length: int) -> Series:
        """Coefficients in nu of q (upside down) or r for path n: 1 - xi^2 = (1 - xi_k^2)(1 - 2 xi_k nu - S nu^2)."""
        F, L = self.field, self.lengths[n]
        one, twice = F.one, L + L + F.one
        if upside_down:
            start, constant, linear, square = F.zero, L + one, -twice, L
        else:
            ratio = F.root * F.element(letter(f"{COT} {self.apart[n]}"))  # sin(theta) cot((L + 1) theta)
            start, constant, linear, square = self.xi - ratio, -L, twice, -(L + one)
        f = [start]
        for j in range(length - 1):
            before = f[j - 1] if j else F.zero
            total = linear * (self.xi * f[j] + self.S * before) + (constant if j == 0 else F.zero)
            for i in range(j + 1):
                total = total + square * f[i] * f[j - i]
            total = total + (self.xi * f[j]).scaled(Fraction(2 * j)) + (self.S * before).scaled(Fraction(max(j - 1, 0)))
            f.append(total.scaled(Fraction(1, j + 1)))
        return f

    def _upside_down(self, q: Series, length: int) -> Series:
        """nu/q as a series in nu; q starts with nu."""
        first = self.field.one / q[1]
        out = [first]
        for n in range(1, length):
            total = self.field.zero
            for j in range(1, n + 1):
                total = total + q[j + 1] * out[n - j]
            out.append(-(total * first))
        return out
