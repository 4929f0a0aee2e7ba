"""The state that an impurity binds on a line or at the end of a half line.

A pole of 1/(1 - eps <p|G_0(E)|p>) off the band, E = sgn (l + 1/l) |h| with |l| < 1 (textbook):

    line           eps = sgn |h| (1/l - l):  E_b = eps sqrt(1 + 4 h^2/eps^2),   weight l^(2m) |eps|/sqrt(eps^2 + 4 h^2)
    half line, 0   eps = sgn |h|/l:          E_b = eps + h^2/eps,               weight l^(2d) (1 - h^2/eps^2)

m and d the steps from the impurity to the detector; the weight is |<d|b>|^2, what the detector has of the state.  On
the line it is always there; at the end of a half line where |eps| > |h|, at site p where |eps| > |h|/(p + 1).
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.scattering import Place
from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Field
from derive.formula.tree import MINUS_ONE, ONE, Formula, call, number, plus, power, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Relation, Setting
from derive.record.said import Claim, Prose

TWO, MINUS_TWO, HALF = number(2), number(-2), number(Fraction(1, 2))
SURELY, NEVER, PERHAPS = "surely", "never", "perhaps"


@dataclass(frozen=True)
class Bound:
    """Energy and weight as claims, empty where there is no closed form; what is to be said of them."""

    claims: tuple[Claim, ...]
    notes: tuple[Prose, ...]


def bound_state(setting: Setting, place: Place, size: Formula, energy: Formula) -> Bound:
    """The bound state of energy eps = `energy` at `place`, |h| = `size`."""
    if not place.ends:
        return Bound(_claims(*_on_the_line(place, size, energy)), ())
    least = times(number(Fraction(1, place.impurity + 1)), size)
    known = _binds(setting, energy, least)
    notes: tuple[Prose, ...] = ()
    if known == NEVER:
        notes = (("The impurity is too weak to bind a state: that takes |", energy, "| > ", least, ".",),)
    elif place.impurity:
        notes = (("The impurity binds a state where |", energy, "| > ", least, "; its energy has no closed form, and "
                  "it is left out.",),)
    if known == NEVER or place.impurity:
        return Bound((), notes)
    strong = Relation(call("abs", energy), ">", size)
    return Bound(_claims(*_at_the_end(place, size, energy), () if known == SURELY else (strong,)), ())


def _claims(e: Formula, weight: Formula, assume: tuple[Relation, ...] = ()) -> tuple[Claim, ...]:
    return (
        Claim("asymptotics.bound.energy", "asymptotics", Quantity("bound state energy"), e, assume=assume),
        Claim("asymptotics.bound.weight", "asymptotics", Quantity("bound state weight"), weight, assume=assume),
    )


def _on_the_line(place: Place, size: Formula, energy: Formula) -> tuple[Formula, Formula]:
    root = call("sqrt", plus(power(energy, TWO), times(number(4), power(size, TWO))))
    share = times(call("abs", energy), power(root, MINUS_ONE))
    e = times(energy, call("sqrt", plus(ONE, times(number(4), power(size, TWO), power(energy, MINUS_TWO)))))
    away = 2 * abs(place.detector - place.impurity)
    if not away:
        return e, share
    fall = times(HALF, plus(root, times(MINUS_ONE, call("abs", energy))), power(size, MINUS_ONE))
    return e, times(share, power(fall, number(away)))


def _at_the_end(place: Place, size: Formula, energy: Formula) -> tuple[Formula, Formula]:
    e = plus(energy, times(power(size, TWO), power(energy, MINUS_ONE)))
    weight = plus(ONE, times(MINUS_ONE, power(size, TWO), power(energy, MINUS_TWO)))
    if place.detector:
        weight = times(weight, power(times(size, power(energy, MINUS_ONE)), number(2 * place.detector)))
    return e, weight


def _binds(setting: Setting, energy: Formula, least: Formula) -> str:
    """Whether |eps| > least: by its own letters and numbers, or as the worksheet assumes."""
    domains = setting.domains()
    size = energy if is_positive(energy, domains) else call("abs", energy)
    for relation in setting.assume:
        sides = relation.left, relation.right
        if relation.op in ("<", ">") and set(sides) == {size, least}:
            return SURELY if (sides[0] == size) == (relation.op == ">") else NEVER
    gap = plus(power(energy, TWO), times(MINUS_ONE, power(least, TWO)))
    try:
        field = Field.of([gap], domains)
        above = field.element(gap)
    except (NotCovered, ZeroDivisionError):
        return PERHAPS
    if is_positive(field.formula(above), domains):
        return SURELY
    return NEVER if not above or is_positive(field.formula(-above), domains) else PERHAPS
