"""A claimed series in tau that is none: a pole, a root or a logarithm at tau = 0.

What is measured is analytic there: G, the maps of states, energies and rates are power series in tau.  A formula f is
one up to O(tau^p) only if its divided difference stays bounded,

    f[t, t/2, ..., t/2^p] = sum_j f(t/2^j)/prod_{i != j} (t/2^j - t/2^i),      t = 10^-10, 10^-20, ..., 10^-320,

while a term tau^q below that order, q no whole number or negative, makes it grow like t^(q-p), and tau^p log(tau) like
log t: by a factor 2 whenever t is squared.  Growth refutes; nothing here accepts.  Common practice, no source.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from flint import acb, arb, fmpq

from derive.checks.trend import ROAD, shown
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.text import text
from derive.formula.tree import TAU, Formula, free_letters, number, power
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import retry
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Matrix

ANALYTIC = ("generator", "state map", "level energy", "decay rate", "secular function")
FIRST_DIGITS, SQUARINGS, LAST_SQUARINGS = 10, 5, 3
GROWS = 1.3
FIRST_BITS, MOST_BITS = 256, 32768
NARROW = Fraction(1, 1000)


def is_series(claim: Claim) -> bool:
    """A claim up to O(tau^p) about a quantity that is a power series in tau."""
    known = claim.quantity is not None and claim.quantity.name in ANALYTIC
    return known and claim.kind.name == "order" and claim.kind.fixed is None


def check_branch(setting: Setting, claim: Claim, effort: Check) -> Finding | None:
    """Refuted where the claim is no power series to the order it claims; None where nothing speaks against it."""
    if any("tau" in free_letters(w.efficiency) for w in setting.detectors):
        return None  # an efficiency such as sqrt(tau) brings powers of its own
    for point in sample_points(setting, effort, claim.assume):
        for f in _formulas(claim):
            try:
                grown = _growth(f, claim.kind.order or 0, point)
            except (NeedsPrecision, NotCovered, OutsideValidity, ZeroDivisionError, OverflowError):
                continue
            if grown is not None:
                order = text(power(TAU, number(claim.kind.order or 0)))
                grows = f"its divided difference grows to {shown(grown)} at tau = 10^-{FIRST_DIGITS << SQUARINGS}"
                evidence = f"no power series in tau comes within O({order}) of the formula: {grows}"
                return Finding("refuted", ROAD, points=1, point=point.without("tau").text(), evidence=evidence)
    return None


def _formulas(claim: Claim) -> Iterator[Formula]:
    if isinstance(claim.value, Formula):
        yield claim.value
    elif isinstance(claim.value, Matrix):
        yield from (f for _, _, f in claim.value.entries())


def _growth(f: Formula, order: int, point: Point) -> arb | None:
    """The last divided difference, if each of the last three squarings of t makes it grow."""
    seen = [_difference(f, order, point, Fraction(1, 10 ** (FIRST_DIGITS << j))) for j in range(SQUARINGS + 1)]
    last = list(zip(seen, seen[1:], strict=False))[-LAST_SQUARINGS:]
    return seen[-1] if all(b > a * GROWS for a, b in last) else None


def _difference(f: Formula, order: int, point: Point, t: Fraction) -> arb:
    """|f[t, t/2, ..., t/2^order]|, narrow."""
    nodes = [t / 2**j for j in range(order + 1)]

    def attempt(bits: int) -> arb:
        values = Values.at(point.mapping())
        total = acb(0)
        for j, x in enumerate(nodes):
            inner = values.with_letter("tau", acb(_ball(x)), x)
            below = Fraction(1)
            for i, y in enumerate(nodes):
                below *= (x - y) if i != j else 1
            total += enclose(f, inner) * _ball(1 / below)
        size = abs(total)
        if not (size > 0 and size.rad() < size.lower() * _ball(NARROW)):
            raise NeedsPrecision("a divided difference that is not told from 0")
        return size

    return retry(attempt, FIRST_BITS, MOST_BITS)


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))
