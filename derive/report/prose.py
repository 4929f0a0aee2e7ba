"""The report's own sentences, as words with formulas in between: what was asked, what was found."""

from __future__ import annotations

import re
from collections.abc import Mapping

from derive.errors import FormulaFault
from derive.formula.grammar import FUNCTIONS, parse
from derive.formula.tree import ONE, TAU, Formula, letter, power
from derive.problem.setting import (
    Domain,
    Family,
    Finite,
    Lattice,
    Relation,
    Setting,
    Start,
    Unitary,
    Vector,
    Watcher,
)
from derive.record.said import Claim, Finding, Judged, Number, Prose
from derive.report.context import Context
from derive.report.letters import GREEK

CONVENTIONS: tuple[str, ...] = (
    "ħ = 1. Energies and hoppings share one unit; times are its inverse.",
    "The first ask comes after one interval; asks are counted from 1.",
    "Efficiency is the probability of a click when the system is on the detector.",
    "A rate is a rate of probability: −2 Im of the level.",
    "P projects onto the detector, Q onto the rest; operators are printed as Q G Q in the site basis.",
    "Symbolic answers are generic; what they exclude is said beside them.",
)
FAMILIES = {
    "chain": "a chain", "ring": "a ring", "complete": "a complete graph", "star": "a star", "tree": "a tree",
    "ladder": "a ladder", "grid": "a grid", "complete bipartite": "a complete bipartite graph",
    "hypercube": "a hypercube", "line": "an infinite line", "half line": "a half line",
    "square lattice": "an infinite square lattice", "edges": "a graph", "edge_file": "a graph",
    "hamiltonian": "a graph", "step": "a graph", "density": "a local density of states",
}
MEANING = {
    "proved": "an exact zero in an exact field, and an independent road that agrees",
    "agrees": "enclosures overlap and are narrow enough, or a limit is confirmed within its stated remainder",
    "undecided": "the enclosures are too wide to tell",
    "untested": "no point met the assumptions, or there is no second road",
    "refuted": "the enclosures are disjoint at a point that meets the assumptions",
}


def joined(words: list[str]) -> str:
    """a, b and c."""
    if len(words) < 2:
        return "".join(words)
    return f"{', '.join(words[:-1])} and {words[-1]}"


def _sites(context: Context, sites: list[int]) -> str:
    names = [context.site(s) for s in sites]
    shown = names if len(names) <= 8 else [*names[:6], f"{len(names) - 6} more"]
    return ("site " if len(sites) == 1 else "sites ") + joined(shown)


def question(context: Context) -> Prose:
    """Every tau, site 4 is asked.  It starts on site 2."""
    setting = context.setting
    return (*_asked(context, setting), *_started(context, setting.start))


def _asked(context: Context, setting: Setting) -> Prose:
    every = interval(setting)
    first, *others = (_watched(context, w) for w in setting.detectors)
    words: Prose = (*every, ", ", *first, *_named(setting.detectors[0]))
    for watcher, other in zip(setting.detectors[1:], others, strict=True):
        words = (*words, ", and apart from it ", *other, *_named(watcher))
    many = len(others) > 0 or (first[0] if isinstance(first[0], str) else "").startswith("sites")
    words = (*words, " are asked." if many else " is asked.")
    for watcher in setting.detectors:
        if watcher.efficiency != ONE:
            where = f" at {watcher.name}" if others else ""
            words = (*words, f" A click{where} comes with probability ", watcher.efficiency, ".")
    return words


def _named(watcher: Watcher) -> Prose:
    """A detector's name, where several are told apart."""
    return (f" ({watcher.name})",) if watcher.name else ()


def interval(setting: Setting) -> Prose:
    asked = setting.interval
    if asked.law == "fixed":
        return ("Every ", asked.length)
    if asked.law == "gamma" and asked.shape is not None:
        return ("At random intervals of mean ", asked.length, " (gamma law of shape ", asked.shape, ")")
    return ("At random intervals of mean ", asked.length, f" ({asked.law} law)")


def _watched(context: Context, watcher: Watcher) -> Prose:
    if not watcher.vectors:
        return _place(watcher.place)
    sites = sorted({site for vector in watcher.vectors for site, _ in vector})
    if all(_is_site(v) for v in watcher.vectors):
        return (_sites(context, sites),)
    if watcher.rank == 1:
        return (f"one state on {_sites(context, sites)}",)
    return (f"a space of {watcher.rank} states on {_sites(context, sites)}",)


def _is_site(vector: Vector) -> bool:
    return len(vector) == 1 and vector[0][1] == ONE


def _place(place: Formula | str | None) -> Prose:
    if isinstance(place, Formula):
        return ("site ", place)
    return (f"the {place}" if place else "the detector",)


def _started(context: Context, start: Start | None) -> Prose:
    if start is None:
        return ()
    if start.distance is not None:
        return (" It starts ", start.distance, " steps from the detector.")
    if not start.mixture:
        return (" It starts at ", *_place(start.place), ".")
    if len(start.mixture) == 1:
        return (" It starts ", _on(context, start.mixture[0][1]), ".")
    words: Prose = (" It starts ",)
    for n, (weight, vector) in enumerate(start.mixture):
        words = (*words, ", or " if n else "", _on(context, vector), " with weight ", weight)
    return (*words, ".")


def _on(context: Context, vector: Vector) -> str:
    sites = [site for site, _ in vector]
    where = _sites(context, sites)
    return f"on {where}" if len(sites) == 1 else f"spread over {where}"


def graph(setting: Setting) -> str:
    """A chain of 9 sites, a ring of 6 sites, a graph of 12 sites."""
    space = setting.space
    if isinstance(space, (Finite, Unitary)):
        kind = FAMILIES.get(space.shape.family, "a graph")
        step = ", given by its step" if isinstance(space, Unitary) else ""
        return f"{kind} of {space.size:,} site{'s' if space.size != 1 else ''}{step}"
    if isinstance(space, Family):
        return f"{FAMILIES.get(space.name, 'a graph')} whose size is a letter"
    if not isinstance(space, Lattice):
        return "a graph"
    sites = [f"site {x}" for x, _ in space.energies]
    return FAMILIES.get(space.name, "a lattice") + (f", uniform but for {joined(sites)}" if sites else "")


def letters(setting: Setting) -> Prose:
    """g positive, Delta real."""
    words: list[str | Formula] = []
    for n, declared in enumerate(setting.letters):
        words += [", " if n else "", letter(declared.name), f" {declared.domain.text.replace('>=', '≥')}"]
    if TAU.args[0] not in {x.name for x in setting.letters}:
        words += [", " if words else "", TAU, " positive"]
    return tuple(words)


def finding(found: Finding, evidence: bool = True) -> str:
    """What one road found, in one clause; with its evidence if asked."""
    clause = _ROADS.get(found.road, found.road)
    where = f" at {found.points} point{'s' if found.points != 1 else ''}" if found.points else ""
    digits = f", {found.digits} digits shared" if found.digits and found.verdict != "refuted" else ""
    said = _FOUND.get((found.road, found.verdict), f"{found.verdict} by {clause}")
    point = ", ".join(f"{name} = {value}" for name, value in found.point)
    at = f" at {point}" if point else where
    return f"{said}{at}{digits}" + (f": {found.evidence}" if found.evidence and evidence else "")


_ROADS = {
    "exact": "exact algebra", "enclosure": "enclosures", "coefficient": "measured coefficients", "trend": "trend",
}
_FOUND = {
    ("exact", "proved"): "exact zero",
    ("exact", "refuted"): "not zero in exact algebra",
    ("exact", "undecided"): "exact algebra could not decide",
    ("enclosure", "agrees"): "measured",
    ("enclosure", "refuted"): "measured otherwise",
    ("enclosure", "undecided"): "measured too coarsely",
    ("coefficient", "agrees"): "coefficients measured",
    ("coefficient", "refuted"): "coefficients measured otherwise",
    ("coefficient", "undecided"): "coefficients measured too coarsely",
    ("trend", "agrees"): "trend confirmed",
    ("trend", "refuted"): "trend goes elsewhere",
    ("trend", "undecided"): "trend unclear",
}


def holds(claim: Claim) -> Prose:
    """up to O(tau^3); assuming Delta > 0; what valid_for says."""
    parts: list[Prose] = [] if claim.kind.phrase == "exactly" else [mathematics(claim.kind.phrase)]
    if claim.assume:
        parts.append(("assuming ", *_relations(claim.assume)))
    if claim.valid_for:
        parts.append(mathematics(claim.valid_for))
    return tuple(word for n, part in enumerate(parts) for word in (("; ", *part) if n else part))


def _relations(relations: tuple[Relation, ...]) -> Prose:
    words: list[str | Formula] = []
    for n, r in enumerate(relations):
        words += [", " if n else "", r.left, f" {_SIGNS.get(r.op, r.op)} ", r.right]
    return tuple(words)


_SIGNS = {"<=": "≤", ">=": "≥", "!=": "≠"}


_LETTER = r"(?:[A-Za-z]|" + "|".join(sorted(GREEK, key=len, reverse=True)) + r"|infinity)"
_NAME = rf"\b{_LETTER}(?:_[A-Za-z0-9]+)?\b(?!\()"
_FENCED = r"\((?:[^()]|\((?:[^()]|\([^()]*\))*\))*\)"
_CALL = rf"\b(?:O|{'|'.join(sorted(FUNCTIONS, key=len, reverse=True))}){_FENCED}"
_ATOM = rf"(?:{_CALL}|\|[A-Za-z0-9_]+\||\b[0-9]+(?:\.[0-9]+)?|{_NAME}|{_FENCED})"
_TERM = rf"-?{_ATOM}(?:(?:[*/]|\^-?){_ATOM})*"
_SPAN = re.compile(rf"(?<![\w.'’)/|*^])({_TERM}(?: [+-] {_TERM})*)(?![\w'’(])(?!\.[0-9])")
"""What may be a formula in worksheet syntax, as long as it goes on."""
_SURELY = re.compile(rf"[*^]|{_CALL}|[A-Za-z)] ?[/+-] ?|[/+-] ?[A-Za-z(]")
"""A span with one of these is a formula; one without is a number, a word in parentheses or a letter alone."""
_ALONE = re.compile(
    r"(\b(?:[A-Za-z]|" + "|".join(sorted(GREEK)) + r")_[A-Za-z0-9]+\b(?![*^(])"  # G_2, omega_c
    r"|(?<![\w'’./])[B-HJ-Zb-df-hj-z](?![\w'’^])"  # a letter on its own that is no word
    r"|\b(?:" + "|".join(sorted(GREEK)) + r")\b)"
)


def _signs(part: str) -> str:
    """Signs between spaces, and before numbers, as they are printed."""
    for typed, printed in ((" != ", " ≠ "), (" >= ", " ≥ "), (" <= ", " ≤ "), (" - ", " − "), (" -> ", " → "),
                           ("→ infinity", "→ ∞")):
        part = part.replace(typed, printed)
    return re.sub(r"(^|[ (=])-(?=[0-9])", r"\1−", part)


def mathematics(phrase: str) -> Prose:
    """A plain sentence with what is surely mathematics in it as formulas; anything doubtful stays as it is."""
    words: list[str | Formula] = []
    at = 0
    for found in _SPAN.finditer(phrase):
        if _SURELY.search(found[1]):
            words += [*_letters_alone(phrase[at : found.start()]), _in_words(found[1])]
            at = found.end()
    words += _letters_alone(phrase[at:])
    return tuple(w for w in words if w != "")


def _letters_alone(part: str) -> list[str | Formula]:
    """Words, with letters that stand alone among them as mathematics."""
    return [_in_words(piece) if n % 2 else _signs(piece) for n, piece in enumerate(_ALONE.split(part))]


def _in_words(part: str) -> Formula | str:
    """A formula in a sentence, or the words where it is none; a measured exponent keeps its digits as they stand."""
    base, mark, exponent = part.rpartition("^")
    measured = mark and re.fullmatch(r"-?[0-9]+\.[0-9]+", exponent)
    if _DECIMAL.search(base if measured else part):
        return _signs(part.replace("*i", "i"))
    part, base = (re.sub(r"\|([^|]+)\|", r"abs(\1)", written) for written in (part, base))
    try:
        return power(parse(base), letter(exponent)) if measured else parse(part)
    except FormulaFault:
        return part


_DECIMAL = re.compile(r"[0-9]\.[0-9]")


def about(claim: Claim) -> Prose:
    """The quantity with its keys, how it is said to hold, and where it was read."""
    quantity = claim.quantity.name if claim.quantity else "a statement"
    keys = [w for pair in (claim.quantity.keys if claim.quantity else ()) for w in (f", {pair[0]} ", _key(pair[1]))]
    source = "" if claim.source in ("", "yours", "derived here") else f" Source: {claim.source}."
    return (quantity[:1].upper() + quantity[1:], *keys, ": ", *(holds(claim) or ("exactly",)), f".{source}")


def _key(value: object) -> str | Formula:
    if isinstance(value, Formula):
        return value
    return "(" + ", ".join(str(v) for v in value) + ")" if isinstance(value, (tuple, list)) else str(value)


def shared_digits(judged: Judged) -> int | None:
    """The fewest digits that any measuring road shares with the claim."""
    return min((f.digits for f in judged.findings if f.digits is not None), default=None)


def verdict_line(judged: Judged) -> str:
    """proved: exact zero; coefficients measured at 4 points, 41 digits shared."""
    said = "; ".join(finding(f) for f in judged.findings) or MEANING[judged.verdict]
    return f"{judged.verdict}: {said}"


def measured_at(n: Number, domains: Mapping[str, Domain]) -> Prose:
    """g = 1, tau = 1/50: letters as mathematics."""
    words: list[str | Formula] = []
    for k, (name, value) in enumerate(n.at):
        known = name in domains or len(name) == 1 or name in GREEK
        words += [", " if k else "", letter(name) if known else name, " = ", _exact(value) if known else value]
    return tuple(words)


def _exact(value: str) -> Formula | str:
    """A letter's exact value as mathematics, where it is more than digits."""
    try:
        return value if value.isdigit() else parse(value)
    except FormulaFault:
        return value
