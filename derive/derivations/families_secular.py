"""Secular functions of families whose size is a letter, where only they are closed, or beside the levels.

    F(E, tau) = <d|(H-E)^(-1)|d> + i tau/2 - (tau^2/12) (C - E) + O(tau^4),      zero at the bright levels

paths (E = -2 T cos(theta)):   1/<d|(H-E)^(-1)|d> = C - E - T sum_a sin(l_a theta)/sin((l_a + 1) theta),
a ring of N sites adds         - 2 T cos(Phi) sin(theta)/sin(N theta)
hypercube (dimension d, hopping t):    <d|(H-E)^(-1)|d> = 2^-d sum_j binomial(d, j)/(t (d - 2 j) - E)

Path resolvents and the hypercube's spectrum are textbook material; put together here.
"""

from __future__ import annotations

from derive.derivations import levels_steps as steps
from derive.derivations.families import Cube, Paths, Unequal
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    inverse,
    letter,
    negate,
    number,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import Claim, Derivation, Kind, Line, Step

E = letter("E")


def secular_claim(setting: Setting, seen: Paths | Unequal | Cube, order: int, every: str) -> Claim:
    """`levels.secular`, up to O(tau^2) or O(tau^4)."""
    if any(x.name == "E" for x in setting.letters):
        raise NotCovered("the letter E stands for the energy in a secular function; name yours otherwise")
    kept = 2 if order == 1 else 4
    terms = [resolvent(setting, seen), times(I_UNIT, TAU, inverse(number(2)))]
    if kept == 4:
        centre = ZERO if isinstance(seen, Cube) else seen.C
        gap = negate(E) if centre == ZERO else plus(centre, negate(E))
        terms.append(times(negate(inverse(number(12))), gap, power(TAU, number(2))))
    phrase = f"up to O(tau^{kept})" + (f", for every {every}" if every else "")
    return Claim(
        "levels.secular", "levels", Quantity("secular function"), plus(*terms),
        Kind("order", phrase, kept, every=every or None),
        valid_for="E no eigenvalue of H that the detector sees; small h*tau",
    )


def secular_alone(setting: Setting, seen: Unequal | Cube, order: int, every: str) -> Derivation:
    """A family whose levels have no closed form: the equation that they solve."""
    claim = secular_claim(setting, seen, order, every)
    value = claim.value if isinstance(claim.value, Formula) else ZERO
    reason = "The spectrum of a hypercube is known, so that the watched corner's resolvent is a finite sum:"
    if isinstance(seen, Unequal):
        reason = "With the energy written as an angle, each path's resolvent is a ratio of sines, and they add up:"
    out = (
        *steps.secular_equation(),
        Step((reason,), (Line(times(steps.BRA, power(plus(steps.H, times(MINUS_ONE, E)), MINUS_ONE), steps.KET),
                              resolvent(setting, seen)),)),
        Step(("so that the levels are the zeros, in ", E, ", of",), (Line(letter("F"), value),), earns=claim.id),
    )
    note = ("The levels of this family have no closed form in its size; numbers for the size give them.",)
    return Derivation("levels", (claim,), out, notes=(note,))


def resolvent(setting: Setting, seen: Paths | Unequal | Cube) -> Formula:
    """<d|(H-E)^(-1)|d>."""
    if isinstance(seen, Cube):
        return _cube(setting, seen)
    theta = call("acos", times(number(-1), E, inverse(times(number(2), seen.T))))
    if isinstance(seen, Unequal):
        parts = [_path(setting, length, theta) for length in seen.lengths if length != ZERO]
    else:
        parts = [times(seen.count, _path(setting, seen.length, theta))]
        if seen.closed:
            parts.append(_around(setting, seen, theta))
    own = () if seen.C == ZERO else (seen.C,)
    return power(plus(*own, negate(E), *(times(MINUS_ONE, seen.T, p) for p in parts)), MINUS_ONE)


def _path(setting: Setting, length: Formula, theta: Formula) -> Formula:
    return times(call("sin", times(length, theta)),
                 inverse(call("sin", times(_simple(length + 1, setting), theta))))


def _around(setting: Setting, ring: Paths, theta: Formula) -> Formula:
    """2 cos(Phi) sin(theta)/sin(N theta), with the hopping's own sign around the ring."""
    size = _simple(ring.length + 1, setting)
    cosine = call("cos", ring.flux) if ring.flux is not None else ONE
    sign = power(MINUS_ONE, size) if ring.turned else ONE
    return times(number(2), sign, cosine, call("sin", theta), inverse(call("sin", times(size, theta))))


def _cube(setting: Setting, cube: Cube) -> Formula:
    j, d = letter("j"), cube.dimension
    if any(x.name == "j" for x in setting.letters):
        j = letter("i1")
    gap = plus(times(cube.t, plus(d, times(number(-2), j))), negate(E))
    body = times(call("binomial", d, j), inverse(gap))
    return times(power(number(2), negate(d)), Formula("sum", (str(j.args[0]), ZERO, d, body)))


def _simple(f: Formula, setting: Setting) -> Formula:
    field = Field.of([f], setting.domains())
    return field.formula(field.element(f))
