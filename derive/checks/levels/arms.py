"""Claims about the levels of one arm, at sizes in numbers: which levels those are, and which k a claim speaks of.

Cutting out the watched site leaves arms, each joined to it by one bond.  They are counted from 1 by their lowest site;
on a chain arm 1 is what lies below the watched site, arm 2 what lies above.  Level k of an arm is its k-th energy from
below, by the eigenvalues of its own block of H.  A relation in k that a claim assumes is decided number by number.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from fractions import Fraction

from flint import acb, acb_mat, arb

from derive.errors import NotCovered, OutsideValidity
from derive.formula.tree import free_letters, number
from derive.numerics.clusters import enclose_clusters
from derive.numerics.evaluate import Values
from derive.numerics.points import decide, sample_points
from derive.numerics.system import System, dense
from derive.problem.points import Point, holds
from derive.problem.setting import Check, Finite, Relation, Setting
from derive.problem.sized import sized
from derive.record.said import Claim

MORE = 8
"""Points drawn for each one wanted, where only some sizes have a level that is meant."""


def arm_of(claim: Claim) -> int | None:
    """The arm that a claim about levels in k names."""
    arm = claim.quantity.key("arm") if claim.quantity else None
    return arm if isinstance(arm, int) else None


def number_of(claim: Claim) -> int | None:
    """The one level of the arm that is meant; None where all are, by k."""
    level = claim.quantity.key("level") if claim.quantity else None
    return level if isinstance(level, int) else None


def meant(claim: Claim, setting: Setting, s: System, values: Values) -> Iterator[tuple[arb, Values]]:
    """(energy at tau = 0, values with k) of every level of the arm that the claim speaks of."""
    arm, found = arm_of(claim), False
    sites = arm_sites(setting, arm) if arm is not None else []
    for k, e in enumerate(_energies(s, sites), start=1):
        if number_of(claim) in (None, k) and _meets(claim.assume, values, k):
            found = True
            yield e, values.with_letter("k", acb(k), Fraction(k))
    if not found:
        raise OutsideValidity("the arm has no such level there")


def arm_sites(setting: Setting, arm: int) -> list[int]:
    """The arm's sites, ascending; none where the arm has no site."""
    space, vector = setting.space, setting.detectors[0].vectors[0]
    if not isinstance(space, Finite) or len(vector) != 1 or setting.detectors[0].rank != 1:
        raise NotCovered("arms are those of a graph watched at one site")
    watched = vector[0][0]
    pieces = _pieces(space, watched)
    if any(sum(y == watched for x in piece for y, _ in space.rows[x]) != 1 for piece in pieces):
        raise NotCovered("an arm is joined to the watched site by one bond")
    if space.shape.family == "chain":
        pieces = [list(range(watched)), list(range(watched + 1, space.size))]
    if not 1 <= arm <= len(pieces):
        raise NotCovered(f"there are {len(pieces)} arms, and number {arm} is spoken of")
    return pieces[arm - 1]


def _pieces(space: Finite, watched: int) -> list[list[int]]:
    """What hangs together without the watched site, by lowest site."""
    left, found = set(range(space.size)) - {watched}, []
    while left:
        piece, reached = [], [min(left)]
        left.discard(reached[0])
        while reached:
            x = reached.pop()
            piece.append(x)
            near = {y for y, _ in space.rows[x]} & left
            left -= near
            reached += sorted(near)
        found.append(sorted(piece))
    return found


def _energies(s: System, sites: Sequence[int]) -> list[arb]:
    """The eigenvalues of the arm's own block, ascending."""
    if not sites:
        return []
    H = dense(s)
    block = acb_mat([[H[x, y] for y in sites] for x in sites])
    return [e for e, m in enclose_clusters(block) for _ in range(m)]


def _meets(assume: Sequence[Relation], values: Values, k: int) -> bool:
    known = {**{name: number(q) for name, q in values.exact.items()}, "k": number(k)}
    return all(holds(r, known, decide) for r in assume if _about_k(r))


def _about_k(relation: Relation) -> bool:
    return "k" in free_letters(relation.left) | free_letters(relation.right)


def level_points(setting: Setting, effort: Check, assume: tuple[Relation, ...], arm: int | None) -> tuple[Point, ...]:
    """Sample points; where relations in k are assumed, those at which most levels of the arm meet them.

    A single one may be the level in the middle, whose energy 0 no factor changes.
    """
    plain = tuple(r for r in assume if not _about_k(r))
    if arm is None or len(plain) == len(assume):
        return sample_points(setting, effort, assume)
    drawn = sample_points(setting, replace(effort, samples=MORE * effort.samples), plain)
    count = {p: len(numbers_meant(setting, p, assume, arm)) for p in drawn}
    meeting = sorted((p for p in drawn if count[p]), key=lambda p: -count[p])
    return tuple(meeting[: effort.samples + len(effort.points)])


def numbers_meant(setting: Setting, point: Point, assume: tuple[Relation, ...], arm: int) -> list[int]:
    """The k at a point that meet the relations."""
    values = Values.at(point.mapping())
    try:
        sites = arm_sites(sized(setting, point.mapping()), arm)
    except OutsideValidity:
        return []
    return [k for k in range(1, len(sites) + 1) if _meets(assume, values, k)]
