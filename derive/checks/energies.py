"""The energies a detector sees, found anew for the exact roads: rational up to one unit, or square roots.

H = h H' with one entry h of H and H' rational; the minimal polynomial of H' seen from the detector is factored over
the rationals, and linear and quadratic factors are solved.  Weights by Lagrange's interpolation from moments,

    p_l = sum_m l_m <d|H'^m|d>,   q_l = sum_m l_m <d|H'^m|psi>,   sum_m l_m x^m = prod_{k != l} (x - x_k)/(x_l - x_k).

Energies with one phase are put together.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import fmpq, fmpq_poly

from derive.checks.observed import Sparse, annihilated
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, ONE, ZERO, Formula, call, number, times
from derive.problem.setting import Finite, Setting, Vector


@dataclass(frozen=True)
class Seen:
    """Weights p, phases z, energies as formulas, and (weight, q) for every state of the start."""

    field: Field
    energies: tuple[Formula, ...]
    p: tuple[Element, ...]
    z: tuple[Element, ...]
    starts: tuple[tuple[Element, tuple[Element, ...]], ...]


def seen_energies(setting: Setting, also: Iterable[Formula] = ()) -> Seen:
    """Everything that the renewal equation needs, for one detector state."""
    space = setting.space
    if not isinstance(space, Finite):
        raise NotCovered("a finite graph is needed here")
    unit, shares = rational_rows(setting)
    vector = setting.detectors[0].vectors[0]
    mixture = setting.start.mixture if setting.start is not None else ()
    plain = Field.of([ONE, *(f for _, f in vector)], setting.domains())
    across = [{y: plain.rational(q) for y, q in row.items()} for row in shares]
    powers, mu = annihilated({x: plain.conjugate(plain.element(f)) for x, f in vector}, across, plain)
    roots = roots_of(mu)
    energies = tuple(scaled(unit, r) for r in roots)
    phases = [phase_of(setting, e) for e in energies]
    field = Field.of([ONE, I_UNIT, *roots, *phases, *also, *_formulas(vector, mixture)], setting.domains())
    rows = [{x: field.element(plain.formula(c)) for x, c in row.items()} for row in powers]
    basis = _lagrange([field.element(r) for r in roots])
    p = _interpolated(field, basis, rows, vector)
    starts = tuple((field.element(w), _interpolated(field, basis, rows, v)) for w, v in mixture)
    return _merged(Seen(field, energies, p, tuple(field.element(f) for f in phases), starts))


def _formulas(vector: Vector, mixture: Sequence[tuple[Formula, Vector]]) -> list[Formula]:
    return [*(f for _, f in vector), *(f for _, v in mixture for _, f in v), *(w for w, _ in mixture)]


def rational_rows(setting: Setting) -> tuple[Formula, list[dict[int, Fraction]]]:
    """(h, H') with H = h H', H' rational."""
    rows = setting.space.rows if isinstance(setting.space, Finite) else ()
    entries = [f for row in rows for _, f in row]
    field = Field.of([ONE, *entries], setting.domains())
    held = [field.element(f) for f in entries]
    unit = field.one if all(x.num.is_constant() and x.den is None for x in held) else held[0]
    return field.formula(unit), [{y: _rational(field.element(f) / unit) for y, f in row} for row in rows]


def _rational(x: Element) -> Fraction:
    if x.den is not None or not x.num.is_constant():
        raise NotCovered("H is no rational matrix times one unit")
    q = x.num.leading_coefficient() if x else fmpq(0)
    return Fraction(int(q.p), int(q.q))


def roots_of(mu: Sequence[Fraction]) -> list[Formula]:
    """All roots, where the factors over the rationals are linear or quadratic."""
    out: list[Formula] = []
    for f, _ in fmpq_poly([fmpq(c.numerator, c.denominator) for c in mu]).factor()[1]:
        c = [Fraction(int(x.p), int(x.q)) for x in (fmpq(1) * x for x in f.coeffs())]
        if len(c) == 2:
            out.append(number(-c[0] / c[1]))
        elif len(c) == 3:
            middle, reach = -c[1] / (2 * c[2]), (c[1] ** 2 - 4 * c[0] * c[2]) / (4 * c[2] ** 2)
            root = call("sqrt", number(reach))
            out += [number(middle) + root if middle else root, number(middle) - root if middle else -root]
        else:
            raise NotCovered("an energy of degree above 2")
    return out


def scaled(unit: Formula, root: Formula) -> Formula:
    if root == ZERO:
        return ZERO
    return times(unit, root)


def phase_of(setting: Setting, energy: Formula) -> Formula:
    """exp(-i E tau), what cancels in E tau cancelled."""
    field = Field.of([energy, setting.interval.length], setting.domains())
    angle = field.formula(field.element(energy) * field.element(setting.interval.length))
    return number(1) if angle == ZERO else call("exp", times(number(-1), I_UNIT, angle))


def _lagrange(roots: list[Element]) -> list[list[Element]]:
    """Coefficients of prod_{k != l} (x - x_k)/(x_l - x_k), constant first."""
    field, out = roots[0].field, []
    for n, x in enumerate(roots):
        line, scale = [field.one], field.one
        for k, y in enumerate(roots):
            if k != n:
                line = [a - y * b for a, b in zip([field.zero, *line], [*line, field.zero], strict=True)]
                scale = scale * (x - y)
        out.append([c / scale for c in line])
    return out


def _interpolated(field: Field, basis: list[list[Element]], rows: list[Sparse], v: Vector) -> tuple[Element, ...]:
    """sum_m l_m <d|H'^m|v> for every level."""
    ket = {x: field.element(f) for x, f in v}
    moments = []
    for row in rows:
        total = field.zero
        for x, c in row.items():
            if x in ket:
                total = total + c * ket[x]
        moments.append(total)
    return tuple(_dot(field, line, moments) for line in basis)


def _dot(field: Field, a: Sequence[Element], b: Sequence[Element]) -> Element:
    total = field.zero
    for x, y in zip(a, b, strict=True):
        total = total + x * y
    return total


def _merged(seen: Seen) -> Seen:
    """Energies with one phase as one."""
    groups: list[list[int]] = []
    for n, z in enumerate(seen.z):
        home = next((g for g in groups if seen.z[g[0]] == z), None)
        if home is None:
            groups.append([n])
        else:
            home.append(n)

    def added(values: Sequence[Element]) -> tuple[Element, ...]:
        return tuple(_dot(seen.field, [values[n] for n in g], [seen.field.one] * len(g)) for g in groups)

    starts = tuple((w, added(q)) for w, q in seen.starts)
    first = [g[0] for g in groups]
    energies = tuple(seen.energies[n] for n in first)
    return Seen(seen.field, energies, added(seen.p), tuple(seen.z[n] for n in first), starts)
