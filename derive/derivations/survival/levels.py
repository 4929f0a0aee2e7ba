"""What survival needs of the levels, for a detector of any rank: leading rates, weights, amplitudes on the detector.

A on the bright space has the eigenvalues E_0, the simple roots of g(E), and there

    M = V† Pi V = N(E_0)/g'(E_0),      s = V† Pi |psi>,      <psi|Pi|psi> = W(E_0)/g'(E_0)

N, W (polynomials) from the moments V† A^m V, <psi|A^m|psi>.  A level of multiplicity one has the rate c tau tr M,
c = coth(kappa/2), and all of the weight.  Where the multiplicity is higher the r x r matrix M tells the levels apart:
its eigenvalues gamma > 0 with projectors P_gamma give the rates c tau gamma, the weights s† P_gamma s/gamma and the
amplitudes P_gamma s.  Derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from dataclasses import replace as changed
from functools import cached_property

from derive.algebra.factor import factored
from derive.algebra.linear import Dense, identity, plus
from derive.algebra.linear import times as product
from derive.algebra.polynomial import Polynomial, at, faddeev, integral, multiplied, taylor
from derive.derivations.levels.topic import bright_levels
from derive.derivations.spectrum import Level, Place, Spectrum, places, places_in
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.formula.tree import ONE, Formula, inverse, negate, number, power, times
from derive.formula.tree import plus as plus_of


@dataclass(frozen=True)
class Fading:
    """A level with its leading rate and the start's weight; `amplitudes` are V† P psi, one vector a start state."""

    level: Level
    amplitudes: tuple[tuple[Formula, ...], ...]


class Residues:
    """N, s and W over g, all read off at a root of g."""

    def __init__(self, spectrum: Spectrum):
        self.spectrum = spectrum
        g: Polynomial = [spectrum.field.one]
        for factor, _ in spectrum.factors:
            g = multiplied(g, factor)
        self.g = g
        self.slope = taylor(g, 1)
        self.starts = [(w, spectrum.watched.outside(psi)) for w, psi in spectrum.starts()]

    def part(self, moments: Sequence[Element]) -> Polynomial:
        """The polynomial part of g(E) sum_m moments[m] E^(-m-1)."""
        out = []
        for j in range(len(self.g) - 1):
            total = self.spectrum.field.zero
            for m in range(len(self.g) - 1 - j):
                total = total + self.g[j + m + 1] * moments[m]
            out.append(total)
        return out

    def _grown(self, v: Vector) -> list[Vector]:
        """v, A v, A^2 v, ..., as many as g needs."""
        found = [v]
        for _ in range(len(self.g) - 2):
            found.append(self.spectrum.act(found[-1]))
        return found

    @cached_property
    def block(self) -> list[list[Polynomial]]:
        """N: V† (E - A)^(-1) V = N/g."""
        inner, columns = self.spectrum.watched.inner, self.spectrum.columns
        grown = [self._grown(v) for v in columns]
        return [[self.part([inner(u, v) for v in line]) for line in grown] for u in columns]

    @cached_property
    def amplitudes(self) -> list[list[Polynomial]]:
        """g V† (E - A)^(-1) |psi>, one vector a start state."""
        inner, columns = self.spectrum.watched.inner, self.spectrum.columns
        grown = [self._grown(psi) for _, psi in self.starts]
        return [[self.part([inner(u, v) for v in line]) for u in columns] for line in grown]

    @cached_property
    def weight(self) -> Polynomial:
        """W: the mean of g <psi|(E - A)^(-1)|psi>, psi's bright part."""
        spectrum, field = self.spectrum, self.spectrum.field
        moments = [field.zero] * (len(self.g) - 1)
        for w, psi in self.starts:
            bright = bright_part(spectrum, psi)
            for m, v in enumerate(self._grown(bright)):
                moments[m] = moments[m] + w * spectrum.watched.inner(bright, v)
        return self.part(moments)

    def on_detector(self) -> list[tuple[Element, list[Element]]]:
        """(weight, D† |psi>) of each start state."""
        watched = self.spectrum.watched
        return [(w, [watched.inner(d, psi) for d in watched.d]) for w, psi in self.spectrum.starts()]


def fading_levels(spectrum: Spectrum, letter: str, returned: bool, amplitudes: bool) -> list[Fading]:
    """Every bright level that is told apart at order tau; `amplitudes` only where they are wanted.

    A start on the detector itself (`returned`) has the weights times tau^2, and these are given.
    """
    if not spectrum.bright.size:
        return []
    residues = Residues(spectrum)
    if spectrum.rank == 1:
        return [_of_rank_one(residues, level, returned, amplitudes) for level in bright_levels(spectrum, 1, letter)]
    found = []
    for factor, multiplicity in spectrum.factors:
        for place in places(spectrum, factor, letter):
            if multiplicity == 1:
                found.append(_single(residues, place, returned, amplitudes))
            else:
                found += _several(residues, place, multiplicity, returned, amplitudes)
    return found


def is_on_detector(spectrum: Spectrum) -> bool:
    """Whether the start has nothing off the detector."""
    return not any(spectrum.watched.outside(psi) for _, psi in spectrum.starts())


def bright_part(spectrum: Spectrum, psi: Vector) -> Vector:
    """The part of psi that the detector reaches."""
    out: Vector = {}
    for u, n in zip(spectrum.bright.basis, spectrum.bright.norms, strict=True):
        c = spectrum.watched.inner(u, psi) / n
        if c:
            accumulate(out, {x: c * f for x, f in u.items()})
    return out


# -- one level at a place


def _of_rank_one(residues: Residues, level: Level, returned: bool, amplitudes: bool) -> Fading:
    weight = level.weight
    if returned:  # tau^2 |<v|V>|^2/(1 - q)^2, and c (1 - q)^2 = eta
        eta = residues.spectrum.efficiency.eta
        weight = times(level.rate[1], inverse(eta)) if eta != ONE else level.rate[1]
    return Fading(changed(level, weight=weight), _seen(residues, level.place) if amplitudes else ())


def _single(residues: Residues, place: Place, returned: bool, amplitudes: bool) -> Fading:
    """The one level at this place: M is of rank one."""
    spectrum, slope = residues.spectrum, _at(place, residues.slope)
    block = [[_at(place, p) for p in row] for row in residues.block]
    (c,) = place.taken([spectrum.coth])
    rate = place.ratio(c * _trace(block), slope, 1)
    weight = _emitted(residues, place, block) if returned else _at(place, residues.weight)
    level = _level(spectrum, place, 1, place.field.formula(place.root), rate, place.ratio(weight, slope, 1), returned)
    return Fading(level, _seen(residues, place) if amplitudes else ())


def _seen(residues: Residues, place: Place) -> tuple[tuple[Formula, ...], ...]:
    """V† Pi psi for each start state."""
    slope = _at(place, residues.slope)
    return tuple(tuple(place.ratio(_at(place, p), slope, 1) for p in line) for line in residues.amplitudes)


def _several(
    residues: Residues, place: Place, multiplicity: int, returned: bool, amplitudes: bool
) -> list[Fading]:
    """The levels at this place: the eigenvalues of M that are not zero."""
    spectrum, field = residues.spectrum, place.field
    down = field.one / _at(place, residues.slope)
    block = [[_at(place, p) * down for p in row] for row in residues.block]
    seen = [[_at(place, p) * down for p in line] for line in residues.amplitudes]
    chi = faddeev(field, block)[spectrum.rank - multiplicity:]
    factors = factored(field, chi)
    zeroth = field.formula(place.root)
    found = []
    for factor, fold in factors:
        for inner, gamma in _gammas(spectrum, place, factor):
            m = [inner.taken(row) for row in block]
            projector = _projector(inner.field, m, gamma, [inner.taken(f) for f, _ in factors], fold < spectrum.rank)
            states = [[_dot(row, inner.taken(s)) for row in projector] for s in seen]
            weight = _emitted(residues, inner, _scaled(projector, gamma)) if returned else _weight(
                spectrum, inner, [inner.taken(s) for s in seen], states) / gamma
            (c,) = inner.taken([spectrum.coth])
            put = inner.field.formula
            level = _level(spectrum, inner, fold, zeroth, put(c * gamma), put(weight), returned)
            kept = tuple(tuple(put(x) for x in s) for s in states) if amplitudes else ()
            found.append(Fading(level, kept))
    return found


def _gammas(spectrum: Spectrum, place: Place, factor: Polynomial) -> list[tuple[Place, Element]]:
    """(where it is computed, gamma) for the roots of a factor of M's characteristic polynomial."""
    if len(factor) == 2:
        return [(place, -factor[0])]
    if place.polynomial is not None:
        raise NotCovered("a level of this detector needs a root of a polynomial over another root")
    formulas = [*spectrum.watched.formulas(), place.field.formula(place.root)]
    whole, scale = integral(factor)  # gamma is a root of `whole` over `scale`
    inner = places_in(spectrum.setting, formulas, place.field, whole, place.letter + "1")
    return [(one, one.root / one.taken([scale])[0]) for one in inner]


def _projector(field: Field, m: Dense, gamma: Element, factors: Sequence[Polynomial], zero_too: bool) -> Dense:
    """P_gamma = sum_k p_k sum_(i+j=k-1) M^i gamma^j/p'(gamma), p the least polynomial of M."""
    p: Polynomial = [field.zero, field.one] if zero_too else [field.one]
    for f in factors:
        p = multiplied(p, f)
    total = [[field.zero] * len(m) for _ in m]
    raised = identity(field, len(m))
    for i in range(len(p) - 1):
        c = field.zero
        for k in range(len(p) - 1, i, -1):
            c = c * gamma + p[k]
        total = plus(total, _scaled(raised, c))
        raised = product(raised, m)
    return _scaled(total, field.one / at(taylor(p, 1), gamma))


def _level(
    spectrum: Spectrum, place: Place, fold: int, zeroth: Formula, rate: Formula, weight: Formula, returned: bool
) -> Level:
    put = spectrum.written_out
    if returned and not spectrum.efficiency.is_perfect:
        kept = spectrum.efficiency.tidy(power(plus_of(ONE, negate(spectrum.efficiency.q)), number(-2)))
        weight = times(kept, weight)
    return Level(place, fold, zeroth, {0: zeroth}, {1: put(rate)}, put(weight))


def _weight(spectrum: Spectrum, place: Place, seen: Sequence[Sequence[Element]], states: Sequence[Sequence[Element]]
            ) -> Element:
    """The mean of s† P s."""
    total = place.field.zero
    for (w, _), s, ps in zip(spectrum.starts(), seen, states, strict=True):
        total = total + place.taken([w])[0] * _dot([place.field.conjugate(x) for x in s], ps)
    return total


def _emitted(residues: Residues, place: Place, block: Dense) -> Element:
    """The mean of a† M a, a the start's amplitudes on the detector."""
    total = place.field.zero
    for w, a in residues.on_detector():
        front, *lifted = place.taken([w, *a])
        total = total + front * _dot([place.field.conjugate(x) for x in lifted], [_dot(row, lifted) for row in block])
    return total


def _at(place: Place, p: Polynomial) -> Element:
    return at(place.taken(p) or [place.field.zero], place.root)


def _trace(block: Dense) -> Element:
    total = block[0][0]
    for k in range(1, len(block)):
        total = total + block[k][k]
    return total


def _scaled(m: Dense, c: Element) -> Dense:
    return [[x * c for x in row] for row in m]


def _dot(a: Sequence[Element], b: Sequence[Element]) -> Element:
    total = a[0] * b[0]
    for x, y in zip(a[1:], b[1:], strict=True):
        total = total + x * y
    return total
