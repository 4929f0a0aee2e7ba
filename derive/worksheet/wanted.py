"""What ties topics and claims to the rest: letters brought along, a start that is needed; and [check]."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from derive.errors import FormulaFault
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters, replace, walk
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Check, Finite, Own, Relation, Setting, Unitary, Wish
from derive.worksheet.claims import brought
from derive.worksheet.keys import CHECK, START_QUANTITIES, TOPICS
from derive.worksheet.letters import approx_value, lies_outside
from derive.worksheet.positions import Path
from derive.worksheet.topics import is_known
from derive.worksheet.values import Reader, divides_by_zero, shown


def check_brought_letters(r: Reader, wishes: tuple[Wish, ...], claims: tuple[Own, ...]) -> None:
    """A declared letter that a topic or a claim of the same worksheet brings along is refused."""
    whose: dict[str, str] = {}
    for wish in wishes:
        whose.update((n, f"the topic {wish.topic}") for n in TOPICS[wish.topic].brings)
    for own in claims:
        names = brought(QUANTITIES[own.about], own.which)
        whose.update((n, f"the claim {own.name}") for n in names)
    for name in r.letters or ():
        if name in whose:
            mend = f"{name} has its own meaning there; name your letter otherwise."
            r.faults.add_key(("symbols", name), f"{name} is declared, and {whose[name]} brings it along.", mend)


def check_set_values(r: Reader, setting: Setting, wishes: tuple[Wish, ...]) -> None:
    """Values that make the graph or a state infinite are refused here, with their place."""
    for wish in wishes:
        if wish.set and infinite_at(setting, dict(wish.set)):
            r.faults.add(
                ("derive", wish.topic, "set"), "at these values the graph or a state divides by zero.", _FINITE
            )


def check_point_values(r: Reader, setting: Setting, check: Check) -> None:
    """The same for the points of [check]."""
    for k, point in enumerate(check.points):
        if infinite_at(setting, dict(point)):
            r.faults.add(("check", "points", k), "at this point the graph or a state divides by zero.", _FINITE)


_FINITE = "Take other values."


def infinite_at(setting: Setting, values: Mapping[str, Formula]) -> bool:
    """Whether an entry of H, of the detector or of the start divides by zero once the letters have these values."""
    domains = setting.domains()
    for f in _dividing(setting):
        try:
            there = replace(f, dict(values))
        except FormulaFault:
            return True
        if any(n.head == "power" and divides_by_zero(n, domains) for n in walk(there)):
            return True
    return False


def _dividing(setting: Setting) -> set[Formula]:
    """The distinct formulas of the setting that divide by something with a letter."""
    space, start = setting.space, setting.start
    rows = space.rows if isinstance(space, (Finite, Unitary)) else ()
    entries = {f for row in rows for _, f in row}
    entries |= {f for w in setting.detectors for v in w.vectors for _, f in v}
    entries |= {f for _, v in (start.mixture if start is not None else ()) for _, f in v}
    return {f for f in entries if any(_is_division(n) for n in walk(f))}


def _is_division(f: Formula) -> bool:
    return f.head == "power" and f.args[1].head == "number" and f.args[1].args[0] < 0 and bool(free_letters(f.args[0]))


def start_wanted(wishes: tuple[Wish, ...], claims: tuple[Own, ...]) -> str | None:
    """What needs a start, if anything does."""
    for wish in wishes:
        if TOPICS[wish.topic].needs_start:
            return f"the topic {wish.topic}"
    for own in claims:
        topic = QUANTITIES[own.about].topic
        if own.about in START_QUANTITIES or TOPICS[topic].needs_start:
            return f"the claim {own.name}"
    return None


def read_check(r: Reader, value: Any, length: Formula, assume: tuple[Relation, ...]) -> Check:
    path: Path = ("check",)
    table = r.table(path, value, CHECK, "check")
    if table is None:
        return Check()

    def whole(name: str, low: int, high: int, default: int) -> int:
        got = r.integer((*path, name), table[name], name, low, high) if name in table else default
        return default if got is None else got

    points = _points(r, (*path, "points"), table["points"], length, assume) if "points" in table else ()
    return Check(whole("digits", 10, 1_000, 30), whole("samples", 1, 1_000, 4), whole("seed", 0, 10**18, 1), points)


Point = tuple[tuple[str, Formula], ...]


def _points(r: Reader, path: Path, value: Any, length: Formula, assume: tuple[Relation, ...]) -> tuple[Point, ...]:
    if not r.is_list(path, value, "points", 1_000):
        return ()
    read = [_point(r, (*path, k), inner, length, assume) for k, inner in enumerate(value)]
    return tuple(p for p in read if p is not None)


def _point(r: Reader, path: Path, value: Any, length: Formula, assume: tuple[Relation, ...]) -> Point | None:
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} is no point.", 'Write { g = 1, tau = "1/50" }.')
        return None
    out: dict[str, Formula] = {}
    faulty = False
    for name, inner in value.items():
        at = (*path, str(name))
        f = r.formula(at, inner)
        if not is_known(r, at, str(name)) or f is None:
            faulty = True
        elif free_letters(f):
            r.faults.add(at, f"{shown(inner)} is no number.", "A point gives each letter a number.")
            faulty = True
        elif lies_outside(f, r.domains[str(name)]):
            r.faults.add(at, f"{shown(inner)} is no value of {name}, which is {r.domains[str(name)].text}.", "")
            faulty = True
        else:
            out[str(name)] = f
    if faulty or r.letters is None:
        return None
    wanted = set(r.letters) | (free_letters(length) & {"tau"})
    missing = sorted(wanted - set(out))
    if missing:
        r.faults.add(
            path, f"this point gives no value for {', '.join(missing)}.", "A point gives each letter a number."
        )
        return None
    _check_kept(r, path, out, assume)
    return tuple(sorted(out.items()))


def _check_kept(r: Reader, path: Path, point: Mapping[str, Formula], assume: tuple[Relation, ...]) -> None:
    """A point that clearly breaks what the worksheet assumes would never be tested."""
    at = {n: v for n, f in point.items() if (v := approx_value(f, {})) is not None}
    for relation in assume:
        left, right = approx_value(relation.left, at), approx_value(relation.right, at)
        if left is not None and right is not None and _broken(left, relation.op, right):
            said = f"{text(relation.left)} {relation.op} {text(relation.right)}"
            r.faults.add(path, f"this point does not keep {said}, which is assumed.", "Change the point or assume.")


def _broken(left: complex, op: str, right: complex) -> bool:
    """Certainly broken; close calls are decided later, exactly."""
    gap, width = left.real - right.real, 1e-9 * (1 + abs(left) + abs(right))
    if op in ("<", "<="):
        return gap > width
    if op in (">", ">="):
        return gap < -width
    return op == "=" and abs(left - right) > width
