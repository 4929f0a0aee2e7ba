"""[derive.*]: what is to be derived, topic by topic, and the values it is to be taken at."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from derive.formula.tree import Formula, free_letters
from derive.problem.setting import Wish
from derive.worksheet import served
from derive.worksheet.faults import near
from derive.worksheet.keys import ANY_TOPIC, TOPICS, Option
from derive.worksheet.letters import approx_value, lies_outside
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, shown


def read_wishes(r: Reader, value: Any) -> tuple[Wish, ...]:
    path: Path = ("derive",)
    if not isinstance(value, Mapping):
        r.faults.add(
            path, f"{shown(value)} stands here, where derive holds one table a topic.", "Write [derive.generator]."
        )
        return ()
    read = [_wish(r, (*path, str(topic)), str(topic), inner) for topic, inner in value.items()]
    return tuple(w for w in read if w is not None)


def _wish(r: Reader, path: Path, topic: str, value: Any) -> Wish | None:
    if topic not in TOPICS:
        mend = near(topic, TOPICS)
        r.faults.add_key(
            path, f"{shown(topic)} is no topic.", (mend + " " if mend else "") + f"Topics: {', '.join(TOPICS)}."
        )
        return None
    spec = TOPICS[topic]
    table = r.table(path, value, (*(o.key for o in spec.options), *ANY_TOPIC), topic)
    if table is None:
        return None
    options = [(o.key.name, _option(r, (*path, o.key.name), o, table)) for o in spec.options]
    if topic == "generator":
        options = _generator_limit(r, path, options)
    options += _numbers_asked(r, path, table)
    values = _set_values(r, (*path, "set"), table.get("set", {}))
    if topic in EXPANDED and "tau" in dict(values):
        at = (*path, "set", "tau")
        r.faults.add(at, f"{topic} expands in tau, which therefore has no value.", "Set another letter, or none.")
    for key in ANY_TOPIC:
        if key.name in table:
            _use(r, (*path, key.name), topic, key.name)
    return Wish(topic, tuple(options), values)


def _use(r: Reader, path: Path, topic: str, name: str) -> None:
    """A key that any topic may have; asks and times only where something changes from ask to ask."""
    serving = served.serving(name)
    if name == "set" or topic in serving or topic not in served.TOPICS:
        r.use(name, path, topic)
        return
    mend = f"Take the line out; {name} go with {served.now(serving)}."
    r.faults.add_key(path, f"{topic} has no numbers that change from ask to ask.", mend)


EXPANDED = ("generator", "absorber", "levels", "validity")
"""Topics whose answers are series in tau."""


def _option(r: Reader, path: Path, option: Option, table: Mapping[str, Any]) -> Any:
    name = option.key.name
    if name not in table:
        return option.default
    value = table[name]
    if option.kind == "integer":
        got = r.integer(path, value, name, option.low, option.high)
        return option.default if got is None else got
    if option.kind == "boolean":
        return r.boolean(path, value, name)
    if option.kind == "walk":
        return r.choice(path, value, ("continuous", "discrete"), "a walk")
    if option.kind == "window":
        return _window(r, path, value)
    f = r.formula(path, value)
    _check_positive(r, path, f, name)
    return f


def _check_positive(r: Reader, path: Path, f: Formula | None, what: str) -> None:
    near_value = approx_value(f, {}) if f is not None else None
    if near_value is not None and not (near_value.real > 0 and abs(near_value.imag) < 1e-12):
        r.faults.add(path, f"{what} is above 0.", 'Write a positive number, such as "1/100".')


def _window(r: Reader, path: Path, value: Any) -> tuple[Formula, ...] | None:
    read = r.formulas(path, value, "window", 2)
    if read is not None and len(read) != 2:
        r.faults.add(path, "a window has two ends.", 'Write [0, "2*pi/g"].')
        return None
    return read


def _generator_limit(r: Reader, path: Path, options: list[tuple[str, Any]]) -> list[tuple[str, Any]]:
    """An order above the limit is refused; `limit` raises it."""
    found = dict(options)
    order, limit = found["order"], found["limit"]
    if order > limit:
        mend = f"Add  limit = {order}  if you mean it; work and memory grow fast with the order."
        r.faults.add((*path, "order"), f"order {order} is above the limit, {limit}.", mend)
    return [(k, v) for k, v in options if k != "limit"]


def _numbers_asked(r: Reader, path: Path, table: Mapping[str, Any]) -> list[tuple[str, Any]]:
    out: list[tuple[str, Any]] = []
    if "asks" in table and r.is_list((*path, "asks"), table["asks"], "asks", 1_000):
        asks = [r.integer((*path, "asks", k), v, "an ask", 1, 10**9) for k, v in enumerate(table["asks"])]
        out.append(("asks", tuple(a for a in asks if a is not None)))
    if "times" in table:
        times = r.formulas((*path, "times"), table["times"], "times", 1_000) or ()
        for k, f in enumerate(times):
            _check_positive(r, (*path, "times", k), f, "a time")
        out.append(("times", times))
    return out


def _set_values(r: Reader, path: Path, value: Any) -> tuple[tuple[str, Formula], ...]:
    """{ letter = value } at which a topic is taken."""
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where set is a table.", "Write { phi = 0 }.")
        return ()
    out = []
    for name, inner in value.items():
        at = (*path, str(name))
        f = r.formula(at, inner)
        if not is_known(r, at, str(name)) or f is None:
            continue
        if name in free_letters(f):
            r.faults.add(at, f"{name} is set to a formula of itself.", "Write its value.")
        elif not free_letters(f) and lies_outside(f, r.domains[str(name)]):
            r.faults.add(at, f"{shown(inner)} is no value of {name}, which is {r.domains[str(name)].text}.", "")
        else:
            out.append((str(name), f))
    return tuple(out)


def is_known(r: Reader, path: Path, name: str) -> bool:
    if r.letters is None or name in r.letters or name == "tau":
        return name in r.domains
    r.faults.add_key(path, *r.undeclared(name))
    return False
