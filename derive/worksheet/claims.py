"""[claim.*]: formulas of the user's own, to be judged."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial
from typing import Any

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.formula.latex_grammar import parse_latex
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters, order
from derive.problem.quantities import QUANTITIES, Spec
from derive.problem.setting import Own, Watcher
from derive.record.holds import kind_of, tau_power
from derive.record.said import EXACTLY, Kind
from derive.worksheet import served
from derive.worksheet.faults import near
from derive.worksheet.keys import ABSORBERS, CLAIM, HIGHEST_LIMIT, ONE_OF_CLAIM, SIDES_OF_MAPS
from derive.worksheet.pieced import read_cases, read_per_root
from derive.worksheet.places import Sites
from derive.worksheet.positions import Path
from derive.worksheet.serving import note_claim
from derive.worksheet.values import Reader, bringing_along, rational, shown

MOST_ENTRIES = 1_000_000  # of a claimed matrix
ERRORS = ("energy error", "rate error")
_ORDER = re.compile(r"\s*O\s*\((.*)\)\s*", re.DOTALL)
NUMBERED = ("detection probability", "survival probability")  # what published numbers may be about
MOST_ATTACHED = 10  # sites of a network beside the detector


@dataclass
class Surroundings:
    """What a claim may refer to besides letters."""

    sites: Sites
    detectors: tuple[Watcher, ...]


def read_claims(r: Reader, value: Any, around: Surroundings) -> tuple[Own, ...]:
    path: Path = ("claim",)
    if not isinstance(value, Mapping):
        r.faults.add(
            path, f"{shown(value)} stands here, where claim holds one table a formula.", "Write [claim.my-name]."
        )
        return ()
    if len(value) > 10_000:
        r.faults.add(path, f"{len(value):,} claims stand here.", "At most 10,000 are read.")
        return ()
    read = [_claim(r, (*path, str(name)), str(name), inner, around) for name, inner in value.items()]
    return tuple(c for c in read if c is not None)


def _claim(r: Reader, path: Path, name: str, value: Any, around: Surroundings) -> Own | None:
    if not name.strip() or len(name) > 100 or not name.isprintable():
        r.faults.add_key(path, f"{shown(name)} cannot name a claim.", "Use a short printable name.")
        return None
    table = r.table(path, value, CLAIM, f"the claim {name}")
    if table is None:
        return None
    about = _about(r, path, table)
    if about is None:
        return None
    spec = QUANTITIES[about]
    which = _which(r, path, table, about, spec, around)
    kind = _holds(r, path, table, spec, which)
    brings = brought(spec, which)
    entry = _entry(r, path, table, spec, around.sites)
    side = _side(r, path, table, about)
    arm = _arm(r, path, table, about)
    given = _one_value(r, path, table)
    formula = matrix = None
    values: tuple[tuple[str, str], ...] = ()
    cases: tuple[tuple[str, Formula], ...] = ()
    per_root = None
    if given == "formula":
        _check_scalar(r, path, about, spec, entry, table, "formula")
        at = (*path, "formula")
        formula = _error(r, at, table["formula"]) if about in ERRORS else r.formula(at, table["formula"], brings)
    elif given == "matrix":
        matrix = _matrix(r, (*path, "matrix"), table["matrix"], about, spec, entry, brings, around.sites)
    elif given == "latex":
        _check_scalar(r, path, about, spec, entry, table, "latex")
        formula = _in_latex(r, (*path, "latex"), table["latex"], about, brings)
    elif given == "values":
        values = _published(r, (*path, "values"), table["values"])
        _check_numbered(r, path, about, kind, which is None or all(n == str(which) for n, _ in values))
    elif given == "cases":
        _check_scalar(r, path, about, spec, entry, table, "cases")
        in_latex = partial(_in_latex, r, about=about, brings=brings)
        cases = read_cases(r, (*path, "cases"), table["cases"], brings, in_latex)
    elif given == "per_root":
        per_root = read_per_root(r, (*path, "per_root"), table["per_root"], about)
    source = r.text((*path, "source"), table["source"], "source") if "source" in table else None
    assume = r.relations((*path, "assume"), table["assume"], brings) if "assume" in table else ()
    note_claim(r, path, about, kind, given)
    return Own(
        name, about, kind.phrase, which, entry, side, formula, matrix, values, None, assume, source, cases, per_root,
        arm,
    )


def _error(r: Reader, path: Path, value: Any) -> Formula | None:
    """An absorber's error is claimed by its order: O(tau^3), the one formula that may say O(...)."""
    value = text(value) if isinstance(value, Formula) else value
    inside = _ORDER.fullmatch(value) if isinstance(value, str) else None
    f = None if inside is None else r.formula(path, inside[1])
    if inside is None or (f is not None and (tau_power(f) or 0) < 1):
        r.faults.add(path, f"{shown(value)} is no order of an error.", 'Write  formula = "O(tau^3)".')
        return None
    return None if f is None else order(f)


def _in_latex(r: Reader, path: Path, value: Any, about: str, brings: tuple[str, ...]) -> Formula | None:
    """A formula in LaTeX, its letters by their owner's LaTeX or by name."""
    written = r.text(path, value, "latex")
    if written is None:
        return None
    known = {"tau": None, **dict.fromkeys(brings), **{n: x.latex for n, x in (r.letters or {}).items()}}
    try:
        f = parse_latex(written, known)
    except FormulaFault as fault:
        r.faults.add(path, fault.message, fault.mend, fault.position)
        return None
    return _error(r, path, text(f)) if about in ERRORS else r.formula(path, f, brings)


def _about(r: Reader, path: Path, table: Mapping[str, Any]) -> str | None:
    if "about" not in table:
        r.faults.add(path, "what this claim is about is not said.", 'Add  about = "generator"  or another quantity.')
        return None
    about = table["about"]
    if isinstance(about, str) and about in QUANTITIES:
        return about
    mend = near(about, QUANTITIES) if isinstance(about, str) else ""
    known = "watchpot words  lists the quantities."
    r.faults.add((*path, "about"), f"{shown(about)} is no quantity.", (mend + " " if mend else "") + known)
    return None


_WHICH_OPTIONAL = ("order", "ask", "regime", "interval", "component")


def _which(
    r: Reader, path: Path, table: Mapping[str, Any], about: str, spec: Spec, around: Surroundings
) -> int | str | None:
    """`which` as the quantity's own kind of key."""
    at = (*path, "which")
    if spec.which is None:
        if "which" in table:
            r.faults.add_key(at, f"there is only one {about}.", "Take the line out.")
        return None
    if "which" not in table:
        if spec.which not in _WHICH_OPTIONAL and "per_root" not in table:  # its roots say which
            r.faults.add(path, f"which {about} is not said.", f"Add  which = {_example(spec.which)}.")
        return None
    value = table["which"]
    if spec.which == "absorber":
        return r.choice(at, value, ABSORBERS, "an absorber")
    if spec.which == "detector":
        return r.choice(at, value, [w.name for w in around.detectors if w.name] or ["a detector's name"], "a detector")
    if spec.which == "level" and value == "k":
        return "k"
    low, high = (0, HIGHEST_LIMIT) if spec.which == "order" else (1, 10**6)
    return r.integer(at, value, "which", low, high)


def _example(which: str) -> str:
    return {"absorber": '"plain"', "detector": '"left"', "level": '1  or  which = "k"'}.get(which, "1")


def brought(spec: Spec, which: int | str | None) -> tuple[str, ...]:
    """The letters the quantity brings along: k only where all levels are meant, n not where one ask is."""
    if spec.which == "level":
        return ("k",) if which == "k" else ()
    if spec.which == "ask" and which is not None:
        return ()
    return spec.brings


def _entry(r: Reader, path: Path, table: Mapping[str, Any], spec: Spec, sites: Sites) -> tuple[int, int] | None:
    if "entry" not in table:
        return None
    at, value = (*path, "entry"), table["entry"]
    if spec.shape != "matrix":
        r.faults.add_key(at, f"{table['about']} is no matrix and has no entries.", "Take the line out.")
        return None
    if not isinstance(value, (list, tuple)) or len(value) != 2:
        r.faults.add(at, f"{shown(value)} is no entry of a matrix.", "Write entry = [x, y].")
        return None
    x, y = (sites.find(r, (*at, k), value[k]) for k in (0, 1))
    return None if x is None or y is None else (x, y)


def _side(r: Reader, path: Path, table: Mapping[str, Any], about: str) -> str | None:
    at = (*path, "side")
    if about != "state map":
        if "side" in table:
            r.faults.add_key(at, f"side goes with a state map, and this is about {about}.", "Take the line out.")
        return None
    if "side" not in table:
        r.faults.add(path, "which side of the state map is not said.", 'Add  side = "left"  or  side = "right".')
        return None
    return r.choice(at, table["side"], SIDES_OF_MAPS, "a side")


def _arm(r: Reader, path: Path, table: Mapping[str, Any], about: str) -> int | None:
    if "arm" not in table:
        return None
    at = (*path, "arm")
    if QUANTITIES[about].which != "level":
        r.faults.add_key(at, f"arm says whose levels are counted, and this is about {about}.", "Take the line out.")
        return None
    return r.integer(at, table["arm"], "arm", 1, 10**6)


def _one_value(r: Reader, path: Path, table: Mapping[str, Any]) -> str | None:
    given = [k for k in table if k in ONE_OF_CLAIM]
    if not given:
        r.faults.add(path, "this claim says nothing.", f"Add one of {', '.join(ONE_OF_CLAIM)}.")
        return None
    if len(given) > 1:
        mend = "Keep one of them, or write two claims."
        r.faults.add_key((*path, given[1]), f"this claim has both {given[0]} and {given[1]}.", mend)
    return given[0]


def _check_scalar(
    r: Reader, path: Path, about: str, spec: Spec, entry: tuple[int, int] | None, table: Mapping[str, Any], key: str
) -> None:
    if spec.shape == "matrix" and entry is None and "entry" not in table:
        mend = 'Add  entry = [x, y], or write  matrix = [[x, y, "..."]]  with its non-zero entries.'
        r.faults.add((*path, key), f"{about} is a matrix, and this is one formula.", mend)


def _matrix(
    r: Reader,
    path: Path,
    value: Any,
    about: str,
    spec: Spec,
    entry: tuple[int, int] | None,
    brings: tuple[str, ...],
    sites: Sites,
) -> tuple[tuple[int, int, Formula], ...] | None:
    if spec.shape == "scalar":
        r.faults.add_key(path, f"{about} is no matrix.", "Write formula = ...")
        return None
    if spec.shape == "either":  # a network's own sites, 0 the detector
        sites = Sites(MOST_ATTACHED + 1)
    if entry is not None:
        r.faults.add_key(
            path, "one entry is meant, and a matrix stands here.", "Write formula = ..., or take entry out."
        )
    if not r.is_list(path, value, "matrix", MOST_ENTRIES):
        return None
    cells: dict[tuple[int, int], Formula] = {}
    for k, inner in enumerate(value):
        at = (*path, k)
        if not isinstance(inner, (list, tuple)) or len(inner) != 3:
            r.faults.add(at, f"{shown(inner)} is no entry of a matrix.", 'An entry is [x, y, "formula"].')
            continue
        x, y = (sites.find(r, (*at, n), inner[n]) for n in (0, 1))
        f = r.formula((*at, 2), inner[2], brings)
        if x is None or y is None or f is None:
            continue
        if (x, y) in cells:
            r.faults.add(at, "this entry stands here twice.", "Keep one of the two.")
        cells[x, y] = f
    return tuple((x, y, cells[x, y]) for x, y in sorted(cells))


def _published(r: Reader, path: Path, value: Any) -> tuple[tuple[str, str], ...]:
    """[[n, decimal], ...] as quoted text, so that the digits shown are the digits meant."""
    if not r.is_list(path, value, "values", 100_000):
        return ()
    if not value:
        r.faults.add(path, "there is no value.", 'Write [["1", "0.0796"]].')
    out = []
    for k, inner in enumerate(value):
        at = (*path, k)
        if not isinstance(inner, (list, tuple)) or len(inner) != 2:
            r.faults.add(at, f"{shown(inner)} is no published number.", 'Write ["1", "0.0796"]: n and the value.')
            continue
        if all(_exact_number(r, (*at, n), inner[n]) for n in (0, 1)) and _is_ask(r, (*at, 0), inner[0]):
            out.append((str(inner[0]), str(inner[1])))
    return tuple(out)


def _is_ask(r: Reader, path: Path, value: Any) -> bool:
    n = rational(parse(str(value)))
    if n is not None and n.denominator == 1 and n >= 1:
        return True
    r.faults.add(path, f"{shown(value)} numbers no ask.", "Asks are numbered 1, 2, 3, ...")
    return False


def _check_numbered(r: Reader, path: Path, about: str, kind: Kind, alike: bool) -> None:
    """Published numbers go by n, each as printed; `alike`: `which` says nothing else."""
    if "values" not in served.TOPICS.get(QUANTITIES[about].topic, ()):
        return  # told as not served
    if about not in NUMBERED:
        mend = f"They go with {' and '.join(NUMBERED)}; for one number write formula = ..."
        r.faults.add_key((*path, "values"), f"{about} has no list of numbers (n, value).", mend)
    if not alike:
        r.faults.add_key((*path, "which"), "values say themselves which n they are for.", "Take the line out.")
    if kind.name != "exactly" or kind.every is not None:
        r.faults.add_key((*path, "holds"), "printed numbers hold to the digits shown.", "Take the line out.")


def _exact_number(r: Reader, path: Path, value: Any) -> bool:
    f = r.formula(path, value)
    if f is not None and rational(f) is None:
        r.faults.add(path, f"{shown(value)} is no number.", "Write its digits in quotes.")
        return False
    return f is not None


def _holds(r: Reader, path: Path, table: Mapping[str, Any], spec: Spec, which: int | str | None) -> Kind:
    if "holds" not in table:
        return EXACTLY
    at, phrase = (*path, "holds"), table["holds"]
    if not isinstance(phrase, str):
        r.faults.add(at, f"{shown(phrase)} is no phrase.", 'Write one in quotes: "up to O(tau^3)".')
        return EXACTLY
    try:
        kind = kind_of(phrase)
    except FormulaFault as fault:
        r.faults.add(at, fault.message, fault.mend, fault.position)
        return EXACTLY
    _check_limit_letters(r, at, kind, set(brought(spec, which)))
    return kind


def _unknown_in_holds(r: Reader, name: str, known: set[str]) -> tuple[str, str]:
    """Message and mend; a letter that another quantity brings along is not to be declared."""
    bringing = [about for about in bringing_along(name) if about in served.QUANTITIES]
    if not bringing:
        return r.undeclared(name)
    message = f"{name} belongs to other quantities ({bringing[0]}, for one); what this claim is about has none."
    return message, f"Letters here: {', '.join(sorted(known))}."


def _check_limit_letters(r: Reader, path: Path, kind: Kind, brought: set[str]) -> None:
    if r.letters is None:
        return
    known = brought | set(r.letters) | {"tau"}
    for name, _ in kind.toward:
        if name not in known:
            mend = f"Letters here: {', '.join(sorted(known))}."
            r.faults.add(path, f"the limit is in {name}, which neither [symbols] nor the quantity knows.", mend)
    for f in (kind.fixed, kind.error, kind.within, *(to for _, to in kind.toward)):
        for name in sorted(free_letters(f) - known) if f is not None else ():
            r.faults.add(path, *_unknown_in_holds(r, name, known))
    if kind.every is not None and (kind.every not in r.letters or r.letters[kind.every].domain.kind != "integer"):
        mend = f'Declare  {kind.every} = "integer >= 2"  under [symbols].'
        r.faults.add(path, f'"for every" speaks of {kind.every}, which is no integer letter.', mend)
