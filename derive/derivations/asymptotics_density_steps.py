"""The late-time law of a local density of states written out: reason, lines, what each line earns."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.derivations.asymptotics_density_point import gamma
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    Formula,
    call,
    constant,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.record.said import Line, Step

if TYPE_CHECKING:
    from derive.derivations.asymptotics_density import DensityLaw

N, Z, X, E = (letter(name) for name in ("n", "z", "x", "E"))
U, U_N, PHI, PHI_N, F_N = operator("u"), operator("u", "n"), operator("φ"), operator("φ", "n"), operator("F", "n")
RHO, ALPHA, A_K, E_K, C_K = operator("ρ"), operator("α"), operator("A", "k"), operator("E", "k"), operator("C", "k")
U_K = operator("u", "k")
INFINITY = constant("infinity")


def written(law: DensityLaw) -> tuple[Step, ...]:
    """All steps, in order; the last ones earn the claims."""
    return (_between_asks(), _beside_a_point(), _ruling(law), *_constants(law), _inverted(law), *_results(law))


def _between_asks() -> Step:
    free = call("exp", times(MINUS_ONE, I_UNIT, E, TAU, N))
    below = plus(ONE, times(MINUS_ONE, Z, call("exp", times(MINUS_ONE, I_UNIT, E, TAU))))
    return Step(
        ("The start is the detector's own state, and all that is asked of the lattice is its local density of states ",
         RHO, ":"),
        (Line(U_N, Formula("integral", ("E", times(MINUS_ONE, INFINITY), INFINITY, times(RHO, free)))),
         Line(U, Formula("integral", ("E", times(MINUS_ONE, INFINITY), INFINITY, times(RHO, power(below, MINUS_ONE))))),
         Line(PHI, plus(ONE, times(MINUS_ONE, power(U, MINUS_ONE))))),
        where=("here ", U, " and ", PHI, " are the power series of ", U_N, " and of ", PHI_N,
               ", the amplitude of the first \"yes\" at ask ", N, ".",),
    )


def _beside_a_point() -> Step:
    """C_k = Gamma(-alpha) Gamma(1+alpha) A_k (+-i tau)^(-alpha-1)."""
    turn = times(call("exp", times(operator("∓"), I_UNIT, letter("pi"), plus(ALPHA, ONE), number(Fraction(1, 2)))))
    front = times(call("Gamma", times(MINUS_ONE, ALPHA)), call("Gamma", plus(ONE, ALPHA)), A_K)
    return Step(
        ("Where ", RHO, " begins like ", A_K, operator("|E−Eₖ|ᵅ"), " on one side of ", E_K,
         ", the integral leaves a power beside what is analytic:"),
        (Line(Z, call("exp", plus(times(I_UNIT, E_K, TAU), times(MINUS_ONE, X)))),
         Line(U, plus(times(C_K, power(X, ALPHA)), operator("power series"))),
         Line(C_K, times(front, turn, power(TAU, plus(times(MINUS_ONE, ALPHA), MINUS_ONE))))),
        where=("the upper sign for a density above ", E_K, "; sides that fall on one point of the circle add.",),
    )


def _ruling(law: DensityLaw) -> Step:
    lines = []
    for place in law.places:
        for side in place.sides:
            where = "above" if side.above else "below"
            lines.append(Line(operator(f"ρ {where} ") * side.energy, _near(side.amplitude, side.power), "~"))
    d = number(2 * (law.ruling[0].power + 1))
    others = "; those that have it interfere" if len(law.ruling) > 1 else ""
    return Step(
        ("The smallest ", operator("|α|"), f" decides{others}. Here it is ", number(law.p), ", a spectral dimension ",
         operator("d", "s"), " = ", times(number(2), plus(ALPHA, ONE)), " = ", d, ":"),
        tuple(lines),
        fold=len(lines) > 4,
    )


def _near(amplitude: Formula, alpha: Fraction) -> Formula:
    return times(amplitude, power(operator("|E−Eₖ|"), number(alpha)))


def _constants(law: DensityLaw) -> tuple[Step, ...]:
    """What u is where the density vanishes."""
    lines = tuple(Line(operator("u", str(k + 1)), t.value) for k, t in enumerate(law.terms) if t.value is not None)
    if not lines:
        return ()
    points = [t.energy for t in law.terms if t.value is not None]
    named: list[str | Formula] = []
    for k, energy in enumerate(points):
        named += [", " if k else "", operator("u", str(k + 1)), " at ", energy]
    return (
        Step(
            ("Where the density vanishes ", U, " is finite; on the unit circle it is a half and an integral over the "
             "bands, in which ", X, " counts the distance from the singular energy:"),
            lines,
            where=(*named, ".",),
        ),
    )


def _inverted(law: DensityLaw) -> Step:
    p = number(law.p)
    lines = []
    signs = {place.power < 0 for place in law.ruling}
    if True in signs:
        lines.append(Line(PHI, plus(operator("power series"), times(MINUS_ONE, power(C_K, MINUS_ONE), power(X, p)))))
    if False in signs:
        lines.append(Line(PHI, plus(operator("power series"), times(C_K, power(U_K, number(-2)), power(X, p)))))
    moved = times(call("exp", times(MINUS_ONE, I_UNIT, E_K, TAU, N)), power(N, number(-1 - law.p)))
    lines.append(Line(operator("[zⁿ]") * power(X, p), times(moved, _one_over_gamma(law.p))))
    both = " (the first where the density diverges, the second where it vanishes)" if len(signs) > 1 else ""
    return Step((f"The singular part of the quotient begins with the same power{both}, which Hankel's integral "
                 "transfers:",), tuple(lines))


def _one_over_gamma(p: Fraction) -> Formula:
    """1/Gamma(-p) = -p/Gamma(1-p); for p > 1 left as it stands."""
    if p > 1:
        return power(call("Gamma", number(-p)), MINUS_ONE)
    return times(number(-p), power(gamma(1 - p), MINUS_ONE))


def _results(law: DensityLaw) -> tuple[Step, ...]:
    many = len(law.ruling) > 1
    together = f"The {len(law.ruling)} points together:" if many else "So that"
    left, square_left = number(-1 - law.q), number(-2 - law.p - law.q)
    return (
        Step((together,), (Line(PHI_N, plus(law.amplitude, order(power(N, left)))),), earns="asymptotics.amplitude"),
        Step(("and the probability is its square:",), (Line(F_N, plus(law.square, order(power(N, square_left)))),),
             earns="asymptotics.F"),
    )
