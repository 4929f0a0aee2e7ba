"""Late asks on a finite graph written out: reason, lines, what each line earns."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    ZERO,
    Formula,
    call,
    letter,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.record.said import Claim, Line, Step

if TYPE_CHECKING:
    from derive.derivations.asymptotics.finite import Tail

Z, N, X, M, ETA = (letter(name) for name in ("z", "n", "x", "m", "eta"))
P, B, SLOPE = (call(name, X) for name in ("P", "B", "S"))
PHI_N, LAMBDA = operator("φ", "n"), operator("λ", "j")


def written(efficiency: Formula, tail: Tail | None, claims: Sequence[Claim]) -> tuple[Step, ...]:
    """The fraction, its poles, the partial fractions, and what each claim reads off them."""
    root = ONE if efficiency == ONE else call("sqrt", ETA)
    found = [_fraction(root)]
    if tail is not None:
        found += [_polynomials(tail), *([_partial(root, tail)] if tail.poles > 1 else [])]
    return (*found, *(step for c in claims if (step := _earned(c)) is not None))


def _fraction(root: Formula) -> Step:
    top, bottom = call("N", Z), call("D", Z)
    factor = plus(ONE, times(MINUS_ONE, LAMBDA, Z))
    return Step(
        ("The generating function of the first click is a fraction in ", Z, ", whose poles lie outside the unit "
         "circle:"),
        (Line(call("φ", Z), times(root, top, power(bottom, MINUS_ONE))),),
        where=(bottom, " is the product of all ", factor, ", ", LAMBDA, " the ", M, " eigenvalues of the undetected "
               "step that are neither 0 nor dark; they are smaller than 1 in modulus.",),
    )


def _polynomials(tail: Tail) -> Step:
    from derive.derivations.asymptotics.finite import in_powers

    slope = [c.scaled(Fraction(k)) for k, c in enumerate(tail.p)][1:]
    lines = [Line(P, in_powers(tail.p, "x"))]
    lines += [Line(B, in_powers(tail.tops[0], "x"))] if len(tail.tops) == 1 else []
    lines += [Line(SLOPE, in_powers(slope, "x"))] if tail.poles > 1 else []
    turned = times(power(X, plus(M, ONE) if tail.late else M), call("N", power(X, MINUS_ONE)))
    last = (", a multiple of ", P, " taken off, and ", SLOPE, " the slope of ", P, ".") if tail.late else (
        ", and ", SLOPE, " the slope of ", P, ".")
    return Step(
        ("In the eigenvalue ", X, " = ", power(Z, MINUS_ONE), " in place of ", Z, ":"),
        tuple(lines),
        where=("with ", P, " = ", times(power(X, M), call("D", power(X, MINUS_ONE))), " and ", B, " = ", turned,
               *(last if tail.poles > 1 else (".",))),
    )


def _partial(root: Formula, tail: Tail) -> Step:
    body = times(B, power(SLOPE, MINUS_ONE), power(X, plus(N, number(-1 - tail.late))))
    first = "from the second ask on" if tail.late else "from the first ask on"
    return Step(
        (f"Partial fractions give one geometric series for each pole, {first}:",),
        (Line(PHI_N, times(root, Formula("rootsum", ("x", P, body)))),),
    )


def _earned(claim: Claim) -> Step | None:
    reason, left = _SAID.get(claim.id, ("", ZERO))
    if claim.id.startswith("asymptotics.pole."):
        _, _, j, what = claim.id.split(".")
        which = "The pole nearest to the unit circle" if j == "1" else f"The next one, number {j},"
        said = "has the modulus" if what == "modulus" else "stands at this angle, alone or with its conjugate:"
        reason, left = f"{which} {said}", operator("ρ" if what == "modulus" else "θ", int(j))
    if not reason:
        return None
    right = claim.value if isinstance(claim.value, Formula) and claim.value != left else None
    return Step((reason,), (Line(left, right),), earns=claim.id)


_SAID: dict[str, tuple[str, Formula]] = {
    "asymptotics.amplitude": ("so that the amplitude of the first click is", PHI_N),
    "asymptotics.F": ("and its probability", operator("F", "n")),
    "asymptotics.survival": ("What has not clicked yet is what is dark and all that still will:", operator("S", "n")),
    "asymptotics.rate": ("so that, oscillation aside, the tail falls ask by ask at the rate", operator("κ")),
    "asymptotics.from": ("The other poles together are a hundredth of the nearest ones, envelope against envelope, at "
                         "the ask", operator("n", "tail")),
}
