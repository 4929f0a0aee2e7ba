"""[graph]: the measured system.  Exactly one of family, edges, edge_file, hamiltonian, step."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path as FilePath
from typing import Any

from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, negate, number, plus, times
from derive.problem.conjugate import conjugate
from derive.problem.families import FAMILIES, INFINITE, Plan, Sizes
from derive.problem.graphs import (
    MOST_EDGES,
    MOST_SITES,
    Bond,
    FluxFault,
    Loop,
    assemble,
    family_edges,
    family_shape,
    family_size,
    matrix_graph,
    matrix_rows,
    step_graph,
    with_bonds,
)
from derive.problem.setting import Family, Finite, Lattice, Shape, Singular, Space
from derive.worksheet import served
from derive.worksheet.edges import file_edges, inline_edges, number_sites, open_edges
from derive.worksheet.faults import near
from derive.worksheet.keys import FAMILY_NAMES, FLUX, GRAPH, ONE_OF_GRAPH, SIDES, SINGULAR, SIZES, Key
from derive.worksheet.places import Sites
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, rational, shown

LARGEST_MATRIX = 1_500  # rows of a matrix written out
LARGEST_STEP = 100  # rows of a unitary: checking it takes N^3 products
AT: Path = ("graph",)


@dataclass
class Bare:
    """A graph before its matrix: sites, bonds, names, shape."""

    size: int
    bonds: list[Bond]
    names: tuple[str, ...] | None
    shape: Shape
    family: str = ""


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
    _refuse(r, table, [*SIZES, "singular"], f"goes with a family, and this graph is given by {kind}")
    if kind in ("hamiltonian", "step"):
        _refuse(r, table, ["hopping", "energies", "bonds", "flux"], f"is refused beside {kind}, which is complete")
        return _hamiltonian(r, table[kind]) if kind == "hamiltonian" else _step(r, table[kind])
    bare, missing = _listed(r, kind, table[kind], folder)
    if bare is None:
        for name in ("hopping",):
            if name in table:
                r.formula((*AT, name), table[name])
        return Sites()
    hopping = _hopping(r, table, missing)
    bare.bonds = [(x, y, hopping if k in missing else v) for k, (x, y, v) in enumerate(bare.bonds)]
    return _finish(r, table, bare)


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


# families ---------------------------------------------------------------------------------------------------


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
    known = [*(k for k, _ in plan.sizes), *plan.instead]
    _refuse(r, table, [k for k in SIZES if k not in known], f"is no size of a {name}: it has {_sizes(plan)}")
    _refuse(r, table, ["singular"], "goes with the family density")
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
    return _finish(r, table, Bare(size, bonds, None, family_shape(name, numeric), name))


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
            r.faults.add(AT, f"a {name} needs its {key}.", f"Add  {key} = {example}.")
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
        r.faults.add((*AT, key), f"this {name} would have {much}.", limit)
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
    if "family" not in served.SPACES:
        r.faults.not_served((*AT, letters[0].split("[")[0]), "sizes that are letters are not served yet.", "Served: numbers.")
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
        elif isinstance(at, Formula) and f is not None and _is_real(r, (*path, str(key)), f):
            out.append((at, f))
    return tuple(out)


def _symbolic_bonds(r: Reader, sites: Sites, table: Mapping[str, Any]) -> tuple[tuple[Formula, Formula, Formula], ...]:
    out = []
    for k, inner in _bond_rows(r, table):
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
        space = Lattice(name, None, (), _singular_points(r, table))
    else:
        _refuse(r, table, ["singular"], "goes with the family density")
        space = Lattice(name, _hopping(r, table))
    sites = Sites(None, None, space, name)
    if name != "density" and "energies" in table:
        sites.space = Lattice(name, space.hopping, _lattice_energies(r, sites, table["energies"]))
    if "lattice" not in served.SPACES:
        r.faults.not_served((*AT, "family"), "infinite graphs are not served yet.", "Served: graphs of a numbered size.")
    return sites


def _lattice_energies(r: Reader, sites: Sites, value: Any) -> tuple[tuple[str, Formula], ...]:
    path = (*AT, "energies")
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where energies is a table.", "Write { site = formula }.")
        return ()
    out = []
    for key, inner in value.items():
        at, f = sites.place(r, (*path, str(key)), str(key), True), r.formula((*path, str(key)), inner)
        if at is not None and f is not None and _is_real(r, (*path, str(key)), f):
            out.append((text(at) if isinstance(at, Formula) else str(at), f))
    return tuple(sorted(out))


def _singular_points(r: Reader, table: Mapping[str, Any]) -> tuple[Singular, ...]:
    path = (*AT, "singular")
    if "singular" not in table:
        r.faults.add(AT, "a density needs its singular points.", "Add [[graph.singular]] with energy and power.")
        return ()
    if not r.is_list(path, table["singular"], "singular", 1_000):
        return ()
    out = []
    for k, inner in enumerate(table["singular"]):
        point = r.table((*path, k), inner, SINGULAR, "a singular point")
        if point is None:
            continue
        for key in SINGULAR:
            if key.required and key.name not in point:
                r.faults.add((*path, k), f"this singular point has no {key.name}.", f'Add  {key.name} = "0".')
        read = {n: r.formula((*path, k, n), v) for n, v in point.items() if n != "side"}
        side = r.choice((*path, k, "side"), point.get("side", "both"), SIDES, "a side")
        energy, power = read.get("energy"), read.get("power")
        if energy is not None and power is not None and side is not None:
            logs, amplitude = read.get("logs") or ZERO, read.get("amplitude") or ONE
            out.append(Singular(energy, power, logs, side, amplitude))
    return tuple(out)


# edges, energies, bonds, flux -------------------------------------------------------------------------------


def _listed(r: Reader, kind: str, value: Any, folder: FilePath) -> tuple[Bare | None, set[int]]:
    """The listed graph, and which of its bonds want the hopping."""
    path = (*AT, kind)
    if kind == "edges":
        edges = inline_edges(r, path, value)
        if edges is None:
            return None, set()

        def report(k: int, column: int, message: str, mend: str) -> None:
            r.faults.add((*path, k, column) if column >= 0 else (*path, k), message, mend)

        listed = number_sites(edges, report)
    else:
        opened = open_edges(r, path, value, folder)
        if opened is None:
            return None, set()
        edges, report, whole = file_edges(r, path, *opened)
        listed = number_sites(edges, report) if whole and edges else None
    if listed is None:
        return None, set()
    missing = {k for k, e in enumerate(edges) if e.value is None}
    return Bare(listed.size, listed.bonds, listed.names, Shape(kind, (("sites", str(listed.size)),))), missing


def _finish(r: Reader, table: Mapping[str, Any], bare: Bare) -> Sites:
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
        at = sites.find(r, (*path, str(key)), key if isinstance(key, int) else str(key), key=True)
        f = r.formula((*path, str(key)), inner)
        if at is not None and at in out:
            r.faults.add_key((*path, str(key)), f"site {sites.name(at)} stands here twice.", "Keep one of the two.")
        elif at is not None and f is not None and _is_real(r, (*path, str(key)), f):
            out[at] = f
    return out


def _is_real(r: Reader, path: Path, f: Formula) -> bool:
    """An energy is a diagonal entry of a Hermitian matrix."""
    turned = conjugate(f, r.domains)
    same = turned == f or vanishes(plus(f, negate(turned)), r.domains)
    if same is None:
        r.faults.add(path, f"it could not be decided whether {shown(text(f))} is real.", _WRITE_REAL)
    elif not same:
        r.faults.add(path, f"{shown(text(f))} is not real, and H_xx is.", _REAL_MEND)
    return same is True


_REAL_MEND = 'Write a real formula; letters of domain "complex" may stand as Re(c), Im(c) or abs(c).'
_WRITE_REAL = "Write it with real letters, or as Re(...)."


def _bond_rows(r: Reader, table: Mapping[str, Any]) -> list[tuple[int, Any]]:
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
    for k, inner in _bond_rows(r, table):
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
            r.faults.add(path, f"{where} are not joined on this graph.", "For an edge of your own give the graph by edges.")
        elif pair in seen:
            r.faults.add(path, "this bond stands here for the second time.", "Keep one of the two; H_yx follows from H_xy.")
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
        return [(tuple(range(bare.size)), phase)] if phase is not None and _is_real(r, path, phase) else []
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
    if phase is None or None in around or not _is_real(r, (*path, "phase"), phase):
        return None
    loop = tuple(x for x in around if x is not None)
    if len(loop) < 3 or len(set(loop)) < len(loop):
        r.faults.add((*path, "loop"), "a loop passes at least three sites, each once.", "Name the sites around, in order.")
        return None
    return loop, phase


# matrices ---------------------------------------------------------------------------------------------------


def _matrix(r: Reader, kind: str, value: Any, largest: int) -> list[list[Formula]] | None:
    path = (*AT, kind)
    if not isinstance(value, (list, tuple)):
        r.faults.add(path, f"{shown(value)} stands here, where {kind} is a list of rows.", 'Write [[0, "-g"], ["-g", 0]].')
        return None
    size = len(value)
    if not size:
        r.faults.add(path, f"{kind} has no rows.", 'Write [[0, "-g"], ["-g", 0]].')
        return None
    if size > largest:
        r.faults.add(path, f"{kind} has {size:,} rows.", f"At most {largest:,} are read; write a larger graph by edges.")
        return None
    out, whole = [], True
    for x, row in enumerate(value):
        if not isinstance(row, (list, tuple)) or len(row) != size:
            has = f"has {len(row)} entries" if isinstance(row, (list, tuple)) else f"is {shown(row)}"
            r.faults.add((*path, x), f"row {x} {has}, and {kind} has {size} rows.", "A matrix is as wide as it is high.")
            whole = False
            continue
        read = [r.formula((*path, x, y), v) for y, v in enumerate(row)]
        whole = whole and None not in read
        out.append([f for f in read if f is not None])
    return out if whole else None


def _hamiltonian(r: Reader, value: Any) -> Sites:
    size = len(value) if isinstance(value, (list, tuple)) and value else None
    matrix = _matrix(r, "hamiltonian", value, LARGEST_MATRIX)
    if matrix is None:
        return Sites(size)
    _check_hermitian(r, matrix)
    return Sites(len(matrix), None, matrix_graph(matrix))


def _check_hermitian(r: Reader, matrix: list[list[Formula]]) -> None:
    known: dict[tuple[Formula, Formula], bool | None] = {}
    for x, row in enumerate(matrix):
        _is_real(r, (*AT, "hamiltonian", x, x), row[x])
        for y in range(x):
            pair = (matrix[y][x], row[y])
            if pair not in known:
                wanted = conjugate(pair[0], r.domains)
                known[pair] = wanted == pair[1] or vanishes(plus(pair[1], negate(wanted)), r.domains)
            if not known[pair]:
                _not_hermitian(r, x, y, pair[0], known[pair])


def _not_hermitian(r: Reader, x: int, y: int, above: Formula, same: bool | None) -> None:
    path = (*AT, "hamiltonian", x, y)
    wanted = text(conjugate(above, r.domains))
    if same is None:
        message = f"it could not be decided whether H_{x}_{y} is the conjugate of H_{y}_{x}."
        r.faults.add(path, message, f'Write it as  "{wanted}".')
    else:
        message = f"H is not Hermitian: this entry ({x}, {y}) is not the conjugate of entry ({y}, {x}), {shown(text(above))}."
        r.faults.add(path, message, f'Write  "{wanted}"  here, or change the entry ({y}, {x}).')


def _step(r: Reader, value: Any) -> Sites:
    size = len(value) if isinstance(value, (list, tuple)) and value else None
    matrix = _matrix(r, "step", value, LARGEST_STEP)
    if matrix is None:
        return Sites(size)
    _check_unitary(r, matrix)
    if "step" not in served.SPACES:
        r.faults.not_served((*AT, "step"), "a step in place of exp(-i H tau) is not served yet.", "Served: a Hamiltonian.")
    return Sites(len(matrix), None, step_graph(matrix))


def _check_unitary(r: Reader, matrix: list[list[Formula]]) -> None:
    """sum_z U_xz conj(U_yz) = delta_xy."""
    rows = [dict(row) for row in matrix_rows(matrix)]
    for x in range(len(rows)):
        for y in range(x + 1):
            shared = sorted(rows[x].keys() & rows[y].keys())
            terms = [times(rows[x][z], conjugate(rows[y][z], r.domains)) for z in shared]
            off = plus(*terms, number(-1 if x == y else 0))
            same = vanishes(off, r.domains)
            if same is True:
                continue
            what = f"row {x} has length 1" if x == y else f"rows {y} and {x} are orthogonal"
            message = f"it could not be decided whether {what}." if same is None else f"the step is not unitary: {_denied(what)}."
            r.faults.add((*AT, "step", x), message, "The rows of a unitary have length 1 and are orthogonal.")


def _denied(what: str) -> str:
    return what.replace(" has length 1", " does not have length 1").replace(" are orthogonal", " are not orthogonal")


