"""Topic `moments`: how many asks the first click takes, as closed functions of the interval.

    mean = sum_n n F_n (not conditioned),   conditional mean = mean/P_det,
    variance = sum_n n^2 F_n/P_det - (mean/P_det)^2,   moment p = sum_n n^p F_n

for detectors of any efficiency, at fixed, exponential or gamma intervals (hbar = 1).  For one detector state
the sums over asks are solved in closed form (`algebra/stein.py`); for several states, or a step given in place of H,
by elimination in a small bright space (`algebra/stepwise.py`); gamma intervals of shapes that are not small whole
numbers keep their powers (`gamma_shapes.py`).  Phases that are powers of one, and up to four
independent ones, are expanded into one function; otherwise mean and return variance stand as sums over pairs of levels.
The mean return is w/eta, w the number of phases seen (source: commun-math-phys-320-543, for eta = 1).
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass
from fractions import Fraction
from math import isqrt

from derive.algebra.levels import Levels
from derive.algebra.phases import trigonometric
from derive.algebra.stein import (
    Bench,
    expectation,
    exponential_interval,
    first_source,
    fixed_interval,
    gamma_interval,
    summed,
    whole_power,
)
from derive.derivations.detection.splitting import bench_to_solve
from derive.derivations.detection.topic import total_probability, valid_for
from derive.derivations.moments import steps
from derive.derivations.moments.gamma_shapes import Powers, different_gaps
from derive.derivations.moments.nested import nested_mean, nested_return_variance
from derive.derivations.moments.open import completed
from derive.derivations.moments.structured import structured_mean, structured_return_variance
from derive.derivations.sight import Sight
from derive.derivations.stated import has_equation
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import I_UNIT, ONE, Formula, call, number, plus, times, walk
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting, Wish
from derive.record.said import Claim, Derivation, Prose

SOURCES = ("commun-math-phys-320-543", "phys-rev-research-1-033086", "phys-rev-e-95-032141")
MOST_PHASES = 4  # independent phases that are expanded into one function
MOST_LEVELS = 16  # levels, where all phases are powers of one
MOST_PAIRED = 4  # levels, where a sum over pairs is written out: five take 7,000 characters
MOST_NESTED = 6  # levels, where sums over roots stand for pairs: at seven, balls of roots of roots are too wide
MOST_SHAPE = 4  # shapes that are multiplied out: degrees grow with shape times pairs of levels
MOST_GAMMA = 5  # levels, at gamma intervals of such a shape
MOST_GAPS = 3  # different gaps of energies, at gamma intervals of any other
LONGEST = 8_000  # characters of a sum over pairs that is still printed
SEVERAL = "No closed form for several detector states at random intervals."
TOO_MANY_GAMMA = (
    f"No closed form here: gamma intervals take closed energies, {MOST_GAMMA} at most, and but {MOST_GAPS} different "
    f"gaps between them where the shape is no whole number up to {MOST_SHAPE}."
)
TOO_MANY = "more independent phases than are expanded, and more levels than are written out in pairs"


@dataclass(frozen=True)
class Answer:
    """Closed values by name, and what could not be closed."""

    values: dict[str, Formula]
    notes: tuple[Prose, ...]


def derive_moments(setting: Setting, wish: Wish) -> Derivation:
    """Mean, conditional mean, variance, and raw moments from the third on."""
    sight = Sight(setting)
    one = len(setting.detectors) == 1 and setting.detectors[0].rank == 1 and not sight.is_step
    highest = _highest(wish)
    try:
        answer = closed(sight, highest) if one else _by_elimination(sight, highest)
    except NotCovered as why:
        if not has_equation(sight):
            raise
        answer = Answer({}, ((str(why),),))
    values, notes = completed(sight, answer.values, answer.notes, highest)
    valid = valid_for(sight)
    claims = tuple(_claim(name, value, valid) for name, value in values.items())
    notes = (*notes, *sight.warning())
    lines = steps.written(sight, values) if one else steps.eliminated(sight, values)
    return Derivation("moments", claims, lines, notes, SOURCES)


def _small_shape(setting: Setting) -> int | None:
    """The shape of gamma intervals where it is a small whole number."""
    shape = setting.interval.shape
    small = shape is not None and shape.head == "number" and shape.args[0] in range(1, MOST_SHAPE + 1)
    return int(shape.args[0]) if small and shape is not None else None


def _highest(wish: Wish) -> int:
    highest = wish.option("highest", 2)
    if not isinstance(highest, int):
        raise TypeError(f"highest is {highest!r}, not an integer")
    return max(highest, 2)


def _claim(name: str, value: Formula, valid: str) -> Claim:
    quantity = Quantity("moment", (("power", int(name)),)) if name.isdigit() else Quantity(name.replace("_", " "))
    return Claim(f"moments.{name}", "moments", quantity, value, valid_for=valid)


def closed(sight: Sight, highest: int) -> Answer:
    """All values that have a closed form here."""
    levels = _levels(sight)
    if levels is not None and _is_expanded(sight, levels):
        return _expanded(sight, levels, highest)
    if levels is not None and _is_short(sight, levels):
        return _at_any_shape(sight, highest)
    if _is_return(sight):
        return _return(sight)
    if sight.setting.interval.law == "gamma":
        raise NotCovered(TOO_MANY_GAMMA)
    if sight.phases > MOST_NESTED or not (_is_plain(sight) and sight.generic):
        raise NotCovered(f"No closed form here: {TOO_MANY}.")
    return _transition(sight)


def _not_too_long(f: Formula) -> Formula:
    if len(text(f)) > LONGEST:
        raise NotCovered(f"No closed form here: {TOO_MANY}.")
    return f


def efficiency_share(sight: Sight) -> Formula:
    """a = 1 - sqrt(1 - eta)."""
    eta = sight.setting.detectors[0].efficiency
    if eta.head != "number":
        return plus(ONE, times(number(-1), call("sqrt", plus(ONE, times(number(-1), eta)))))
    missed = 1 - eta.args[0]
    root = Fraction(isqrt(missed.numerator), isqrt(missed.denominator))
    return number(1 - root) if root * root == missed else ONE - call("sqrt", number(missed))


def _levels(sight: Sight) -> Levels | None:
    """Levels with phases (fixed interval) or energies alone (random); None without closed energies."""
    if sight.energies is None:
        return None
    interval, also = sight.setting.interval, also_needed(sight)
    if interval.law != "fixed":
        return sight.levels(None, also)
    try:
        return sight.with_phases(also)
    except NotCovered:
        return None


def also_needed(sight: Sight) -> list[Formula]:
    """What the field of the levels must hold besides."""
    return [efficiency_share(sight), sight.setting.interval.length, *(w for w, _ in sight.explored.mixture)]


def _is_expanded(sight: Sight, levels: Levels) -> bool:
    law = sight.setting.interval.law
    if law == "gamma":
        return _small_shape(sight.setting) is not None and levels.size <= MOST_GAMMA
    if law == "exponential":
        return levels.size <= MOST_LEVELS
    phases = len(levels.field.needs.units)
    return levels.size <= (MOST_LEVELS if phases <= 1 else MOST_PHASES)


def bench_of(sight: Sight, levels: Levels) -> Bench:
    field = levels.field
    a = field.element(efficiency_share(sight))
    if sight.setting.interval.law == "fixed":
        return fixed_interval(field, levels.p, levels.z, a)
    energies = [field.element(e) for e in levels.energies]
    mean = field.element(sight.setting.interval.length)
    if sight.setting.interval.law == "gamma":
        return gamma_interval(field, levels.p, energies, _average(sight.setting, field), a)
    return exponential_interval(field, levels.p, energies, mean, field.element(I_UNIT), a)


def _average(setting: Setting, field: Field) -> Callable[[Element], Element]:
    """(1 - i gap m/s)^(-s) for a small whole shape s."""
    shape = _small_shape(setting) or 1
    step = field.element(I_UNIT * setting.interval.length / shape)
    return lambda gap: field.one / whole_power(field.one - step * gap, shape)


def _is_short(sight: Sight, levels: Levels) -> bool:
    """Whether gamma intervals of another shape are expanded."""
    gamma = sight.setting.interval.law == "gamma" and _small_shape(sight.setting) is None
    return gamma and different_gaps(levels) <= MOST_GAPS


def _at_any_shape(sight: Sight, highest: int) -> Answer:
    """With letters for the powers, put in at the end."""
    powers = Powers(sight.setting, MOST_GAPS)
    wide = Sight(powers.setting).levels(None, [*also_needed(sight), *powers.letters])
    energies = [wide.field.element(e) for e in wide.energies]
    a = wide.field.element(efficiency_share(sight))
    bench = gamma_interval(wide.field, wide.p, energies, lambda gap: powers.of(wide.field, gap), a)
    total = wide.field.element(total_probability(sight))
    answer = _values(total, _rising(sight, wide, bench, highest), highest)
    values = {name: powers.put_in(f) for name, f in answer.values.items()}
    kept = {name: f for name, f in values.items() if len(text(f)) <= LONGEST}
    left = ", ".join(name.replace("_", " ") for name in values if name not in kept)
    return Answer(kept, (*answer.notes, *(((f"Too long to be printed: {left}.",),) if left else ())))


def _expanded(sight: Sight, levels: Levels, highest: int) -> Answer:
    """One function each, from the sums b_p = sum_n binomial(n+p-1, p) F_n."""
    total = levels.field.element(total_probability(sight))
    return _values(total, rising_sums(sight, levels, highest), highest)


def _values(total: Element, sums: list[Element], highest: int) -> Answer:
    """Means, variance and raw moments as trigonometric functions."""
    field = total.field
    raw = [total, *(_raw(field.zero, p, sums) for p in range(1, highest + 1))]
    values = {"mean": raw[1]}
    if total:
        values["conditional_mean"] = raw[1] / total
    if total and highest > 1:
        values["variance"] = raw[2] / total - (raw[1] / total) * (raw[1] / total)
    values |= {str(p): raw[p] for p in range(3, highest + 1)}
    notes: tuple[Prose, ...] = () if total else (("This start is never detected: there is nothing to condition on.",),)
    return Answer({name: trigonometric(x) for name, x in values.items()}, notes)


def rising_sums(sight: Sight, levels: Levels, highest: int) -> list[Element]:
    """b_1 ... b_highest, weighted over the start's mixture."""
    return _rising(sight, levels, bench_of(sight, levels), highest)


def _rising(sight: Sight, levels: Levels, bench: Bench, highest: int) -> list[Element]:
    field = levels.field
    weights = [field.element(w) for w, _ in sight.explored.mixture]
    t, found = first_source(bench), []
    for _ in range(highest):
        t = summed(bench, t)
        total = field.zero
        for weight, row in zip(weights, levels.s, strict=True):
            q = [p * s for p, s in zip(levels.p, row, strict=True)]
            total = total + weight * expectation(field, t, q)
        found.append(total)
    return found


def _by_elimination(sight: Sight, highest: int) -> Answer:
    """Several detector states, or a step given: Stein's equation solved on the bright space."""
    if sight.setting.interval.law != "fixed":
        raise NotCovered(SEVERAL)
    bench = bench_to_solve(sight)
    total = bench.field.element(total_probability(sight))
    return _values(total, bench.rising_sums(highest), highest)


def _raw(zero: Element, p: int, sums: list[Element]) -> Element:
    """sum_n n^p F_n = sum_i (-1)^(p-i) i! S(p, i) b_i, S Stirling's numbers of the second kind."""
    total, row, factorial = zero, [1], 1
    for q in range(1, p + 1):
        row = [(i * row[i] if i < q else 0) + (row[i - 1] if i else 0) for i in range(q + 1)]
    for i in range(1, p + 1):
        factorial *= i
        total = total + sums[i - 1].scaled(Fraction((-1) ** (p - i) * factorial * row[i]))
    return total


# -- where phases are too many to be expanded


def _are_paired(sight: Sight) -> bool:
    """Whether pairs of levels are written out; else sums over roots stand for them."""
    closed_ = sight.energies is not None and not any(holds_cosine(e) for e in sight.energies)
    return closed_ and sight.phases <= MOST_PAIRED


def holds_cosine(f: Formula) -> bool:
    return any(node.head == "call" and node.args[0] == "cos" for node in walk(f))


def _is_return(sight: Sight) -> bool:
    """Whether the start is the detector's state up to a phase: <u_j|psi> = 0 for j > 0, all of it bright."""
    parts = sight.parts
    return len(parts) == 1 and not any(parts[0].overlaps[1:]) and total_probability(sight) == ONE


def _is_plain(sight: Sight) -> bool:
    """A perfect detector at fixed intervals: what the sums over pairs are written for."""
    return sight.setting.detectors[0].efficiency == ONE and sight.setting.interval.law == "fixed"


def _return(sight: Sight) -> Answer:
    """Mean w/eta; the variance as a sum over pairs where the levels are few enough."""
    mean = number(sight.phases) / sight.setting.detectors[0].efficiency
    values = {"mean": mean, "conditional_mean": mean}
    if sight.phases <= MOST_NESTED and _is_plain(sight) and sight.generic:
        with suppress(NotCovered):
            written = structured_return_variance if _are_paired(sight) else nested_return_variance
            values["variance"] = _not_too_long(written(sight))
            return Answer(values, ())
    return Answer(values, ((f"The variance has no closed form here: {TOO_MANY}.",),))


def _transition(sight: Sight) -> Answer:
    mean = _not_too_long((structured_mean if _are_paired(sight) else nested_mean)(sight))
    values = {"mean": mean}
    total = total_probability(sight)
    if total != number(0):
        values["conditional_mean"] = mean / total
    return Answer(values, ((f"The variance has no closed form here: {TOO_MANY}.",),))
