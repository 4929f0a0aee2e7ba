"""Road "exact" for dark levels: a dark state is an eigenvector of H that has nothing on the detector.

    multiplicity of E = dim { v : (H - E) v = 0,  D† v = 0 } = N - rank of the stacked matrix,

by elimination over the exact field that holds H and E, or over K[E]/(p) where one formula names all roots of p.
"""

from __future__ import annotations

from collections.abc import Sequence

from derive.checks.levels.compare import sibling
from derive.checks.levels.resolvent import polynomial_over
from derive.checks.levels.resolvent_dense import DenseResolvent
from derive.errors import NotCovered
from derive.exact.adjoin import Fractions
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.exact.zero import vanishes
from derive.formula.tree import Formula
from derive.problem.setting import Family, Finite, Setting
from derive.record.said import Claim, Finding, PerRoot, Value

LARGEST_NUMERIC, LARGEST_SYMBOLIC = 30, 14
"""Sites up to which the elimination is done: with one letter at most, with more."""


def check_dark_exact(setting: Setting, claims: Sequence[Claim]) -> dict[str, Finding]:
    """"Proved" for derived dark energies and multiplicities that the elimination confirms; nothing else is said."""
    wanted = [c for c in claims if c.quantity is not None and c.quantity.name.startswith("dark level")]
    if wanted and isinstance(setting.space, Family):
        return _of_family(setting, wanted)
    if not wanted or not isinstance(setting.space, Finite):
        return {}
    found: dict[str, Finding] = {}
    counted: dict[str, int | None] = {}
    for claim in wanted:
        energy, fold = sibling(claim, claims, "energy"), sibling(claim, claims, "multiplicity")
        if energy is None or fold is None or not isinstance(fold.value, Formula) or fold.value.head != "number":
            continue
        if energy.id not in counted:
            counted[energy.id] = _multiplicity(setting, energy.value)
        seen, said = counted[energy.id], fold.value.args[0]
        if seen is not None and (seen == said or (claim is energy and seen > 0)):
            text = f"H - E has {seen} independent eigenvectors there that vanish on the detector"
            found[claim.id] = Finding("proved", "exact", evidence=text)
    return found


def _of_family(setting: Setting, wanted: Sequence[Claim]) -> dict[str, Finding]:
    """Complete and complete bipartite graphs with letters for their sizes: what the uniform states leave over."""
    try:
        energy, fold = DenseResolvent(setting).dark()
    except NotCovered:
        return {}
    demanded = {"dark level energy": energy, "dark level multiplicity": fold}
    found: dict[str, Finding] = {}
    for claim in wanted:
        value = claim.value
        if claim.quantity is None or claim.quantity.key("level") != 1 or not isinstance(value, Formula):
            continue
        if vanishes(value - demanded[claim.quantity.name], setting.domains()) is True:
            text = "what is orthogonal to the uniform states has this energy, with the size as a letter"
            found[claim.id] = Finding("proved", "exact", evidence=text)
    return found


def _multiplicity(setting: Setting, energy: Value) -> int | None:
    try:
        return _counted(setting, energy)
    except (NotCovered, ZeroDivisionError):
        return None


def _counted(setting: Setting, energy: Value) -> int:
    space = setting.space
    if not isinstance(space, Finite):
        raise NotCovered("a finite graph is needed here")
    vectors = [v for w in setting.detectors for v in w.vectors]
    formulas = list(dict.fromkeys([f for v in vectors for _, f in v] + [f for row in space.rows for _, f in row]))
    field, root = _place(setting, formulas, energy)
    letters = [name for name in field.gen if name.startswith(("letter:", "unit", "growth"))]
    if space.size > (LARGEST_SYMBOLIC if len(letters) > 1 + isinstance(energy, PerRoot) else LARGEST_NUMERIC):
        raise NotCovered("too many sites for elimination")
    rows: list[Vector] = [{x: field.conjugate(field.element(f)) for x, f in v} for v in vectors]
    for x, row in enumerate(space.rows):
        line = {y: field.element(f) for y, f in row}
        accumulate(line, {x: -root})
        rows.append(line)
    return space.size - _rank(rows)


def _place(setting: Setting, formulas: list[Formula], energy: Value) -> tuple[Field, Element]:
    if isinstance(energy, PerRoot):
        base = Field.of(formulas, setting.domains())
        p = polynomial_over(setting, base, formulas, energy.polynomial, energy.letter)
        field: Field = Fractions(base, energy.letter, [c / p[-1] for c in p[:-1]])
        return field, field.element(energy.formula)
    if not isinstance(energy, Formula):
        raise NotCovered("a dark energy is a formula")
    field = Field.of([*formulas, energy], setting.domains())
    return field, field.element(energy)


def _rank(rows: list[Vector]) -> int:
    """By elimination; a pivot is any entry that is not exactly zero."""
    echelon: dict[int, Vector] = {}
    for row in rows:
        rest = dict(row)
        while rest and min(rest) in echelon:
            pivot = echelon[min(rest)]
            front = rest[min(rest)] / pivot[min(rest)]
            accumulate(rest, {x: -(front * f) for x, f in pivot.items()})
        if rest:
            echelon[min(rest)] = rest
    return len(echelon)
