"""The late-time law of a local density of states written out: reason, lines, what each line earns."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.derivations.asymptotics.density_point import Side, as_root, gamma
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
    from derive.derivations.asymptotics.density import DensityLaw

N, Z, X, E = (letter(name) for name in ("n", "z", "x", "E"))
U, U_N, PHI, PHI_N, F_N = operator("u"), operator("u", "n"), operator("φ"), operator("φ", "n"), operator("F", "n")
RHO, ALPHA = operator("ρ"), operator("α")
A_K, E_K, C_K, U_K = operator("A", "k"), operator("E", "k"), operator("C", "k"), operator("u", "k")
ANALYTIC = operator("power series")
INFINITY = constant("infinity")


def written(law: DensityLaw) -> tuple[Step, ...]:
    """All steps, in order; the last ones earn the claims."""
    return (_between_asks(), *_beside_a_point(), _ruling(law), *_constants(law), *_inverted(law), *_results(law))


def _between_asks() -> Step:
    free = call("exp", times(MINUS_ONE, I_UNIT, E, TAU, N))
    below = plus(ONE, times(MINUS_ONE, Z, call("exp", times(MINUS_ONE, I_UNIT, E, TAU))))

    def over_energies(f: Formula) -> Formula:
        return Formula("integral", ("E", times(MINUS_ONE, INFINITY), INFINITY, times(RHO, f)))

    return Step(
        ("The start is the detector's own state, and all that is asked of the lattice is its local density of states ",
         RHO, ":"),
        (Line(U_N, over_energies(free)), Line(U, over_energies(power(below, MINUS_ONE))),
         Line(PHI, plus(ONE, times(MINUS_ONE, power(U, MINUS_ONE))))),
        where=("here ", U, " and ", PHI, " are the power series of ", U_N, " and of ", PHI_N,
               ", the amplitude of the first \"yes\" at ask ", N, ".",),
    )


def _beside_a_point() -> tuple[Step, ...]:
    """C_k = Gamma(-alpha) Gamma(1+alpha) A_k (+-i tau)^(-alpha-1)."""
    distance = call("abs", plus(E, times(MINUS_ONE, E_K)))
    front = times(call("Gamma", times(MINUS_ONE, ALPHA)), call("Gamma", plus(ONE, ALPHA)), A_K)
    turn = power(times(I_UNIT, TAU), plus(times(MINUS_ONE, ALPHA), MINUS_ONE))
    return (
        Step(
            ("Beside what is analytic, the density goes like a power next to a singular energy ", E_K,
             ", here on the side above it, and leaves a power in ", U, ":"),
            (Line(RHO, times(A_K, power(distance, ALPHA)), "~"),
             Line(Z, call("exp", plus(times(I_UNIT, E_K, TAU), times(MINUS_ONE, X)))),
             Line(U, plus(times(C_K, power(X, ALPHA)), ANALYTIC)), Line(C_K, times(front, turn))),
            where=("on the side below ", E_K, " with ", times(MINUS_ONE, I_UNIT), " for ", I_UNIT,
                   "; sides that fall on one point of the circle add.",),
        ),
    )


def _ruling(law: DensityLaw) -> Step:
    sides = [side for place in law.places for side in place.sides]
    lines = tuple(Line(RHO, _beside(side, law), "~") for side in sides)
    d = number(2 * (law.ruling[0].power + 1))
    others = "; points that have it interfere" if len(law.ruling) > 1 else ""
    size = call("abs", ALPHA)
    tied = {place.power for place in law.ruling}
    dimension = (", a spectral dimension ", times(number(2), plus(ALPHA, ONE)), " = ", d) if len(tied) == 1 else ()
    return Step(
        ("The smallest ", size, f" decides{others}. Here it is ", number(law.p), *dimension, ":"),
        lines,
        fold=len(lines) > 4,
    )


def _beside(side: Side, law: DensityLaw) -> Formula:
    """The density next to a singular energy."""
    from_there = plus(E, -side.energy) if side.above else plus(side.energy, -E)
    return times(as_root(side.amplitude, law.setting), power(from_there, number(side.power)))


def _constants(law: DensityLaw) -> tuple[Step, ...]:
    """What u is where the density vanishes."""
    found = [(operator("u", str(k + 1)), t.energy, t.value) for k, t in enumerate(law.terms)]
    lines = tuple(Line(name, value) for name, _, value in found if value is not None)
    if not lines:
        return ()
    named: list[str | Formula] = []
    for name, energy, value in found:
        if value is not None:
            named += ["; " if named else "", name, " belongs to ", energy]
    return (
        Step(
            ("Where the density vanishes ", U, " is finite; on the unit circle it is a half and an integral over the "
             "bands, in which ", X, " counts the distance from the singular energy:"),
            lines,
            where=(*named, ".",),
        ),
    )


def _inverted(law: DensityLaw) -> tuple[Step, ...]:
    p = power(X, number(law.p))
    lines = []
    signs = {place.power < 0 for place in law.ruling}
    if True in signs:
        lines.append(Line(PHI, plus(ANALYTIC, times(MINUS_ONE, power(C_K, MINUS_ONE), p))))
    if False in signs:
        lines.append(Line(PHI, plus(ANALYTIC, times(C_K, power(U_K, number(-2)), p))))
    both = ", where the density diverges and where it vanishes" if len(signs) > 1 else ""
    moved = times(call("exp", times(MINUS_ONE, I_UNIT, E_K, TAU, N)), power(N, number(-1 - law.p)))
    return (
        Step((f"The singular part of the quotient begins with the same power{both}:",), tuple(lines)),
        Step(("The coefficients of ", p, " are found by Hankel's integral:"),
             (Line(times(_one_over_gamma(law.p), moved)),)),
    )


def _one_over_gamma(p: Fraction) -> Formula:
    """1/Gamma(-p) = -p/Gamma(1-p); for p > 1 left as it stands."""
    if p > 1:
        return power(call("Gamma", number(-p)), MINUS_ONE)
    return times(number(-p), power(gamma(1 - p), MINUS_ONE))


def _results(law: DensityLaw) -> tuple[Step, ...]:
    together = f"The {len(law.ruling)} points together:" if len(law.ruling) > 1 else "Together:"
    left, square_left = number(-1 - law.q), number(-2 - law.p - law.q)
    return (
        Step((together,), (Line(PHI_N, plus(law.amplitude, order(power(N, left)))),), earns="asymptotics.amplitude"),
        Step(("and the probability is its square:",), (Line(F_N, plus(law.square, order(power(N, square_left)))),),
             earns="asymptotics.F"),
    )
