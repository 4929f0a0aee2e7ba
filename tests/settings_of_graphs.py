"""Settings built in a line, for tests."""

from derive.formula.grammar import parse
from derive.formula.tree import ONE, number
from derive.problem.graphs import assemble, family_edges, family_shape, with_bonds
from derive.problem.setting import Domain, Family, Letter, Relation, Setting, Start, Watcher

REAL, POSITIVE = Domain("real", "real"), Domain("positive", "positive")
KNOWN = {"g": POSITIVE, "kappa": POSITIVE, "Delta": REAL, "phi": REAL, "E": REAL}


def watched(name, sizes, at, letters=("g",), hopping="-g", energies=(), bonds=(), loops=(), start=None):
    """A family watched at sites (or vectors, as {site: amplitude}), perhaps with a start site."""
    size, edges = family_edges(name, sizes, parse(hopping))
    edges = with_bonds(edges, [(x, y, parse(f)) for x, y, f in bonds])
    return _setting(size, edges, family_shape(name, sizes), at, letters, dict(energies), loops, start)


def cluster(edges, at, letters=("g",), energies=(), start=None):
    """Edges (x, y, H_xy) watched at sites."""
    size = 1 + max(max(x, y) for x, y, _ in edges)
    edges = [(x, y, parse(f)) for x, y, f in edges]
    shape = family_shape("chain", {"sites": size})
    return _setting(size, edges, shape, at, letters, dict(energies), (), start)


def _setting(size, edges, shape, at, letters, energies, loops, start):
    domains = {name: KNOWN[name] for name in letters}
    loops = [(tuple(sites), parse(phase)) for sites, phase in loops]
    space = assemble(size, edges, {x: parse(str(f)) for x, f in energies.items()}, shape, domains, None, loops)
    vectors = tuple(_vector(a) for a in (at if isinstance(at, list) else [at]))
    begin = None if start is None else Start(((ONE, _vector(start)),))
    return Setting("test", tuple(Letter(n, d) for n, d in domains.items()), space, (Watcher(vectors),), begin)


def family(name, sizes, place, letters, hopping="-g", known=("g",), flux=None, distance=None, energies=(), assume=()):
    """A family whose sizes are formulas; `letters` maps integer letters to their least value."""
    declared = [Letter(n, KNOWN[n]) for n in known]
    declared += [Letter(n, Domain("integer", f"integer >= {low}", number(low))) for n, low in letters.items()]
    space = Family(
        name, tuple((k, parse(str(v))) for k, v in sizes.items()), parse(hopping),
        tuple((parse(str(x)), parse(f)) for x, f in energies), (), None if flux is None else parse(flux),
    )
    watcher = Watcher((), ONE, None, place if place in ("centre", "end") else parse(str(place)))
    start = None if distance is None else Start((), parse(distance))
    relations = tuple(Relation(parse(a), op, parse(b)) for a, op, b in assume)
    return Setting("test", tuple(declared), space, (watcher,), start, assume=relations)


def _vector(at):
    if isinstance(at, int):
        return ((at, ONE),)
    return tuple((x, parse(f)) for x, f in sorted(at.items()))
