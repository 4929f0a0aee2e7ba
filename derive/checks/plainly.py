"""What no measurement is needed for: a claim that is not real where the quantity is, or that depends on tau where it
does not.

Roads leave such points out, since there is nothing to compare; but a probability, a time or a number of levels is real,
and a radius of convergence is the same for every interval.  Values in balls at sampled points; surely wrong refutes.
"""

from __future__ import annotations

from fractions import Fraction

from flint import acb

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters
from derive.numerics.decimals import spoken
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import retry
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

ROAD = "enclosure"
COMPLEX = ("generator", "absorber coupling", "state map", "secular function", "generating function",
           "detection amplitude", "pole", "dark state", "absorber strength", "absorber loss", "return factor")
"""Quantities that need not be real, whatever they are in a simple case."""
WITHOUT_TAU = ("radius of convergence", "largest interval", "exceptional interval", "merging levels",
               "drop of phases", "divergence coefficient", "classical mean", "classical mean of steps")
SENSES = ("exactly", "upper", "lower")
OTHER_TAUS = (Fraction(1, 97), Fraction(2, 89))
BITS, MOST_BITS = 128, 1024


def may_move(claim: Claim) -> bool:
    """Whether tau stands in a claim about what does not depend on it: then roads may have taken any tau for it."""
    formula = isinstance(claim.value, Formula) and "tau" in free_letters(claim.value)
    return claim.quantity is not None and claim.quantity.name in WITHOUT_TAU and formula


def check_plainly(setting: Setting, claim: Claim, effort: Check) -> Finding | None:
    """Refuted where the formula cannot be the quantity at all; None where nothing speaks against it."""
    if claim.quantity is None or not isinstance(claim.value, Formula) or claim.kind.name not in SENSES:
        return None
    letters = free_letters(claim.value)
    if not letters <= set(setting.domains()):
        return None
    for point in sample_points(setting, effort, claim.assume):
        said = _not_real(claim, point) or _moves(claim, point)
        if said:
            return Finding("refuted", ROAD, points=1, point=point.text(), evidence=said)
    return None


def _not_real(claim: Claim, point: Point) -> str:
    if claim.quantity is None or claim.quantity.name in COMPLEX:
        return ""
    value = _value(claim, Values.at(point.mapping()))
    if value is None or value.imag.contains(0):
        return ""
    return f"{claim.quantity.name} is real, and {spoken(value)} is claimed"


def _moves(claim: Claim, point: Point) -> str:
    """Another value at another tau."""
    if claim.quantity is None or not may_move(claim):
        return ""
    still = Values.at(point.without("tau").mapping())
    first, second = (_value(claim, still.with_letter("tau", _ball(q), q)) for q in OTHER_TAUS)
    if first is None or second is None or (first - second).contains(0):
        return ""
    return f"{claim.quantity.name} does not depend on tau, and the formula does"


def _ball(q: Fraction) -> acb:
    return acb(q.numerator) / q.denominator


def _value(claim: Claim, values: Values) -> acb | None:
    def attempt(bits: int) -> acb:
        if not isinstance(claim.value, Formula):
            raise NotCovered("a formula is looked at here")
        return enclose(claim.value, values)

    try:
        return retry(attempt, BITS, MOST_BITS)
    except (NeedsPrecision, NotCovered, OutsideValidity, ZeroDivisionError):
        return None
