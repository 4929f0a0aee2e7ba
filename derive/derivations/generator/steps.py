"""The generator's derivation written out: reason, lines, and what each line earns."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from fractions import Fraction

from derive.algebra.local import Block, Local, Moments
from derive.algebra.words import A, Word, Words, words_of_degree
from derive.derivations.watched import Watched, rotated
from derive.exact.sparse import Vector
from derive.formula.tree import (
    I_UNIT,
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
    order,
    plus,
    power,
    times,
)
from derive.record.said import Line, Matrix, Step

H, P, Q, D, U, K, G = (operator(name) for name in ("H", "P", "Q", "D", "U", "K", "G"))
D_DAGGER, V, V_DAGGER, C = operator("D", None, True), operator("V"), operator("V", None, True), operator("C")
AT_TAU = times(MINUS_ONE, I_UNIT, TAU)  # -i tau
MOMENTS_SHOWN = 40  # places (i, j) of one order that are still printed


def one_undetected_step() -> tuple[Step, ...]:
    m, k = letter("m"), letter("k")
    step = times(Q, operator("U"), Q)
    power_sum = Formula("sum", ("m", ONE, constant("infinity"), times(
        power(AT_TAU, m), power(call("factorial", m), MINUS_ONE), Q, power(H, m), Q)))
    generator_sum = Formula("sum", ("k", ZERO, constant("infinity"), times(power(TAU, k), operator("G", "k"))))
    return (
        Step(
            ("Between two asks the state evolves freely; a “no” removes its part on the detector. "
             "One undetected step on the sites that are left is therefore",),
            (Line(K, step), Line(U, call("exp", times(MINUS_ONE, I_UNIT, H, TAU)))),
            where=("with ", P, " the detector's projector, ", Q, " = 1 − ", P, ", and ħ = 1.",),
        ),
        Step(
            ("The step is written as an evolution for the time ", TAU, " under a generator of its own:"),
            (Line(K, call("exp", times(AT_TAU, G))), Line(G, generator_sum)),
        ),
        Step(
            ("Expanding ", U, " and taking the logarithm, which on range(", Q, ") starts from the identity:"),
            (Line(times(AT_TAU, G), call("log", plus(ONE, power_sum))),),
        ),
    )


def cut_into_blocks(degrees: int) -> tuple[Step, ...]:
    """The blocks, and (H^m)_QQ in words for m = 1 ... degrees."""
    blocks = (
        Line(operator("A"), times(Q, H, Q), ":="),
        Line(V, times(Q, H, D), ":="),
        Line(C, times(D_DAGGER, H, D), ":="),
        Line(operator("B", "k"), times(V, power(C, letter("k")), V_DAGGER), ":="),
    )
    words = tuple(
        Line(times(Q, power(H, number(m)) if m > 1 else H, Q), _sum_of_words(words_of_degree(m)))
        for m in range(1, degrees + 1)
    )
    return (
        Step(("The detector's orthonormal vectors are the columns of ", D, "; they cut ", H, " into blocks:"), blocks),
        Step(
            ("A path of ", letter("m"), " steps that begins and ends off the detector either stays off it (",
             operator("A"), ") or dips into it, stays there ", letter("k"), " steps and comes back (",
             operator("B", "k"), ", which takes ", plus(letter("k"), number(2)),
             " steps). Every such path occurs once:"),
            words,
        ),
    )


def logarithm(words: list[Words]) -> tuple[Step, ...]:
    """L_d from the compositions of d, then collected."""
    lines = []
    for d in range(1, len(words) + 1):
        lines.append(Line(operator("L", d), _compositions_sum(d)))
        if d > 1:
            lines.append(Line(operator("L", d), _collected(words[d - 1], Fraction(1))))
    return (
        Step(
            ("With ", operator("F", "m"), " for ", times(Q, power(H, letter("m")), Q),
             " divided by ", call("factorial", letter("m")), ", the coefficient ", operator("L", "d"), " of ",
             power(AT_TAU, letter("d")), " in the logarithm collects the products whose degrees add up to ",
             letter("d"), "; inserting the words, all powers of ", operator("A"), " alone cancel but the first:"),
            tuple(lines),
            fold=True,
        ),
    )


def universal(words: list[Words]) -> tuple[Step, ...]:
    """G_k = (-i)^k L_(k+1) in words, each earning its universal entry."""
    first = Step(
        ("Comparing powers of ", TAU, " on both sides:"),
        (Line(operator("G", "k"), times(power(times(MINUS_ONE, I_UNIT), letter("k")), operator("L", "k+1"))),),
    )
    reasons = {0: "The order zero keeps what was left of the Hamiltonian:",
               1: "The first order is where probability leaves; it is anti-Hermitian:"}
    rest = tuple(
        Step(
            (reasons.get(k, f"Order {k}, {'Hermitian' if k % 2 == 0 else 'anti-Hermitian'}:"),),
            (Line(operator("G", k), in_words(log, k)),),
            earns=f"generator.universal.{k}",
        )
        for k, log in enumerate(words)
    )
    return (first, *rest)


def local_form(rank: int) -> tuple[Step, ...]:
    i, j, k, m = (letter(name) for name in "ijkm")
    inner = times(power(operator("A"), i), V, _g("k", "ij"), V_DAGGER, power(operator("A"), j))
    total = Formula("sum", ("i,j", ZERO, plus(k, MINUS_ONE), inner))
    size = "a number" if rank == 1 else f"a {rank} × {rank} matrix"
    return (
        Step(
            ("Every word but ", operator("A"), " itself begins with ", times(power(operator("A"), i), V),
             " and ends with ", times(V_DAGGER, power(operator("A"), j)),
             f"; what lies between is {size} made of ", C, " and of the moments"),
            (Line(operator("mu", "m"), times(V_DAGGER, power(operator("A"), m), V), ":="),),
        ),
        Step(
            ("so that for ", k, " ≥ 1 the graph enters through ", C, ", the moments and the vectors ",
             times(power(operator("A"), i), V), " alone (terms with ", plus(i, j), " ≥ ", k, " are absent):"),
            (Line(operator("G", "k"), total),),
        ),
    )


def on_this_graph(watched: Watched, krylov: list[list[Vector]], moments: Moments) -> tuple[Step, ...]:
    """D, C, mu_m and A^i V for the graph at hand."""
    spans = tuple(
        Line(_column("d", a, watched.detector.rank), _kets(watched, v)) for a, v in enumerate(watched.d)
    )
    numbers = [Line(C, _block(moments.c)), *(Line(operator("mu", m), _block(b)) for m, b in enumerate(moments.mu))]
    vectors = [
        Line(times(_a_power(i), _column("v", a, watched.detector.rank)), _kets(watched, v))
        for i, columns in enumerate(krylov) for a, v in enumerate(columns)
    ]
    return (
        Step(("On this graph the detector is spanned by",), spans),
        Step(("and reading ", C, " and the moments off the Hamiltonian:",), tuple(numbers), fold=len(numbers) > 4),
        Step(
            ("The columns of ", V, " are ", _column("v", 0, watched.detector.rank),
             *((" and so on" if watched.detector.rank > 1 else ""),),
             "; applying ", operator("A"), " again and again carries them outwards one site at a time:"),
            tuple(vectors), fold=len(vectors) > 4,
        ),
    )


def coefficients(logs: list[Local], rank: int) -> tuple[Step, ...]:
    """g^(k)_ij for k >= 1, i <= j (the others by Hermiticity of L_d)."""
    lines = []
    for k, log in enumerate(logs[1:], start=1):
        if len(log.local) <= MOMENTS_SHOWN:
            lines += [Line(_g(k, f"{i}{j}"), _rotated_block(b, k)) for (i, j), b in sorted(log.local.items()) if i <= j]
    if not lines:
        return ()
    why = ("; the ones with ", letter("i"), " > ", letter("j"), " follow, since ", operator("L", "d"), " is Hermitian")
    return (
        Step(
            ("The logarithm, taken with these numbers in place of the words, gives the coefficients", *why, ":"),
            tuple(lines), fold=len(lines) > 4,
        ),
    )


def inserted(k: int, matrix: Matrix) -> Step:
    reason = "Cutting the detector out of H:" if k == 0 else f"Inserted, order {k} in the site basis:"
    return Step((reason,), (Line(operator("G", k), matrix),), earns=f"generator.{k}")


def put_together(highest: int) -> Step:
    parts = [times(power(TAU, number(k)) if k > 1 else TAU if k else ONE, operator("G", k)) for k in range(highest + 1)]
    rest = order(power(TAU, number(highest + 1)) if highest else TAU)
    return Step(("Together:",), (Line(G, plus(*parts, rest)),), earns="generator.truncated")


# -- words and blocks as formulas


def in_words(log: Words, k: int) -> Formula:
    """(-i)^k L_(k+1) over the operators A and B_0, B_1, ..."""
    sign = Fraction((-1) ** ((k + 1) // 2))
    inner = _collected(log, sign)
    if k % 2 == 0:
        return inner
    if inner.head == "times" and inner.args[0].head == "number":
        return times(inner.args[0], I_UNIT, *inner.args[1:])
    return times(I_UNIT, inner)


def _collected(log: Words, front: Fraction) -> Formula:
    """Words of the same letters and coefficient in one bracket, short words first."""
    groups: dict[tuple[Fraction, Word], list[Word]] = defaultdict(list)
    for word in sorted(log.terms, key=lambda w: (len(w), [-x for x in w])):
        groups[log.terms[word] * front, tuple(sorted(word))].append(word)
    return plus(*(times(number(c), _sum_of_words(iter(ws))) for (c, _), ws in groups.items()))


def _sum_of_words(words: Iterator[Word]) -> Formula:
    return plus(*(_word(w) for w in sorted(words, key=lambda w: (-len(w), w))))


def _word(word: Word) -> Formula:
    return _in_runs([operator("A") if x == A else operator("B", x) for x in word])


def _product_of_runs(name: str, parts: tuple[int, ...]) -> Formula:
    return _in_runs([operator(name, m) for m in parts])


def _in_runs(letters: list[Formula]) -> Formula:
    """The letters in order, runs of one letter as powers."""
    runs: list[tuple[Formula, int]] = []
    for x in letters:
        if runs and runs[-1][0] == x:
            runs[-1] = (x, runs[-1][1] + 1)
        else:
            runs.append((x, 1))
    return times(*(x if n == 1 else power(x, number(n)) for x, n in runs))


def _compositions_sum(d: int) -> Formula:
    """sum_p (-1)^(p+1)/p sum_(m_1+...+m_p = d) F_m1 ... F_mp."""
    terms = []
    for p in range(1, d + 1):
        products = [_product_of_runs("F", parts) for parts in _compositions(d, p)]
        terms.append(times(number(Fraction((-1) ** (p + 1), p)), plus(*products)))
    return plus(*terms)


def _compositions(d: int, p: int) -> Iterator[tuple[int, ...]]:
    if p == 1:
        yield (d,)
        return
    for first in range(1, d - p + 2):
        for rest in _compositions(d - first, p - 1):
            yield (first, *rest)


def _g(k: int | str, place: str) -> Formula:
    return operator(f"g^{{({k})}}", place)


def _column(name: str, a: int, rank: int) -> Formula:
    return operator(f"|{name}>", a if rank > 1 else None)


def _a_power(i: int) -> Formula:
    return ONE if i == 0 else operator("A") if i == 1 else power(operator("A"), number(i))


def _kets(watched: Watched, v: Vector) -> Formula:
    """sum_x v_x |x>."""
    field = watched.field
    return plus(*(times(field.formula(v[x]), operator(f"|{watched.space.name(x)}>")) for x in sorted(v)))


def _block(b: Block) -> Formula | Matrix:
    return _rotated_block(b, 0)


def _rotated_block(b: Block, k: int) -> Formula | Matrix:
    """(-i)^k b: a formula for rank one, else a small matrix."""
    if len(b) == 1:
        return rotated(b[0][0], k)
    rows = tuple((a, tuple((c, rotated(x, k)) for c, x in enumerate(row) if x)) for a, row in enumerate(b))
    return Matrix(len(b), (), rows)


