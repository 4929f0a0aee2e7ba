"""The derivation of the total detection probability written out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from derive.algebra.polynomial import Polynomial, polynomial_formula
from derive.derivations.sight import Sight
from derive.derivations.stated import is_open
from derive.formula.text import text
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
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

VECTORS_SHOWN = 12  # bright vectors printed one by one
H, U, P, E = operator("H"), operator("U"), letter("P"), letter("E")
TWO = number(2)


def written(sight: Sight, total: Formula) -> tuple[Step, ...]:
    """From the sum over asks to the numbers; `total` is the generic value."""
    found = (*_bright_space(sight), *_seen(sight), _insert(sight, total))
    return (_sum_over_asks(), _sum_over_levels(), *found, *_counted(sight))


def _sum_over_asks() -> Step:
    n = letter("n")
    amplitude = times(operator("D", None, True), U, power(times(operator("Q"), U), plus(n, MINUS_ONE)), letter("psi"))
    total = Formula("sum", ("n", ONE, constant("infinity"), operator("F", "n")))
    return Step(
        ("The first click comes at ask ", n, " with the probability",),
        (Line(operator("F", "n"), power(call("abs", amplitude), TWO)), Line(operator("P", "det"), total)),
        where=("with ", operator("D"), " the detector's states and ", operator("Q"), " = 1 − ",
               times(operator("D"), operator("D", None, True)), "."),
    )


def _sum_over_levels() -> Step:
    inner = times(power(call("abs", operator("c", "l")), TWO), power(operator("p", "l"), MINUS_ONE))
    total = Formula("sum", ("l", ONE, letter("w"), inner))
    return Step(
        ("What ", U, " never brings to the detector is dark; the rest is finite and leaks at every turn, so all of it "
         "is detected in the end. One state ", operator("d"), " sees one direction of every level, and",),
        (Line(operator("P", "det"), total),),
        where=("with ", operator("p", "l"), " the weight of the level in ", operator("d"), " and ", operator("c", "l"),
               " = ", times(operator("<d|"), operator("E", "l"), operator("|psi>")),
               ", ", operator("E", "l"), " the level's projector; several states see the span of what ", H,
               " reaches from them."),
    )


def _bright_space(sight: Sight) -> tuple[Step, ...]:
    j = letter("j")
    i, image = operator("u", "i"), times(H, operator("u", "j"))
    along = times(i, operator("u", "i", True), image, power(operator("n", "i"), MINUS_ONE))
    rule = Line(operator("u", "j+1"), plus(image, times(MINUS_ONE, Formula("sum", ("i", ZERO, j, along)))))
    shown = sight.space.basis[:VECTORS_SHOWN]
    vectors = tuple(Line(operator("u", k), sight.explored.kets(v)) for k, v in enumerate(shown))
    norms = [sight.field.formula(n) for n in sight.space.norms[:VECTORS_SHOWN]]
    lengths = tuple(Line(operator("n", k), n) for k, n in enumerate(norms))
    return (
        Step(
            ("The bright space grows from the detector; each new vector is made orthogonal to the earlier ones, and "
             "one that vanishes ends the search. Nothing is normalised, so no root appears:",),
            (rule, *vectors), fold=len(vectors) > 4,
            where=("for ", j, f" = 0 … {sight.space.size - 1}."),
        ),
        Step(("Their squared lengths are",), lengths, fold=len(lengths) > 4),
    )


def _seen(sight: Sight) -> tuple[Step, ...]:
    lines = tuple(Line(polynomial_formula(f, "E"), ZERO) for f, _ in sight.factors if len(f) <= 9)
    long = [len(f) - 1 for f, _ in sight.factors if len(f) > 9]
    more = f" and those of {len(long)} irreducible factor(s) of degree {', '.join(map(str, long))}" if long else ""
    return (Step((f"The energies seen are the roots of{more or ''}",), lines),) if lines or long else ()


def _insert(sight: Sight, value: Formula) -> Step:
    left = operator("P", "det")
    if not sight.generic:
        return Step(("Weights and overlaps of levels with one phase are added before the square is taken:",),
                    (Line(left, value),), earns="detection.total")
    overlap = power(call("abs", times(operator("u", "j", True), letter("psi"))), TWO)
    inner = times(overlap, power(operator("n", "j"), MINUS_ONE))
    total = Formula("sum", ("j", ZERO, number(sight.space.size - 1), inner))
    return Step(
        ("The sum over levels is the squared length of the bright part of ", letter("psi"),
         ", and any orthogonal basis gives it:"),
        (Line(left, total), Line(left, value)),
        earns="detection.total",
    )


def _counted(sight: Sight) -> tuple[Step, ...]:
    names = {"bright_dimension": sight.bright, "dark_dimension": sight.size - sight.bright, "phases": sight.phases}
    reasons = {
        "bright_dimension": "The vectors found span the bright space:",
        "dark_dimension": "What is orthogonal to them is never seen:",
        "phases": "The phases seen, each counted once, are the mean number of asks until a return:"
        if len(sight.explored.d) == 1 else "The phases seen, each counted once:",
    }
    symbols = {"bright_dimension": "bright", "dark_dimension": "dark", "phases": "w"}
    return tuple(
        Step((reasons[k],), (Line(operator("N", symbols[k]) if k != "phases" else letter("w"), number(n)),),
             earns=f"detection.{k}")
        for k, n in names.items()
    )


def split(shares: Mapping[str, Formula]) -> tuple[Step, ...]:
    """Stein's equation for the detectors told apart, and the probabilities it earns."""
    if not shares:
        return ()
    y, k = operator("Y", "w"), operator("K")
    click = times(operator("eta", "w"), operator("U", None, True), operator("P", "w"), U)
    equation = Line(plus(y, times(MINUS_ONE, operator("K", None, True), y, k)), click)
    first = Step(
        ("Told apart, detector ", letter("w"), " clicks first with the expectation of the solution of",), (equation,),
        where=("on the bright space, ", k, " being one interval and a \"no\" of every detector."),
    )
    return (first, *(_one_share(name, value) for name, value in shares.items()))


def _one_share(name: str, value: Formula) -> Step:
    inner = times(operator("<psi|"), operator("Y", name), operator("|psi>"))
    line = Line(operator("S", name), inner if is_open(value) else value)
    return Step((f"Detector {name}:",), (line,), earns=f"detection.splitting.{name}")


def levels_note(words: str, factors: Sequence[Polynomial]) -> tuple[Prose, ...]:
    """A sentence that ends in the levels' equations, a factor that occurs k times once; none where there are none."""
    counted: list[tuple[Polynomial, int]] = []
    for f in factors:
        place = next((k for k, (g, _) in enumerate(counted) if g == f), None)
        if place is None:
            counted.append((f, 1))
        else:
            counted[place] = (f, counted[place][1] + 1)
    out: list[str | Formula] = [words, " "]
    for k, (f, times_found) in enumerate(counted):
        out += [", " if k else "", polynomial_formula(f, "E"), " = 0"]
        out += [f" ({times_found} times)"] if times_found > 1 else []
    return ((*out, "."),) if factors else ()


def alike_note(names: Sequence[str]) -> Prose:
    listed = ", ".join(names)
    return (f"Sites {listed} look alike to the detector: every difference between them is dark, and a start on any one "
            f"of them is detected with probability 1/{len(names)} at most.",)


def merged_note(sight: Sight) -> Prose:
    """Which energies are seen as one at this interval."""
    groups = sight.groups
    energies = sight.energies or []
    together = "; ".join(", ".join(text(energies[k]) for k in g) for g in groups if len(g) > 1)
    here = times(TAU)
    if not together:
        return ("At this interval ", here, " = ", sight.setting.interval.length, " all seen phases are different.")
    return ("At this interval ", here, " = ", sight.setting.interval.length,
            f" these energies have one phase and are seen as one: {together}.")
