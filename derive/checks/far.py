"""Road "trend", far out: a claimed law beside a derived one at n = 10^40, 10^80, ..., 10^1280.

A constant beside log n is lost only like 1/log n: over the doublings that can be measured, a law without it looks
neither right nor wrong.  Where the derived law has been confirmed by the experiment, two formulas are left to compare,
and n may be squared again and again:

    gap = sum |claimed - derived|,   size = sum |derived|      over RUN consecutive n where a law oscillates, else one

    bare limit      agrees: gap/size falls by a factor 0.8 or less in each of the last three squarings, or is gone
                    refuted: by more than 0.95 in each
    error O(...)    agrees: gap/error grows by a factor 1.05 or less in each
                    refuted: by 1.3 or more in each (a power b of log n too many: by 2^b)
                    the derived law must be known at least to that error

Anything else stays open.  The thresholds are those of the doublings, where there are any; common practice, no source.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import acb, arb, fmpz

from derive.checks.trend import FALLS, FLAT, ROAD, shown, total
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, constant, free_letters, walk
from derive.numerics.evaluate import Values, enclose
from derive.numerics.moving import in_letter
from derive.numerics.points import sample_points
from derive.numerics.precision import retry
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Kind

FIRST_DIGITS, SQUARINGS, RUN = 40, 5, 7
LAST_SQUARINGS = 3
FIRST_BITS, MOST_BITS, MOST_BITS_OF_INTEGRALS = 128, 16384, 512
NARROW = Fraction(1, 10**6)
GONE = Fraction(1, 10**12)
STEADY, GROWS = 1.05, 1.3
SLOW_CALLS = ("log", "sqrt")
INFINITY = constant("infinity")


@dataclass(frozen=True, slots=True)
class Scale:
    """One n_j: gap and size, what the two errors allow there (None: not said)."""

    n: int
    gap: arb
    size: arb
    error: arb | None
    known_to: arb | None


def is_far(claim: Claim) -> bool:
    """One law for one letter that goes to infinity, said without a bound at the n that are measured."""
    kind = claim.kind
    one = kind.name == "limit" and len(kind.toward) == 1 and kind.toward[0][1] == INFINITY
    return one and kind.within is None and isinstance(claim.value, Formula)


def check_far(setting: Setting, claim: Claim, law: Claim, effort: Check) -> Finding | None:
    """What the comparison with a confirmed derived law says of the claim; None where it says nothing."""
    said: list[tuple[str, str]] = []
    for point in sample_points(setting, effort, (*claim.assume, *law.assume)):
        try:
            verdict, evidence = _at(claim, law, point)
        except (NotCovered, NeedsPrecision, OutsideValidity, ZeroDivisionError, OverflowError):
            return None
        if verdict == "refuted":
            return Finding(verdict, ROAD, points=len(said) + 1, point=point.text(), evidence=evidence)
        said.append((verdict, evidence))
    if not said or any(v != "agrees" for v, _ in said):
        return None
    return Finding("agrees", ROAD, points=len(said), evidence=said[0][1])


def _at(claim: Claim, law: Claim, point: Point) -> tuple[str, str]:
    values = Values.at(point.mapping())
    scales = [_scale(claim, law, values, 10 ** (FIRST_DIGITS << j)) for j in range(SQUARINGS + 1)]
    return _by_error(claim, scales) if claim.kind.error is not None else _bare(claim, scales)


def _scale(claim: Claim, law: Claim, values: Values, n: int) -> Scale:
    """Both laws around one n, at the precision that this takes."""
    name = claim.kind.toward[0][0]
    mine, ours = _formula_of(claim), _formula_of(law)
    run = RUN if _oscillates(mine, name) or _oscillates(ours, name) else 1

    def attempt(bits: int) -> Scale:
        places = [(acb(arb(fmpz(n + j))), Fraction(n + j)) for j in range(run)]
        around = [values.with_letter(name, *place) for place in places]
        laws = in_letter(mine, name, values), in_letter(ours, name, values)  # what is free of n is enclosed once
        pairs = [(laws[0](*place), laws[1](*place)) for place in places]
        gap, size = total(_gap(a, b, claim.kind) for a, b in pairs), total(abs(b) for _, b in pairs)
        error = _allowed(claim, around)
        if mine != ours and not (_narrow(gap, gap) or gap < (size if error is None else error) * _ball(GONE)):
            raise NeedsPrecision("two laws that are too close to be told apart")
        return Scale(n, gap if mine != ours else arb(0), size, error, _allowed(law, around))

    slow = any(_is_slow(node) for f in (mine, ours) for node in walk(f))
    return retry(attempt, FIRST_BITS, MOST_BITS_OF_INTEGRALS if slow else MOST_BITS)


def _is_slow(node: Formula) -> bool:
    """An integral, or a sum without an end: their work grows fast with the digits."""
    return node.head == "integral" or (node.head == "sum" and node.args[2] == INFINITY)


def _formula_of(claim: Claim) -> Formula:
    if not isinstance(claim.value, Formula):
        raise NotCovered("two formulas are compared here")
    return claim.value


def _oscillates(f: Formula, name: str) -> bool:
    """Whether a function other than a logarithm or a root depends on the letter."""
    calls = (node for node in walk(f) if node.head == "call" and node.args[0] not in SLOW_CALLS)
    return any(name in free_letters(node) for node in calls)


def _gap(a: acb, b: acb, kind: Kind) -> arb:
    return abs(abs(a) - abs(b)) if kind.phase else abs(a - b)


def _ball(q: Fraction) -> arb:
    return arb(q.numerator) / q.denominator


def _narrow(x: arb, scale: arb) -> bool:
    return bool(x > 0 and x.rad() < scale.lower() * _ball(NARROW))


def _allowed(claim: Claim, around: Sequence[Values]) -> arb | None:
    """Sum of the error term over the run."""
    if claim.kind.error is None:
        return None
    inner = claim.kind.error.args[0] if claim.kind.error.head == "order" else claim.kind.error
    return total(abs(enclose(inner, v)) for v in around)


def _bare(claim: Claim, scales: Sequence[Scale]) -> tuple[str, str]:
    off = [s.gap / s.size for s in scales]
    last = list(zip(off, off[1:], strict=False))[-LAST_SQUARINGS:]
    at = f"{claim.kind.toward[0][0]} = 10^{FIRST_DIGITS << SQUARINGS}"
    if off[-1] < _ball(GONE):
        return "agrees", f"beside the derived law nothing of the difference is left at {at}"
    if all(b < a * FALLS for a, b in last):
        falls = float((off[-2] / off[-1]).mid())
        words = f"off by {shown(off[-1])} at {at}, and each squaring divides that by {falls:.2f}"
        return "agrees", f"beside the derived law it is {words}"
    if all(b > a * FLAT for a, b in last):
        return "refuted", f"beside the derived law it is off by {shown(off[-1])} even at {at}"
    return "undecided", ""


def _by_error(claim: Claim, scales: Sequence[Scale]) -> tuple[str, str]:
    """gap/error, and whether the derived law is known well enough for it."""
    found: list[arb] = []
    for s in scales:
        if s.error is None or s.known_to is None or not s.known_to < s.error:
            raise NotCovered("the derived law is not known to the error that is claimed")
        found.append(s.gap / s.error)
    last = list(zip(found, found[1:], strict=False))[-LAST_SQUARINGS:]
    at = f"{claim.kind.toward[0][0]} = 10^{FIRST_DIGITS << SQUARINGS}"
    if all(b < a * STEADY for a, b in last) or found[-1] < _ball(GONE):
        return "agrees", f"beside the derived law the difference is {shown(found[-1])} of the claimed error at {at}"
    if all(b > a * GROWS for a, b in last):
        words = f"the difference outgrows the claimed error, {shown(found[-1])} times as large at {at}"
        return "refuted", f"beside the derived law {words}"
    return "undecided", ""
