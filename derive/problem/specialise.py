"""A setting at given values of some of its letters."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace as changed

from derive.formula.tree import Formula, replace
from derive.problem.setting import Family, Finite, Interval, Lattice, Relation, Row, Setting, Start, Unitary, Watcher


def at_values(setting: Setting, values: Mapping[str, Formula]) -> Setting:
    """The setting with letters replaced everywhere; replaced letters are no longer declared."""
    if not values:
        return setting
    put = dict(values)

    def row(r: Row) -> Row:
        return tuple((y, replace(f, put)) for y, f in r)

    space = setting.space
    if isinstance(space, (Finite, Unitary)):
        space = changed(space, rows=tuple(row(r) for r in space.rows))
    elif isinstance(space, Lattice):
        space = _lattice(space, put)
    elif isinstance(space, Family):
        space = _family(space, put)
    return changed(
        setting,
        letters=tuple(x for x in setting.letters if x.name not in put),
        space=space,
        detectors=tuple(_watcher(w, put) for w in setting.detectors),
        start=None if setting.start is None else _start(setting.start, put),
        interval=_interval(setting.interval, put),
        assume=tuple(Relation(replace(r.left, put), r.op, replace(r.right, put)) for r in setting.assume),
    )


def _family(space: Family, put: dict[str, Formula]) -> Family:
    return changed(
        space,
        sizes=tuple((key, replace(f, put)) for key, f in space.sizes),
        hopping=replace(space.hopping, put),
        energies=tuple((replace(x, put), replace(f, put)) for x, f in space.energies),
        bonds=tuple((replace(x, put), replace(y, put), replace(f, put)) for x, y, f in space.bonds),
        flux=None if space.flux is None else replace(space.flux, put),
    )


def _lattice(space: Lattice, put: dict[str, Formula]) -> Lattice:
    hopping = None if space.hopping is None else replace(space.hopping, put)
    energies = tuple((site, replace(f, put)) for site, f in space.energies)
    singular = tuple(
        changed(s, energy=replace(s.energy, put), power=replace(s.power, put), logs=replace(s.logs, put),
                amplitude=replace(s.amplitude, put))
        for s in space.singular
    )
    bands = tuple(
        changed(b, low=replace(b.low, put), high=replace(b.high, put), low_power=replace(b.low_power, put),
                high_power=replace(b.high_power, put), factor=replace(b.factor, put))
        for b in space.bands
    )
    return changed(space, hopping=hopping, energies=energies, singular=singular, bands=bands)


def _placed(place: Formula | str | None, put: dict[str, Formula]) -> Formula | str | None:
    return replace(place, put) if isinstance(place, Formula) else place


def _watcher(w: Watcher, put: dict[str, Formula]) -> Watcher:
    vectors = tuple(tuple((x, replace(f, put)) for x, f in v) for v in w.vectors)
    return changed(w, vectors=vectors, efficiency=replace(w.efficiency, put), place=_placed(w.place, put))


def _interval(interval: Interval, put: dict[str, Formula]) -> Interval:
    shape = None if interval.shape is None else replace(interval.shape, put)
    return changed(interval, length=replace(interval.length, put), shape=shape)


def _start(s: Start, put: dict[str, Formula]) -> Start:
    mixture = tuple((replace(w, put), tuple((x, replace(f, put)) for x, f in v)) for w, v in s.mixture)
    distance = None if s.distance is None else replace(s.distance, put)
    return changed(s, mixture=mixture, distance=distance, place=_placed(s.place, put))
