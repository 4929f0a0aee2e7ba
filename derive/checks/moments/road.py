"""Road `exact` for moments and generating functions: the renewal equation, solved by residues.

From the moments <d|H^m|d>, <d|H^m|psi> come the energies seen (rational up to one unit, or square roots), their
weights p_l and q_l (Lagrange's interpolation), and with z_l = exp(-i E_l tau)

    phi(z) = sqrt(eta) v/(1 - a + a u) = sqrt(eta) z M(z)/D(z),
    u = sum p_l/(1 - z z_l),   v = sum q_l z z_l/(1 - z z_l),

a = 1 - sqrt(1 - eta), D(0) = 1.  The zeros of D lie outside the unit circle, so with M*, E* of degree w - 1 and w the
conjugate reversed polynomials of M and D,

    sum_n n^p F_n = eta (1/2 pi i) int M_p M*/(D^(p+1) E*) dz = eta [z^(w-1)] ( M_p M* D^-(p+1) mod E* ),

z M_p/D^(p+1) = (z d/dz)^p (z M/D).  One inverse modulo E* is all that is divided by.  Nothing of Stein's equation,
which the derivation solves, is used.  Derived here; the renewal equation is published (phys-rev-e-95-032141).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Protocol

from derive.checks.detection.road import difference, refuted
from derive.checks.detection.splitting import Forward
from derive.checks.energies import Seen, seen_energies
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import ONE, Formula, call, number
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Claim, Finding

Polynomial = list[Element]
QUANTITIES = ("mean", "conditional mean", "variance", "moment")
MOST_LEVELS = 12


def check_moments(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim about a moment that has a place in an exact field; the others get none."""
    mine = [c for c in claims if c.quantity is not None and c.quantity.name in QUANTITIES]
    try:
        residues = _sums(setting) if mine else None
    except (NotCovered, ZeroDivisionError):
        return {}
    found = {c.id: _judge(setting, c, effort, residues) for c in mine if residues is not None}
    return {name: f for name, f in found.items() if f is not None}


class Sums(Protocol):
    """Moments by the power, p = 0 the total probability."""

    @property
    def field(self) -> Field: ...

    def moment(self, p: int) -> Element: ...


def _sums(setting: Setting) -> Sums:
    """Residues for one detector state and H; else the undetected state followed forward."""
    one = len(setting.detectors) == 1 and setting.detectors[0].rank == 1
    return Residues(setting) if one and isinstance(setting.space, Finite) else Forward(setting)


def _judge(setting: Setting, claim: Claim, effort: Check, residues: Sums) -> Finding | None:
    if not isinstance(claim.value, Formula) or claim.kind.name != "exactly":
        return None
    try:
        residual = difference(claim.value, _truth(claim, residues), setting)
    except (NotCovered, ZeroDivisionError):
        return None
    name = claim.quantity.name if claim.quantity else ""
    if residual is None:
        return Finding("proved", "exact", evidence="from the renewal equation, the difference is exactly zero")
    return refuted(setting, claim, effort, name, residual)


def _truth(claim: Claim, residues: Sums) -> Formula:
    name = claim.quantity.name if claim.quantity else ""
    if name == "mean":
        return residues.field.formula(residues.moment(1))
    total = residues.moment(0)
    if name == "conditional mean":
        return residues.field.formula(residues.moment(1) / total)
    if name == "variance":
        mean = residues.moment(1) / total
        return residues.field.formula(residues.moment(2) / total - mean * mean)
    p = claim.quantity.key("power") if claim.quantity else None
    if not isinstance(p, int):
        raise NotCovered("which moment is not said")
    return residues.field.formula(residues.moment(p))


@dataclass(frozen=True)
class Start:
    """One state of the start: its weight and M(z)."""

    weight: Element
    m: Polynomial


class Residues:
    """phi = sqrt(eta) z M/D for every state of the start, and the sums over asks."""

    def __init__(self, setting: Setting, also: Iterable[Formula] = ()):
        if setting.interval.law != "fixed" or len(setting.detectors) != 1 or setting.detectors[0].rank != 1:
            raise NotCovered("one detector state at fixed intervals is needed here")
        eta = setting.detectors[0].efficiency
        missed = ONE - eta if eta.head != "number" else number(1 - eta.args[0])
        root = call("sqrt", missed) if missed != number(0) else missed
        seen = seen_energies(setting, [eta, root, *also])
        if len(seen.p) > MOST_LEVELS:
            raise NotCovered("too many levels for an exact sum over asks")
        self.field: Field = seen.field
        self.eta = self.field.element(eta)
        self.a = self.field.one - self.field.element(root)
        self.starts = tuple(Start(w, self._tidied(_weighted(seen, q))) for w, q in seen.starts)
        self.d = self._tidied(self._denominator(seen))
        self.w = len(seen.p)
        self.modulus = self._reversed(self.d, self.w)
        self._inverse: Polynomial | None = None

    def _denominator(self, seen: Seen) -> Polynomial:
        """D = (1 - a) prod (1 - z z_l) + a sum_l p_l prod_{k != l} (1 - z z_k)."""
        field = self.field
        whole = product_of(field, seen.z)
        parts = combined(field, [(p, product_of(field, [z for k, z in enumerate(seen.z) if k != n]))
                                  for n, p in enumerate(seen.p)])
        return combined(field, [(field.one - self.a, whole), (self.a, parts)])

    def _reversed(self, p: Polynomial, degree: int) -> Polynomial:
        """z^degree conj(p)(1/z)."""
        conjugate = self.field.conjugate
        full = [*p, *[self.field.zero] * (degree + 1 - len(p))]
        return self._tidied([conjugate(c) for c in reversed(full)])

    def _tidied(self, p: Polynomial) -> Polynomial:
        """Coefficients as fractions in the phases u alone, 1/u written as a division, so that fractions cancel."""
        field = self.field
        out = []
        for c in p:
            for name, _ in field.relations:
                if name + "bar" in field.gen:
                    k = int(c.num.degrees()[field.index[name + "bar"]])
                    if k > 0:
                        lift = field.gen[name] ** k
                        den = lift if c.den is None else c.den * lift
                        c = field.quotient(field.reduce(c.num * lift), den)
            out.append(c)
        return out

    @property
    def inverse(self) -> Polynomial:
        """1/D modulo E*."""
        if self._inverse is None:
            self._inverse = _inverse_modulo(self.field, self.d, self.modulus)
        return self._inverse

    def moment(self, p: int) -> Element:
        """sum_n n^p F_n."""
        total = self.field.zero
        for start in self.starts:
            top = multiplied(self.field, self._derived(start.m, p), self._reversed(start.m, self.w - 1))
            for _ in range(p + 1):
                top = self._modulo(multiplied(self.field, self._modulo(top), self.inverse))
            share = top[self.w - 1] if len(top) >= self.w else self.field.zero
            total = total + start.weight * share
        return total * self.eta

    def _modulo(self, f: Polynomial) -> Polynomial:
        """f modulo E*, which is monic."""
        rest = list(f)
        for k in range(len(rest) - 1, self.w - 1, -1):
            c = rest[k]
            if c:
                for j, e in enumerate(self.modulus):
                    rest[k - self.w + j] = rest[k - self.w + j] - c * e
        return rest[: self.w]

    def _derived(self, m: Polynomial, p: int) -> Polynomial:
        """M_p: z M_(k+1) = z (z M_k)' D - (k + 1) z (z M_k) D', z M_k over D^(k+1)."""
        field, d = self.field, self.d
        slope = [c.scaled(Fraction(k)) for k, c in enumerate(d)]  # z D'
        for k in range(p):
            grown = [c.scaled(Fraction(j + 1)) for j, c in enumerate(m)]  # (z M)'
            lost = [c.scaled(Fraction(-(k + 1))) for c in multiplied(field, m, slope)]
            m = combined(field, [(field.one, multiplied(field, grown, d)), (field.one, lost)])
        return m

    def coefficients(self, m: Polynomial, count: int) -> list[Element]:
        """phi_1 ... phi_count without the factor sqrt(eta): z M/D expanded."""
        found: list[Element] = []
        for n in range(count):
            c = m[n] if n < len(m) else self.field.zero
            for k in range(1, min(n, len(self.d) - 1) + 1):
                c = c - self.d[k] * found[n - k]
            found.append(c)
        return found


def _weighted(seen: Seen, q: Sequence[Element]) -> Polynomial:
    """M = sum_l q_l z_l prod_{k != l} (1 - z z_k)."""
    return combined(seen.field, [
        (c * seen.z[n], product_of(seen.field, [z for k, z in enumerate(seen.z) if k != n])) for n, c in enumerate(q)
    ])


def product_of(field: Field, z: Sequence[Element]) -> Polynomial:
    """prod (1 - z z_k)."""
    out = [field.one]
    for x in z:
        out = multiplied(field, out, [field.one, -x])
    return out


def combined(field: Field, terms: Sequence[tuple[Element, Polynomial]]) -> Polynomial:
    """sum c f."""
    out = [field.zero] * max(len(f) for _, f in terms)
    for c, f in terms:
        for k, x in enumerate(f):
            out[k] = out[k] + c * x
    return out


def multiplied(field: Field, a: Polynomial, b: Polynomial) -> Polynomial:
    out = [field.zero] * (len(a) + len(b) - 1)
    for i, x in enumerate(a):
        if x:
            for j, y in enumerate(b):
                out[i + j] = out[i + j] + x * y
    return out


def _inverse_modulo(field: Field, f: Polynomial, modulus: Polynomial) -> Polynomial:
    """1/f modulo a monic polynomial: f times z^j, j = 0 ... w-1, combined to 1."""
    w = len(modulus) - 1
    column, columns = _shifted_down(field, f, modulus), []
    for _ in range(w):
        columns.append(column)
        column = _shifted_down(field, [field.zero, *column], modulus)
    rows = [[columns[j][i] for j in range(w)] + [field.one if i == 0 else field.zero] for i in range(w)]
    return _solve(rows)


def _shifted_down(field: Field, f: Polynomial, modulus: Polynomial) -> Polynomial:
    w = len(modulus) - 1
    rest = [*f, *[field.zero] * (w - len(f))]
    for k in range(len(rest) - 1, w - 1, -1):
        c = rest[k]
        if c:
            for j, e in enumerate(modulus):
                rest[k - w + j] = rest[k - w + j] - c * e
    return rest[:w]


def _solve(rows: list[list[Element]]) -> Polynomial:
    """x from rows (M | b)."""
    n = len(rows)
    for k in range(n):
        pivot = next((i for i in range(k, n) if rows[i][k]), None)
        if pivot is None:
            raise ZeroDivisionError("D and its mirror image have a common zero")
        rows[k], rows[pivot] = rows[pivot], rows[k]
        top = rows[k][k]
        rows[k] = [x / top if x else x for x in rows[k]]
        for i in range(n):
            c = rows[i][k]
            if i != k and c:
                rows[i] = [x - c * y if y else x for x, y in zip(rows[i], rows[k], strict=True)]
    return [row[n] for row in rows]
