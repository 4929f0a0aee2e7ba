"""[detector], [start], [interval]: what is asked, from which state, and when."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from math import isqrt
from typing import Any

from derive.errors import NotCovered
from derive.exact.field import Field
from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import ONE, TAU, ZERO, Formula, call, inverse, number, plus, times
from derive.problem.conjugate import conjugate
from derive.problem.graphs import MOST_SITES
from derive.problem.setting import Interval, Start, Vector, Watcher
from derive.worksheet.keys import DETECTOR, INTERVAL, LAWS, MIXED, ONE_OF_START, START
from derive.worksheet.letters import approx_value
from derive.worksheet.places import Place, Sites, read_vector, unit
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, name_fault, rational, shown

MOST_VECTORS = 200  # of a detector given by states: every pair is checked


def inner(u: Vector, v: Vector, r: Reader) -> Formula:
    """<u|v> = sum_x conj(u_x) v_x."""
    right = dict(v)
    return plus(*(times(conjugate(a, r.domains), right[x]) for x, a in u if x in right))


# detector ---------------------------------------------------------------------------------------------------


def read_detectors(r: Reader, value: Any, sites: Sites) -> tuple[Watcher, ...]:
    """One detector, or several told apart by name."""
    path: Path = ("detector",)
    keys = {k.name for k in DETECTOR}
    if isinstance(value, Mapping) and any(isinstance(v, Mapping) for k, v in value.items() if k not in keys):
        return _several(r, path, value, sites, keys)
    one = _watcher(r, path, value, sites, None)
    if one is None:
        return ()
    _check_left_over(r, path, [one], sites)
    return (one,)


def _several(r: Reader, path: Path, value: Mapping[str, Any], sites: Sites, keys: set[str]) -> tuple[Watcher, ...]:
    out = []
    for name, table in value.items():
        inside = (*path, str(name))
        if name in keys:
            r.faults.add_key(inside, f"{name} stands beside named detectors.", "Move it into one of them.")
            continue
        fault = name_fault(str(name).replace("-", "_"))
        if fault is not None:
            r.faults.add_key(inside, f"{shown(str(name))} cannot name a detector.", "Use letters, digits, _ and -.")
            continue
        one = _watcher(r, inside, table, sites, str(name))
        if one is not None:
            out.append(one)
    _check_apart(r, path, out)
    _check_left_over(r, path, out, sites)
    if len(out) > 1:
        r.use("several", (*path, str(out[1].name)))
    return tuple(out)


def _watcher(r: Reader, path: Path, value: Any, sites: Sites, name: str | None) -> Watcher | None:
    table = r.table(path, value, DETECTOR, "a detector" if name else "detector")
    if table is None:
        return None
    efficiency = _efficiency(r, (*path, "efficiency"), table.get("efficiency", 1))
    given = [k for k in ("at", "states") if k in table]
    if len(given) != 1:
        if given:
            r.faults.add_key(
                (*path, "states"), "the detector is given twice, by at and by states.", "Keep one of them."
            )
        else:
            r.faults.add(path, "where the detector stands is not said.", "Add  at = 0  with its site.")
        return None
    if given[0] == "states":
        vectors = _states(r, (*path, "states"), table["states"], sites)
        return None if vectors is None else Watcher(vectors, efficiency, name)
    return _at(r, (*path, "at"), table["at"], sites, efficiency, name)


def _efficiency(r: Reader, path: Path, value: Any) -> Formula:
    f = r.formula(path, value)
    if f is None:
        return ONE
    q = rational(f)
    near = approx_value(f, {})
    if q is not None and not 0 < q <= 1 or (near is not None and not (0 < near.real <= 1 + 1e-12 and not near.imag)):
        r.faults.add(path, f"an efficiency of {shown(text(f))} is no probability.", "It is above 0 and at most 1.")
    elif q != 1:
        r.use("efficiency", path)
    return f


def _at(r: Reader, path: Path, value: Any, sites: Sites, efficiency: Formula, name: str | None) -> Watcher | None:
    if not isinstance(value, (list, tuple)):
        if sites.symbolic:
            place = sites.place(r, path, value)
            return None if place is None else Watcher((), efficiency, name, _said(place))
        at = sites.find(r, path, value)
        return None if at is None else Watcher((unit(at),), efficiency, name)
    if not value:
        r.faults.add(path, "the detector stands on no site.", "Name at least one site.")
        return None
    if not r.is_list(path, value, "at", MOST_SITES):
        return None
    found = _distinct_sites(r, path, value, sites)
    return None if found is None else Watcher(tuple(unit(x) for x in sorted(found)), efficiency, name)


def _said(place: Place) -> Formula | str:
    return number(place) if isinstance(place, int) else place


def _distinct_sites(r: Reader, path: Path, value: Iterable[Any], sites: Sites) -> set[int] | None:
    found: set[int] = set()
    whole = True
    for k, inner_value in enumerate(value):
        at = sites.find(r, (*path, k), inner_value)
        if at is not None and at in found:
            r.faults.add((*path, k), f"site {sites.name(at)} stands here twice.", "Name each site once.")
            whole = False
        whole = whole and at is not None
        if at is not None:
            found.add(at)
    return found if whole else None


def _states(r: Reader, path: Path, value: Any, sites: Sites) -> tuple[Vector, ...] | None:
    """Vectors, checked to be orthonormal."""
    if not r.is_list(path, value, "states", MOST_VECTORS):
        return None
    if not value:
        r.faults.add(path, "the detector has no state.", 'Write one: states = [{ 3 = "1/sqrt(2)", 5 = "1/sqrt(2)" }].')
        return None
    read = [read_vector(r, sites, (*path, k), v, "a state") for k, v in enumerate(value)]
    if None in read:
        return None
    vectors = [v for v in read if v is not None]
    for k, v in enumerate(vectors):
        if not _check_norm(r, (*path, k), v):
            continue
        for n in range(k):
            _check_orthogonal(r, (*path, k), vectors[n], v, f"states {n} and {k}")
    return tuple(vectors)


def _check_norm(r: Reader, path: Path, v: Vector) -> bool:
    length = inner(v, v, r)
    same = vanishes(plus(length, number(-1)), r.domains)
    if same is None:
        message = (
            f"it could not be decided whether this state has length 1: its squared length is {shown(text(length))}."
        )
        r.faults.add(path, message, _SQUARES)
    elif not same:
        r.faults.add(path, f"this state has squared length {_simple(length, r)}, not 1.", _SQUARES)
    return same is True


_SQUARES = 'The squares of the amplitudes add up to 1, as in { 3 = "1/sqrt(2)", 5 = "1/sqrt(2)" }.'


def _check_orthogonal(r: Reader, path: Path, u: Vector, v: Vector, which: str) -> None:
    product = inner(u, v, r)
    same = product == ZERO or vanishes(product, r.domains)
    if same is None:
        r.faults.add(
            path, f"it could not be decided whether {which} are orthogonal.", "Write amplitudes with plain roots."
        )
    elif not same:
        r.faults.add(path, f"{which} are not orthogonal: their product is {_simple(product, r)}.", "It must be 0.")


def _simple(f: Formula, r: Reader) -> str:
    """f as short as the exact field can say it."""
    found = simplified(f, r)
    return shown(text(found if found is not None else f))


def simplified(f: Formula, r: Reader) -> Formula | None:
    """f as its exact field writes it; None where no field here holds it."""
    try:
        field = Field.of([f], r.domains)
        return field.formula(field.element(f))
    except (NotCovered, ZeroDivisionError):
        return None


def _check_apart(r: Reader, path: Path, watchers: list[Watcher]) -> None:
    """Detectors that are told apart watch orthogonal states."""
    for k, b in enumerate(watchers):
        for a in watchers[:k]:
            for u in a.vectors:
                for v in b.vectors:
                    _check_orthogonal(r, (*path, str(b.name)), u, v, f"the detectors {a.name} and {b.name}")


def _check_left_over(r: Reader, path: Path, watchers: list[Watcher], sites: Sites) -> None:
    if sites.size is None or sites.symbolic:
        return
    if sum(w.rank for w in watchers) >= sites.size:
        key = "at" if not watchers[0].name else str(watchers[0].name)
        r.faults.add_key(
            (*path, key), "the detector covers every site of the graph.", "Leave at least one state that is not asked."
        )


# start ------------------------------------------------------------------------------------------------------


def read_start(r: Reader, value: Any, sites: Sites, detectors: tuple[Watcher, ...]) -> Start | None:
    path: Path = ("start",)
    table = r.table(path, value, START, "start")
    if table is None:
        return None
    given = [k for k in table if k in ONE_OF_START]
    if len(given) != 1:
        if given:
            r.faults.add_key(
                (*path, given[1]), f"the start is given twice, by {given[0]} and by {given[1]}.", "Keep one."
            )
        else:
            r.faults.add(path, "the start is not said.", f"Add one of {', '.join(ONE_OF_START)}, such as  at = 0.")
        return None
    kind = given[0]
    readers = {"at": _start_at, "state": _start_state, "mixture": _start_mixture, "distance": _start_distance}
    return readers[kind](r, (*path, kind), table[kind], sites, detectors)


def _start_at(r: Reader, path: Path, value: Any, sites: Sites, detectors: tuple[Watcher, ...]) -> Start | None:
    if value == "detector" and not (sites.names and "detector" in sites.names):
        return _start_on_detector(r, path, detectors)
    if isinstance(value, (list, tuple)):
        r.faults.add(path, "a start is one site.", "For several write state = { ... } or mixture = [...].")
        return None
    if sites.symbolic:
        place = sites.place(r, path, value)
        return None if place is None else Start(place=_said(place))
    at = sites.find(r, path, value)
    return None if at is None else Start(((ONE, unit(at)),))


def _start_on_detector(r: Reader, path: Path, detectors: tuple[Watcher, ...]) -> Start | None:
    if not detectors:
        return None
    only = detectors[0]
    if len(detectors) > 1 or only.rank > 1:
        r.faults.add(path, '"detector" means one state, and this detector has several.', "Name the site or the state.")
        return None
    return Start(place=only.place) if only.place is not None else Start(((ONE, only.vectors[0]),))


def _start_state(r: Reader, path: Path, value: Any, sites: Sites, _: tuple[Watcher, ...]) -> Start | None:
    v = _normalised(r, path, value, sites)
    return None if v is None else Start(((ONE, v),))


def _normalised(r: Reader, path: Path, value: Any, sites: Sites) -> Vector | None:
    v = read_vector(r, sites, path, value, "a state")
    if v is None:
        return None
    square = inner(v, v, r)
    zero = square == ZERO or vanishes(square, r.domains)
    if zero is True:
        r.faults.add(path, "this state is zero.", "Give at least one site an amplitude.")
        return None
    if zero is None and not any(rational(a) for _, a in v):
        r.faults.add(path, "it could not be decided whether this state is zero.", "Write amplitudes with plain roots.")
        return None
    short = simplified(square, r) or square
    return v if short == ONE else tuple((x, times(a, inverse(_root(short)))) for x, a in v)


def _root(square: Formula) -> Formula:
    """sqrt(square), without the sign where it is a rational number's."""
    q = rational(square)
    if q is None or q < 0:
        return call("sqrt", square)
    up, down = isqrt(q.numerator), isqrt(q.denominator)
    exact = up * up == q.numerator and down * down == q.denominator
    return number(Fraction(up, down)) if exact else call("sqrt", square)


def _start_mixture(r: Reader, path: Path, value: Any, sites: Sites, _: tuple[Watcher, ...]) -> Start | None:
    if not r.is_list(path, value, "mixture", 10_000):
        return None
    if not value:
        r.faults.add(path, "this mixture is empty.", 'Write [{ weight = "1/2", at = 0 }, { weight = "1/2", at = 2 }].')
        return None
    read = [_component(r, (*path, k), part, sites) for k, part in enumerate(value)]
    if None in read:
        return None
    parts = tuple(p for p in read if p is not None)
    if len(parts) > 1:
        r.use("mixture", path)
    total = plus(*(w for w, _ in parts))
    same = vanishes(plus(total, number(-1)), r.domains)
    if same is None:
        r.faults.add(
            path, "it could not be decided whether the weights add up to 1.", "Write the last as 1 minus the others."
        )
    elif not same:
        r.faults.add(path, f"the weights add up to {_simple(total, r)}, not 1.", "Make them add up to 1.")
    return Start(parts)


def _component(r: Reader, path: Path, value: Any, sites: Sites) -> tuple[Formula, Vector] | None:
    table = r.table(path, value, MIXED, "a part of a mixture")
    if table is None:
        return None
    if "weight" not in table or ("at" in table) == ("state" in table):
        r.faults.add(
            path, "a part of a mixture has a weight, and either at or state.", 'Write { weight = "1/2", at = 0 }.'
        )
        return None
    weight = r.formula((*path, "weight"), table["weight"])
    value_at = approx_value(weight, {}) if weight is not None else None
    if value_at is not None and (value_at.real < 0 or abs(value_at.imag) > 1e-12):
        r.faults.add(
            (*path, "weight"), f"a weight of {text(weight) if weight else ''} is no probability.", "It is 0 or above."
        )
        return None
    if "at" in table:
        at = sites.find(r, (*path, "at"), table["at"])
        v = None if at is None else unit(at)
    else:
        v = _normalised(r, (*path, "state"), table["state"], sites)
    return None if weight is None or v is None else (weight, v)


def _start_distance(r: Reader, path: Path, value: Any, sites: Sites, _: tuple[Watcher, ...]) -> Start | None:
    f = r.formula(path, value)
    if not sites.symbolic and sites.size is not None:
        r.faults.add_key(path, "distance is for a size that is a letter.", "Write  at = 0  with the site's number.")
        return None
    q = rational(f) if f is not None else None
    if q is not None and (q.denominator != 1 or q < 0):
        r.faults.add(path, f"{q} is no number of steps.", "Write 0, 1, 2, ... or an integer letter.")
        return None
    return None if f is None else Start(distance=f)


# interval ---------------------------------------------------------------------------------------------------


def read_interval(r: Reader, value: Any) -> Interval:
    path: Path = ("interval",)
    table = r.table(path, value, INTERVAL, "interval")
    if table is None:
        return Interval()
    length = r.formula((*path, "length"), table.get("length", "tau")) or TAU
    near = approx_value(length, {})
    if near is not None and not (near.real > 0 and abs(near.imag) < 1e-12):
        r.faults.add(
            (*path, "length"), f"an interval of {shown(text(length))} is not above 0.", "Write a positive length."
        )
    elif length.head == "letter" and length != TAU and r.domains.get(length.args[0]) is not None:
        _check_length_letter(r, (*path, "length"), length)
    law = r.choice((*path, "law"), table.get("law", "fixed"), LAWS, "a law of the interval") or "fixed"
    shape = _shape(r, path, table, law)
    if law != "fixed":
        r.use(law, (*path, "law"))
    return Interval(length, law, shape)


def _check_length_letter(r: Reader, path: Path, length: Formula) -> None:
    domain = r.domains[length.args[0]]
    if not domain.is_positive:
        mend = f'Declare  {length.args[0]} = "positive".'
        r.faults.add(path, f"{length.args[0]} is {domain.text}, and a length is positive.", mend)


def _shape(r: Reader, path: Path, table: Mapping[str, Any], law: str) -> Formula | None:
    if "shape" in table and law != "gamma":
        r.faults.add_key((*path, "shape"), f"shape goes with the gamma law, and the law is {law}.", "Take it out.")
        return None
    if law != "gamma":
        return None
    if "shape" not in table:
        r.faults.add(path, "the gamma law needs its shape.", 'Add  shape = 2  or  shape = "s".')
        return None
    f = r.formula((*path, "shape"), table["shape"])
    near = approx_value(f, {}) if f is not None else None
    if near is not None and not near.real > 0:
        r.faults.add((*path, "shape"), "a shape is above 0.", "Write a positive shape.")
    return f
