"""Infinite lattices as settings, and the experiment on a finite piece of them in floating point."""

from __future__ import annotations

import numpy as np
import scipy.linalg

from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.problem.setting import POSITIVE, Domain, Interval, Lattice, Letter, Relation, Setting, Start, Watcher

REAL = Domain("real", "real")
BELOW = (Relation(parse("2*g*tau"), "<", parse("pi")),)


def lattice(
    name: str = "line", at: int = 0, start: int = 0, below: bool = True, length: str | None = None, hopping: str = "-g",
    impurity: tuple[int, str] | None = None,
) -> Setting:
    """A line or half line with a detector and a start on numbered sites; `impurity` puts an energy on one site."""
    energies = () if impurity is None else ((str(impurity[0]), parse(impurity[1])),)
    return Setting(
        "a lattice",
        (Letter("g", POSITIVE), *((Letter("Delta", REAL),) if impurity else ())),
        Lattice(name, parse(hopping), energies),
        (Watcher((), place=number(at)),),
        Start(place=number(start)),
        Interval() if length is None else Interval(parse(length)),
        BELOW if below else (),
    )


def square(below: bool = True, start_at: str = "0,0", hopping: str = "-g") -> Setting:
    """The square lattice, watched at the origin."""
    space = Lattice("square lattice", parse(hopping))
    watcher, start = (Watcher((), place="0,0"),), Start(place=start_at)
    return Setting("a grid", (Letter("g", POSITIVE),), space, watcher, start, assume=BELOW if below else ())


def by_evolution(
    name: str, at: int, start: int, gt: float, asks: int, impurity: tuple[int, float] | None = None
) -> np.ndarray:
    """phi_1 ... phi_asks by scipy.linalg.expm, on a piece from whose far ends nothing comes back (speed 2 g).

    `impurity`: a site and its energy over g.
    """
    reach = int(2 * gt * asks) + 60
    left = reach if name == "line" else 0
    size = left + max(at, start) + reach
    h = -np.eye(size, k=1) - np.eye(size, k=-1)
    if impurity is not None:
        h[left + impurity[0], left + impurity[0]] = impurity[1]
    step = scipy.linalg.expm(-1j * gt * h)
    psi = np.zeros(size, dtype=complex)
    psi[left + start] = 1
    found = []
    for _ in range(asks):
        psi = step @ psi
        found.append(psi[left + at])
        psi[left + at] = 0
    return np.array(found)
