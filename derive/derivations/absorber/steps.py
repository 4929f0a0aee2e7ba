"""The absorbers' derivation written out: reason, lines, and what each line earns."""

from __future__ import annotations

from fractions import Fraction

from derive.algebra.paths import A, C, Paths, V, W, Word
from derive.algebra.slow import Series
from derive.derivations.absorber.maps import Maps
from derive.derivations.imperfect import COTH, Imperfect
from derive.exact.field import Element
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
    number,
    operator,
    order,
    plus,
    power,
    rebuild,
    times,
)
from derive.record.said import Expansion, Line, Matrix, Prose, Step

H, P, Q, U, K, D = (operator(name) for name in ("H", "P", "Q", "U", "K", "D"))
EPS, KAPPA, ETA, CHI, PSI = (operator(name) for name in ("epsilon", "kappa", "eta", "chi", "psi"))
R, Y, L, G, S, X, Z, N = (operator(name) for name in ("R", "Y", "L", "G", "S", "X", "Z", "N"))
RESOLVENT = operator("r")
HALF_KAPPA = times(number(Fraction(1, 2)), KAPPA)
ABOVE_DETECTOR = plus(H, times(MINUS_ONE, EPS))
WORDS_SHOWN = 3  # orders of a map that are printed in words; on the graph all of them are
TITLES = {"plain": "plain absorber", "dressed": "dressed absorber", "ancilla": "lossy ancilla", "cascade": "cascade"}


def _coth(perfect: bool) -> tuple[Formula, ...]:
    """coth(kappa/2) as a factor, which a perfect detector does not show."""
    return () if perfect else (call("coth", HALF_KAPPA),)


def one_step(perfect: bool) -> tuple[Step, ...]:
    """K, and what an efficiency does to it."""
    evolution = Line(U, call("exp", times(MINUS_ONE, I_UNIT, H, TAU)))
    where: Prose = ("with ", P, " the detector's projector, ", Q, " = 1 − ", P, ", and ħ = 1.")
    if perfect:
        reason = "One undetected interval: the state evolves, then a “no” removes its part on the detector:"
        return (Step((reason,), (Line(K, times(Q, U)), evolution), where=where),)
    a = operator("a")
    lines = (
        Line(K, times(plus(ONE, times(MINUS_ONE, a, P)), U)),
        evolution,
        Line(a, plus(ONE, times(MINUS_ONE, call("sqrt", plus(ONE, times(MINUS_ONE, ETA)))))),
        Line(plus(ONE, times(MINUS_ONE, a)), call("exp", times(MINUS_ONE, KAPPA))),
    )
    reason = "A “no” of a detector that clicks with probability η leaves a part of the amplitude it was asked about:"
    return (Step((reason,), lines, where=where),)


def secular(perfect: bool) -> tuple[Step, ...]:
    """From K psi = exp(-i eps tau) psi to P (H - eps)^-1 P = Y(eps)."""
    turned = operator("W")
    scaled = times(number(Fraction(1, 2)), ABOVE_DETECTOR, TAU)
    strength = number(1) if perfect else call("coth", HALF_KAPPA)
    level = Line(times(K, PSI), times(call("exp", times(MINUS_ONE, I_UNIT, EPS, TAU)), PSI))
    missing = (ONE,) if perfect else (operator("a"),)
    moved = Line(times(plus(turned, MINUS_ONE), PSI), times(*missing, P, turned, PSI))
    cot = Line(times(P, call("cot", scaled), P, CHI), times(MINUS_ONE, I_UNIT, strength, CHI))
    y = plus(
        times(number(Fraction(-1, 2)), I_UNIT, TAU, *_coth(perfect)),
        times(number(Fraction(1, 12)), power(TAU, number(2)), P, ABOVE_DETECTOR, P),
        times(number(Fraction(1, 720)), power(TAU, number(4)), P, power(ABOVE_DETECTOR, number(3)), P),
        order(power(TAU, number(6))),
    )
    argument = operator("y")
    laurent = plus(
        inverse(argument), times(number(Fraction(-1, 3)), argument),
        times(number(Fraction(-1, 45)), power(argument, number(3))), order(power(argument, number(5))),
    )
    return (
        Step(
            ("A level ", EPS, " of the undetected evolution turns by the same phase in every interval; with ",
             turned, " = exp(−i(", H, " − ", EPS, ")", TAU, "):"),
            (level, moved),
        ),
        Step(
            ("Solving for the detector's part ", CHI, " = ", P, turned, PSI, " and writing ",
             times(turned, inverse(plus(turned, MINUS_ONE))), " as one half of 1 plus i times a cotangent:"),
            (cot,),
        ),
        Step(("The cotangent's expansion about 0",), (Line(call("cot", argument), laurent),)),
        Step(
            ("turns this into an equation for the resolvent on the detector, to be met by any potential that stands in "
             "for the asking:",),
            (Line(RESOLVENT, times(P, inverse(ABOVE_DETECTOR), P), ":="), Line(RESOLVENT, Y), Line(Y, y)),
        ),
    )

def parameters(detector: Imperfect, closed: dict[str, Formula]) -> tuple[Step, ...]:
    """Plain, dressed, ancilla: which part of Y they keep, and the numbers that follow."""
    gamma, dressed, s = operator("Gamma"), operator("Gamma", "d"), operator("s")
    coupling, loss, c = operator("k", "a"), operator("l", "a"), operator("C")
    minus_i = times(MINUS_ONE, I_UNIT)
    above = plus(c, times(MINUS_ONE, EPS))
    share = plus(ONE, times(MINUS_ONE, power(s, number(-2))))
    plain = Step(
        ("A potential −i", gamma, " on the detector has ", RESOLVENT, " = −i/", gamma,
         ". Keeping the first term of ", Y, ":"),
        (Line(gamma, closed["plain.strength"]),), earns="absorber.plain.strength",
    )
    dressing = Step(
        ("With its potential −i", dressed, " and its couplings to the rest multiplied by ", s, ", the detector has"),
        (Line(inverse(RESOLVENT), plus(times(share, above), times(I_UNIT, dressed, power(s, number(-2))))),),
        where=("with ", c, " = ", D, "†", H, D, "."),
    )
    second = Step(
        ("The inverse of ", Y, " begins with"),
        (Line(inverse(Y), _inverse_y(detector, above)),),
    )
    both = Step(
        ("Comparing the terms without and with ", above, ":"),
        (Line(s, closed["dressed.coupling"]),), earns="absorber.dressed.coupling",
    )
    strength = Step(("and",), (Line(dressed, closed["dressed.strength"]),), earns="absorber.dressed.strength")
    beside = Step(
        ("An auxiliary site at the detector's own energy, coupled to it by ", coupling, " and losing at ", loss,
         " (one beside each of its vectors), leaves the system's couplings alone and has ", Y, " itself as resolvent:"),
        (Line(RESOLVENT, times(power(coupling, number(-2)), plus(above, times(minus_i, loss)))),),
    )
    found = Step(
        ("Comparing with the first two terms of ", Y, ":"),
        (Line(coupling, closed["ancilla.coupling"]),), earns="absorber.ancilla.coupling",
    )
    lost = Step(("and",), (Line(loss, closed["ancilla.loss"]),), earns="absorber.ancilla.loss")
    return (plain, dressing, second, both, strength, beside, found, lost)


def _inverse_y(detector: Imperfect, above: Formula) -> Formula:
    """(2 i/tau) th + (th^2/3) (C - eps) + O(tau)."""
    perfect = detector.eta == ONE
    tanh = () if perfect else (call("tanh", HALF_KAPPA),)
    squared = () if perfect else (power(call("tanh", HALF_KAPPA), number(2)),)
    first = times(number(2), I_UNIT, *tanh, inverse(TAU))
    return plus(first, times(number(Fraction(1, 3)), *squared, above), order(TAU))


def cascade(auxiliary: Matrix, perfect: bool) -> list[Step]:
    """The network that keeps Y through tau^5."""
    b, delta, c = operator("b"), operator("delta"), operator("C")
    above = plus(c, times(MINUS_ONE, EPS))
    mu0, mu1 = operator("mu", 0), operator("mu", 1)
    cube = plus(power(above, number(3)), times(number(2), mu0, above), mu1, times(MINUS_ONE, c, mu0))
    fraction = times(TAU, plus(
        times(plus(times(TAU, above), delta),
              inverse(plus(b, times(number(Fraction(-1, 5)), power(TAU, number(2)), power(above, number(2)))))),
        times(number(Fraction(-1, 2)), I_UNIT, *_coth(perfect)),
    ))
    return [
        Step(
            ("For a detector of rank one the next term of ", Y, " sees the graph through two moments, ", mu0, " and ",
             mu1, ":"),
            (Line(times(P, power(ABOVE_DETECTOR, number(3)), P), cube),),
        ),
        Step(
            ("A fraction in ", EPS, " with the same expansion through ", power(TAU, number(5)), " is"),
            (
                Line(Y, plus(fraction, order(power(TAU, number(6))))),
                Line(b, times(number(12), inverse(plus(ONE, times(number(Fraction(1, 20)), _tau(2), mu0))))),
                Line(delta, times(number(Fraction(1, 60)), _tau(3), plus(mu1, times(MINUS_ONE, c, mu0)))),
            ),
        ),
        Step(
            ("Its inverse, taken apart as a continued fraction, is that of a potential on the detector (row 0) with "
             "two sites in a row beside it (rows 1 and 2):",),
            (Line(operator("M"), auxiliary),), earns="absorber.cascade",
        ),
    ]


def _moment() -> Formula:
    """D†(H - C)^k D."""
    apart = plus(operator("H"), times(MINUS_ONE, operator("C")))
    return times(operator("D", None, True), power(apart, letter("k")), operator("D"))


def long_cascade(auxiliary: Matrix) -> list[Step]:
    """The chain of M sites by a continued fraction."""
    c, m, x, f = operator("C"), auxiliary.size - 1, operator("x"), operator("F")
    above = plus(c, times(MINUS_ONE, EPS))
    j, k = letter("j"), letter("k")
    rest = plus(times(number(2), j), MINUS_ONE, times(MINUS_ONE, k))
    chosen = call("binomial", plus(times(number(2), j), MINUS_ONE), k)
    term = times(operator("beta", "j"), chosen, operator("nu", "2j-1-k"), power(TAU, rest))
    return [
        Step(
            ("For a detector of rank one ", Y, f", as far as a chain of {m} sites reaches, is, with ", x, " = ",
             times(TAU, above), " and the moments ", operator("nu", "k"), " = ", _moment(), ","),
            (
                Line(Y, times(TAU, plus(f, times(number(Fraction(-1, 2)), I_UNIT, call("coth", HALF_KAPPA))))),
                Line(f, Formula("sum", ("k", ZERO, number(2 * m - 1), times(operator("f", "k"), power(x, k))))),
                Line(operator("f", "k"), Formula("sum", ("j", ONE, number(m), term))),
            ),
            where=("with ", operator("beta", "j"), " from 1/y − cot(y/2)/2 = y/12 + y³/720 + ... and no negative "
                   "powers of ", TAU, "."),
        ),
        Step(
            ("The fraction in ", x, f" that agrees through x^{2 * m - 1} (Padé), taken apart from the outside, is a "
             "chain of sites beside the detector (row 0), each parameter as far in τ as it is needed:",),
            (Line(operator("M"), auxiliary),), earns="absorber.cascade",
        ),
    ]


def levels_counted(kind: str, powers: tuple[int, int], weak: bool) -> list[Step]:
    """Orders read off the secular equation alone."""
    energy, rate = (order(power(TAU, number(p))) for p in powers)
    if weak:
        start: Prose = ("With ", KAPPA, f" vanishing with the interval, energies and rates of the {TITLES[kind]} are "
                        "wrong alike, energies by")
    else:
        start = (f"The secular equation of the {TITLES[kind]} is met so far that energies are wrong by",)
    return [
        Step(start, (Line(operator("delta", "E"), energy),), earns=f"absorber.{kind}.energy_error"),
        Step(("and rates by",), (Line(operator("delta", "gamma"), rate),), earns=f"absorber.{kind}.rate_error"),
    ]


def slow_subspaces() -> list[Step]:
    """What is compared: generators of the slow states, made similar by a local map."""
    k, n, l_map = K, operator("n"), L
    absorber = operator("H", "abs")
    inside = times(Q, call("exp", times(MINUS_ONE, I_UNIT, absorber, operator("t"))), Q)
    return [
        Step(
            ("Off the detector both evolutions follow their slow states, those whose part on the detector (and on what "
             "is attached to it) is a function of the rest, right and left:",),
            (
                Line(times(k, plus(Q, X)), times(plus(Q, X), call("exp", times(MINUS_ONE, I_UNIT, G, TAU)))),
                Line(times(absorber, plus(Q, operator("X", "abs"))), times(plus(Q, operator("X", "abs")), S)),
            ),
            where=("and ", Z, " for the left ones; ", N, " = 1 + ", Z, X, ". All follow order by order in ", TAU, "."),
        ),
        Step(
            ("A map ", l_map, " that touches nothing far from the detector, with"),
            (Line(times(G, l_map), times(l_map, S)),),
            where=("is unique order by order as long as the levels of ", G, " and ", S, " agree, and stops where they "
                   "part. Then, with ", operator("t"), " = ", n, TAU, ","),
        ),
        Step(
            ("the measured state is the absorber's, mapped on both sides:",),
            (
                Line(times(Q, power(k, n), Q), times(l_map, inside, R)),
                Line(R, times(operator("N", "abs"), inverse(l_map), inverse(N))),
            ),
        ),
    ]


def levels_part(kind: str, maps: Maps, powers: tuple[int, int]) -> list[Step]:
    """Where the levels of an absorber part from the measured ones: energies and rates."""
    k = maps.order
    gap = in_operators(-maps.similar.gap, k)
    energy, rate = (order(power(TAU, number(p))) for p in powers)
    title = TITLES[kind]
    parts = Line(plus(times(inverse(L), G, L), times(MINUS_ONE, S)), plus(gap, order(_tau(k + 1))))
    return [
        Step((f"For the {title} the levels part at order {k}; what no map removes is",), (parts,)),
        Step(
            ("Levels are real where ", times(MINUS_ONE, I_UNIT, TAU), " is real, so energies are even in ", TAU,
             " and rates odd. Energies are wrong by",),
            (Line(operator("delta", "E"), energy),), earns=f"absorber.{kind}.energy_error",
        ),
        Step(("and rates by",), (Line(operator("delta", "gamma"), rate),), earns=f"absorber.{kind}.rate_error"),
    ]


def maps(kind: str, found: Maps, values: dict[str, Expansion]) -> list[Step]:
    """The maps in words, then on the graph."""
    told = []
    names = {
        "left": (L, found.left, f"The {TITLES[kind]}'s map on the left, in words:"),
        "right": (R, found.right, "and on the right, for starts off the detector:"),
        "from detector": (times(R, Z), found.entering, "A start on the detector is fed in as"),
        "to detector": (times(X, L), found.staying, "What a “no” leaves on the detector is"),
    }
    for side, value in values.items():
        letter_of, series, reason = names[side]
        told.append(Step((reason,), (Line(letter_of, in_series(series)),)))
        lines = tuple(
            Line(_part(letter_of, k), term)
            for k, term in zip(value.powers, value.terms, strict=True)
        )
        told.append(
            Step(("On this graph, order by order:",), lines, earns=f"absorber.{kind}.map.{side.replace(' ', '_')}",
                 fold=len(lines) > 2)
        )
    return told


def return_factor(detector: Imperfect, factor: Formula) -> tuple[Step, ...]:
    """A start on the detector: amplitudes by the first orders of Z, hence the ratio of probabilities."""
    perfect = detector.eta == ONE
    v = operator("V")
    half = number(Fraction(1, 2))
    c = () if perfect else (call("coth", HALF_KAPPA),)
    measured = times(MINUS_ONE, I_UNIT, TAU, v) if perfect else times(
        number(Fraction(-1, 2)), I_UNIT, TAU, plus(ONE, *c), v)
    absorbed = times(MINUS_ONE, half, I_UNIT, TAU, *c, v)
    return (
        Step(
            ("A start on the detector enters the slow states by the first order of ", Z, ", measured and for the plain "
             "absorber:"),
            (Line(Z, plus(measured, order(_tau(2)))), Line(operator("Z", "abs"), plus(absorbed, order(_tau(2))))),
        ),
        Step(
            ("Taken at face value the plain absorber's survival and detection are therefore too small by the factor",),
            (Line(operator("f"), factor),), earns="absorber.return_factor",
        ),
    )


def notes(weak: bool, rank: int, closed: bool) -> tuple[Prose, ...]:
    """What was left out."""
    found: list[Prose] = []
    if weak:
        found.append(("The efficiency vanishes with ", TAU, ": slow and fast states are not apart then, and no state "
                      "maps are given.",))
    if rank > 1:
        found.append(("The cascade is derived for a detector of rank one.",))
    elif not closed:
        found.append(("State maps of a cascade are given for two sites; here its levels only.",))
    return tuple(found)


# -- words as formulas


def in_series(series: Series) -> Formula:
    """sum_k x^k (words) through tau^WORDS_SHOWN, with O(...) behind it."""
    shown = min(len(series), WORDS_SHOWN + 1)
    terms = [in_operators(paths, k) for k, paths in enumerate(series[:shown]) if paths]
    return plus(*terms, order(_tau(shown)))


def in_operators(paths: Paths, k: int, powers: bool = True) -> Formula:
    """(-i tau)^k (without `powers`: (-i)^k) times the words, over A, B_k, V, V†, C; coth(kappa/2) by its name."""
    if any(not w for w in paths.terms):
        return ONE
    groups: dict[str, tuple[Formula, list[Formula]]] = {}
    for w in sorted(paths.terms, key=lambda w: (len(w), w)):
        front = _front(paths.terms[w], k, powers)
        groups.setdefault(repr(front), (front, []))[1].append(_word(w))
    return plus(*(times(front, plus(*words)) for front, words in groups.values()))


def _front(c: Element, k: int, powers: bool) -> Formula:
    """(-i)^k tau^k c, its sign in the rational in front."""
    sign = (1, -1, -1, 1)[k % 4]
    inner = _by_name(c.field.formula(c.scaled(Fraction(sign))))
    parts = inner.args if inner.head == "times" else (inner,)
    numbers = [f for f in parts if f.head == "number"]
    rest = [f for f in parts if f.head != "number"]
    return times(*numbers, *((I_UNIT,) if k % 2 else ()), *((_tau(k),) if k and powers else ()), *rest)


def _by_name(f: Formula) -> Formula:
    """coth(kappa/2) by its name, and its inverse powers as powers of tanh(kappa/2)."""
    if f.head == "letter" and f.args[0] == COTH:
        return call("coth", HALF_KAPPA)
    if f.head == "power" and f.args[0] == letter(COTH) and f.args[1].args[0] < 0:
        tanh, n = call("tanh", HALF_KAPPA), -f.args[1].args[0]
        return tanh if n == 1 else power(tanh, number(n))
    if f.head in ("plus", "times", "power"):
        return rebuild(f, tuple(_by_name(a) for a in f.args))
    return f


def _word(w: Word) -> Formula:
    """V C^k W as B_k; what begins or ends on the detector keeps its V, V† and C."""
    found: list[Formula] = []
    at = 0
    while at < len(w):
        run = 1
        while w[at] in (A, C) and at + run < len(w) and w[at + run] == w[at]:
            run += 1
        dip = _dip(w, at)
        if dip is not None:
            found.append(operator("B", dip))
            run = dip + 2
        else:
            base = {A: operator("A"), C: operator("C"), V: operator("V"), W: operator("V", None, True)}[w[at]]
            found.append(base if run == 1 else power(base, number(run)))
        at += run
    return times(*found)


def _dip(w: Word, at: int) -> int | None:
    """k where V C^k W begins at this place."""
    if w[at] != V:
        return None
    stop = at + 1
    while stop < len(w) and w[stop] == C:
        stop += 1
    return stop - at - 1 if stop < len(w) and w[stop] == W else None


def _tau(k: int) -> Formula:
    return TAU if k == 1 else power(TAU, number(k))


def _part(name: Formula, k: int) -> Formula:
    """The coefficient of tau^k of a map: its letters with the order as a subscript."""
    if name.head == "operator":
        return operator(name.args[0], k)
    return operator("".join(str(f.args[0]) for f in name.args), k)
