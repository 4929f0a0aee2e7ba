"""Whether two formulas differ, decided by mpmath alone.  Common practice, no source.

exactly      at five generic points (two where a value is an integral or a sum without an end), a number to its radius
up to O()    by how fast the difference falls as tau is halved
a limit      by how the difference behaves beside the law, or beside the error that is claimed, at n far out
a bound      a wider one differs in nothing; one that has changed its sign does; of another one nothing is said
"""

from __future__ import annotations

import signal
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction
from random import Random
from typing import Any

import mpmath
from mpmath.libmp import NoConvergence

from derive.formula.tree import Formula, free_letters, walk
from derive.problem.setting import Domain, Relation
from derive.record.said import EXACTLY, Kind

POINTS, WHOLE_POINTS, SLOW_POINTS = 5, 30, 2
LATER = mpmath.mpf(10) ** 60  # so much later only what stays is left of a regime
DIGITS, SLOW_DIGITS, FAR_DIGITS = 60, 20, 250
FAR, NEAR = (20, 24, 28), (3, 4, 5)  # powers of ten: n of a limit; where every value is an integral
RUN = 5
PATIENCE = 20  # seconds for one comparison
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
        if f.args[0] not in at:
            raise Unknown("a letter that nobody gives a value")
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
    if f.head in _SLOWLY:
        needed = sorted(free_letters(f))
        key = (f, mpmath.mp.prec, tuple(at[n] for n in needed))
        if key not in _known:
            _known[key] = _SLOWLY[f.head](f, at)
        return _known[key]
    raise Unknown(f.head)


def _integral(f: Formula, at: Mapping[str, Any]) -> Any:
    name, low, high, body = f.args
    ends = [mpmath.inf if e.head == "constant" else value(e, at) for e in (low, high)]
    middle = [mpmath.mpf(1)] if not mpmath.isfinite(ends[1]) else []
    return mpmath.quad(lambda x: value(body, {**at, name: x}), [ends[0], *middle, ends[1]])


def _at_roots(f: Formula, at: Mapping[str, Any]) -> Any:
    """root(p, x, j): the j-th real root; rootsum(x in p: body): the sum over all."""
    if f.head == "root":
        p, name, j = f.args
        real = sorted(mpmath.re(x) for x in roots(p, name, at) if abs(mpmath.im(x)) < mpmath.mpf(10) ** -20)
        return real[int(value(j, at)) - 1]
    name, p, body = f.args
    return sum((value(body, {**at, name: x}) for x in roots(p, name, at)), mpmath.mpf(0))


def roots(p: Formula, name: str, at: Mapping[str, Any]) -> list[Any]:
    """All roots of a polynomial, from its values at whole numbers."""
    for degree in range(1, 12):
        nodes = [mpmath.mpf(k) for k in range(degree + 1)]
        rows = mpmath.matrix([[x**j for j in range(degree + 1)] for x in nodes])
        c = mpmath.lu_solve(rows, mpmath.matrix([value(p, {**at, name: x}) for x in nodes]))
        probe = mpmath.mpf(17) / 5
        seen = value(p, {**at, name: probe})
        if abs(sum(c[j] * probe**j for j in range(degree + 1)) - seen) < mpmath.mpf(10) ** -30 * (1 + abs(seen)):
            return list(mpmath.polyroots([c[j] for j in range(degree, -1, -1)], maxsteps=200, extraprec=200))
    raise Unknown("a polynomial of a high degree")


def _sum(f: Formula, at: Mapping[str, Any]) -> Any:
    name, low, high, body = f.args
    first, last = value(low, at), mpmath.inf if high.head == "constant" else value(high, at)
    if not mpmath.isfinite(last):
        return mpmath.nsum(lambda k: value(body, {**at, name: k}), [first, last])
    if last - first > 500:
        raise Unknown("a long sum")
    first, last = int(mpmath.nint(first)), int(mpmath.nint(last))
    return sum((value(body, {**at, name: mpmath.mpf(k)}) for k in range(first, last + 1)), mpmath.mpf(0))


_SLOWLY: dict[str, Any] = {"sum": _sum, "integral": _integral, "root": _at_roots, "rootsum": _at_roots}
_known: dict[Any, Any] = {}
"""Values that took long, by formula, precision and the values of its letters."""


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
        for r in assume:
            if r.op == "=" and r.left.head == "letter":
                at[r.left.args[0]] = value(r.right, at)
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


@dataclass(frozen=True)
class Meant:
    """In what sense two formulas are compared: a claim's kind, a number's radius, the roots it is meant at, the times
    between which it holds."""

    kind: Kind = EXACTLY
    radius: Fraction | None = None
    root: tuple[Formula, str] | None = None
    window: tuple[Formula, Formula] | None = None


def differs(f: Formula, m: Formula, meant: Meant, where: list[Any]) -> bool | None:
    """Whether m says something else than f; None where mpmath gives no answer."""
    slow = is_slow(f) or is_slow(m)
    verdicts: list[bool | None] = []
    digits = SLOW_DIGITS if slow else FAR_DIGITS if meant.kind.name == "limit" else DIGITS
    with mpmath.workdps(digits), _patience():
        for at in where[:SLOW_POINTS] if slow else where:
            try:
                verdicts += [_differs_at(f, m, meant, inner, slow) for inner in _at_the_roots(meant, at)]
            except (ZeroDivisionError, ValueError, OverflowError, IndexError, NoConvergence):
                continue
    if meant.kind.name in ("upper", "lower"):
        return True if True in verdicts else False if verdicts and None not in verdicts else None
    return None if not verdicts or None in verdicts else any(verdicts)


def is_slow(f: Formula) -> bool:
    """Whether a value is an integral or a sum without an end."""
    return any(n.head == "integral" or (n.head == "sum" and n.args[2].head == "constant") for n in walk(f))


@contextmanager
def _patience() -> Iterator[None]:
    """Powers with enormous exponents take mpmath minutes; such a comparison is given up."""

    def stop(number: int, frame: object) -> None:
        raise Unknown("values that take too long")

    before = signal.signal(signal.SIGALRM, stop)
    signal.setitimer(signal.ITIMER_REAL, PATIENCE)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, before)


def _at_the_roots(meant: Meant, at: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    if meant.root is None:
        return [at]
    p, name = meant.root
    return [{**at, name: x} for x in roots(p, name, at)]


def _differs_at(f: Formula, m: Formula, meant: Meant, at: Mapping[str, Any], slow: bool) -> bool | None:
    kind = meant.kind
    if kind.name == "order":
        return _beyond_the_order(f, m, kind, at)
    if kind.name == "limit":
        return _far_out(f, m, meant, at, slow)
    if kind.name in ("upper", "lower"):
        at = _where_it_holds(f, at)
        return _as_a_bound(value(f, at), value(m, at), kind)
    a, b = value(f, at), value(m, at)
    if meant.radius is not None:
        return bool(abs(a - b) > 2 * mpmath.mpf(meant.radius.numerator) / meant.radius.denominator)
    small = mpmath.mpf(10) ** (-10 if slow else -25)
    return bool(abs(a - b) > small * (abs(a) + mpmath.mpf(10) ** -10))


def _where_it_holds(f: Formula, at: Mapping[str, Any]) -> Mapping[str, Any]:
    """tau so small that the bound is a number above 0."""
    for k in range(20):
        inner = {**at, "tau": at["tau"] / 2**k} if "tau" in at else at
        seen = value(f, inner)
        if mpmath.im(seen) == 0 and seen > 0:
            return inner
    raise ValueError("a bound that is no number")


def _as_a_bound(a: Any, b: Any, kind: Kind) -> bool | None:
    """A norm is no smaller than 0; whether a tighter bound, or one that is no number here, is one is not known."""
    if mpmath.im(b) != 0:
        return None
    if kind.name == "upper" and b < 0:
        return True
    wider = b >= a if kind.name == "upper" else b <= a
    return False if wider else None


def _beyond_the_order(f: Formula, m: Formula, kind: Kind, at: Mapping[str, Any]) -> bool:
    def gap(tau: Any) -> Any:
        inner = {**at, "tau": tau}
        if kind.fixed is not None:
            inner["t"] = at["t"] / tau
        return abs(value(f, inner) - value(m, inner))

    order = kind.order or 0
    first, second = gap(SMALL), gap(SMALL / 2)
    if first < SMALL**order * mpmath.mpf(10) ** 9 and second < mpmath.mpf(10) ** (8 - DIGITS):
        return False
    return bool(mpmath.log(first / second, 2) < order - mpmath.mpf(1) / 10)


def _far_out(f: Formula, m: Formula, meant: Meant, at: Mapping[str, Any], slow: bool) -> bool | None:
    """The difference beside the law, or beside the claimed error, at three n, each 10^4 (10 if slow) times the last.

    A letter that goes to infinity before another is the tenth power of it.  A regime is looked at in the middle of its
    window, the geometric mean of the times between which it holds, unless it is t that goes somewhere; beside what
    decays there, without what stays.
    """
    kind, share = meant.kind, []
    for k in NEAR if slow else FAR:
        gaps, sizes = mpmath.mpf(0), mpmath.mpf(0)
        for j in range(1 if slow else RUN):
            inner, n = dict(at), mpmath.mpf(10) ** k + j
            for name, to in reversed(kind.toward):
                inner[name], n = (n if to.head == "constant" else value(to, at) + 1 / n), n**10
            rest = mpmath.mpf(0)
            if meant.window is not None and "t" not in dict(kind.toward):
                inner["t"] = mpmath.sqrt(value(meant.window[0], inner) * value(meant.window[1], inner))
                rest = value(f, {**inner, "t": inner["t"] * LATER})
            gaps += abs(_turned(value(f, inner), kind) - _turned(value(m, inner), kind))
            sizes += abs(value(kind.error.args[0], inner)) if kind.error is not None else abs(value(f, inner) - rest)
        share.append(gaps / sizes)
    if share[-1] < mpmath.mpf(10) ** -15:
        return False
    if kind.error is not None:
        return True if share[-1] > 3 * share[0] else False if share[-1] < share[0] * 3 / 2 else None
    return True if share[-1] > share[0] * 9 / 10 else False if share[-1] < share[0] / 50 else None


def _turned(x: Any, kind: Kind) -> Any:
    return abs(x) if kind.phase else x
