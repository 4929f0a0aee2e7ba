"""The derivation of the generating function written out."""

from __future__ import annotations

from collections.abc import Sequence

from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    Formula,
    call,
    letter,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.record.said import Claim, Line, PerRoot, Step

U, PSI, N, M, Z = operator("U"), operator("|psi>"), letter("n"), letter("m"), letter("z")
BRA, KET = operator("<d|"), operator("|d>")
A, ETA = letter("a"), letter("eta")


def written(claims: Sequence[Claim]) -> tuple[Step, ...]:
    """Free amplitudes, the renewal equation, its generating function, and what follows from it."""
    return (_free(), _renewal(), _levels(), *(_earned(c) for c in claims))


def _free() -> Step:
    return Step(
        ("Without any ask the amplitudes on the detector's state are",),
        tuple(Line(operator(name, "n"), times(BRA, power(U, N), ket)) for name, ket in (("u", KET), ("v", PSI))),
    )


def _renewal() -> Step:
    inner = times(operator("u", "n-m"), operator("f", "m"))
    total = Formula("sum", ("m", ONE, plus(N, MINUS_ONE), inner))
    u, v = operator("u(z)"), operator("v(z)")
    bottom = plus(ONE, times(MINUS_ONE, A), times(A, u))
    return Step(
        ("A particle that is there at ask ", N, " was either never asked away before, or lost the share ", A,
         " of its amplitude at an earlier ask ", M, " and came back since:"),
        (Line(operator("v", "n"), plus(operator("f", "n"), times(A, total))),
         Line(operator("\\varphi(z)"), times(call("sqrt", ETA), v, power(bottom, MINUS_ONE)))),
        where=("with ", operator("\\varphi", "n"), " = ", times(call("sqrt", ETA), operator("f", "n")), ", ", A, " = ",
               plus(ONE, times(MINUS_ONE, call("sqrt", plus(ONE, times(MINUS_ONE, ETA))))),
               ", and generating functions in ", Z, ", that of u beginning with 1."),
    )


def written_in_columns(claims: Sequence[Claim]) -> tuple[Step, ...]:
    """The same for several detector states, by columns and matrices, or for a step given."""
    return (_free_columns(), _renewal_of_columns(), _solved_for_columns(), *(_earned(c) for c in claims))


def _free_columns() -> Step:
    d, bra = operator("D"), operator("D", None, True)
    return Step(
        ("Without any ask the amplitudes on the detectors' states are a matrix and a column,",),
        (Line(operator("u", "n"), times(bra, power(U, N), d)),
         Line(operator("v", "n"), times(bra, power(U, N), PSI))),
        where=("with ", d, " the detectors' states, numbered in their order.",),
    )


def _renewal_of_columns() -> Step:
    inner = times(operator("u", "n-m"), operator("A"), operator("f", "m"))
    total = Formula("sum", ("m", ONE, plus(N, MINUS_ONE), inner))
    return Step(
        ("What is there at ask ", N, " was either never asked away before, or lost the share ", operator("A"),
         " of its amplitudes at an earlier ask ", M, " and came back since, to any of the states:"),
        (Line(operator("v", "n"), plus(operator("f", "n"), total)),),
        where=("with ", operator("A"), " the diagonal matrix of ", A, " = ",
               plus(ONE, times(MINUS_ONE, call("sqrt", plus(ONE, times(MINUS_ONE, ETA))))), ", state by state.",),
    )


def _solved_for_columns() -> Step:
    u, a, k = operator("u(z)"), operator("A"), operator("K")
    bottom = plus(ONE, times(MINUS_ONE, a), times(u, a))
    resolved = power(plus(ONE, times(MINUS_ONE, Z, k)), MINUS_ONE)
    bra = operator("D", None, True)
    return Step(
        ("In generating functions, that of u beginning with 1, this is one linear system, with the poles of the "
         "undetected step ", k, ":"),
        (Line(operator("\\varphi(z)"), times(operator("E"), power(bottom, MINUS_ONE), operator("v(z)"))),
         Line(operator("\\varphi(z)"), times(operator("E"), bra, Z, U, resolved, PSI)),
         Line(k, times(plus(ONE, times(MINUS_ONE, operator("D"), a, bra)), U))),
        where=("with ", operator("E"), " the diagonal matrix of ", call("sqrt", ETA), ".",),
    )


def _levels() -> Step:
    turn = times(Z, operator("z", "l"))
    share = power(plus(ONE, times(MINUS_ONE, turn)), MINUS_ONE)
    u = Formula("sum", ("l", ONE, letter("w"), times(operator("p", "l"), share)))
    v = Formula("sum", ("l", ONE, letter("w"), times(operator("q", "l"), turn, share)))
    return Step(
        ("Level by level the free amplitudes are geometric series:",),
        (Line(operator("u(z)"), u), Line(operator("v(z)"), v)),
        where=("with the phases ", operator("z", "l"), " of the levels over one interval, ", operator("p", "l"), " = ",
               times(BRA, operator("E", "l"), KET), " and ", operator("q", "l"), " = ",
               times(BRA, operator("E", "l"), PSI), "."),
    )


def _earned(claim: Claim) -> Step:
    if claim.id == "renewal.amplitude" and isinstance(claim.value, Formula):
        reason = "For this system, converging inside and on the unit circle:"
        return Step((reason,), (Line(operator("\\varphi(z)"), claim.value),), claim.id)
    if claim.id.startswith("renewal.amplitude.") and isinstance(claim.value, Formula):
        c = int(claim.id.rsplit(".", 1)[1])
        reason = f"On the detectors' state {c}, converging inside and on the unit circle:"
        return Step((reason,), (Line(operator(f"\\varphi_{{{c}}}(z)"), claim.value),), claim.id)
    if claim.id.startswith("renewal.F.") and isinstance(claim.value, Formula):
        n = int(claim.id.rsplit(".", 1)[1])
        reason = f"Ask {n}:" if n > 1 else "Read off power by power, the first click at the first ask has probability"
        return Step((reason,), (Line(operator("F", n), claim.value),), claim.id)
    if isinstance(claim.value, PerRoot):
        return Step(("The poles are the zeros of",), (Line(claim.value.polynomial, number(0)),), claim.id)
    right = claim.value if isinstance(claim.value, Formula) else None
    return Step(("The one pole is",), (Line(Z, right),), claim.id)
