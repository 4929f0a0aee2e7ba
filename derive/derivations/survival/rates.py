"""How survival begins and ends to fall on an explicit graph: the mean rate at first, the slowest rate at last.

At fixed t*tau and small tau, S = w_dark + sum_j w_j exp(-Gamma_j t) (`survival.py`).  With w = sum_j w_j,

    t << 1/<Gamma>     w_dark + w exp(-<Gamma> t),   <Gamma> = sum_j w_j Gamma_j/w;   off by O((t*tau)^2)
    t >> 1/Gamma_last  w_dark + w_last exp(-Gamma_last t)                             off by what fades faster

each said to hold up to, or from, where its rate times t is 1.  Which rate is the slowest must not depend on the
letters: H holds none, or is a positive letter times a matrix of numbers.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

from derive.algebra.factor import factored
from derive.algebra.polynomial import polynomial_formula
from derive.derivations.levels.order import energies_at, reference_values
from derive.derivations.survival.interference import simple
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    free_letters,
    inverse,
    letter,
    number,
    operator,
    order,
    plus,
    power,
    replace,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Finite, Setting
from derive.record.said import Claim, Kind, Line, Step

T = letter("t")
RATE_LETTERS = ("y", "x", "lambda0", "lambda1", "lambda2")
"""Names for a rate over tau, the first one that is free."""
NEAR = 1e-9
"""Rates closer than this, in floating point and to each other, are taken for the same when the slowest is picked."""
APART, SEEN = 0.1, 1e-6
"""The last law is told where the next rate is larger by this part, and the slowest level holds this part of w."""
SMALL = Kind("limit", "as t -> 0, error O(t^2)", toward=(("t", ZERO),), error=order(power(T, number(2))))
LATE = Kind("limit", "as t -> infinity", toward=(("t", constant("infinity")),))


def rate_claims(setting: Setting, dark: Formula, bright: Formula, decays: Sequence[Any]) -> tuple[Claim, ...]:
    """Both laws and where they stop or start to hold; nothing where no rate stands out or letters decide."""
    slowest = _slowest(setting, decays) if _one_scale(setting) else []
    if not slowest:
        return ()
    mean = times(simple(times(plus(*(_mean(d) for d in decays)), inverse(bright)), setting), TAU)
    last = slowest[0][1]
    tail = plus(*(times(w, call("exp", times(MINUS_ONE, rate, T))) for w, rate in slowest))
    known = () if dark == ZERO else (dark,)
    first = plus(*known, times(bright, call("exp", times(MINUS_ONE, mean, T))))
    return (
        _law(1, first, SMALL, "t well below the inverse of the mean rate, tau -> 0 first"),
        _time("1.to", 1, mean),
        _law(2, plus(*known, tail), LATE, "t well above the inverse of the slowest rate, tau -> 0 first"),
        _time("2.from", 2, last),
    )


def _mean(decay: Any) -> Formula:
    """Weight times rate over tau, summed over all roots where there are several: a trace, which holds none of them."""
    field = None if decay.place is None else decay.place.field
    if decay.over is None or not isinstance(field, WithRoot):
        return replace(decay.mean(), {"tau": ONE})
    try:
        one = field.element(replace(times(decay.weight, decay.rate), {"tau": ONE}))
        return field.below.formula(field.trace(one))
    except (NotCovered, ZeroDivisionError):
        return replace(decay.mean(), {"tau": ONE})


def _law(which: int, value: Formula, kind: Kind, valid: str) -> Claim:
    quantity = Quantity("survival regime", (("regime", which),))
    return Claim(f"survival.regimes.{which}.law", "survival", quantity, value, kind, valid_for=valid)


def _time(part: str, which: int, rate: Formula) -> Claim:
    quantity = Quantity("crossover time", (("regime", which),))
    return Claim(f"survival.regimes.{part}", "survival", quantity, inverse(rate), valid_for="to leading order in tau")


def _one_scale(setting: Setting) -> bool:
    """Whether H holds no letter, or is one positive letter times numbers."""
    space = setting.space
    if not isinstance(space, Finite):
        return False
    entries = {f: None for row in space.rows for _, f in row}
    names = {n for f in entries for n in free_letters(f)}
    states = [f for w, v in setting.start.mixture for f in (w, *(a for _, a in v))] if setting.start else []
    states += [a for v in setting.detectors[0].vectors for _, a in v]
    if len(names) > 1 or any(free_letters(f) for f in states):
        return False
    return all(
        setting.domains()[n].is_positive
        and not any(free_letters(simple(times(f, inverse(letter(n))), setting)) for f in entries)
        for n in names
    )


def _slowest(setting: Setting, decays: Sequence[Any]) -> list[tuple[Formula, Formula]]:
    """(weight, rate) of every level of the slowest rate; empty where it does not stand out."""
    values = {**reference_values(setting), "tau": 1.0}
    every = [
        (e, w, i, d) for d in decays for i, (e, w) in enumerate(
            zip(energies_at(d.place, values, d.rate), energies_at(d.place, values, d.weight), strict=True), start=1)
    ]
    least = min(e for e, *_ in every)
    last = [one for one in every if one[0] - least < NEAR * least]
    others = [one for one in every if one not in last]
    if not others or min(e for e, *_ in others) < (1 + APART) * least:
        return []
    if sum(w for _, w, *_ in last) < SEEN * sum(w for _, w, *_ in others):
        return []
    return [_single(setting, d, i) for _, _, i, d in last]


def _single(setting: Setting, decay: Any, index: int) -> tuple[Formula, Formula]:
    """One level's weight and rate; a root of a polynomial is named by its number."""
    if decay.over is None:
        return decay.weight, decay.rate
    name, polynomial = decay.over
    put = {name: Formula("root", (polynomial, name, number(index)))}
    own = _own_polynomial(setting, decay)
    rate = replace(decay.rate, put) if own is None else times(Formula("root", (*own, ONE)), TAU)
    return replace(decay.weight, put), rate


def _own_polynomial(setting: Setting, decay: Any) -> tuple[Formula, str] | None:
    """The polynomial whose roots, all positive, are the rates over tau, and its letter; None where it is not found.

    Its coefficients follow from the traces of the rate's powers (Newton).
    """
    field = decay.place.field
    if not isinstance(field, WithRoot):
        return None
    try:
        rate = field.element(replace(decay.rate, {"tau": ONE}))
    except (NotCovered, ZeroDivisionError):
        return None
    degree = len(decay.place.polynomial) - 1
    raised, sums, a = field.one, [], [field.below.one]
    for k in range(1, degree + 1):
        raised = raised * rate
        sums.append(field.trace(raised))
        total = field.below.zero
        for j in range(1, k + 1):
            total = total + sums[j - 1] * a[k - j]
        a.append(total.scaled(Fraction(-1, k)))
    factors = factored(field.below, a[::-1])
    taken = {x.name for x in setting.letters} | {decay.place.letter}
    name = next(n for n in RATE_LETTERS if n not in taken)
    return (polynomial_formula(factors[0][0], name), name) if len(factors) == 1 else None


def rate_steps(claims: Sequence[Claim]) -> tuple[Step, ...]:
    """Both laws, and where they hold."""
    reasons = {
        "1.law": "At first every level has its weight still, and what is left fades at the mean rate:",
        "1.to": "That holds well before the mean rate times t is 1,",
        "2.law": "In the end the slowest level is left:",
        "2.from": "That holds from well after the time at which its rate times t is 1,",
    }
    out = []
    for claim in claims:
        part = claim.id.removeprefix("survival.regimes.")
        if isinstance(claim.value, Formula):
            line = Line(operator("S"), claim.value, "~") if part.endswith("law") else Line(T, claim.value)
            out.append(Step((reasons[part],), (line,), earns=claim.id))
    return tuple(out)
