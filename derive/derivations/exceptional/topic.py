"""Topic `exceptional`: intervals at which phases of seen energies merge, and what happens there.

    (E_j - E_k) tau_c = 2 pi m,     p_j, p_k > 0

At tau_c the number w of phases drops, starts become dark, and the variance of the return diverges around it:

    Var n ~ D/(tau - tau_c)^2,   D = sum over merging phases of 2 sum_j g'(E_j)^2/(p_j h'(E_j)^2),
    h(x) = prod (x - E_j),   g(x) = sum_j p_j prod_{k != j} (x - E_k)   over the levels that merge into one phase

for one perfect detector state and a fixed interval (hbar = 1; D in units of 1/energy^2).  Exceptional intervals are
numbered from 0 upwards, whatever the window.  For two levels of weights p_a, p_b, a gap Delta apart,
D = 2 (p_a + p_b)^3/(p_a p_b Delta^2).  Values of letters at which phases merge at any interval:
`exceptional_values.py`.
Source: phys-rev-research-1-033086 for the divergence at two levels; several levels derived here, from the zeros of g,
2 sum_k sum_j p_j/(theta_k - E_j)^2, turned into residues at the E_j.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from derive.algebra.levels import Levels, groups_at
from derive.derivations.detection.topic import total_probability
from derive.derivations.exceptional import steps
from derive.derivations.exceptional.values import claims_of, special_values
from derive.derivations.sight import Sight
from derive.derivations.turning import meetings
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.formula.text import text
from derive.formula.tree import ONE, TAU, Formula, number
from derive.problem.quantities import Quantity
from derive.problem.setting import Interval, Setting, Wish
from derive.record.said import Claim, Derivation, Prose, Step

SOURCES = ("phys-rev-research-1-033086", "phys-rev-research-2-043107")
ONE_DETECTOR = "Exceptional intervals are derived for one perfect detector with one state."
NO_ENERGIES = "The seen energies have no closed form here, so that exceptional intervals have none."
FIXED = "A random interval has no exceptional values: every gap is averaged over."


@dataclass(frozen=True)
class Merger:
    """One exceptional interval: groups of energies with one phase, the drop of w, the divergence, the total there."""

    number: int
    interval: Formula
    groups: tuple[tuple[int, ...], ...]
    drop: int
    divergence: Formula
    total: Formula | None


def derive_exceptional(setting: Setting, wish: Wish) -> Derivation:
    """Every exceptional interval in the window, and every value of a letter at which fewer phases are seen."""
    watcher = setting.detectors[0]
    if len(setting.detectors) != 1 or watcher.rank != 1 or watcher.efficiency != ONE:
        raise NotCovered(ONE_DETECTOR)
    if setting.interval.law != "fixed":
        raise NotCovered(FIXED)
    free = replace(setting, interval=Interval(TAU))
    sight = Sight(free)
    values, notes = special_values(free, sight)
    try:
        found, written = _intervals(free, sight, wish)
    except NotCovered as why:
        if not values:
            raise
        found, written, notes = [], (), (*notes, (f"Intervals are left out: {why}",))
    claims = (*(c for e in found for c in _claims(sight, e)), *claims_of(values))
    return Derivation(
        "exceptional", claims, (*written, *steps.at_values(sight, values)), (*_notes(sight, found), *notes), SOURCES
    )


def _intervals(free: Setting, sight: Sight, wish: Wish) -> tuple[list[Merger], tuple[Step, ...]]:
    """Every exceptional interval in the window, and the steps that lead there."""
    if sight.energies is None:
        raise NotCovered(NO_ENERGIES)
    found = [_exception(free, sight, n, m) for n, m in meetings(sight.energies, _window(wish), free.domains())]
    return found, steps.written(sight, found)


def _window(wish: Wish) -> tuple[Formula, Formula] | None:
    window = wish.option("window")
    return (window[0], window[1]) if isinstance(window, tuple) else None


def _exception(setting: Setting, sight: Sight, n: int, interval: Formula) -> Merger:
    levels = sight.levels(None)
    groups = groups_at(levels.energies, interval, setting.domains())
    field, total = levels.field, levels.field.zero
    for group in groups:
        if len(group) > 1:
            total = total + divergence(levels, group)
    there = Sight(replace(setting, interval=Interval(interval)))
    value = total_probability(there) if setting.start is not None and setting.start.mixture else None
    return Merger(n, interval, groups, levels.size - len(groups), field.formula(total), value)


def divergence(levels: Levels, group: Sequence[int]) -> Element:
    """2 sum_j g'(E_j)^2/(p_j h'(E_j)^2) over the levels of one merging phase."""
    field = levels.field
    e = [field.element(levels.energies[k]) for k in group]
    p = [levels.p[k] for k in group]
    total = field.zero
    for j, x in enumerate(e):
        slope_h = _product(field.one, [x - y for k, y in enumerate(e) if k != j])
        slope_g = _slope(field.zero, x, e, p)
        total = total + slope_g * slope_g / (p[j] * slope_h * slope_h)
    return total + total


def _product(one: Element, factors: Sequence[Element]) -> Element:
    for x in factors:
        one = one * x
    return one


def _slope(zero: Element, x: Element, e: Sequence[Element], p: Sequence[Element]) -> Element:
    """g'(x) = sum_j p_j sum_{k != j} prod_{i != j, k} (x - E_i)."""
    one = zero.field.one
    for j, weight in enumerate(p):
        for k in range(len(e)):
            if k != j:
                zero = zero + weight * _product(one, [x - y for i, y in enumerate(e) if i not in (j, k)])
    return zero


def _claims(sight: Sight, e: Merger) -> tuple[Claim, ...]:
    lost = sum(len(g) for g in e.groups if len(g) > 1)
    rows: tuple[tuple[str, str, Formula], ...] = (
        ("interval", "exceptional interval", e.interval),
        ("merged", "merging levels", number(lost)),
        ("drop", "drop of phases", number(e.drop)),
        ("divergence", "divergence coefficient", e.divergence),
    )
    which = (("interval", e.number),)
    valid = "; ".join(f"{text(f)} != 0" for f in sight.conditions)
    return tuple(
        Claim(f"exceptional.{e.number}.{name}", "exceptional", Quantity(about, which), value, valid_for=valid)
        for name, about, value in rows
    )


def _notes(sight: Sight, found: Sequence[Merger]) -> tuple[Prose, ...]:
    """How the total probability jumps, where a start is given,."""
    out: list[Prose] = []
    start = sight.setting.start
    if start is not None and start.mixture:
        generic = total_probability(sight)
        for e in found:
            if e.total is not None and e.total != generic:
                out.append(("At ", TAU, " = ", e.interval, " the total detection probability is ", e.total,
                            "; next to it ", generic, "."))
    return tuple(out)
