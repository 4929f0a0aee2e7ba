"""A user's own formula as the same record that a derivation makes."""

from __future__ import annotations

from derive.formula.tree import Formula
from derive.problem.quantities import QUANTITIES, Quantity
from derive.problem.setting import Finite, Own, Setting, Unitary
from derive.record.holds import kind_of
from derive.record.said import Cases, Claim, Matrix, PerRoot, Table, Value


def own_claim(own: Own, setting: Setting) -> Claim:
    """The claim `claim.<name>`; `which` becomes the key that the quantity's table names."""
    return Claim(
        id=f"claim.{own.name}",
        topic=QUANTITIES[own.about].topic,
        quantity=Quantity(own.about, _keys(own)),
        value=_value(own, setting),
        kind=kind_of(own.holds),
        assume=own.assume,
        source=own.source or "",
        origin="user",
    )


def _keys(own: Own) -> tuple[tuple[str, object], ...]:
    keys: list[tuple[str, object]] = []
    if own.which is not None:
        keys.append((QUANTITIES[own.about].which or "which", own.which))
    if own.entry is not None:
        keys.append(("entry", own.entry))
    if own.side is not None:
        keys.append(("side", own.side))
    if own.arm is not None:
        keys.append(("arm", own.arm))
    return tuple(keys)


def _value(own: Own, setting: Setting) -> Value:
    if own.formula is not None:
        return own.formula
    if own.values:
        return Table(own.values)
    if own.cases:
        return Cases(own.cases)
    if own.per_root is not None:
        return PerRoot(*own.per_root)
    if own.matrix is None or not isinstance(setting.space, (Finite, Unitary)):
        raise TypeError(f"claim {own.name}: a formula or a matrix on a finite graph is needed here")
    rows: dict[int, list[tuple[int, Formula]]] = {}
    for x, y, f in own.matrix:
        rows.setdefault(x, []).append((y, f))
    patch = tuple((x, tuple(sorted(rows[x], key=lambda e: e[0]))) for x in sorted(rows))
    beside = QUANTITIES[own.about].shape == "either"  # a network beside the detector, numbered by itself
    size = 1 + max((max(x, y) for x, y, _ in own.matrix), default=0) if beside else setting.space.size
    return Matrix(size, (), patch)
