"""Edges, energies, bonds and fluxes of a graph whose sites are known; then its matrix."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path as FilePath
from typing import Any

from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import ONE, Formula, negate, plus
from derive.problem.conjugate import conjugate
from derive.problem.graphs import MOST_EDGES, MOST_SITES, Bond, FluxFault, Loop, assemble, with_bonds
from derive.problem.setting import Shape
from derive.worksheet.edges import Report, file_edges, inline_edges, number_sites, open_edges
from derive.worksheet.keys import FLUX
from derive.worksheet.places import Sites, refuse_dotted
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, shown

AT: Path = ("graph",)


@dataclass
class Bare:
    """A graph before its matrix: sites, bonds, names, shape."""

    size: int
    bonds: list[Bond]
    names: tuple[str, ...] | None
    shape: Shape
    family: str = ""


def listed_graph(r: Reader, kind: str, value: Any, folder: FilePath) -> tuple[Bare | None, set[int]]:
    """The listed graph, and which of its bonds want the hopping."""
    path = (*AT, kind)
    if kind == "edges":
        edges = inline_edges(r, path, value)
        if edges is None:
            return None, set()

        listed = number_sites(edges, _inline_report(r, path))
    else:
        opened = open_edges(r, path, value, folder)
        if opened is None:
            return None, set()
        edges, tell, whole = file_edges(r, path, *opened)
        listed = number_sites(edges, tell) if whole and edges else None
    if listed is None:
        return None, set()
    missing = {k for k, e in enumerate(edges) if e.value is None}
    return Bare(listed.size, listed.bonds, listed.names, Shape(kind, (("sites", str(listed.size)),))), missing


def _inline_report(r: Reader, path: Path) -> Report:
    def report(k: int, column: int, message: str, mend: str) -> None:
        r.faults.add((*path, k, column) if column >= 0 else (*path, k), message, mend)

    return report


def finish(r: Reader, table: Mapping[str, Any], bare: Bare) -> Sites:
    """Energies, bonds and fluxes on a graph whose sites are known; then the matrix."""
    plain = assemble(bare.size, [(x, y, ONE) for x, y, _ in bare.bonds], {}, bare.shape, {}, bare.names)
    sites = Sites(bare.size, bare.names, plain, bare.family)
    energies = _energies(r, sites, table)
    bonds = _bonds(r, sites, table, bare)
    loops = _loops(r, sites, table, bare)
    try:
        edges = with_bonds(bare.bonds, bonds) if bonds else bare.bonds
        sites.space = assemble(bare.size, edges, energies, bare.shape, r.domains, bare.names, loops)
    except FluxFault as fault:
        path = (*AT, "flux", fault.loop) if isinstance(table["flux"], (list, tuple)) else (*AT, "flux")
        mend = "A loop goes along edges; each loop listed must have a flux of its own."
        r.faults.add(path, f"this loop carries no flux: {fault.reason}.", mend)
    return sites


def _energies(r: Reader, sites: Sites, table: Mapping[str, Any]) -> dict[int, Formula]:
    value = table.get("energies", {})
    path = (*AT, "energies")
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where energies is a table.", "Write { site = formula }.")
        return {}
    out: dict[int, Formula] = {}
    for key, inner in value.items():
        if refuse_dotted(r, (*path, str(key)), inner):
            continue
        at = sites.find(r, (*path, str(key)), key if isinstance(key, int) else str(key), key=True)
        f = r.formula((*path, str(key)), inner)
        if at is not None and at in out:
            r.faults.add_key((*path, str(key)), f"site {sites.name(at)} stands here twice.", "Keep one of the two.")
        elif at is not None and f is not None and is_real(r, (*path, str(key)), f):
            out[at] = f
    return out


def is_real(r: Reader, path: Path, f: Formula, what: str = "H_xx") -> bool:
    """An energy is a diagonal entry of a Hermitian matrix; a flux is an angle."""
    turned = conjugate(f, r.domains)
    same = turned == f or vanishes(plus(f, negate(turned)), r.domains)
    if same is None:
        r.faults.add(path, f"it could not be decided whether {shown(text(f))} is real.", _WRITE_REAL)
    elif not same:
        r.faults.add(path, f"{shown(text(f))} is not real, and {what} is.", _REAL_MEND)
    return same is True


_REAL_MEND = 'Write a real formula; letters of domain "complex" may stand as Re(c), Im(c) or abs(c).'
_WRITE_REAL = "Write it with real letters, or as Re(...)."


def bond_rows(r: Reader, table: Mapping[str, Any]) -> list[tuple[int, Any]]:
    """(index, [x, y, H_xy]) of every well-formed bond."""
    path = (*AT, "bonds")
    if "bonds" not in table or not r.is_list(path, table["bonds"], "bonds", MOST_EDGES):
        return []
    out = []
    for k, inner in enumerate(table["bonds"]):
        if isinstance(inner, (list, tuple)) and len(inner) == 3:
            out.append((k, inner))
        else:
            r.faults.add((*path, k), f"{shown(inner)} is no bond.", "A bond is [x, y, H_xy].")
    return out


def _bonds(r: Reader, sites: Sites, table: Mapping[str, Any], bare: Bare) -> list[Bond]:
    joined: set[frozenset[int]] | None = None
    seen: set[frozenset[int]] = set()
    out = []
    for k, inner in bond_rows(r, table):
        path = (*AT, "bonds", k)
        x, y = (sites.find(r, (*path, n), inner[n]) for n in (0, 1))
        f = r.formula((*path, 2), inner[2])
        if x is None or y is None:
            continue
        joined = joined if joined is not None else {frozenset(b[:2]) for b in bare.bonds}
        pair = frozenset((x, y))
        if x == y:
            r.faults.add(path, "this bond joins a site to itself.", "H_xx belongs in energies: { site = value }.")
        elif pair not in joined:
            where = f"{sites.name(x)} and {sites.name(y)}"
            r.faults.add(
                path, f"{where} are not joined on this graph.", "For an edge of your own give the graph by edges."
            )
        elif pair in seen:
            r.faults.add(
                path, "this bond stands here for the second time.", "Keep one of the two; H_yx follows from H_xy."
            )
        elif f is not None:
            out.append((x, y, f))
        seen.add(pair)
    return out


def _loops(r: Reader, sites: Sites, table: Mapping[str, Any], bare: Bare) -> list[Loop]:
    if "flux" not in table:
        return []
    path, value = (*AT, "flux"), table["flux"]
    if not isinstance(value, (list, tuple)):
        phase = r.formula(path, value)
        if bare.family != "ring":
            mend = 'Write  flux = [{ loop = [0, 1, 2, 3], phase = "phi" }].'
            r.faults.add(path, "only a ring takes its flux without a loop.", mend)
            return []
        return [(tuple(range(bare.size)), phase)] if phase is not None and is_real(r, path, phase, "a phase") else []
    if not r.is_list(path, value, "flux", 2_000):
        return []
    read = [_loop(r, sites, (*path, k), inner) for k, inner in enumerate(value)]
    return [loop for loop in read if loop is not None]


def _loop(r: Reader, sites: Sites, path: Path, value: Any) -> Loop | None:
    table = r.table(path, value, FLUX, "a flux")
    if table is None:
        return None
    for key in FLUX:
        if key.name not in table:
            r.faults.add(path, f"this flux has no {key.name}.", 'Write { loop = [0, 1, 2, 3], phase = "phi" }.')
            return None
    phase = r.formula((*path, "phase"), table["phase"])
    if not r.is_list((*path, "loop"), table["loop"], "loop", MOST_SITES):
        return None
    around = [sites.find(r, (*path, "loop", k), v) for k, v in enumerate(table["loop"])]
    if phase is None or None in around or not is_real(r, (*path, "phase"), phase, "a phase"):
        return None
    loop = tuple(x for x in around if x is not None)
    if len(loop) < 3 or len(set(loop)) < len(loop):
        r.faults.add(
            (*path, "loop"), "a loop passes at least three sites, each once.", "Name the sites around, in order."
        )
        return None
    return loop, phase
