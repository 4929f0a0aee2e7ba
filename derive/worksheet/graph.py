"""[graph]: the measured system.  Exactly one of family, edges, edge_file, hamiltonian, step."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path as FilePath
from typing import Any

from derive.formula.text import text
from derive.formula.tree import ONE, Formula, number
from derive.problem.families import FAMILIES, INFINITE, Plan, Sizes, noun
from derive.problem.graphs import (
    MOST_EDGES,
    MOST_SITES,
    family_edges,
    family_shape,
    family_size,
)
from derive.problem.setting import Family, Lattice
from derive.worksheet.bonds import AT, Bare, bond_rows, finish, is_real, listed_graph
from derive.worksheet.density import read_density
from derive.worksheet.faults import near
from derive.worksheet.keys import FAMILY_NAMES, GRAPH, ONE_OF_GRAPH, SIZES, Key
from derive.worksheet.matrices import read_hamiltonian, read_step
from derive.worksheet.places import Sites
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, rational, shown

LARGEST_MATRIX = 1_500  # rows of a matrix written out
LARGEST_STEP = 100  # rows of a unitary: checking it takes N^3 products


def read_graph(r: Reader, value: Any, folder: FilePath) -> Sites:
    """The space in `Sites.space` (None where faulty), and the sites as far as they are known."""
    keys = (*GRAPH, *(Key(name, "size", says) for name, says in SIZES.items()))
    table = r.table(AT, value, keys, "graph")
    if table is None:
        return Sites()
    given = [k for k in table if k in ONE_OF_GRAPH]
    if not given:
        r.faults.add(AT, "the graph is not said.", f'Add one of {", ".join(ONE_OF_GRAPH)}, such as  family = "chain".')
        return Sites()
    if len(given) > 1:
        mend = f"Keep one of {' and '.join(given)}."
        r.faults.add_key((*AT, given[1]), f"the graph is given twice, by {given[0]} and by {given[1]}.", mend)
        return Sites()
    kind = given[0]
    if kind == "family":
        return _family(r, table)
    _refuse(r, table, [*SIZES, "singular", "band"], f"goes with a family, and this graph is given by {kind}")
    if kind in ("hamiltonian", "step"):
        _refuse(r, table, ["hopping", "energies", "bonds", "flux"], f"is refused beside {kind}, which is complete")
        return read_hamiltonian(r, table[kind]) if kind == "hamiltonian" else read_step(r, table[kind])
    bare, missing = listed_graph(r, kind, table[kind], folder)
    if bare is None:
        if "hopping" in table:
            r.formula((*AT, "hopping"), table["hopping"])
        return Sites()
    hopping = _hopping(r, table, missing)
    bare.bonds = [(x, y, hopping if k in missing else v) for k, (x, y, v) in enumerate(bare.bonds)]
    return finish(r, table, bare)


def _refuse(r: Reader, table: Mapping[str, Any], names: list[str], why: str) -> None:
    for name in names:
        if name in table:
            r.faults.add_key((*AT, name), f"{name} {why}.", "Take it out.")


def _hopping(r: Reader, table: Mapping[str, Any], needed: object = True) -> Formula:
    """The hopping; where it is faulty or missing 1 stands in, so that the rest can still be read."""
    if "hopping" in table:
        return r.formula((*AT, "hopping"), table["hopping"]) or ONE
    if needed:
        r.faults.add(AT, "hopping is missing: the matrix element H_xy on every edge.", 'Add  hopping = "-g".')
    return ONE


def _family(r: Reader, table: dict[str, Any]) -> Sites:
    name = table["family"]
    if not isinstance(name, str) or name not in FAMILY_NAMES:
        mend = near(name.replace("_", " "), FAMILY_NAMES) if isinstance(name, str) else ""
        known = f"Known: {', '.join(FAMILY_NAMES)}."
        r.faults.add((*AT, "family"), f"{shown(name)} is no family of graphs.", f"{mend} {known}".strip())
        return Sites()
    if name in INFINITE:
        return _lattice(r, table, name)
    plan = FAMILIES[name]
    sized = [*(k for k, _ in plan.sizes), *plan.instead]
    _refuse(r, table, [k for k in SIZES if k not in sized], f"is no size of a {noun(name)}: it has {_sizes(plan)}")
    _refuse(r, table, ["singular", "band"], "goes with the family density")
    sizes = _read_sizes(r, table, name, plan)
    hopping = _hopping(r, table)
    if sizes is None:
        return Sites(family=name)
    if any(isinstance(v, Formula) for v in sizes.values()):
        return _symbolic(r, table, name, sizes, hopping)
    numeric = _collect(sizes)
    if not _fits(r, name, plan, numeric):
        return Sites(family=name)
    size, bonds = family_edges(name, numeric, hopping)
    return finish(r, table, Bare(size, bonds, None, family_shape(name, numeric), name))


def _sizes(plan: Plan) -> str:
    said = " and ".join(k for k, _ in plan.sizes)
    return said + (f", or {plan.instead[0]}" if plan.instead else "")


def _read_sizes(r: Reader, table: Mapping[str, Any], name: str, plan: Plan) -> dict[str, int | Formula] | None:
    """Each size as an int or, where it has letters, a formula; a list of lengths as "lengths[0]", ..."""
    if "lengths" in table and plan.instead:
        _refuse(r, table, [k for k, _ in plan.sizes], "is refused beside lengths")
        return _lengths(r, table["lengths"])
    out: dict[str, int | Formula] = {}
    for key, least in plan.sizes:
        if key not in table:
            example = {"sites": 9, "arms": 3, "branching": 2, "depth": 3}.get(key, 4)
            r.faults.add(AT, f"a {noun(name)} needs its {key}.", f"Add  {key} = {example}.")
            continue
        size = _size(r, (*AT, key), table[key], key, least)
        if size is not None:
            out[key] = size
    return out if len(out) == len(plan.sizes) else None


def _lengths(r: Reader, value: Any) -> dict[str, int | Formula] | None:
    path = (*AT, "lengths")
    if not r.is_list(path, value, "lengths", 10_000):
        return None
    if not value:
        r.faults.add(path, "a star without arms is a single site.", "Write at least one length: [3].")
        return None
    read = [_size(r, (*path, k), v, "a length", 1) for k, v in enumerate(value)]
    return None if None in read else {f"lengths[{k}]": v for k, v in enumerate(read) if v is not None}


def _size(r: Reader, path: Path, value: Any, what: str, least: int) -> int | Formula | None:
    if isinstance(value, (str, Formula)):
        f = r.formula(path, value)
        if f is None:
            return None
        if rational(f) is None:
            return _symbolic_size(r, path, f, what)
    return r.integer(path, value, what, least, 10**9)


def _symbolic_size(r: Reader, path: Path, f: Formula, what: str) -> Formula | None:
    from derive.formula.tree import free_letters

    for name in sorted(free_letters(f)):
        kind = r.domains[name].kind if name in r.domains else "integer"
        if kind != "integer":
            mend = f'Declare  {name} = "integer >= 2"  under [symbols].'
            r.faults.add(path, f"{name} is {kind}, and {what} is a whole number.", mend)
            return None
    if not free_letters(f):
        r.faults.add(path, f"{what} is {shown(text(f))}, which is no whole number.", "Write digits.")
        return None
    return f


def _collect(sizes: Mapping[str, Any]) -> Sizes:
    if any(k.startswith("lengths[") for k in sizes):
        return {"lengths": tuple(sizes.values())}
    return dict(sizes)


def _fits(r: Reader, name: str, plan: Plan, sizes: Sizes) -> bool:
    key = next(k for k in (*plan.instead, *(k for k, _ in plan.sizes)) if k in sizes)
    try:
        family_size(name, sizes)
    except ValueError:
        sites, edges = plan.count(sizes)
        much = f"{sites:,} sites" if sites > MOST_SITES else f"{edges:,} edges"
        if sites >= 10**12:
            much = "more than a million million sites"
        limit = f"At most {MOST_SITES:,} sites and {MOST_EDGES:,} edges are built."
        r.faults.add((*AT, key), f"this {noun(name)} would have {much}.", limit)
        return False
    return True


def _symbolic(
    r: Reader, table: Mapping[str, Any], name: str, sizes: Mapping[str, int | Formula], hopping: Formula
) -> Sites:
    """A family whose size is a letter: recorded as written."""
    paired = tuple((k, v if isinstance(v, Formula) else number(v)) for k, v in sizes.items())
    sites = Sites(None, None, Family(name, paired, hopping), name)
    energies = _symbolic_energies(r, sites, table)
    bonds = _symbolic_bonds(r, sites, table)
    flux = None
    if "flux" in table:
        if name == "ring" and not isinstance(table["flux"], (list, tuple)):
            flux = r.formula((*AT, "flux"), table["flux"])
        else:
            mend = "Only a ring's flux can be said there; write the size as a number."
            r.faults.add_key((*AT, "flux"), "a loop cannot be told where the size is a letter.", mend)
    sites.space = Family(name, paired, hopping, energies, bonds, flux)
    letters = [k for k, v in sizes.items() if isinstance(v, Formula)]
    r.use("family", (*AT, letters[0].split("[")[0]))
    return sites


def _symbolic_energies(r: Reader, sites: Sites, table: Mapping[str, Any]) -> tuple[tuple[Formula, Formula], ...]:
    value = table.get("energies", {})
    path = (*AT, "energies")
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where energies is a table.", "Write { site = formula }.")
        return ()
    out = []
    for key, inner in value.items():
        at, f = sites.place(r, (*path, str(key)), str(key), True), r.formula((*path, str(key)), inner)
        if isinstance(at, str):
            r.faults.add_key((*path, key), f'"{at}" cannot stand here where the size is a letter.', "Write a formula.")
        elif isinstance(at, Formula) and f is not None and is_real(r, (*path, str(key)), f):
            out.append((at, f))
    return tuple(out)


def _symbolic_bonds(r: Reader, sites: Sites, table: Mapping[str, Any]) -> tuple[tuple[Formula, Formula, Formula], ...]:
    out = []
    for k, inner in bond_rows(r, table):
        path = (*AT, "bonds", k)
        x, y = (sites.place(r, (*path, n), inner[n]) for n in (0, 1))
        f = r.formula((*path, 2), inner[2])
        if isinstance(x, Formula) and isinstance(y, Formula) and f is not None:
            out.append((x, y, f))
    return tuple(out)


def _lattice(r: Reader, table: Mapping[str, Any], name: str) -> Sites:
    _refuse(r, table, list(SIZES), f"is a size, and a {name} has none")
    _refuse(r, table, ["bonds", "flux"], f"is not read on a {name}")
    if name == "density":
        _refuse(r, table, ["hopping", "energies"], "is not read with a density")
        space = read_density(r, table)
    else:
        _refuse(r, table, ["singular", "band"], "goes with the family density")
        space = Lattice(name, _hopping(r, table))
    sites = Sites(None, None, space, name)
    if name != "density" and "energies" in table:
        sites.space = Lattice(name, space.hopping, _lattice_energies(r, sites, table["energies"]))
    r.use("lattice", (*AT, "family"))
    return sites


def _lattice_energies(r: Reader, sites: Sites, value: Any) -> tuple[tuple[str, Formula], ...]:
    path = (*AT, "energies")
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where energies is a table.", "Write { site = formula }.")
        return ()
    out = []
    for key, inner in value.items():
        at, f = sites.place(r, (*path, str(key)), str(key), True), r.formula((*path, str(key)), inner)
        if at is not None and f is not None and is_real(r, (*path, str(key)), f):
            out.append((text(at) if isinstance(at, Formula) else str(at), f))
    return tuple(sorted(out))
