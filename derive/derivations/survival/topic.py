"""Topic `survival`: the probability that no ask up to t = n tau has clicked, for small tau, as a finite sum.

The undetected evolution acts on range(Q); at fixed t*tau its levels decay by exp(-Gamma_j t), with
Gamma_j = c tau |V† v_j|^2, and keep their weights, while interference between levels of different energy is of order
tau:

    S(t) = w_dark + sum_j w_j exp(-Gamma_j t) + O(tau)       (fixed t*tau)

w_j the start's weight on the bright level j, w_dark on everything dark; an efficiency eta below 1 multiplies the rates
by c = coth(kappa/2) = (1 + q)/(1 - q), q = sqrt(1 - eta).  What the start has on the detector is lost in the first
asks.  A start on the detector itself leaves the detector by -i tau V/(1 - q): of rank one, S = (tau/eta) sum_j Gamma_j
exp(-Gamma_j t).  At a detector of higher rank levels of one energy are those of V† Pi V (`survival_levels.py`).
The density is -dS/dt, averaged over the interference.  Units: hbar = 1.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from derive.algebra.polynomial import at, polynomial_formula
from derive.derivations.families import Layers, Paths, Unequal, seen_from_detector
from derive.derivations.levels.families import angle, in_k, path_sizes, weight_in_k
from derive.derivations.levels.order import in_order
from derive.derivations.levels.topic import free_letter
from derive.derivations.spectrum import Place, Spectrum, refuse
from derive.derivations.survival import steps
from derive.derivations.survival.interference import Pair, Shift, interference, shifts, simple
from derive.derivations.survival.levels import Fading, fading_levels, is_on_detector
from derive.derivations.survival.rates import rate_claims, rate_steps
from derive.derivations.survival.regimes import regime_claims, regime_steps
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    inverse,
    letter,
    negate,
    number,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Family, Lattice, Relation, Setting, Wish
from derive.record.said import EXACTLY, Claim, Derivation, Kind, Prose, Step

DEFAULT_ORDER, HIGHEST_ORDER = 1, 2
T, N = letter("t"), letter("n")


@dataclass(frozen=True)
class Decay:
    """weight * exp(-rate t): one term, or a sum over the roots of a polynomial or over k."""

    weight: Formula
    rate: Formula
    over: tuple[str, Formula] | None = None  # (letter, polynomial)
    upto: Formula | None = None  # k from 1 to this
    place: Place | None = None  # where its level stands, on an explicit graph

    def law(self) -> Formula:
        return self._summed(times(self.weight, self._fading()))

    def density(self) -> Formula:
        return self._summed(times(self.weight, self.rate, self._fading()))

    def mean(self) -> Formula:
        return self._summed(times(self.weight, self.rate))

    def _fading(self) -> Formula:
        return call("exp", times(MINUS_ONE, self.rate, T))

    def _summed(self, body: Formula) -> Formula:
        if self.over is not None:
            return Formula("rootsum", (self.over[0], self.over[1], body))
        if self.upto is not None:
            return Formula("sum", ("k", ONE, self.upto, body))
        return body


@dataclass(frozen=True)
class Law:
    """S = dark + sum of decays, up to O(tau^order) at fixed t*tau."""

    dark: Formula
    decays: tuple[Decay, ...]
    order: int = 1
    exact: Formula | None = None
    pairs: tuple[Pair, ...] = ()
    bright: Formula = ZERO
    apart: bool = True  # no two levels of one energy
    shifts: tuple[Shift, ...] = ()
    assume: tuple[Relation, ...] = ()

    @property
    def beats(self) -> bool:
        """Whether the terms of order tau are told."""
        return bool(self.pairs or self.shifts)

    def survival(self) -> Formula:
        parts = [] if self.dark == ZERO and self.decays else [self.dark]
        further = (*(s.law() for s in self.shifts), *(p.law() for p in self.pairs))
        return plus(*parts, *(d.law() for d in self.decays), *further)

    def density(self) -> Formula:
        return plus(*(d.density() for d in self.decays))


def derive_survival(setting: Setting, wish: Wish) -> Derivation:
    """The law at small tau, its density, and the exact law where one exists."""
    order = wish.option("order", DEFAULT_ORDER)
    if not isinstance(order, int):
        raise TypeError(f"order is {order!r}, not an integer")
    if order not in (1, HIGHEST_ORDER):
        raise NotCovered(f"survival is derived to order {HIGHEST_ORDER}: with terms of order tau at fixed t*tau")
    if setting.start is None:
        raise NotCovered("survival needs a start")
    if isinstance(setting.space, Lattice):
        raise NotCovered("on an infinite lattice survival at late asks is derived, by the topic asymptotics")
    law, opening = _family_law(setting, order) if isinstance(setting.space, Family) else finite_law(setting, order)
    regimes, later = _regimes(setting, law)
    every = path_sizes(setting) if isinstance(setting.space, Family) else ""
    claims = [
        _claim("small_tau", "survival probability", law.survival(), law.order, every),
        _claim("density", "survival density", law.density(), 2 if law.beats else law.order + 1, every),
    ]
    if law.exact is not None:
        kind = Kind("exactly", f"exactly, for every {every}", every=every) if every else EXACTLY
        claims.insert(0, Claim("survival.exact", "survival", Quantity("survival probability"), law.exact, kind,
                               valid_for="every tau"))
    claims = [replace(c, assume=law.assume) for c in claims]
    return Derivation("survival", (*claims, *regimes), (*opening, *steps.laws(law), *later), notes=_notes(law))


def _regimes(setting: Setting, law: Law) -> tuple[tuple[Claim, ...], tuple[Step, ...]]:
    """Power laws and the last exponential, where the image sum exists; on an explicit graph first and last rate."""
    if not isinstance(setting.space, Family):
        told = () if law.bright == ZERO or not law.apart else rate_claims(setting, law.dark, law.bright, law.decays)
        return told, rate_steps(told)
    seen = seen_from_detector(setting)
    distance = setting.start.distance if setting.start else None
    if not isinstance(seen, Paths) or seen.closed or distance is None or not path_sizes(setting):
        return (), ()
    said = regime_claims(seen, distance, law.dark, path_sizes(setting))
    return said, regime_steps(seen, distance, said)


def _claim(part: str, quantity: str, value: Formula, order: int, every: str) -> Claim:
    phrase = f"up to O(tau^{order}) at fixed t*tau" if order > 1 else "up to O(tau) at fixed t*tau"
    if every:
        phrase += f", for every {every}"
    kind = Kind("order", phrase, order, times(T, TAU), every=every or None)
    valid = "t = n tau, averaged over the oscillations between levels" if part == "density" else "t = n tau"
    return Claim(f"survival.{part}", "survival", Quantity(quantity), value, kind, valid_for=valid)


def _notes(law: Law) -> tuple[Prose, ...]:
    if law.order > HIGHEST_ORDER:
        return (("The start is on the detector: the first ask leaves it with a probability of order ",
                 power(TAU, number(2)), "."),)
    return ()


# -- an explicit graph


def finite_law(setting: Setting, order: int = 1) -> tuple[Law, tuple[Step, ...]]:
    """The law on an explicit graph, and the steps that lead to it."""
    spectrum = Spectrum(setting)
    name = free_letter(setting)
    returned = is_on_detector(spectrum)
    fading = fading_levels(spectrum, name, returned, order > 1 and not returned)
    ordered = _in_order(setting, fading)
    found, kept = [], []
    for one in ordered:
        level = one.level
        if level.weight is None or level.weight == ZERO:
            continue
        kept.append(one)
        weight = times(level.weight, power(TAU, number(2))) if returned else level.weight
        polynomial = level.place.polynomial
        over = None if polynomial is None else (level.place.letter, polynomial_formula(polynomial, level.place.letter))
        found.append(Decay(weight, times(level.rate[1], TAU), over, place=level.place))
    dark = ZERO if returned else _dark_weight(spectrum)
    further = order > 1 and not returned
    pairs, moved = (interference(spectrum, kept), shifts(spectrum, kept)) if further else ((), ())
    exact = None if returned else _exact(spectrum, dark)
    law = Law(dark, _gathered(setting, found), 3 if returned else order, exact, pairs,
              ZERO if returned else spectrum.field.formula(_bright_weight(spectrum)), not _coincide(spectrum),
              moved)
    return law, steps.from_levels(spectrum, [one.level for one in ordered], returned)


def _in_order(setting: Setting, fading: Sequence[Fading]) -> list[Fading]:
    by_level = {id(one.level): one for one in fading}
    return [by_level[id(level)] for _, level in in_order(setting, [one.level for one in fading])]


def _coincide(spectrum: Spectrum) -> bool:
    """Whether the detector reaches several levels of one energy."""
    return any(multiplicity > 1 for _, multiplicity in spectrum.factors)


def _dark_weight(spectrum: Spectrum) -> Formula:
    """sum_w w (|Q psi|^2 - |bright part|^2)."""
    field, total = spectrum.field, spectrum.field.zero
    for weight, psi in spectrum.starts():
        rest = spectrum.watched.outside(psi)
        total = total + weight * spectrum.watched.inner(rest, rest)
    return field.formula(total - _bright_weight(spectrum))


def _bright_weight(spectrum: Spectrum) -> Element:
    field, total = spectrum.field, spectrum.field.zero
    for weight, psi in spectrum.starts():
        for u, n in zip(spectrum.bright.basis, spectrum.bright.norms, strict=True):
            overlap = spectrum.watched.inner(u, psi)
            total = total + weight * overlap * field.conjugate(overlap) / n
    return total


def _gathered(setting: Setting, decays: Sequence[Decay]) -> tuple[Decay, ...]:
    """Terms of the same rate as one, their weights added exactly."""
    out: list[Decay] = []
    for d in decays:
        same = next((k for k, e in enumerate(out) if e.over == d.over is None and e.rate == d.rate), None)
        if same is None:
            out.append(d)
        else:
            weight = simple(plus(out[same].weight, d.weight), setting)
            out[same] = Decay(weight, d.rate, place=d.place)
    return tuple(out)


def _exact(spectrum: Spectrum, dark: Formula) -> Formula | None:
    """One bright state b: S_n = dark + w (1 - (|V|^2/W^2) sin^2(W tau))^n, W^2 = (A_bb - C)^2/4 + |V|^2."""
    single = spectrum.rank == 1 and spectrum.bright.size == 1 and spectrum.efficiency.is_perfect
    if not single or any(d in psi for _, psi in spectrum.starts() for d in spectrum.watched.support):
        return None
    field = spectrum.field
    square = spectrum.bright.norms[0]
    gap = at(spectrum.q, spectrum.c)  # C - A_bb
    width = (gap * gap).scaled(Fraction(1, 4)) + square
    root = _root(field.formula(width), spectrum.setting)
    share = field.formula(square / width)
    bright = field.formula(_bright_weight(spectrum))
    parts = [] if dark == ZERO else [dark]
    if share == ONE:
        return plus(*parts, times(bright, power(call("cos", times(root, TAU)), times(number(2), N))))
    inner = plus(ONE, times(MINUS_ONE, share, power(call("sin", times(root, TAU)), number(2))))
    return plus(*parts, times(bright, power(inner, N)))


def _root(f: Formula, setting: Setting) -> Formula:
    """sqrt(f), simplified where the field knows how."""
    return simple(call("sqrt", f), setting)


# -- families


def _family_law(setting: Setting, order: int) -> tuple[Law, tuple[Step, ...]]:
    refuse(setting)
    if order > 1:
        raise NotCovered("where the size is a letter, survival is derived to order 1")
    seen = seen_from_detector(setting)
    if isinstance(seen, Layers):
        if seen.setting.start is None:
            raise NotCovered("where the size is a letter, a start is given by its distance from the detector")
        law, opening = finite_law(seen.setting)
        return _with_everything(law, seen.setting, setting), opening
    if isinstance(seen, Paths):
        return _paths_law(setting, seen)
    if not isinstance(seen, Unequal):
        raise NotCovered("this family's survival has no closed form in its size; give a number for it")
    from derive.derivations.survival.arms import arms_law  # it builds on this module

    return arms_law(setting, seen)


def _with_everything(law: Law, layers: Setting, setting: Setting) -> Law:
    """The layers hold a part of the start only; what they do not hold is dark."""
    spectrum = Spectrum(layers)
    bright = spectrum.field.formula(_bright_weight(spectrum))
    dark = simple(plus(ONE, negate(bright)), setting)
    exact = None if law.exact is None else plus(dark, law.exact) if law.dark == ZERO else None
    return Law(dark, law.decays, law.order, exact)


def _paths_law(setting: Setting, paths: Paths) -> tuple[Law, tuple[Step, ...]]:
    weight = weight_in_k(setting, paths)
    if weight is None or setting.start is None or setting.start.distance is None:
        raise NotCovered("where the size is a letter, a start is given by its distance from the detector")
    _, rates = in_k(setting, paths, 1)
    rate = times(rates[1], TAU)
    count = paths.length
    if paths.closed and paths.flux is None:
        count = call("floor", times(simple(paths.length + 1, setting), inverse(number(2))))
    decay = Decay(weight, rate, None, count)
    return Law(_paths_dark(setting, paths), (decay,)), steps.from_paths(setting, paths, angle(paths))


def _paths_dark(setting: Setting, paths: Paths) -> Formula:
    """1 - 1/m on m equal arms; on a ring without flux what the even multiples hold."""
    if not paths.closed:
        return simple(plus(ONE, negate(inverse(paths.count))), setting)
    if paths.flux is not None:
        return ZERO
    start = setting.start
    distance = start.distance if start is not None and start.distance is not None else ONE
    size = simple(paths.length + 1, setting)
    theta = times(number(2), letter("k"), distance, PI, inverse(size))
    body = times(number(2), power(call("sin", theta), number(2)), inverse(size))
    return Formula("sum", ("k", ONE, call("floor", times(paths.length, inverse(number(2)))), body))
