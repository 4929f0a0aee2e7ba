"""Whether two formulas differ, decided by mpmath alone: at five generic points, and for O(tau^k) by how fast the
difference falls.  Common practice, no source."""

from __future__ import annotations

from collections.abc import Mapping
from random import Random
from typing import Any

import mpmath

from derive.formula.tree import Formula
from derive.problem.setting import Domain, Relation

POINTS, WHOLE_POINTS = 5, 30
DIGITS = 60
SMALL = mpmath.mpf(10) ** -9


class Unknown(Exception):
    """This formula has a part that is not evaluated here."""


_CALLS: dict[str, Any] = {
    "sqrt": mpmath.sqrt, "exp": mpmath.exp, "log": mpmath.log, "sin": mpmath.sin, "cos": mpmath.cos,
    "tan": mpmath.tan, "cot": mpmath.cot, "sinh": mpmath.sinh, "cosh": mpmath.cosh, "tanh": mpmath.tanh,
    "coth": mpmath.coth, "conj": mpmath.conj, "abs": abs, "Re": mpmath.re, "Im": mpmath.im,
    "factorial": mpmath.factorial, "binomial": mpmath.binomial, "floor": mpmath.floor, "Gamma": mpmath.gamma,
    "bessel_J": mpmath.besselj, "bessel_I": mpmath.besseli, "asin": mpmath.asin, "acos": mpmath.acos,
    "atan": mpmath.atan,
}
_CONSTANTS: dict[str, Any] = {"i": mpmath.mpc(0, 1), "pi": mpmath.pi, "euler_gamma": mpmath.euler}


def value(f: Formula, at: Mapping[str, Any]) -> Any:
    """f at a point, at mpmath's working precision."""
    if f.head == "number":
        return mpmath.mpf(f.args[0].numerator) / f.args[0].denominator
    if f.head == "letter":
        return at[f.args[0]]
    if f.head == "constant" and f.args[0] in _CONSTANTS:
        return +_CONSTANTS[f.args[0]]
    if f.head in ("plus", "times"):
        out = mpmath.mpf(0 if f.head == "plus" else 1)
        for a in f.args:
            out = out + value(a, at) if f.head == "plus" else out * value(a, at)
        return out
    if f.head == "power":
        return value(f.args[0], at) ** value(f.args[1], at)
    if f.head == "call":
        return _CALLS[f.args[0]](*(value(a, at) for a in f.args[1:]))
    if f.head == "sum":
        return _sum(f, at)
    raise Unknown(f.head)


def _sum(f: Formula, at: Mapping[str, Any]) -> Any:
    name, low, high, body = f.args
    first, last = value(low, at), value(high, at)
    if not mpmath.isfinite(last) or last - first > 500:
        raise Unknown("a long sum")
    first, last = int(mpmath.nint(first)), int(mpmath.nint(last))
    return sum((value(body, {**at, name: mpmath.mpf(k)}) for k in range(first, last + 1)), mpmath.mpf(0))


def points(
    domains: Mapping[str, Domain], also: Mapping[str, str], assume: tuple[Relation, ...], seed: int
) -> list[Any]:
    """Five generic points inside the domains that keep the relations; `also`: letters brought along, whole or not.

    Whole letters have few values, so that a point says little: then there are more, and no counter exceeds a size.
    """
    wanted = WHOLE_POINTS if any(d.kind == "integer" for d in domains.values()) or "whole" in also.values() else POINTS
    chance = Random(seed)
    found: list[dict[str, Any]] = []
    for _ in range(4000):
        at = {name: _drawn(d.kind, d, chance) for name, d in domains.items()}
        sizes = [int(at[n]) for n, d in domains.items() if d.kind == "integer" and d.low is not None and n.isupper()]
        most = max(1, min(sizes) - 1) if sizes else 3
        at |= {name: _brought(kind, most, chance) for name, kind in also.items()}
        if all(_kept(r, at) for r in assume):
            found.append(at)
        if len(found) == wanted:
            return found
    return found


def _brought(kind: str, most: int, chance: Random) -> Any:
    if kind == "whole":
        return mpmath.mpf(chance.randint(1, most))
    q = mpmath.mpf(chance.randint(3, 17)) / 13
    return mpmath.mpc(q, mpmath.mpf(chance.randint(2, 9)) / 11) if kind == "complex" else q


def _drawn(kind: str, domain: Domain, chance: Random) -> Any:
    q = mpmath.mpf(chance.randint(5, 40)) / 29
    if kind == "integer":
        low = int(domain.low.args[0]) if domain.low is not None else 1
        return mpmath.mpf(low + chance.randint(0, 6))
    if kind == "complex":
        return mpmath.mpc(q, mpmath.mpf(chance.randint(3, 20)) / 23)
    if kind == "interval" and domain.low is not None and domain.high is not None:
        low, high = value(domain.low, {}), value(domain.high, {})
        return low + (high - low) * chance.randint(2, 9) / 11
    return q if kind in ("positive", "nonnegative") else q * chance.choice((1, -1))


def _kept(r: Relation, at: Mapping[str, Any]) -> bool:
    a, b = value(r.left, at), value(r.right, at)
    return bool({"<": a < b, "<=": a <= b, ">": a > b, ">=": a >= b, "!=": a != b, "=": a == b}[r.op])


def differs(f: Formula, m: Formula, order: int | None, at_fixed: bool, where: list[Any]) -> bool | None:
    """Whether m says something else than f; None where mpmath gives no answer."""
    verdicts = []
    with mpmath.workdps(DIGITS):
        for at in where:
            try:
                verdicts.append(_differs_at(f, m, order, at_fixed, at))
            except (ZeroDivisionError, ValueError, OverflowError):
                continue
    return None if not verdicts else any(verdicts)


def _differs_at(f: Formula, m: Formula, order: int | None, at_fixed: bool, at: Mapping[str, Any]) -> bool:
    if order is None:
        a, b = value(f, at), value(m, at)
        return bool(abs(a - b) > mpmath.mpf(10) ** -25 * (abs(a) + mpmath.mpf(10) ** -10))

    def gap(tau: Any) -> Any:
        inner = {**at, "tau": tau}
        if at_fixed:
            inner["t"] = at["t"] / tau
        return abs(value(f, inner) - value(m, inner))

    first, second = gap(SMALL), gap(SMALL / 2)
    if first < SMALL**order * mpmath.mpf(10) ** 9 and second < mpmath.mpf(10) ** (8 - DIGITS):
        return False
    return bool(mpmath.log(first / second, 2) < order - mpmath.mpf(1) / 10)
