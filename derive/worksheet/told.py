"""What was understood, in a few plain lines: `watchpot read`."""

from __future__ import annotations

from collections.abc import Iterator

from derive.formula.text import text
from derive.formula.tree import ONE, Formula
from derive.problem.families import FAMILIES, noun
from derive.problem.setting import (
    Family,
    Finite,
    Lattice,
    Own,
    Question,
    Relation,
    Row,
    Setting,
    Space,
    Start,
    Unitary,
    Vector,
    Watcher,
    Wish,
)

SHOWN = 12  # sites, entries or names told before the rest is only counted


def told(question: Question) -> Iterator[str]:
    """Title, sites and their numbers, H, detector, start, interval, letters, what is asked."""
    setting = question.setting
    yield f"{' '.join(setting.title.split()) or question.name}"
    yield from _space(setting.space)
    for watcher in setting.detectors:
        yield f"Detector{f' {watcher.name}' if watcher.name else ''}: {_watched(watcher, setting.space)}."
    yield f"Start: {_started(setting.start, setting.space)}."
    yield f"Interval: {_interval(setting)}."
    yield f"Letters: {_letters(setting)}."
    if setting.assume:
        yield f"Assumed: {'; '.join(_relation(r) for r in setting.assume)}."
    for wish in question.wishes:
        yield f"To derive: {_wish(wish)}."
    for own in question.claims:
        yield f"To judge: {_claim(own, setting.space)}."
    check = question.check
    own_points = f" and {_count(len(check.points), 'point')} of yours" if check.points else ""
    yield f"To check: {check.digits} digits at {_count(check.samples, 'sampled point')}{own_points}, seed {check.seed}."


def _count(n: int, what: str) -> str:
    return f"{n:,} {what}" if n == 1 else f"{n:,} {what}s"


# the graph --------------------------------------------------------------------------------------------------


def _space(space: Space) -> Iterator[str]:
    if isinstance(space, Family):
        sizes = ", ".join(f"{k} = {text(v)}" for k, v in space.sizes)
        yield f"Graph: a {noun(space.name)}, {sizes}; {FAMILIES[space.name].says}."
        yield f"H: {text(space.hopping)} on every edge{_family_rest(space)}."
    elif isinstance(space, Lattice):
        yield f"Graph: {'given by its local density of states' if space.name == 'density' else f'a {space.name}'}."
        if space.hopping is not None:
            yield f"H: {text(space.hopping)} on every edge."
        if space.energies:
            yield f"H_xx: {_listed([f'{text(v)} at {x}' for x, v in space.energies])}."
        for s in space.singular:
            yield f"Singular at {text(s.energy)}: power {text(s.power)}, logs {text(s.logs)}, {s.side}."
        for b in space.bands:
            yield f"Band from {text(b.low)} to {text(b.high)}, with the factor {text(b.factor)}."
    else:
        yield f"Graph: {_graph_name(space)}."
        if space.names is not None:
            yield f"Sites: {_listed([f'{k} {_plain(n)}' for k, n in enumerate(space.names)])}."
        yield from _matrix(space)


def _plain(name: str) -> str:
    return name if name.isprintable() else ascii(name)[1:-1]


def _family_rest(space: Family) -> str:
    parts = [f"{text(v)} at {text(x)}" for x, v in space.energies]
    parts += [f"{text(v)} from {text(x)} to {text(y)}" for x, y, v in space.bonds]
    parts += [f"flux {text(space.flux)}"] if space.flux is not None else []
    return "; " + ", ".join(parts) if parts else ""


def _graph_name(space: Finite | Unitary) -> str:
    """a chain of 9 sites, 0 to 8, numbered along the chain."""
    kind, last = space.shape.family, space.size - 1
    sites = f"{_count(space.size, 'site')}, 0 to {last}" if last else "one site, 0"
    if kind in FAMILIES:
        sizes = ", ".join(f"{k} {v}" for k, v in space.shape.sizes if k != "sites")
        return f"a {noun(kind)}{f' ({sizes})' if sizes else ''} of {sites}; {FAMILIES[kind].says}"
    said = {
        "edges": "given by its edges",
        "edge_file": "given by an edge file",
        "hamiltonian": "given by its matrix",
        "step": "given by a unitary step",
    }
    return f"{sites}, {said.get(kind, kind)}"


def _matrix(space: Finite | Unitary) -> Iterator[str]:
    """The entries above the diagonal by value, then the diagonal, then the bonds that carry a flux."""
    name = "H" if isinstance(space, Finite) else "U"
    above = _by_value(((x, y, v) for x, row in enumerate(space.rows) for y, v in row if x < y), space)
    parts = [f"{value} on {_count(len(at), 'edge')}: {_listed(at)}" for value, at in above]
    joined = "; ".join(parts[:SHOWN]) + (f"; and {len(parts) - SHOWN:,} more values" if len(parts) > SHOWN else "")
    yield f"{name}_xy, x < y: {joined or '0 everywhere'}." + (" H_yx is the conjugate." if name == "H" else "")
    yield from _diagonal(name, space.rows, space)
    for x, y, phase in space.gauge if isinstance(space, Finite) else ():
        yield f"The flux {text(phase)} is carried by the bond from {_site(space, x)} to {_site(space, y)}."


def _by_value(entries: Iterator[tuple[int, int, Formula]], space: Finite | Unitary) -> list[tuple[str, list[str]]]:
    found: dict[Formula, list[str]] = {}
    for x, y, value in entries:
        found.setdefault(value, []).append(f"{_site(space, x)}-{_site(space, y)}")
    return [(text(value), at) for value, at in found.items()]


def _diagonal(name: str, rows: tuple[Row, ...], space: Finite | Unitary) -> Iterator[str]:
    entries = [f"{text(v)} at {_site(space, x)}" for x, row in enumerate(rows) for y, v in row if y == x]
    yield f"{name}_xx: {_listed(entries)}." if entries else f"{name}_xx: 0."


def _site(space: Space, site: int) -> str:
    return _plain(space.name(site)) if isinstance(space, (Finite, Unitary)) else str(site)


def _listed(items: list[str]) -> str:
    more = len(items) - SHOWN
    return ", ".join(items[:SHOWN]) + (f" and {more:,} more" if more > 0 else "")


# states and time --------------------------------------------------------------------------------------------


def _watched(watcher: Watcher, space: Space) -> str:
    eta = "" if watcher.efficiency == ONE else f", efficiency {text(watcher.efficiency)}"
    if watcher.place is not None:
        return f"site {_place(watcher.place)}{eta}"
    if all(len(v) == 1 and v[0][1] == ONE for v in watcher.vectors):
        sites = [_site(space, v[0][0]) for v in watcher.vectors]
        return f"{'site' if len(sites) == 1 else 'sites'} {_listed(sites)}{eta}"
    return "; ".join(_state(v, space) for v in watcher.vectors[:SHOWN]) + eta


def _place(place: Formula | str) -> str:
    return text(place) if isinstance(place, Formula) else place


def _state(vector: Vector, space: Space) -> str:
    return "the state " + _listed([f"{text(a)} on {_site(space, x)}" for x, a in vector])


def _started(start: Start | None, space: Space) -> str:
    if start is None:
        return "none"
    if start.distance is not None:
        return f"{text(start.distance)} steps from the detector"
    if start.place is not None:
        return f"site {_place(start.place)}"
    parts = [_state_or_site(v, space) for _, v in start.mixture]
    if len(parts) == 1:
        return parts[0]
    weighted = [f"{text(w)} of {part}" for (w, _), part in zip(start.mixture, parts, strict=True)]
    return "a mixture, " + "; ".join(weighted[:SHOWN])


def _state_or_site(vector: Vector, space: Space) -> str:
    single = len(vector) == 1 and vector[0][1] == ONE
    return f"site {_site(space, vector[0][0])}" if single else _state(vector, space)


def _interval(setting: Setting) -> str:
    interval = setting.interval
    shape = f" of shape {text(interval.shape)}" if interval.shape is not None else ""
    law = "" if interval.law == "fixed" else f", {interval.law} law{shape}, this mean"
    return text(interval.length) + law


def _letters(setting: Setting) -> str:
    said = [f"{x.name} {x.domain.text}" for x in setting.letters if x.name != "tau"]
    return ", ".join([*said, "tau positive"])


def _relation(r: Relation) -> str:
    return f"{text(r.left)} {r.op} {text(r.right)}"


# what is asked ----------------------------------------------------------------------------------------------


def _wish(wish: Wish) -> str:
    options = [f"{name} {_option(value)}" for name, value in wish.options if value is not None]
    at = [f"{name} = {text(value)}" for name, value in wish.set]
    return wish.topic + (f", {', '.join(options)}" if options else "") + (f", at {', '.join(at)}" if at else "")


def _option(value: object) -> str:
    if isinstance(value, Formula):
        return text(value)
    if isinstance(value, tuple):
        return ", ".join(_option(v) for v in value)
    return str(value).lower() if isinstance(value, bool) else str(value)


def _claim(own: Own, space: Space) -> str:
    which = f" {own.which}" if own.which is not None else ""
    which += f" of arm {own.arm}" if own.arm is not None else ""
    entry = f", entry ({', '.join(_site(space, x) for x in own.entry)})" if own.entry else ""
    said = text(own.formula) if own.formula is not None else own.latex or "as given"
    if own.values:
        said = _count(len(own.values), "published number")
    if own.matrix is not None:
        said = _count(len(own.matrix), "entry").replace("entrys", "entries")
    if own.cases:
        said = "; ".join(f"{text(f)} if {when}" if when != "otherwise" else f"{text(f)} otherwise"
                         for when, f in own.cases)
    if own.per_root is not None:
        polynomial, name, f = own.per_root
        said = f"{text(f)} at every root {name} of {text(polynomial)}"
    return f"{own.name}: {own.about}{which}{entry} = {said}, {own.holds}"
