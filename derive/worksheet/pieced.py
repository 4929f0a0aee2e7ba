"""Values of a claim that are more than one formula: by condition, or at every root of a polynomial.

    cases    = [{ if = "phi = 0", formula = "1/2" }, { if = "otherwise", formula = "1" }]
    per_root = { polynomial = "E^3 - 2*g^2*E", letter = "E", formula = "g^2*tau/2" }

Both are the ledger's own shapes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from derive.formula.tree import Formula, free_letters
from derive.worksheet.keys import CASE, PER_ROOT
from derive.worksheet.plain import name_fault, one_line
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, shown

MOST_CASES = 50
OTHERWISE = "otherwise"
AT_ROOTS = ("level energy", "decay rate", "level weight", "level multiplicity", "dark level energy",
            "dark level multiplicity", "pole")
"""Quantities that have a value at each root of a polynomial."""

InLatex = Callable[[Path, Any], "Formula | None"]


def read_cases(
    r: Reader, path: Path, value: Any, brings: tuple[str, ...], in_latex: InLatex
) -> tuple[tuple[str, Formula], ...]:
    """(condition, formula), the conditions in the user's own words."""
    if not r.is_list(path, value, "cases", MOST_CASES):
        return ()
    if not value:
        r.faults.add(path, "there is no case.", 'Write [{ if = "phi = 0", formula = "1/2" }].')
    read = [_case(r, (*path, k), inner, brings, in_latex) for k, inner in enumerate(value)]
    found = [c for c in read if c is not None]
    for k, (when, _) in enumerate(found):
        if when in [w for w, _ in found[:k]]:
            r.faults.add((*path, k), f'"{when}" stands here twice.', "Keep one of the two.")
        if when == OTHERWISE and k < len(value) - 1:
            r.faults.add((*path, k), '"otherwise" stands before another case.', "Put it at the end.")
    return tuple(found)


def _case(
    r: Reader, path: Path, value: Any, brings: tuple[str, ...], in_latex: InLatex
) -> tuple[str, Formula] | None:
    table = r.table(path, value, CASE, "a case")
    if table is None:
        return None
    when = _condition(r, path, table, brings)
    given = [k for k in ("formula", "latex") if k in table]
    if len(given) != 1:
        what = "says nothing" if not given else "has both formula and latex"
        r.faults.add(path, f"this case {what}.", 'Write  { if = "phi = 0", formula = "1/2" }.')
        return None
    at = (*path, given[0])
    f = r.formula(at, table["formula"], brings) if given == ["formula"] else in_latex(at, table["latex"])
    return None if when is None or f is None else (when, f)


def _condition(r: Reader, path: Path, table: Mapping[str, Any], brings: tuple[str, ...]) -> str | None:
    if "if" not in table:
        r.faults.add(path, "where this case holds is not said.", 'Add  if = "phi = 0"  or  if = "otherwise".')
        return None
    said = table["if"]
    if said == OTHERWISE:
        return OTHERWISE
    return one_line(said) if r.relation((*path, "if"), said, frozenset(brings)) else None


def read_per_root(r: Reader, path: Path, value: Any, about: str) -> tuple[Formula, str, Formula] | None:
    """(polynomial, its letter, formula in that letter)."""
    if about not in AT_ROOTS:
        mend = f"It goes with {', '.join(AT_ROOTS[:-1])} and {AT_ROOTS[-1]}."
        r.faults.add_key(path, f"{about} has no value at each root of a polynomial.", mend)
        return None
    table = r.table(path, value, PER_ROOT, "per_root")
    if table is None:
        return None
    missing = [k.name for k in PER_ROOT if k.name not in table]
    if missing:
        mend = 'Write  { polynomial = "E^2 - g^2", letter = "E", formula = "..." }.'
        r.faults.add(path, f"per_root says no {missing[0]}.", mend)
        return None
    name = _letter(r, (*path, "letter"), table["letter"])
    if name is None:
        return None
    polynomial = r.formula((*path, "polynomial"), table["polynomial"], (name,))
    f = r.formula((*path, "formula"), table["formula"], (name,))
    if polynomial is not None and name not in free_letters(polynomial):
        r.faults.add((*path, "polynomial"), f"{name} does not stand in this polynomial.", f"Write it in {name}.")
        return None
    return None if polynomial is None or f is None else (polynomial, name, f)


def _letter(r: Reader, path: Path, value: Any) -> str | None:
    if not isinstance(value, str):
        r.faults.add(path, f"{shown(value)} is no letter.", 'Write  letter = "E".')
        return None
    fault = name_fault(value)
    if fault is not None:
        r.faults.add(path, *fault)
        return None
    if value == "tau" or value in (r.letters or {}):
        r.faults.add(path, f"{value} already has a meaning.", "Take another letter for the root.")
        return None
    return value
