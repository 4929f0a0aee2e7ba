"""The derivation of the moments written out: from the sum over asks to closed functions of the interval."""

from __future__ import annotations

from collections.abc import Mapping

from derive.derivations.sight import Sight
from derive.derivations.stated import is_open
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
    plus,
    power,
    times,
)
from derive.record.said import Line, Prose, Step

K, K_DAGGER, U, Y = operator("K"), operator("K", None, True), operator("U"), operator("Y")
P, PSI, N, A, ETA, W = letter("p"), letter("psi"), letter("n"), letter("a"), letter("eta"), letter("w")
HALF = number(1) / 2
NAMES: dict[str, Prose] = {
    "mean": ("With ", operator("M", "p"), " for the sum of the ", P, "-th powers weighted by the probabilities, the "
             "mean, not conditioned:"),
    "conditional_mean": ("Divided by the total probability, the mean given that there is a click at all:",),
    "variance": ("and the variance of the number of asks given a click:",),
}


def written(sight: Sight, values: Mapping[str, Formula]) -> tuple[Step, ...]:
    """Stein's equation, its solution level by level, and the values it earns."""
    law = sight.setting.interval.law
    return (
        _as_survival(), _stein(), _by_levels(law), _diagonal(), _imaginary(law), _back_to_moments(),
        *(_earned(name, value) for name, value in values.items()),
    )


def eliminated(sight: Sight, values: Mapping[str, Formula]) -> tuple[Step, ...]:
    """Stein's equation for several states or a step given, solved in the bright space's own basis."""
    k, y = operator("k"), operator("y", "p")
    matrix = Line(plus(y, times(MINUS_ONE, operator("k", None, True), y, k)), operator("y", "p-1"))
    solved = Step(
        ("In the orthogonal basis of the bright space this is a linear system of ",
         power(number(sight.space.size), number(2)), " equations, solved by elimination:"),
        (matrix,),
        where=("with ", k, " the coordinates of ", K, " and ", y, " the form of ", operator("Y", "p"), "."),
    )
    return (_as_survival(), _stein(), solved, *(_earned(name, value) for name, value in values.items()))


def _as_survival() -> Step:
    m = letter("m")
    undetected = times(power(K_DAGGER, m), power(K, m))
    total = Formula("sum", ("m", number(0), constant("infinity"), times(undetected)))
    rule = plus(ONE, times(MINUS_ONE, A, operator("P")))
    return Step(
        ("A start on the bright space that is still undetected after ", m, " asks has lost nothing else, so the mean "
         "number of asks is the sum of the survival probabilities,",),
        (Line(Formula("sum", ("n", ONE, constant("infinity"), times(N, operator("F", "n")))),
              times(operator("<psi|"), total, operator("|psi>"))),
         Line(K, times(rule, U))),
        where=("with ", A, " = 1 − ", call("sqrt", plus(ONE, times(MINUS_ONE, ETA))), " for a detector of efficiency ",
               ETA, "; the dark part of the start is left out."),
    )


def _stein() -> Step:
    p = operator("Y", "p")
    return Step(
        ("The sum, and its repeated sums, solve",),
        (Line(plus(p, times(MINUS_ONE, K_DAGGER, p, K)), operator("Y", "p-1")), Line(operator("Y", 0), ONE)),
        where=("and the solution on the bright space is unique, since all eigenvalues of ", K, " there lie inside the "
               "unit circle."),
    )


def _by_levels(law: str) -> Step:
    t, rho, c = operator("T", "jk"), operator("rho", "jk"), operator("c", "jk")
    y = letter("y")
    inner = plus(times(A, operator("t", "j")), times(A, call("conj", operator("t", "k"))),
                 times(MINUS_ONE, power(A, number(2)), y))
    gap = plus(operator("E", "j"), times(MINUS_ONE, operator("E", "k")))
    cot = call("cot", times(HALF, gap, TAU))
    fixed = plus(-HALF, times(HALF, I_UNIT, cot))
    exponential = times(I_UNIT, power(gap, MINUS_ONE), power(TAU, MINUS_ONE))
    s = letter("s")
    base = plus(ONE, times(MINUS_ONE, I_UNIT, gap, TAU, power(s, MINUS_ONE)))
    gamma = power(plus(power(base, s), MINUS_ONE), MINUS_ONE)
    random = "" if law == "fixed" else f"; the interval is averaged over its {law} law"
    shape: tuple[Formula | str, ...] = (" of shape ", s) if law == "gamma" else ()
    return Step(
        ("Between two different levels ", letter("j"), " and ", letter("k"), ", with the detector's amplitudes taken "
         "out of both sides, ", operator("Y", "jk"), " = ",
         times(operator("d", "j"), t, call("conj", operator("d", "k"))), ", the equation reads",),
        (Line(t, plus(times(plus(ONE, c), rho), times(MINUS_ONE, c, inner))),
         Line(c, {"fixed": fixed, "exponential": exponential, "gamma": gamma}[law])),
        where=("with ", operator("t", "j"), " = ", Formula("sum", ("k", ONE, W, times(t, operator("p", "k")))), " and ",
               y, " = ", times(operator("<d|"), Y, operator("|d>")),
               random, *shape, "."),
    )


def _diagonal() -> Step:
    rho, y, t = operator("rho", "jj"), letter("y"), operator("t", "j")
    left = times(number(2), A, call("Re", t))
    trace = Formula("sum", ("j", ONE, W, times(operator("p", "j"), rho)))
    return Step(
        ("On the diagonal the left side vanishes, which fixes the real parts, and their sum fixes ", y, ":"),
        (Line(left, plus(rho, times(power(A, number(2)), y))), Line(times(ETA, y), trace)),
        where=("The first source is 1, so the first ", y, " is ", W, "/", ETA, ": the mean return.",),
    )


def _imaginary(law: str) -> Step:
    j, k = operator("t", "j"), operator("rho", "jk")
    c = operator("c", "jk")
    mean = times(HALF, plus(operator("rho", "jj"), operator("rho", "kk")))
    inner = plus(times(plus(ONE, c), k), times(MINUS_ONE, c, mean))
    total = Formula("sum", ("k", ONE, W, times(operator("p", "k"), inner)))
    if law == "gamma":
        return _together(j, total)
    front = () if law == "exponential" else (plus(ONE, times(MINUS_ONE, HALF, A)),)
    others = Formula("sum", ("k", ONE, W, times(operator("p", "k"), operator("T", "jk"))))
    return Step(
        ("The imaginary parts, weighted, add up to 0, and with that they decouple:",),
        (Line(times(*front, call("Im", j)), call("Im", total)),
         Line(times(operator("p", "j"), operator("T", "jj")),
              plus(j, times(MINUS_ONE, others)))),
        where=("where the sums leave out ", letter("k"), " = ", letter("j"), ". No system is left to solve."),
    )


def _together(t: Formula, right: Formula) -> Step:
    """The w real equations of gamma intervals."""
    j, k = letter("j"), letter("k")
    apart = plus(call("Im", t), times(MINUS_ONE, call("Im", operator("t", "k"))))
    pulls = Formula("sum", ("k", ONE, W, times(operator("p", "k"), call("Re", operator("c", "jk")), apart)))
    return Step(
        ("The imaginary parts solve as many real equations as there are levels:",),
        (Line(plus(call("Im", t), times(A, pulls)), call("Im", right)),),
        where=("where the sums leave out ", k, " = ", j, ". The diagonal follows from ", t, " as their weighted sum."),
    )


def _back_to_moments() -> Step:
    q, twice = operator("q", "j"), times(number(2), call("binomial", plus(N, ONE), number(2)))
    b = operator("b", "p")
    both = Formula("sum", ("k", ONE, W, times(call("conj", q), operator("T", "jk"), operator("q", "k"))))
    total = Formula("sum", ("j", ONE, W, both))
    rising = Formula("sum", ("n", ONE, constant("infinity"),
                             times(call("binomial", plus(N, P, MINUS_ONE), P), operator("F", "n"))))
    return Step(
        ("The start enters through ", q, " = ", times(operator("<d|"), operator("E", "j"), operator("|psi>")),
         ", and powers of ", N, " follow from the rising ones:"),
        (Line(b, total), Line(b, rising), Line(power(N, number(2)), plus(twice, times(MINUS_ONE, N)))),
    )


def _earned(name: str, value: Formula) -> Step:
    first, total = operator("M", 1), operator("P", "det")
    square = times(power(first, number(2)), power(total, number(-2)))
    shown = {
        "mean": first,
        "conditional_mean": times(first, power(total, MINUS_ONE)),
        "variance": plus(times(operator("M", 2), power(total, MINUS_ONE)), times(MINUS_ONE, square)),
    }
    left = shown[name] if name in shown else operator("M", int(name))
    if is_open(value):
        return Step(NAMES.get(name, (f"Moment {name}, not conditioned:",)), (Line(value, _from_sums(name)),),
                    earns=f"moments.{name}", where=("to be solved where the letters have values.",))
    return Step(NAMES.get(name, (f"Moment {name}, not conditioned:",)), (Line(left, value),), earns=f"moments.{name}")


def _from_sums(name: str) -> Formula:
    """The value by the sums b_p over asks."""
    b = [operator("b", p) for p in (1, 2)]
    total = operator("P", "det")
    mean = times(b[0], power(total, MINUS_ONE))
    square = times(plus(times(number(2), b[1]), times(MINUS_ONE, b[0])), power(total, MINUS_ONE))
    if name == "variance":
        return plus(square, times(MINUS_ONE, power(mean, number(2))))
    if name == "conditional_mean":
        return mean
    if name == "mean":
        return b[0]
    order = number(int(name))
    return Formula("sum", ("n", ONE, constant("infinity"), times(power(N, order), operator("F", "n"))))
