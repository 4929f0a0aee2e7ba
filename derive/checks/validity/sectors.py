"""The detector's sectors at a point, and the exact number of bright dimensions.

Detector vectors fall into sectors that no power of H connects: T_n = D† H^n D (r x r) is block diagonal, in the given
vectors, or after a rotation where all T_n of a block commute.  What belongs to different sectors never mixes, so a
meeting between them is harmless.  Block patterns and commutators are exact zeros in an exact field; the rotation is
made in balls.
"""

from __future__ import annotations

from dataclasses import dataclass

from flint import acb, acb_mat, ctx

from derive.checks.krylov import reach_pattern
from derive.errors import NeedsPrecision, NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.formula.tree import Formula
from derive.numerics.bright import Sector, detector_states, enclose_sector, split_states
from derive.numerics.evaluate import Values
from derive.numerics.system import detector_vectors, finite_space, system, watched_sites
from derive.problem.balls import ball
from derive.problem.points import Point
from derive.problem.setting import Setting
from derive.problem.specialise import at_values

CERTIFIED = 8
"""Bright dimensions up to which the radius is certified."""

LOOKING_BITS = 256
WEIGHTS = (3, -5, 7, 2, -11, 13, 4, -17)
"""Any numbers; unequal enough that commuting matrices added up have no common eigenvalue by chance."""

Block = list[list[Element]]


@dataclass(frozen=True)
class Parted:
    """Detector vectors by number, in sectors; `turned` ones are diagonalised; `bright` dimensions altogether."""

    groups: tuple[tuple[int, ...], ...]
    turned: tuple[bool, ...]
    powers: int
    bright: int


def parted(setting: Setting, point: Point) -> Parted:
    """Sectors and bright dimension, exactly; `NotCovered` beyond `CERTIFIED` dimensions."""
    if dimensions_at_most(setting, point) is None:
        raise NotCovered(f"the detector sees more than {CERTIFIED} dimensions here")
    there = at_values(setting, point.mapping())
    bright = sum(reach_pattern(there))
    rank = len(detector_vectors(there))
    if rank == 1:
        return Parted(((0,),), (False,), 0, bright)
    powers = 2 * (bright + 1)
    returns = _returns(there, powers)
    groups = _connected(returns, rank)
    turned = tuple(len(g) > 1 and _commute(returns, g) for g in groups)
    return Parted(groups, turned, powers, bright)


def dimensions_at_most(setting: Setting, point: Point) -> int | None:
    """None where more than `CERTIFIED` dimensions are surely seen; else about how many, as balls see it."""
    try:
        with ctx.workprec(LOOKING_BITS):
            s = system(setting, Values.at(point.mapping()), _near(setting))
            return enclose_sector(s, detector_states(s), CERTIFIED).bright
    except NeedsPrecision:
        return None


def _near(setting: Setting) -> tuple[int, ...]:
    return ball(finite_space(setting).rows, watched_sites(setting), CERTIFIED + 2)


def enclose_sectors(setting: Setting, point: Point, parts: Parted) -> list[Sector]:
    """The sectors in balls; `NeedsPrecision` where balls see another number of dimensions than there is."""
    s = system(setting, Values.at(point.mapping()), _near(setting))
    states = detector_states(s)
    found = []
    for group, turned in zip(parts.groups, parts.turned, strict=True):
        members = [states[k] for k in group]
        if turned:
            both = enclose_sector(s, members, parts.bright)
            members = split_states(members, _mixed(both, parts.powers))
            found += [enclose_sector(s, [v], parts.bright) for v in members]
        else:
            found.append(enclose_sector(s, members, parts.bright))
    if sum(x.bright for x in found) != parts.bright:
        raise NeedsPrecision("the number of bright dimensions is not seen in balls")
    return found


def _mixed(s: Sector, powers: int) -> acb_mat:
    """sum_n w_n (H'^n)_PP, which has the eigenvectors of every T_n."""
    r, power = s.rank, s.matrix
    total = acb_mat(r, r)
    for n in range(powers):
        weight = acb(WEIGHTS[n % len(WEIGHTS)])
        total = total + acb_mat(r, r, [power[x, y] for x in range(r) for y in range(r)]) * weight
        power = power * s.matrix
    return total


def _returns(setting: Setting, powers: int) -> list[Block]:
    """T_1 ... T_powers in an exact field."""
    rows, vectors = finite_space(setting).rows, detector_vectors(setting)
    sites = ball(rows, watched_sites(setting), powers)
    formulas = {f: None for v in vectors for _, f in v} | {f: None for x in sites for _, f in rows[x]}
    field = Field.of(formulas, setting.domains())
    d = [{x: field.element(f) for x, f in v} for v in vectors]
    columns: list[Vector] = list(d)
    found = []
    for _ in range(powers):
        columns = [_applied(field, rows, v) for v in columns]
        found.append([[_inner(field, a, b) for b in columns] for a in d])
    return found


def _applied(field: Field, rows: tuple[tuple[tuple[int, Formula], ...], ...], v: Vector) -> Vector:
    out: Vector = {}
    for y, a in v.items():
        accumulate(out, {x: field.conjugate(field.element(f)) * a for x, f in rows[y]})
    return out


def _inner(field: Field, a: Vector, b: Vector) -> Element:
    total = field.zero
    for x, f in a.items():
        if x in b:
            total = total + field.conjugate(f) * b[x]
    return total


def _connected(returns: list[Block], rank: int) -> tuple[tuple[int, ...], ...]:
    """Vectors joined by some T_n."""
    groups: list[list[int]] = []
    for a in range(rank):
        near = [g for g in groups if any(t[a][b] or t[b][a] for t in returns for b in g)]
        groups = [g for g in groups if g not in near] + [[*(b for g in near for b in g), a]]
    return tuple(tuple(sorted(g)) for g in groups)


def _commute(returns: list[Block], group: tuple[int, ...]) -> bool:
    """Whether the blocks of all T_n commute, exactly."""
    blocks = [[[t[a][b] for b in group] for a in group] for t in returns]
    return all(not _commutator(x, y) for i, x in enumerate(blocks) for y in blocks[:i])


def _commutator(x: Block, y: Block) -> bool:
    """Whether xy - yx is other than zero."""
    n = range(len(x))
    for a in n:
        for b in n:
            total = x[a][0] * y[0][b] - y[a][0] * x[0][b]
            for k in list(n)[1:]:
                total = total + x[a][k] * y[k][b] - y[a][k] * x[k][b]
            if total:
                return True
    return False
