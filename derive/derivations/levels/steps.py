"""The levels' derivation written out: reason, lines, and what each line earns."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from typing import Any

from derive.algebra.polynomial import polynomial_formula
from derive.derivations.spectrum import Spectrum
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    inverse,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.record.said import Claim, Line, PerRoot, Prose, Step

A, H, P, Q, U, K, V = (operator(name) for name in ("A", "H", "P", "Q", "U", "K", "V"))
V_DAGGER = operator("V", None, True)
EPS = letter("epsilon")
KET, BRA = operator("|d>"), operator("<d|")


def split(spectrum: Spectrum, name: str) -> tuple[Step, ...]:
    """Bright and dark dimensions, and the bright space's polynomial."""
    m, total = letter("m"), spectrum.size - spectrum.rank
    bright = spectrum.bright.size
    factors = [polynomial_formula(p, name) for p, _ in spectrum.factors]
    lines = []
    if bright:
        lines.append(Line(letter("q"), polynomial_formula(spectrum.q, name)))
    if len(factors) > 1 or any(k > 1 for _, k in spectrum.factors):
        parts = [f if k == 1 else power(f, number(k)) for f, (_, k) in zip(factors, spectrum.factors, strict=True)]
        lines.append(Line(letter("q"), times(*parts)))
    return (
        Step(
            ("The detector cuts ", H, " into ", A, " = ", times(Q, H, Q), " and ", V, " = ", times(Q, H, operator("D")),
             ". What it can ever see of the rest is spanned by"),
            (Line(times(power(A, m), V), None),),
            where=_what_is_dark(bright, total),
        ),
        Step(
            ("On the bright space ", A, " has the characteristic polynomial, in the letter ", letter(name), ","),
            tuple(lines),
            where=("its roots are the levels at ", TAU, " = 0.",),
        ),
    ) if bright else (
        Step(("Nothing reaches the detector: every level is dark.",)),
    )


def _what_is_dark(bright: int, total: int) -> Prose:
    if bright == total:
        return (f"with m = 0, 1, ...: all {total} dimensions (exact rank), so that nothing is dark.",)
    return (f"with m = 0, 1, ...: {bright} of {total} dimensions (exact rank). The other {total - bright} are "
            "dark: the evolution there is that of A alone, at every ", TAU, ".")


def secular_equation(perfect: bool = True) -> tuple[Step, ...]:
    """From an eigenvector of the undetected step to the secular equation, and its expansion."""
    return (*(_perfect_secular() if perfect else _imperfect_secular()), _expanded(perfect))


def _perfect_secular() -> tuple[Step, ...]:
    phase = call("exp", times(MINUS_ONE, I_UNIT, EPS, TAU))
    return (
        Step(
            ("A level is an eigenvalue of one undetected step,",),
            (Line(times(Q, U, Q, operator("|phi>")), times(phase, operator("|phi>"))),),
            where=("its energy is the real part of ", EPS, " and its rate, of probability, is minus twice the "
                   "imaginary part.",),
        ),
        Step(
            ("Evolving ", operator("|phi>"), " leaves it where it is, up to the phase, but for a part on the detector. "
             "So ", operator("|phi>"), " is the inverse of ", plus(U, times(MINUS_ONE, phase)),
             " applied to the detector's state, and it must have nothing on the detector:"),
            (Line(times(BRA, power(plus(U, times(MINUS_ONE, phase)), MINUS_ONE), KET), ZERO),),
        ),
        Step(
            ("Written with a cotangent (",
             times(number(2), I_UNIT, power(plus(call("exp", times(MINUS_ONE, I_UNIT, letter("y"))), MINUS_ONE),
                                            MINUS_ONE)),
             " is ", plus(times(MINUS_ONE, call("cot", times(number(Fraction(1, 2)), letter("y")))),
                          times(MINUS_ONE, I_UNIT)), ") this is the secular equation:"),
            (Line(_cotangent(), times(number(Fraction(-1, 2)), I_UNIT, TAU)),),
        ),
    )


def _imperfect_secular() -> tuple[Step, ...]:
    """K = (1 - (1 - q) P) U; on the detector an eigenvector obeys its own equation, with c = (1 + q)/(1 - q)."""
    phase = call("exp", times(MINUS_ONE, I_UNIT, EPS, TAU))
    q, missed_part = letter("q"), plus(ONE, times(MINUS_ONE, letter("q")))
    step = times(plus(ONE, times(MINUS_ONE, missed_part, P)), U)
    inside = times(U, power(plus(phase, times(MINUS_ONE, U)), MINUS_ONE))
    return (
        Step(
            ("An ask without a click leaves what is off the detector as it is and multiplies what is on it by ",
             q, " = ", call("sqrt", plus(ONE, times(MINUS_ONE, letter("eta")))),
             ". A level is a slow eigenvalue of that step,"),
            (Line(times(step, operator("|phi>")), times(phase, operator("|phi>"))),),
            where=("its energy is the real part of ", EPS, " and its rate, of probability, is minus twice the "
                   "imaginary part; the fast ones fade by about ", q, " an ask.",),
        ),
        Step(
            ("Solved for ", operator("|phi>"), " with its amplitude on the detector after evolving as given, that "
             "amplitude drops out:"),
            (Line(ONE, times(MINUS_ONE, missed_part, BRA, inside, KET)),),
        ),
        Step(
            ("Written with a cotangent (",
             power(plus(call("exp", times(I_UNIT, letter("y"))), MINUS_ONE), MINUS_ONE), " is ",
             times(number(Fraction(-1, 2)), plus(ONE, times(I_UNIT, call("cot", times(number(Fraction(1, 2)),
                                                                                   letter("y")))))),
             ") this is the secular equation:"),
            (Line(_cotangent(), times(number(Fraction(-1, 2)), I_UNIT, letter("c"), TAU)),),
            where=("with ", letter("c"), " = ", times(plus(ONE, q), power(missed_part, MINUS_ONE)), ", which is 1 for "
                   "a detector that never misses.",),
        ),
    )


def _cotangent() -> Formula:
    half = times(number(Fraction(1, 2)), TAU)
    return times(half, BRA, call("cot", times(plus(H, times(MINUS_ONE, EPS)), half)), KET)


def _expanded(perfect: bool) -> Step:
    n = letter("n")
    tail = Formula("sum", ("n", ONE, constant("infinity"), times(
        power(MINUS_ONE, n), operator("B", "2n"), inverse(call("factorial", times(number(2), n))),
        power(TAU, times(number(2), n)), BRA,
        power(plus(H, times(MINUS_ONE, EPS)), plus(times(number(2), n), MINUS_ONE)), KET)))
    resolvent = times(BRA, power(plus(H, times(MINUS_ONE, EPS)), MINUS_ONE), KET)
    first = times(number(Fraction(-1, 2)), I_UNIT, *(() if perfect else (letter("c"),)), TAU)
    return Step(
        ("and with the cotangent's series, ", operator("B", "2n"), " Bernoulli's numbers:"),
        (Line(resolvent, plus(first, times(MINUS_ONE, tail))),),
    )


def on_this_graph(secular: Formula, name: str) -> tuple[Step, ...]:
    return (
        Step(
            ("On this graph, everything brought to one side (what is left out is of higher order in ", TAU, "):"),
            (Line(letter("F"), secular),),
            earns="levels.secular" if name == "E" else None,
        ),
    )


def reduction(perfect: bool) -> tuple[Step, ...]:
    k = letter("k")
    total = Formula("sum", ("k", ZERO, constant("infinity"), times(power(TAU, k), operator("G", "k"))))
    slow = "After a few asks a slow state is left, and a step multiplies its part off the detector by "
    return (
        Step(
            ("The undetected step is " if perfect else slow,
             call("exp", times(MINUS_ONE, I_UNIT, TAU, operator("G"))), ". The levels are the eigenvalues of"),
            (Line(operator("G"), total),),
            where=("taken on the bright space. Each level of ", A, " is reduced in turn: the family on the space that "
                   "starts as its eigenspace, minus the level, divided by ", TAU, ", is a family again, of lower order "
                   "and smaller size; what is degenerate splits at the order that can split it.",),
        ),
    )


def level(
    index: int, found: Any, in_tau: Callable[[Mapping[int, Formula]], Formula], remainders: tuple[int, int]
) -> tuple[Step, ...]:
    """The lines of one level, or of all roots of one factor; `remainders` are those of energy and rate."""
    who = f"Level {index}"
    if found.place.polynomial is not None:
        who = f"Levels from {index} on, one for each root of the factor below"
    name = letter(found.place.letter)
    lines = []
    if found.place.polynomial is not None:
        lines.append(Line(polynomial_formula(found.place.polynomial, found.place.letter), ZERO))
    if found.place.polynomial is None or found.zeroth != name:
        lines.append(Line(operator("E", 0), found.zeroth))
    steps = [Step((who + ", at ", TAU, " = 0:"), tuple(lines))]
    where = () if found.place.polynomial is None else ("with ", name, " any of the roots.")
    energy = plus(in_tau(found.energy), order(power(TAU, number(remainders[0]))))
    steps.append(Step(
        ("Its energy, even in ", TAU, ","), (Line(call("Re", EPS), energy),),
        earns=f"levels.{index}.energy", where=where))
    steps.append(Step(
        ("and its rate, odd in ", TAU, ":"),
        (Line(times(number(-2), call("Im", EPS)), plus(in_tau(found.rate), order(power(TAU, number(remainders[1]))))),),
        earns=f"levels.{index}.rate"))
    if found.weight is not None:
        steps.append(Step(
            ("The start's weight on it, as ", TAU, " goes to 0:"), (Line(operator("w", index), found.weight),),
            earns=f"levels.{index}.weight"))
    return tuple(steps)


def dark(claims: Sequence[Claim]) -> tuple[Step, ...]:
    """The dark levels, each with its multiplicity."""
    out = []
    for energy, multiplicity in zip(claims[::2], claims[1::2], strict=True):
        value = energy.value
        shown = value.polynomial if isinstance(value, PerRoot) else value
        count = multiplicity.value
        if not isinstance(shown, Formula) or not isinstance(count, Formula):
            raise TypeError("a dark level is a formula with a count")
        line = Line(shown, ZERO) if isinstance(value, PerRoot) else Line(operator("E"), shown)
        reason = ("A dark level, ", count, "-fold; its rate is 0 at every ", TAU, ":")
        out.append(Step(reason, (line,), earns=energy.id))
    return tuple(out)
