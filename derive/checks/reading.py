"""A claim about the generator, read as numbers: which orders it speaks of, and its entries at a point, as balls.

    G = sum_k tau^k G_k;  a claim names one G_k (key "order"), or G up to O(tau^(K+1)) as an expansion or as a matrix
    whose entries are functions of tau; with the key "entry" it names a single element <x|G|y>.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from flint import acb

from derive.errors import NotCovered
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.numerics.series import enclose_series
from derive.problem.setting import Row
from derive.record.said import Claim, Expansion, Matrix

Entries = dict[tuple[int, int], acb]
Skip = Callable[[int, Row], bool]
"""Whether a row of G_0 (or of a matrix in tau) is H's own row, away from the detector, and needs no numbers."""

OPEN_ORDERS = 6
"""Orders compared when a claim says `exactly` about all of G(tau): enough to refute, never to confirm."""


@dataclass(frozen=True)
class Reading:
    """`orders` that are claimed, ascending; `entry` if a single element is; `closed`: nothing beyond is claimed."""

    claim: Claim
    orders: tuple[int, ...]
    entry: tuple[int, int] | None
    closed: bool = True

    @property
    def single_order(self) -> bool:
        return self.claim.quantity is not None and self.claim.quantity.key("order") is not None


def read_claim(claim: Claim) -> Reading:
    """What a claim about the quantity "generator" speaks of."""
    if claim.kind.name not in ("exactly", "order"):
        raise NotCovered(f'"{claim.kind.phrase}" is not decided by coefficients')
    quantity = claim.quantity
    entry = quantity.key("entry") if quantity else None
    place = (int(entry[0]), int(entry[1])) if isinstance(entry, (tuple, list)) else None
    order = quantity.key("order") if quantity else None
    if isinstance(order, int):
        return Reading(claim, (order,), place)
    last = _remainder(claim)
    if last is None:
        return Reading(claim, tuple(range(OPEN_ORDERS + 1)), place, closed=False)
    if last < 1:
        raise NotCovered(f"O(tau^{last}) leaves no coefficient to compare")
    return Reading(claim, tuple(range(last)), place)


def _remainder(claim: Claim) -> int | None:
    """The power of tau that the claim's O(...) names; None where it claims every order."""
    if isinstance(claim.value, Expansion):
        return claim.value.remainder
    return claim.kind.order if claim.kind.name == "order" else None


@dataclass
class Claimed:
    """order -> {(x, y): ball}, an absent entry being claimed zero; rows of G_0 that were `skipped` as H's own."""

    entries: dict[int, Entries]
    skipped: set[int]


def claimed_at(reading: Reading, values: Values, skip: Skip) -> Claimed:
    """The claim's numbers at the given values."""
    claimed = Claimed({k: {} for k in reading.orders}, set())
    value = reading.claim.value
    if isinstance(value, Expansion):
        parts = dict(zip(value.powers, value.terms, strict=True))
        for k in reading.orders:
            _fill(claimed, k, parts.get(k), reading, values, skip)
    elif reading.single_order:
        _fill(claimed, reading.orders[0], value, reading, values, skip)
    else:
        for place, f in _formulas(value, reading, skip, claimed.skipped):
            for k, coefficient in enumerate(enclose_series(f, values, reading.orders[-1] + 1)):
                claimed.entries[k][place] = coefficient
    return claimed


def _fill(claimed: Claimed, k: int, part: object, reading: Reading, values: Values, skip: Skip) -> None:
    """The entries of one coefficient."""
    for place, f in _formulas(part, reading, skip if k == 0 else _never, claimed.skipped):
        claimed.entries[k][place] = enclose(f, values)


def _never(x: int, row: Row) -> bool:
    return False


def _formulas(
    part: object, reading: Reading, skip: Skip, skipped: set[int]
) -> Iterator[tuple[tuple[int, int], Formula]]:
    """((x, y), formula) of a matrix or of the single entry that is named; skipped rows are noted."""
    if part is None:
        return
    if isinstance(part, Formula) and reading.entry is not None:
        yield reading.entry, part
    elif isinstance(part, Matrix):
        for x, row in _rows(part):
            if skip(x, row):
                skipped.add(x)
            else:
                yield from (((x, y), f) for y, f in row if reading.entry in (None, (x, y)))
    else:
        what = "a formula without an entry" if isinstance(part, Formula) else type(part).__name__
        raise NotCovered(f"{what} is not compared with the generator, which is a matrix")


def _rows(matrix: Matrix) -> Iterator[tuple[int, Row]]:
    """The rows that are written down, ascending."""
    patched = dict(matrix.patch)
    for x in range(len(matrix.base)) if matrix.base else sorted(patched):
        yield x, patched[x] if x in patched else matrix.base[x]
