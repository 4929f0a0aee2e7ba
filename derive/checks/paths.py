"""Families made of paths at one watched site, read off the setting for the checks of claims "for every L".

Equal paths: a chain watched at its end or in the middle, a star watched at its centre, a ring.  Any paths: a chain
watched at any site, a star with arms given one by one.  Any size may be a letter.
"""

from __future__ import annotations

from dataclasses import dataclass

from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.zero import vanishes
from derive.formula.tree import ONE, ZERO, Formula, call, negate, number
from derive.problem.setting import Family, Setting


@dataclass(frozen=True)
class Arms:
    """`count` paths of `length` sites, hopping of size T, the watched site's energy C; a ring is one path, both
    ends of which are joined.  `positive`: the hopping is +T."""

    count: Formula
    length: Formula
    T: Formula
    C: Formula
    ring: bool
    flux: Formula | None
    positive: bool


def arms_of(setting: Setting) -> Arms:
    """The paths of a family, or `NotCovered`."""
    family = setting.space
    if not isinstance(family, Family) or family.bonds or len(setting.detectors) != 1:
        raise NotCovered("no family of equal paths")
    domains = setting.domains()
    sizes, place = dict(family.sizes), setting.detectors[0].place

    def at(f: Formula) -> bool:
        return isinstance(place, Formula) and vanishes(place - f, domains) is True

    T, positive = _hopping(family, setting)
    if family.name == "star" and (place == "centre" or at(ZERO)) and "arms" in sizes:
        return Arms(sizes["arms"], sizes["length"], T, _energy(family), False, None, positive)
    if family.name == "ring" and isinstance(place, Formula):
        whole = family.flux is None or vanishes(call("cos", family.flux) - 1, domains) is True
        flux = None if whole else family.flux
        return Arms(number(2), sizes["sites"] - 1, T, _energy(family), True, flux, positive)
    if family.name == "chain":
        last = sizes["sites"] - 1
        middle = place == "centre" or at(last / 2)
        if not middle and place != "end" and not at(ZERO) and not at(last):
            raise NotCovered("a chain watched elsewhere")
        length = last / 2 if middle else last
        return Arms(number(2) if middle else ONE, length, T, _energy(family), False, None, positive)
    raise NotCovered("no family of equal paths")


@dataclass(frozen=True)
class Hanging:
    """Paths of the given lengths at the watched site, hopping of size T, the watched site's energy C."""

    lengths: tuple[Formula, ...]
    T: Formula
    C: Formula


def hanging_of(setting: Setting) -> Hanging:
    """Every path by itself, in the order in which arms are counted; `NotCovered` elsewhere."""
    family = setting.space
    if not isinstance(family, Family) or family.bonds or len(setting.detectors) != 1:
        raise NotCovered("no family of paths")
    place, sizes = setting.detectors[0].place, dict(family.sizes)
    T, _ = _hopping(family, setting)
    if family.name == "chain" and isinstance(place, Formula):
        return Hanging((place, sizes["sites"] - 1 - place), T, _energy(family))
    if family.name == "star" and "arms" not in sizes and place in ("centre", ZERO):
        return Hanging(tuple(f for key, f in family.sizes if key.startswith("lengths")), T, _energy(family))
    raise NotCovered("no family of paths")


def _hopping(family: Family, setting: Setting) -> tuple[Formula, bool]:
    """(T, whether the hopping is +T)."""
    domains = setting.domains()
    positive = is_positive(family.hopping, domains)
    T = family.hopping if positive else negate(family.hopping)
    if not positive and vanishes(T, domains) is not False:
        raise NotCovered("a hopping of unknown sign")
    return T, positive


def _energy(family: Family) -> Formula:
    """The one energy there is, which stands on the watched site (the measured road would see it elsewhere)."""
    if len(family.energies) > 1:
        raise NotCovered("energies of their own")
    return family.energies[0][1] if family.energies else ZERO
