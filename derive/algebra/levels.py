"""What one detector state sees of H, energy by energy, in a field that holds energies and phases.

With u_j = q_j(H) d the orthogonal vectors that H reaches from d, <u_j|u_j> = n_j,

    p_l = <d|E_l|d> = 1/sum_j |q_j(E_l)|^2/n_j,        s_l = <d|E_l|psi>/p_l = sum_j q_j(E_l) <u_j|psi>/n_j,

so the bright part of psi is sum_l s_l E_l d.  Energies whose phases exp(-i E_l tau) coincide are seen as one: their
p add up, and s is the mean with weights p.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.bright import Krylov
from derive.exact.arguments import Domains
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, MINUS_ONE, PI, Formula, call, number, times


@dataclass(frozen=True)
class Levels:
    """Energies as formulas; weights p, amplitudes s (one row a start), phases z = exp(-i E tau) if tau was given."""

    field: Field
    energies: tuple[Formula, ...]
    p: tuple[Element, ...]
    s: tuple[tuple[Element, ...], ...]
    z: tuple[Element, ...]

    @property
    def size(self) -> int:
        return len(self.p)


def levels_of(
    space: Krylov,
    energies: Sequence[Formula],
    overlaps: Sequence[Sequence[Element]],
    tau: Formula | None,
    also: Sequence[Formula],
    domains: Domains,
) -> Levels:
    """p, s and z for a space that was grown from one vector; `also` are formulas that the field must hold besides."""
    below = space.field
    shown = {id(x): below.formula(x) for x in _numbers(space, overlaps)}
    phases = [] if tau is None else [phase_formula(e, tau, domains) for e in energies]
    field = Field.of([*shown.values(), *energies, *phases, *also, I_UNIT, number(1)], domains)
    lifted = {k: field.element(f) for k, f in shown.items()}
    norms = [lifted[id(n)] for n in space.norms]
    rows = [_values(space, lifted, field.element(e)) for e in energies]
    p = tuple(field.one / _weighted(field, r, [field.conjugate(q) for q in r], norms) for r in rows)
    parts = [[lifted[id(c)] for c in part] for part in overlaps]
    s = tuple(tuple(_weighted(field, r, part, norms) for r in rows) for part in parts)
    return Levels(field, tuple(energies), p, s, tuple(field.element(f) for f in phases))


def _weighted(field: Field, a: Sequence[Element], b: Sequence[Element], norms: Sequence[Element]) -> Element:
    """sum_j a_j b_j/n_j."""
    return _total(field, [x * y / n for x, y, n in zip(a, b, norms, strict=True)])


def _numbers(space: Krylov, overlaps: Sequence[Sequence[Element]]) -> list[Element]:
    return [*space.norms, *(a for column in space.columns for a in column.values()), *(c for o in overlaps for c in o)]


def phase_formula(energy: Formula, tau: Formula, domains: Domains) -> Formula:
    """exp(-i E tau), what cancels in E tau cancelled; cosines of rational angles are kept as they are."""
    factors = energy.args if energy.head == "times" else (energy,)
    kept = [f for f in factors if f.head == "call" and f.args[0] == "cos"]
    rest = times(*(f for f in factors if f not in kept))
    field = Field.of([rest, tau], domains)
    angle = field.formula(field.element(rest) * field.element(tau))
    return call("exp", times(MINUS_ONE, I_UNIT, angle, *kept)) if angle != number(0) else number(1)


def _values(space: Krylov, lifted: dict[int, Element], energy: Element) -> list[Element]:
    """q_0(E) ... q_(w-1)(E) by the three-term recursion H u_j = u_(j+1) + a_j u_j + b_j u_(j-1)."""
    field = energy.field
    found = [field.one]
    for j in range(space.size - 1):
        column = space.columns[j]
        step = energy - lifted[id(column[j])] if j in column else energy
        following = step * found[j]
        if j:
            following = following - lifted[id(column[j - 1])] * found[j - 1]
        found.append(following)
    return found


def _total(field: Field, terms: Sequence[Element]) -> Element:
    total = field.zero
    for x in terms:
        total = total + x
    return total


Groups = tuple[tuple[int, ...], ...]


def groups_at(energies: Sequence[Formula], interval: Formula, domains: Domains) -> Groups:
    """Places of energies with one phase exp(-i E tau): (E - E') tau/(2 pi) is a whole number, exactly."""
    field = Field.of([*energies, interval, PI], domains)
    share = field.element(interval) / field.element(PI)
    turns = [(field.element(e) * share).scaled(Fraction(1, 2)) for e in energies]
    groups: list[list[int]] = []
    for place, x in enumerate(turns):
        home = next((g for g in groups if _is_whole(x - turns[g[0]])), None)
        if home is None:
            groups.append([place])
        else:
            home.append(place)
    return tuple(tuple(g) for g in groups)


def _is_whole(x: Element) -> bool:
    plain = x.den is None and bool(x.num.is_constant())
    return not x or (plain and int(x.num.leading_coefficient().q) == 1)


def merged(levels: Levels, groups: Groups) -> Levels:
    """Levels of one phase put together."""
    if len(groups) == levels.size:
        return levels
    field = levels.field
    weights = tuple(_total(field, [levels.p[k] for k in g]) for g in groups)
    means = tuple(tuple(_mean(levels, row, g) for g in groups) for row in levels.s)
    z = tuple(levels.z[g[0]] for g in groups) if levels.z else ()
    energies = tuple(levels.energies[g[0]] for g in groups)
    return Levels(field, energies, weights, means, z)


def _mean(levels: Levels, row: Sequence[Element], group: Sequence[int]) -> Element:
    """The mean of s over levels of one phase, with weights p."""
    weight = _total(levels.field, [levels.p[k] for k in group])
    return _total(levels.field, [levels.p[k] * row[k] for k in group]) / weight


def seen_share(levels: Levels, part: int) -> Element:
    """sum_l p_l |s_l|^2: the squared length of the bright part of one start."""
    field = levels.field
    return _total(field, [p * s * field.conjugate(s) for p, s in zip(levels.p, levels.s[part], strict=True)])
