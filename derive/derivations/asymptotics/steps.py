"""The late-time law written out: reason, lines, what each line earns."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from derive.derivations.asymptotics.band import Wave
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    ZERO,
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
    from derive.derivations.asymptotics.topic import Law

N, Z, K, M, S = (letter(name) for name in ("n", "z", "k", "m", "s"))
THETA, A = operator("θ"), letter("a")
PHI_N, U_N, V_N, F_N = operator("φ", "n"), operator("u", "n"), operator("v", "n"), operator("F", "n")
PHI, U, V, R, NU_H = operator("φ"), operator("u"), operator("v"), operator("R"), operator("H")
INFINITY = constant("infinity")


def written(law: Law, terms: int) -> tuple[Step, ...]:
    """All steps, in order; the last ones earn the claims."""
    middle = _meeting(law) if law.watch.meets is not None else _apart(law, terms)
    return (*renewal(), *_between_asks(law), *middle, *_results(law))


def renewal() -> tuple[Step, ...]:
    """u, v and their quotient."""
    def series(name: Formula, first: Formula) -> Formula:
        return Formula("sum", ("n", first, INFINITY, times(power(Z, N), name)))

    return (
        Step(
            ("With ", U_N, " the amplitude from the detector back to it after ", N, " free intervals, and ", V_N,
             " from the start to it, every arrival splits at the first detection; for the power series"),
            (Line(U, series(U_N, ZERO)), Line(V, series(V_N, ONE)), Line(PHI, series(PHI_N, ONE)),
             Line(PHI, times(V, power(U, MINUS_ONE)))),
            where=("here ", PHI_N, " is the amplitude of the first \"yes\" at ask ", N, ".",),
        ),
    )


def _between_asks(law: Law) -> tuple[Step, ...]:
    w = law.watch
    what = "the line" if w.name == "line" else "the half line, the end acting as a mirror"
    v = Line(V_N, times(w.phase, _waves(w.pair.v)))
    lines = (Line(U_N, _waves(w.pair.u)), *(() if w.pair.returns else (v,)), Line(A, w.a, ":="))
    tail = ("; the start is the detector's own state, so ", V_N, " = ", U_N, ":") if w.pair.returns else (":",)
    return (Step((f"The plane waves of {what} give Bessel functions", *tail), lines),)


def _waves(wave: Wave) -> Formula:
    return plus(*(times(number(sign), call("bessel_J", number(k), times(A, N))) for sign, k in wave))


def _apart(law: Law, terms: int) -> tuple[Step, ...]:
    w = law.watch
    root = call("sqrt", plus(power(A, number(2)), times(MINUS_ONE, power(THETA, number(2)))))
    wave = Formula("power", (S, plus(times(number(2), K), MINUS_ONE)))
    double = operator("(2k−1)!!")
    front = times(double, power(times(A, power(N, MINUS_ONE)), K))
    t = times(THETA, power(A, MINUS_ONE))
    p, q = operator("p", "k"), operator("q", "k")
    return (
        Step(
            ("On the unit circle Poisson's summation turns each series into the transform over one turn and its images "
             "one, two, ... turns away. Near the band's upper edge the first is singular and the others are not:",),
            (Line(Z, call("exp", times(I_UNIT, THETA))), Line(S, root, ":="),
             Line(U, plus(times(operator("N", "u"), power(S, MINUS_ONE)), operator("R", "u"))),
             Line(V, plus(times(operator("N", "v"), power(S, MINUS_ONE)), operator("R", "v")))),
            where=("with ", operator("N"), " and ", operator("R"), " analytic at ", THETA, " = ", A,
                   "; a wave J", operator("", "k"), " has ", operator("N"), " = ",
                   times(power(I_UNIT, K), operator("T", "k"), operator("(θ/a)")), ".",),
        ),
        *_rests(law),
        Step(
            ("Of the quotient only the part odd in ", S, " is singular:"),
            (Line(PHI, plus(operator("even part"), times(S, NU_H))),
             Line(NU_H, times(plus(times(operator("R", "v"), operator("N", "u")),
                                   times(MINUS_ONE, operator("N", "v"), operator("R", "u"))),
                              power(plus(power(operator("N", "u"), number(2)),
                                         times(MINUS_ONE, power(operator("R", "u"), number(2)), power(S, number(2)))),
                                    MINUS_ONE))),
             Line(NU_H, Formula("sum", ("k", ONE, INFINITY, times(
                 plus(p, times(I_UNIT, q, t)), power(S, plus(times(number(2), K), number(-2)))))))),
            where=("with real ", p, " and ", q, ", the same at both edges.",),
        ),
        Step(
            ("and every term of it transforms exactly, one power of ", S, " to one Bessel function; a factor ",
             times(I_UNIT, t), " raises its order by one:"),
            (Line(operator("[zⁿ]") * wave, times(front, call("bessel_J", K, times(A, N)))),
             Line(operator("[zⁿ]") * times(I_UNIT, t, wave), times(front, call("bessel_J", K + ONE, times(A, N))))),
        ),
        *_first_term(law, terms, p, q),
        *([] if w.below else [_aliases(law)]),
    )


def _rests(law: Law) -> tuple[Step, ...]:
    """What the images leave at the band's edge."""
    if not law.rests:
        return ()
    below = law.watch.below or law.watch.meets is not None
    factor = " (times a power of i)" if below else ""
    lines = tuple(Line(operator(name.split("_")[0], name.split("_")[1]), f, ":=") for name, f in law.rests.items())
    return (
        Step(
            (f"The regular parts at the edge, beside the 1/2 of the first ask, are sums over the images{factor}: ",
             operator("r", "j"), " of ", U, " and ", operator("s", "j"), " of ", V, ", ", operator("j"),
             " counting Taylor coefficients:"),
            lines,
            fold=len(lines) > 3,
        ),
    )


def _first_term(law: Law, terms: int, p: Formula, q: Formula) -> tuple[Step, ...]:
    if terms > 1:
        return ()
    x = letter("x")
    first = times(MINUS_ONE, call("sqrt", times(number(2), power(times(PI, x), MINUS_ONE))),
                  call("cos", plus(x, times(number(Fraction(1, 4)), PI))))
    return (
        Step(
            ("To first order the Bessel functions may be replaced by the first terms of their own expansions:",),
            (Line(call("bessel_J", ONE, x), plus(first, order(power(x, number(Fraction(-3, 2)))))),),
        ),
    )


def _aliases(law: Law) -> Step:
    return Step(
        ("Nothing was assumed about ", law.watch.a, " but that it is no multiple of π: images that fall back into the "
         "band are in the sums, with their principal roots.",),
        (),
    )


def _meeting(law: Law) -> tuple[Step, ...]:
    x, h = operator("x"), operator("h", "k")
    return (
        Step(
            ("At this interval both edges of the band fall on one point of the unit circle, where the two square roots "
             "are complex conjugates of each other:",),
            (Line(THETA, plus(A, times(I_UNIT, x))),
             Line(U, plus(times(operator("N", "u"), power(x, number(Fraction(-1, 2)))), operator("R", "u")))),
            where=("with real power series ", operator("N"), " and ", operator("R"), " in ", x, ".",),
        ),
        *_rests(law),
        Step(
            ("The quotient is a series in half-integer powers, and Hankel's integral transfers them one by one:",),
            (Line(PHI, plus(operator("integer powers"), Formula("sum", ("k", ZERO, INFINITY, times(
                h, power(x, plus(K, number(Fraction(1, 2))))))))),
             Line(PHI_N, times(Formula("power", (call("exp", times(MINUS_ONE, I_UNIT, A)), N)), Formula("sum", (
                 "k", ZERO, INFINITY, times(h, power(call("Gamma", plus(times(MINUS_ONE, K), number(Fraction(-1, 2)))),
                                                     MINUS_ONE),
                                            power(N, plus(times(MINUS_ONE, K), number(Fraction(-3, 2)))))))))),
        ),
    )


def _results(law: Law) -> tuple[Step, ...]:
    amplitude = times(law.watch.phase, law.real)
    error, square_error = (order(power(N, number(e))) for e in (law.left_out, law.left_out - Fraction(3, 2)))
    found = [
        Step(("Inserting the coefficients:",), (Line(PHI_N, plus(amplitude, error)),), earns="asymptotics.amplitude"),
        Step(("and the probability is its square:",), (Line(F_N, plus(law.square, square_error)),),
             earns="asymptotics.F"),
    ]
    if law.begins:
        found.append(Step(
            ("The second term is a hundredth of the first, envelope against envelope, at the ask",),
            (Line(operator("n", "tail"), law.start),), earns="asymptotics.from"))
    return tuple(found)
