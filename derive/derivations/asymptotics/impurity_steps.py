"""The late-time law beside an impurity written out: reason, lines, what each line earns."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.derivations.asymptotics.bound import Bound
from derive.derivations.asymptotics.scattering import Place
from derive.derivations.asymptotics.steps import renewal
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
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
from derive.record.said import Claim, Line, Prose, Step

if TYPE_CHECKING:
    from derive.derivations.asymptotics.impurity import ImpurityLaw

N, S, A, E, Z = (letter(name) for name in ("n", "s", "a", "e", "z"))
THETA, LAMBDA = operator("θ"), operator("λ")
U, V, PHI, H = operator("u"), operator("v"), operator("φ"), operator("h")
R_U, R_V, K, N_U, M_V = operator("R", "u"), operator("R", "v"), operator("K"), operator("N"), operator("M")
TWO, THREE, HALF, INFINITY = number(2), number(3), number(Fraction(1, 2)), constant("infinity")
EDGES = ("+", "−")


def written(law: ImpurityLaw, bound: Bound) -> tuple[Step, ...]:
    """All steps, in order; the last ones earn the claims."""
    first = _scattered(law) if law.impure else _mirrored(law)
    return (*renewal(), first, _quotient(law), *_images(law), _odd(law), *_results(law), *_bound(bound))


def _turns() -> Formula:
    """(i/tau) sum over the turns of the circle."""
    turns = Formula("sum", ("m", times(MINUS_ONE, INFINITY), INFINITY, operator("G", "d,d")))
    return times(I_UNIT, power(TAU, MINUS_ONE), turns)


def _where(law: ImpurityLaw) -> Prose:
    """What d, G and v are."""
    energy = times(plus(THETA, times(TWO, PI, letter("m"))), power(TAU, MINUS_ONE))
    start = () if law.place.returns else (", and ", V, " is the same between start and detector",)
    return (operator("d"), f" = {law.place.detector} being the detector's site, ", operator("G"),
            " the resolvent taken at the energy ", energy, *start, ".")


def _mirrored(law: ImpurityLaw) -> Step:
    """u as its sum over the turns, on the half line."""
    return Step(
        ("On the unit circle a sum over the asks is a sum over the turns ", letter("m"), " that an energy may have "
         "made unseen; the end mirrors what the line carries, of resolvent ", operator("g"), ":"),
        (Line(operator("G", "x,y"), plus(operator("g", "x−y"), times(MINUS_ONE, operator("g", "x+y+2")))),
         Line(U, plus(HALF, _turns())), Line(Z, call("exp", times(I_UNIT, THETA)))),
        where=_where(law),
    )


def _scattered(law: ImpurityLaw) -> Step:
    """The resolvent, and u as its sum over the turns of the circle."""
    eps = law.energy

    def free(x: str, y: str) -> Formula:
        return operator("g", f"{x},{y}")

    below = plus(ONE, times(MINUS_ONE, eps, free("p", "p")))
    over = times(eps, free("x", "p"), free("p", "y"), power(below, MINUS_ONE))
    return Step(
        ("The impurity scatters what the uniform lattice carries, of resolvent ", operator("g"), "; and on the unit "
         "circle a sum over the asks is a sum over the turns ", letter("m"), " that an energy may have made unseen:"),
        (Line(operator("G", "x,y"), plus(free("x", "y"), over)), Line(U, plus(HALF, _turns())),
         Line(Z, call("exp", times(I_UNIT, THETA)))),
        where=("with ", operator("p"), f" = {law.place.impurity} the impurity's site, ", *_where(law)),
    )


def _quotient(law: ImpurityLaw) -> Step:
    """K, N and M at the edge."""
    place = law.place
    root = call("sqrt", plus(power(A, TWO), times(MINUS_ONE, power(THETA, TWO))))
    turned = times(power(A, MINUS_ONE), plus(THETA, times(MINUS_ONE, I_UNIT, S)))
    letters = [Line(A, law.seen.a, ":=")]
    letters += [Line(E, times(law.energy, TAU), ":=")] if law.impure else []
    lines = [*letters, Line(S, root, ":="), Line(LAMBDA, turned, ":=")]
    lines.append(Line(U, plus(times(N_U, power(K, MINUS_ONE)), R_U)))
    if not place.returns:
        lines.append(Line(V, times(_phase(place.k), plus(times(M_V, power(K, MINUS_ONE)), R_V))))
    lines += _half_line(law) if place.ends else _line(place)
    energy: Prose = (E, " the impurity's energy in phase, ") if law.impure else ()
    return Step(
        ("Of the turns ", letter("m"), " = 0 alone is singular at the band's upper edge. Everything over one "
         "denominator ", K, ", nothing diverges there:"),
        tuple(lines),
        where=("with ", A, " half the band's width in phase, ", *energy, "and ", R_U,
               *(() if place.returns else (", ", R_V)), " what the other turns add."),
    )


def _phase(k: int) -> Formula:
    """(i w)^k."""
    turned = times(I_UNIT, operator("w"))
    return power(turned, number(k)) if k > 1 else turned


def _line(place: Place) -> list[Line]:
    turn = times(I_UNIT, E)
    lines = [Line(K, plus(S, turn)), Line(N_U, _with(turn, 2 * abs(place.detector - place.impurity)))]
    if not place.returns:
        straight = power(LAMBDA, number(place.k)) if place.k > 1 else LAMBDA
        lines.append(Line(M_V, times(straight, _with(turn, place.detour - place.k))))
    return lines


def _with(turn: Formula, n: int) -> Formula:
    """1 + i e D_n."""
    return ONE if n == 0 else plus(ONE, times(turn, _lacking(n)))


def _lacking(n: int) -> Formula:
    return times(plus(ONE, times(MINUS_ONE, power(LAMBDA, number(n)))), power(S, MINUS_ONE))


def _half_line(law: ImpurityLaw) -> list[Line]:
    place, turn = law.place, times(I_UNIT, E)
    d, x, p = place.detector, place.start, place.impurity

    def between(y: int, z: int) -> Formula:
        return operator("D", f"{y},{z}")

    lines = [Line(K, plus(ONE, times(turn, between(p, p))) if law.impure else ONE)]
    lines.append(Line(N_U, between(d, d) if d == p else plus(
        between(d, d) * K, times(MINUS_ONE, turn, power(between(d, p), TWO)))))
    if not place.returns:
        lines.append(Line(M_V, between(d, x) if p in (d, x) else plus(
            between(d, x) * K, times(MINUS_ONE, turn, between(d, p), between(p, x)))))
    first, second = letter("y"), operator("z")
    least = times(TWO, operator("min(y, z)"))
    body = plus(ONE, times(MINUS_ONE, power(LAMBDA, plus(least, TWO))))
    general = times(power(LAMBDA, call("abs", plus(first, times(MINUS_ONE, second)))), body, power(S, MINUS_ONE))
    return [*lines, Line(operator("D", "y,z"), general, ":=")]


def _images(law: ImpurityLaw) -> tuple[Step, ...]:
    """R at both edges."""
    lines = []
    for side, name in zip(law.sides, EDGES, strict=False):
        (y, _), (start, _) = side.images
        lines.append(Line(operator("Y", name), y, ":="))
        if not law.place.returns:
            lines.append(Line(operator("Z", name), start, ":="))
    rest = ("At the upper edge ", R_U, " = ", plus(HALF, times(I_UNIT, operator("Y", "+"))))
    more: Prose = () if law.place.returns else (" and ", R_V, " = ", times(I_UNIT, operator("Z", "+")),)
    turned = ", with the impurity's energy turned round" if law.impure else ""
    where = ("the bound state's phase lies on no edge, so that no denominator vanishes.",) if law.impure else ()
    return (Step((*rest, *more, f"; at the lower one all is complex conjugate{turned}:"), tuple(lines), where=where),)


def _odd(law: ImpurityLaw) -> Step:
    """The part of phi odd in s, and its leading coefficient at either edge."""
    above = times(MINUS_ONE, K) if law.place.returns else plus(M_V, R_V * K)
    quotient = times(above, power(plus(N_U, R_U * K), MINUS_ONE))
    whole = plus(ONE, quotient) if law.place.returns else times(_phase(law.place.k), quotient)
    first = operator("C", "1") if law.place.returns else times(_phase(law.place.k), operator("C", "1"))
    odd = plus(operator("even part"), times(MINUS_ONE, S, first), order(power(S, THREE)))
    lines = [Line(PHI, whole), Line(PHI, odd)]
    lines += [Line(operator("C", name), side.first(), ":=") for side, name in zip(law.sides, EDGES, strict=False)]
    return Step(("Of the quotient only the part odd in ", S, " is singular, at either edge:"), tuple(lines))


def _results(law: ImpurityLaw) -> tuple[Step, ...]:
    left_out = -law.terms - Fraction(3, 2)
    error, square_error = (order(power(N, number(e))) for e in (left_out, left_out - Fraction(3, 2)))
    psi, k = operator("ψ"), law.place.k
    angle = plus(times(A, N), times(number(Fraction(1 - 2 * k, 4)), PI))
    front = times(call("sqrt", times(A, power(times(TWO, PI), MINUS_ONE))), power(N, number(Fraction(-3, 2))))
    parts = [times(call("exp", times(number(sign), I_UNIT, psi)), operator("C", name))
             for sign, name in zip((-1, 1), EDGES, strict=True)]
    both = plus(*parts) if law.impure else times(TWO, call("Re", parts[0]))
    phase = operator("φ", "n") if k == 0 else times(power(operator("w"), number(-k)), operator("φ", "n"))
    second = () if law.terms == 1 else (" The next term of the square root's series adds the power below it.",)
    found = [
        Step(("Hankel's integral takes the square root at either edge to a power of ", N, ":", *second),
             (Line(phase, times(front, both), "~"), Line(psi, angle, ":="))),
        Step(("Put together:",), (Line(operator("φ", "n"), plus(law.amplitude, error)),),
             earns="asymptotics.amplitude"),
        Step(("and the probability is its square:",), (Line(operator("F", "n"), plus(law.square, square_error)),),
             earns="asymptotics.F"),
    ]
    if law.start is not None:
        found.append(Step(
            ("The second term is a hundredth of the first, envelope against envelope, at the ask",),
            (Line(operator("n", "tail"), law.start),), earns="asymptotics.from"))
    return tuple(found)


def _bound(bound: Bound) -> tuple[Step, ...]:
    """The pole off the band, energy and weight."""
    if not bound.claims:
        return ()
    energy, weight = bound.claims
    return (
        Step(("The resolvent has one pole off the band, a state that the impurity binds. It makes a pole of ", U,
              " on the unit circle, at which ", PHI, " is regular; its energy is"),
             (Line(operator("E", "b"), _formula(energy)),), earns=energy.id),
        Step(("and the share of it that stands on the detector's site, the residue there,",),
             (Line(power(operator("|⟨d|b⟩|"), TWO), _formula(weight)),), earns=weight.id),
    )


def _formula(claim: Claim) -> Formula:
    if not isinstance(claim.value, Formula):
        raise TypeError("energy and weight are formulas")
    return claim.value
