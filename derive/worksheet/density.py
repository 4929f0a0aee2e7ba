"""family = "density": the singular points of a local density of states and, where it is known everywhere, its bands.

A singular point says energy, power, logs, side and amplitude.  A band runs from one singular point to another; the
density on it is |E - from|^p |E - to|^q factor, p and q the powers said there, so amplitudes follow from the bands.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, negate, plus, power, times
from derive.formula.tree import replace as put
from derive.problem.conjugate import conjugate
from derive.problem.setting import Band, Lattice, Singular
from derive.worksheet.bonds import AT
from derive.worksheet.keys import BAND, SIDES, SINGULAR
from derive.worksheet.measured import simplified
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, rational, shown

ENERGY = "E"
"""The letter that a band's factor brings along."""
MOST = 100
"""Singular points, and bands."""


def read_density(r: Reader, table: Mapping[str, Any]) -> Lattice:
    """The density as far as it could be read; faults have been added for the rest."""
    points = _singular_points(r, table, "band" in table)
    if "band" not in table:
        return Lattice("density", None, (), points)
    bands = _bands(r, table["band"], points)
    found = tuple(_one_sided(r, bands)) if bands else points
    return Lattice("density", None, (), found, bands)


def _singular_points(r: Reader, table: Mapping[str, Any], complete: bool) -> tuple[Singular, ...]:
    path = (*AT, "singular")
    if "singular" not in table:
        r.faults.add(AT, "a density needs its singular points.", "Add [[graph.singular]] with energy and power.")
        return ()
    if not r.is_list(path, table["singular"], "singular", MOST):
        return ()
    read = (_singular(r, (*path, k), inner, complete) for k, inner in enumerate(table["singular"]))
    return tuple(point for point in read if point is not None)


def _singular(r: Reader, path: Path, value: Any, complete: bool) -> Singular | None:
    point = r.table(path, value, SINGULAR, "a singular point")
    if point is None:
        return None
    for key in SINGULAR:
        if key.required and key.name not in point:
            r.faults.add(path, f"this singular point has no {key.name}.", f'Add  {key.name} = "0".')
    if complete and "amplitude" in point:
        r.faults.add_key((*path, "amplitude"), "amplitude follows from the bands.", "Take it out.")
    read = {n: r.formula((*path, n), v) for n, v in point.items() if n != "side"}
    side = r.choice((*path, "side"), point.get("side", "both"), SIDES, "a side")
    energy, exponent = read.get("energy"), read.get("power")
    if energy is None or exponent is None or side is None or not _stands(r, path, read):
        return None
    return Singular(energy, exponent, read.get("logs") or ZERO, side, read.get("amplitude") or ONE)


def _stands(r: Reader, path: Path, read: Mapping[str, Formula | None]) -> bool:
    """Whether everything is real, the density can be integrated and the amplitude is no negative number."""
    real = all(_is_real(r, (*path, name), f) for name, f in read.items() if f is not None)
    exponent = rational(read["power"]) if read["power"] is not None else None
    if exponent is not None and exponent <= -1:
        message = f"a density that rises like |E - energy|^({exponent}) holds no finite weight."
        r.faults.add((*path, "power"), message, "A power is above -1.")
        return False
    front = read.get("amplitude")
    size = rational(front) if front is not None else None
    if size is not None and size <= 0:
        r.faults.add((*path, "amplitude"), f"the amplitude is {size}, and a density is positive.", "Write one above 0.")
        return False
    return real


def _is_real(r: Reader, path: Path, f: Formula) -> bool:
    """Whether f is not surely complex."""
    turned = conjugate(f, r.domains)
    if turned == f or vanishes(plus(f, negate(turned)), r.domains) is not False:
        return True
    r.faults.add(path, f"{shown(text(f))} is not real, and a density is.", "Write a real formula.")
    return False


# -- bands


def _bands(r: Reader, value: Any, points: tuple[Singular, ...]) -> tuple[Band, ...]:
    path = (*AT, "band")
    if ENERGY in (r.letters or {}):
        mend = "Declare your letter under another name."
        r.faults.add_key(("symbols", ENERGY), "E is the energy in a band's factor.", mend)
        return ()
    if not r.is_list(path, value, "band", MOST):
        return ()
    if not value:
        r.faults.add(path, "there is no band.", "Write [[graph.band]] with from, to and factor, or take the key out.")
        return ()
    read = [_band(r, (*path, k), inner, points) for k, inner in enumerate(value)]
    if None in read:
        return ()
    bands = tuple(b for b in read if b is not None)
    _check_all_used(r, points, bands)
    return bands


def _band(r: Reader, path: Path, value: Any, points: tuple[Singular, ...]) -> Band | None:
    table = r.table(path, value, BAND, "a band")
    if table is None:
        return None
    for key in BAND:
        if key.name not in table:
            r.faults.add(path, f"this band has no {key.name}: {key.says}.", f'Add  {key.name} = "...".')
    read = {n: r.formula((*path, n), v, (ENERGY,) if n == "factor" else ()) for n, v in table.items()}
    low, high, factor = (read.get(n) for n in ("from", "to", "factor"))
    if low is None or high is None or factor is None:
        return None
    first, last = (_power_at(r, (*path, n), e, points, side)
                   for n, e, side in (("from", low, "above"), ("to", high, "below")))
    return None if first is None or last is None else Band(low, high, first, last, factor)


def _power_at(r: Reader, path: Path, energy: Formula, points: tuple[Singular, ...], side: str) -> Formula | None:
    """The power of the singular point at a band's end."""
    found = next((p for p in points if p.side in (side, "both") and _same(r, p.energy, energy)), None)
    if found is None:
        end = "begins" if side == "above" else "ends"
        mend = f'Add [[graph.singular]] with  energy = "{text(energy)}"  and its power.'
        r.faults.add(path, f"the band {end} at {text(energy)}, and no singular point there says a power.", mend)
        return None
    if found.logs != ZERO:
        r.faults.add(path, "a band has powers at its ends and no logarithms.", "Leave the bands out.")
        return None
    return found.power


def _same(r: Reader, a: Formula, b: Formula) -> bool:
    return a == b or vanishes(plus(a, negate(b)), r.domains) is True


def _check_all_used(r: Reader, points: tuple[Singular, ...], bands: tuple[Band, ...]) -> None:
    ends = [(b.low, "above") for b in bands] + [(b.high, "below") for b in bands]
    for k, p in enumerate(points):
        if not any(p.side in (side, "both") and _same(r, p.energy, e) for e, side in ends):
            message = f"no band begins or ends at {text(p.energy)}."
            r.faults.add((*AT, "singular", k, "energy"), message, "Begin or end one there, or take the point out.")


def _one_sided(r: Reader, bands: tuple[Band, ...]) -> list[Singular]:
    """The ends of the bands as singular points, with the amplitudes that the bands give them."""
    found = []
    for b in bands:
        width = _plain(r, plus(b.high, negate(b.low)))
        for energy, own, other, side in ((b.low, b.low_power, b.high_power, "above"),
                                         (b.high, b.high_power, b.low_power, "below")):
            front = _plain(r, times(power(width, other), put(b.factor, {ENERGY: energy})))
            found.append(Singular(energy, own, ZERO, side, front))
    return found


def _plain(r: Reader, f: Formula) -> Formula:
    """f as its exact field writes it, where there is one."""
    return simplified(f, r) or f
