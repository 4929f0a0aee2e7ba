"""A product taken apart: sign, rational, what stands above and below the bar, what trails behind the fraction."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction as Rational

from derive.formula.tree import Formula, number, power, walk
from derive.report.arrange import is_operator, is_plain

LARGE = ("sum", "integral", "rootsum")
MOST_ON_A_BAR = 4  # terms of a sum above a bar; a longer one stands behind
SHORT_EXPONENTIAL = 6  # nodes; a longer one stands behind the fraction, not on it


@dataclass(frozen=True, slots=True)
class Factors:
    """A product taken apart: sign, rational, what stands above and below the bar, and what trails behind."""

    negative: bool
    front: Rational
    above: list[Formula] = field(default_factory=list)
    below: list[Formula] = field(default_factory=list)
    trailing: list[Formula] = field(default_factory=list)


def take_apart(f: Formula) -> Factors:
    """Sign, rational, numerator, denominator and trailing factors of a product, a number or a divisor."""
    factors = list(f.args) if f.head == "times" else [f]
    front = Rational(1)
    if factors[0].head == "number":
        front = factors.pop(0).args[0]
    parts = Factors(front < 0, abs(front))
    behind = False  # behind an operator everything keeps its place
    for a in factors:
        behind = behind or is_operator(a)
        if is_divisor(a):
            parts.below.append(_flipped(a))
        else:
            (parts.trailing if behind or _trails(a) else parts.above).append(a)
    return parts


def is_divisor(f: Formula) -> bool:
    """A negative numeric power of something that commutes: it is written below a bar."""
    if f.head != "power" or f.args[1].head != "number" or f.args[1].args[0] >= 0:
        return False
    return not is_operator(f)


def _flipped(f: Formula) -> Formula:
    base, exponent = f.args
    up = -exponent.args[0]
    return base if up == 1 else power(base, number(up))


def _trails(f: Formula) -> bool:
    """Does f stand behind a fraction rather than on it?"""
    if is_operator(f) or f.head in LARGE or f.head == "plus":
        return True
    base = f.args[0] if f.head == "power" else f
    if base.head == "plus" or (base.head == "times" and not is_plain(base)):
        return True
    if base.head != "call":
        return False
    if base.args[0] == "exp":
        return sum(1 for _ in walk(base)) > SHORT_EXPONENTIAL
    return base.args[0] not in ("sqrt", "conj", "abs", "factorial")


def moves_up(parts: Factors) -> bool:
    """A lone trailing factor stands on the bar: (x + y)/2, not 1/2 (x + y)."""
    if parts.above or parts.front.numerator != 1 or len(parts.trailing) != 1:
        return False
    lone = parts.trailing[0]
    if lone.head == "plus" and len(lone.args) > MOST_ON_A_BAR:
        return False  # a long sum must be able to break
    return lone.head not in LARGE and not is_operator(lone)


def numbered(front: int, factors: list[Formula]) -> list[Formula]:
    return factors if abs(front) == 1 and factors else [number(abs(front)), *factors]
