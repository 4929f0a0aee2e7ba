"""The terms of order tau in survival at fixed t*tau: interference between levels, on an explicit graph.

First-order states of the undetected evolution overlap by  <R_j|R_k> = i c tau <v_j|V><V|v_k>/(E_j - E_k), and what
the start has of R_j moves by as much.  With s_j = V† P_j |psi>, z = s_j† s_k (no phase of v_j enters) and
D = E_k - E_j every pair of levels of different energies adds to S

    - (2 c tau/D) { Re z sin(D t) e^(-(Gamma_j + Gamma_k) t/2)
                    + Im z [ (e^(-Gamma_j t) + e^(-Gamma_k t))/2 - cos(D t) e^(-(Gamma_j + Gamma_k) t/2) ] } + O(tau^2)

c = coth(kappa/2), 1 for a perfect detector.  What a start has on the detector, a = D† psi, enters R_j by
-i tau V a/(1 - q): every level adds (2 tau/(1 - q)) Im(s_j† a) e^(-Gamma_j t).  All Im are 0 for real H, detector and
start; then levels of one energy do not interfere at this order either.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from dataclasses import replace as changed
from fractions import Fraction

from derive.algebra.polynomial import Polynomial, polynomial_formula
from derive.derivations.spectrum import Spectrum
from derive.derivations.survival.levels import Fading
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.tree import (
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    free_letters,
    inverse,
    letter,
    negate,
    number,
    plus,
    power,
    replace,
    times,
)
from derive.problem.setting import Domain, Setting

T = letter("t")
SECOND = ("x", "y", "lambda0", "lambda1")
"""Names for the root of a pair's second level, the first one that is free."""
LARGEST_DEGREE = 12
"""Of a polynomial whose roots are paired: the sum over pairs is checked root by root (measured: a minute beyond)."""
ROOT = Domain("real", "real")

Over = tuple[tuple[str, Formula], ...]
"""(letter, polynomial) of the sums a term stands under, the outer one first."""


@dataclass(frozen=True)
class Pair:
    """Two levels of gap D: 2 c Re z and 2 c Im z, both over D too, and the two rates."""

    even: Formula
    even_amplitude: Formula
    odd: Formula
    odd_amplitude: Formula
    gap: Formula
    rates: tuple[Formula, Formula]
    mean: Formula
    front: tuple[Formula, ...] = ()
    over: Over = ()

    def law(self) -> Formula:
        """What the pair adds to S."""
        parts = []
        if self.even != ZERO:
            parts.append(times(number(-1), *self.front, self.even_amplitude, TAU, self._swinging("sin")))
        if self.odd != ZERO:
            halves = [times(number(Fraction(1, 2)), _faded(rate)) for rate in self.rates]
            inner = plus(*halves, negate(self._swinging("cos")))
            parts.append(times(number(-1), *self.front, self.odd_amplitude, TAU, inner))
        return _summed(plus(*parts), self.over)

    def _swinging(self, name: str) -> Formula:
        return times(call(name, times(self.gap, T)), _faded(self.mean))


@dataclass(frozen=True)
class Shift:
    """What a level gains by the start's part on the detector: amount tau exp(-rate t)."""

    amount: Formula
    rate: Formula
    over: Over = ()

    def law(self) -> Formula:
        return _summed(times(self.amount, TAU, _faded(self.rate)), self.over)


def interference(spectrum: Spectrum, fading: Sequence[Fading]) -> tuple[Pair, ...]:
    """Every pair of levels whose interference is not zero."""
    real = _is_real(spectrum)
    if not real and any(multiplicity > 1 for _, multiplicity in spectrum.factors):
        raise NotCovered("terms of order tau are derived for complex couplings where no two levels have one energy")
    if max((len(one.level.place.polynomial or ()) for one in fading), default=0) > LARGEST_DEGREE + 1:
        raise NotCovered(f"terms of order tau are derived where no polynomial of levels has a degree above "
                         f"{LARGEST_DEGREE}")
    found: list[Pair] = []
    for k, upper in enumerate(fading):
        for lower in fading[:k]:
            if upper.level.zeroth != lower.level.zeroth or upper.level.place.polynomial is not None:
                found = _joined(found, _pair(spectrum, lower, upper, real), spectrum.setting)
        if upper.level.place.polynomial is not None:
            found = _joined(found, _within(spectrum, upper, real), spectrum.setting)
    return tuple(found)


def shifts(spectrum: Spectrum, fading: Sequence[Fading]) -> tuple[Shift, ...]:
    """(2/(1 - q)) Im(s† a) of every level; nothing where all is real or the start is off the detector."""
    if _is_real(spectrum):
        return ()
    watched, formula, starts = spectrum.watched, spectrum.field.formula, spectrum.starts()
    on = [[formula(watched.inner(d, psi)) for d in watched.d] for _, psi in starts]
    weights = [formula(w) for w, _ in starts]
    out: list[Shift] = []
    for one in fading:
        terms = [
            times(w, call("conj", s), a)
            for w, seen, detected in zip(weights, one.amplitudes, on, strict=True)
            for s, a in zip(seen, detected, strict=True)
        ]
        amount = _tidy(times(number(2), call("Im", plus(*terms))), spectrum.setting, _roots(one))
        if amount != ZERO:
            out = _gathered(out, Shift(amount, times(one.level.rate[1], TAU), _over(one)), spectrum.setting)
    missed = () if spectrum.efficiency.is_perfect else (_after_missing(spectrum),)
    return tuple(changed(x, amount=times(*missed, x.amount)) for x in out)


def _after_missing(spectrum: Spectrum) -> Formula:
    """1/(1 - q)."""
    return spectrum.efficiency.tidy(inverse(plus(ONE, negate(spectrum.efficiency.q))))


def _gathered(found: list[Shift], one: Shift, setting: Setting) -> list[Shift]:
    """One more; those of one rate are one term."""
    same = next((x for x in found if x.rate == one.rate and not x.over and not one.over), None)
    if same is None:
        return [*found, one]
    amount = _tidy(plus(same.amount, one.amount), setting, ())
    rest = [x for x in found if x is not same]
    return rest if amount == ZERO else [*rest, changed(one, amount=amount)]


def _is_real(spectrum: Spectrum) -> bool:
    conjugate = spectrum.field.conjugate
    return spectrum.field.is_real or all(
        not (x - conjugate(x)) for x in (
            *(spectrum.field.element(f) for row in spectrum.watched.space.rows for _, f in row),
            *(x for v in (*spectrum.watched.d, *(psi for _, psi in spectrum.starts())) for x in v.values()))
    )


# -- one pair


def _pair(spectrum: Spectrum, lower: Fading, upper: Fading, real: bool) -> Pair:
    """Levels of two places; where both are roots of polynomials the second one's root is renamed."""
    over = _over(lower)
    if over and upper.level.place.polynomial is not None:
        upper, moved = _renamed(spectrum, upper)
        return _made(spectrum, lower, upper, real, (*over, *moved))
    return _made(spectrum, lower, upper, real, over or _over(upper))


def _within(spectrum: Spectrum, one: Fading, real: bool) -> Pair:
    """Two roots of one polynomial p: the second one is a root of (p(x) - p(E))/(x - E); every pair comes twice."""
    other, ((name, _),) = _renamed(spectrum, one)
    p = one.level.place.polynomial
    if p is None:
        raise TypeError("a level without a polynomial has no other roots")
    second = _divided_difference(p, one.level.place.letter, name)
    return _made(spectrum, one, other, real, (*_over(one), (name, second)), Fraction(1, 2))


def _made(
    spectrum: Spectrum, lower: Fading, upper: Fading, real: bool, over: Over, share: Fraction = Fraction(1)
) -> Pair:
    c = spectrum.efficiency.c
    front = (c,) if free_letters(c) else ()
    tidy = _Tidy(spectrum.setting, tuple(name for name, _ in over), bool(over))
    along, across = _product(spectrum, lower, upper, real)
    scale = times(number(2 * share), *(() if front else (c,)))
    even, odd = tidy(times(scale, along)), ZERO if across == ZERO else tidy(times(scale, across))
    gap = tidy(plus(upper.level.zeroth, negate(lower.level.zeroth)))
    first, second = (one.level.rate[1] for one in (lower, upper))
    half = times(number(Fraction(1, 2)), plus(first, second))
    mean = first if first == second else half if front else tidy(half)
    amplitudes = [tidy(times(x, inverse(gap))) for x in (even, odd)]
    lasting = (times(first, TAU), times(second, TAU))
    return Pair(even, amplitudes[0], odd, amplitudes[1], gap, lasting, times(mean, TAU), front, over)


@dataclass(frozen=True)
class _Tidy:
    """Formulas as their exact field writes them; products over roots of polynomials are shorter left as they are."""

    setting: Setting
    names: tuple[str, ...]
    leave: bool

    def __call__(self, f: Formula) -> Formula:
        return f if self.leave else _tidy(f, self.setting, self.names)


def _product(spectrum: Spectrum, lower: Fading, upper: Fading, real: bool) -> tuple[Formula, Formula]:
    """Re z and Im z, z the mean of s_j† s_k over the start's mixture."""
    along, across = [], []
    for (w, _), a, b in zip(spectrum.starts(), lower.amplitudes, upper.amplitudes, strict=True):
        front = spectrum.field.formula(w)
        for x, y in zip(a, b, strict=True):
            (x1, x2), (y1, y2) = (_parts(spectrum, f, one, real) for f, one in ((x, lower), (y, upper)))
            along += [times(front, x1, y1), times(front, x2, y2)]
            across += [times(front, x1, y2), times(number(-1), front, x2, y1)]
    return plus(*(f for f in along if f != ZERO)), plus(*(f for f in across if f != ZERO))


def _parts(spectrum: Spectrum, f: Formula, one: Fading, real: bool) -> tuple[Formula, Formula]:
    """Re f and Im f."""
    if real:
        return f, ZERO
    setting, names = spectrum.setting, _roots(one)
    return _tidy(call("Re", f), setting, names), _tidy(call("Im", f), setting, names)


def _joined(found: list[Pair], pair: Pair, setting: Setting) -> list[Pair]:
    """One pair more; real pairs of the same gap and rate are one term."""
    if pair.even == ZERO and pair.odd == ZERO:
        return found
    for n, p in enumerate(found):
        alike = not (p.over or pair.over) and p.odd == pair.odd == ZERO
        if alike and p.gap == pair.gap and p.mean == pair.mean:
            even = _tidy(plus(p.even, pair.even), setting, ())
            amplitude = _tidy(times(even, inverse(p.gap)), setting, ())
            one = Pair(even, amplitude, ZERO, ZERO, p.gap, p.rates, p.mean, p.front)
            return [*found[:n], *found[n + 1 :], *([one] if even != ZERO else [])]
    return [*found, pair]


# -- roots under sums


def _over(one: Fading) -> Over:
    place = one.level.place
    return () if place.polynomial is None else ((place.letter, polynomial_formula(place.polynomial, place.letter)),)


def _roots(one: Fading) -> tuple[str, ...]:
    return tuple(name for name, _ in _over(one))


def _renamed(spectrum: Spectrum, one: Fading) -> tuple[Fading, Over]:
    """The level with another letter for its root, and the sum it stands under."""
    place = one.level.place
    if place.polynomial is None:
        raise TypeError("a level that is written out has no letter")
    taken = {x.name for x in spectrum.setting.letters} | {place.letter}
    name = next(n for n in SECOND if n not in taken)
    put = {place.letter: letter(name)}
    level = changed(
        one.level, zeroth=replace(one.level.zeroth, put), rate={k: replace(f, put) for k, f in one.level.rate.items()}
    )
    amplitudes = tuple(tuple(replace(f, put) for f in seen) for seen in one.amplitudes)
    return Fading(level, amplitudes), ((name, polynomial_formula(place.polynomial, name)),)


def _divided_difference(p: Polynomial, first: str, second: str) -> Formula:
    """(p(x) - p(E))/(x - E), highest power of x first: sum_k p_k sum_(i+j=k-1) x^i E^j."""
    terms = []
    for i in range(len(p) - 2, -1, -1):
        inner = [
            times(p[k].field.formula(p[k]), *_raised(first, k - 1 - i)) for k in range(len(p) - 1, i, -1) if p[k]
        ]
        terms.append(times(plus(*inner), *_raised(second, i)))
    return plus(*terms)


def _raised(name: str, n: int) -> tuple[Formula, ...]:
    if n == 0:
        return ()
    return (letter(name) if n == 1 else power(letter(name), number(n)),)


def _summed(body: Formula, over: Over) -> Formula:
    for name, polynomial in reversed(over):
        body = Formula("rootsum", (name, polynomial, body))
    return body


def _faded(rate: Formula) -> Formula:
    return call("exp", times(number(-1), rate, T))


def _tidy(f: Formula, setting: Setting, names: Sequence[str]) -> Formula:
    """f as its exact field writes it, where there is one; `names` are those of real roots."""
    try:
        field = Field.of([f], {**setting.domains(), **dict.fromkeys(names, ROOT)})
        return field.formula(field.element(f))
    except NotCovered:
        return f


def simple(f: Formula, setting: Setting) -> Formula:
    """f as its exact field writes it, where there is one."""
    return _tidy(f, setting, ())
