"""Families made of equal paths at one watched site, read off the setting for the checks of claims "for every L".

A chain watched at its end or in the middle, a star watched at its centre, a ring; any size may be a letter.
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

    positive = is_positive(family.hopping, domains)
    T = family.hopping if positive else negate(family.hopping)
    if not positive and vanishes(T, domains) is not False:
        raise NotCovered("a hopping of unknown sign")
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


def _energy(family: Family) -> Formula:
    """The one energy there is, which stands on the watched site (the measured road would see it elsewhere)."""
    if len(family.energies) > 1:
        raise NotCovered("energies of their own")
    return family.energies[0][1] if family.energies else ZERO
