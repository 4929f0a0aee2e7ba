"""The watched system's spectrum, split exactly: bright and dark spaces, their polynomials, a level's own field.

bright   span of A^m V, found by exact rank; closed under every G_k
dark     the rest of range(Q): V† A^m v = 0 for all m, so the evolution there is A's own, at every tau
q(E)     det(E - A) on the bright space;  h(E) = det(E - H) on bright space and detector together
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from dataclasses import replace as changed
from fractions import Fraction
from functools import cached_property

from derive.algebra.bright import Krylov, dark_pieces, reached
from derive.algebra.factor import Factor, factored
from derive.algebra.polynomial import Polynomial, added, characteristic, continuants, multiplied
from derive.derivations.imperfect import COTH, Imperfect, efficiency_of
from derive.derivations.watched import Watched
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.formula.text import text
from derive.formula.tree import ONE, Formula, call, free_letters, inverse, letter, number, power, replace, times
from derive.problem.setting import POSITIVE, Letter, Setting

INVERTED_DEGREE = 4
"""Degree of a factor up to which dividing modulo it is tried for a shorter formula (measured: seconds beyond)."""


class Whole(Watched):
    """A finite setting with one detector, all of its sites in view, the start's amplitudes and `also` in the field."""

    def __init__(self, setting: Setting, also: Sequence[Formula] = ()):
        self.start = setting.start.mixture if setting.start else ()
        self.also = also
        super().__init__(setting, _size(setting))

    def formulas(self) -> list[Formula]:
        return self._formulas()

    def _formulas(self) -> list[Formula]:
        everywhere = [f for row in self.space.rows for _, f in row]  # other pieces of the graph too
        start = [f for w, v in self.start for f in (w, *(a for _, a in v))]
        return list(dict.fromkeys([*super()._formulas(), *everywhere, *start, *self.also]))


class Spectrum:
    """A finite setting with one detector, cut into bright and dark.

    `coth` is coth(kappa/2), 1 for a perfect detector.  Where the efficiency has letters it stays a letter, which
    `setting` then declares too, and `written_out` puts the efficiency in its place.
    """

    def __init__(self, setting: Setting):
        refuse(setting, imperfect_too=True)
        self.efficiency = efficiency_of(setting)
        if self.efficiency.is_weak:
            raise NotCovered("levels are derived for an efficiency that does not depend on the interval")
        self.setting, c = _with_coth(setting, self.efficiency)
        self.watched = Whole(self.setting, (c,))
        self.field: Field = self.watched.field
        self.coth = self.field.element(c)
        self.columns: list[Vector] = self.watched.krylov(1)[0]
        self.bright = reached(self.field, self.act, self.watched.inner, self.columns)

    @property
    def size(self) -> int:
        return self.watched.space.size

    @property
    def rank(self) -> int:
        return self.watched.detector.rank

    def act(self, v: Vector) -> Vector:
        """A v."""
        return self.watched.outside(self.watched.hamiltonian(v))

    def written_out(self, f: Formula) -> Formula:
        """f with coth(kappa/2) by the efficiency."""
        return replace(f, {COTH: self.efficiency.c})

    @cached_property
    def q(self) -> Polynomial:
        return characteristic(self.bright)

    @cached_property
    def h(self) -> Polynomial:
        """Rank one: h = (E - C) q - |V|^2 q', q' the polynomial without the first bright vector."""
        if not self.bright.size:
            return [-self.c, self.field.one]
        first = self.bright.norms[0]
        below = [-(first * x) for x in continuants(self.bright, 1)]
        return added(added([self.field.zero, *self.q], [-(self.c * x) for x in self.q]), below)

    @property
    def c(self) -> Element:
        """C = <d|H|d>, rank one."""
        return self.watched.inner(self.watched.d[0], self.watched.hamiltonian(self.watched.d[0]))

    @cached_property
    def factors(self) -> list[Factor]:
        return factored(self.field, self.q) if self.bright.size else []

    @cached_property
    def dark(self) -> list[Factor]:
        """Factors of det(E - A) on the dark space, with multiplicities."""
        room = self.size - self.rank - self.bright.size
        taken = Krylov(self.field, tuple(self.watched.d), (self.field.one,) * self.rank, (), ())
        units = [{x: self.field.one} for x in range(self.size)]
        pieces = dark_pieces(self.field, self.act, self.watched.inner, [taken, self.bright], units, room)
        return _gathered([f for piece in pieces for f in factored(self.field, characteristic(piece))])

    def starts(self) -> list[tuple[Element, Vector]]:
        """(weight, amplitudes) of each vector in the start's mixture."""
        element = self.field.element
        return [(element(w), {x: element(f) for x, f in v}) for w, v in self.watched.start]

    def start_numerator(self) -> Polynomial:
        """N(E) = sum_w w <psi| adj(E - A) |psi> on the bright space, rank one: the weight is N/q' at a level.

        adj(E - A)_ij = q_i q^(j+1) n_j/n_i for i <= j, q_i the first and q^(j) the last minors of the tridiagonal A.
        """
        bright = self.bright
        heads = _heads(bright)
        tails = [continuants(bright, j) for j in range(1, bright.size)] + [[self.field.one]]
        total: Polynomial = []
        for weight, psi in self.starts():
            c = [self.watched.inner(u, psi) for u in bright.basis]  # n_i times the coordinate
            for j, tail in enumerate(tails):
                for i in range(j + 1):
                    overlap = self._overlap(c[i], c[j], i == j)
                    if overlap:
                        front = weight * overlap / bright.norms[i]
                        total = added(total, [front * x for x in multiplied(heads[i], tail)])
        return total

    def _overlap(self, a: Element, b: Element, same: bool) -> Element:
        product = self.field.conjugate(a) * b
        return product if same else product + self.field.conjugate(product)


def _heads(space: Krylov) -> list[Polynomial]:
    """q_0 ... q_(M-1): the characteristic polynomials of the leading blocks."""
    field = space.field
    found: list[Polynomial] = [[field.one]]
    before: Polynomial = []
    for j in range(space.size - 1):
        now = found[-1]
        a = space.columns[j].get(j, field.zero)
        following = added([field.zero, *now], [-(a * c) for c in now])
        if j:
            b = space.columns[j - 1][j] * space.columns[j][j - 1]
            following = added(following, [-(b * c) for c in before])
        before = now
        found.append(following)
    return found


def refuse(setting: Setting, imperfect_too: bool = False) -> None:
    """What no derivation of levels serves yet."""
    if len(setting.detectors) != 1:
        raise NotCovered("levels are derived for one detector; several told apart are not served here yet")
    if setting.detectors[0].efficiency != ONE and not imperfect_too:
        raise NotCovered("where the size is a letter, levels are derived for a detector of efficiency 1")
    if setting.interval.law != "fixed":
        raise NotCovered("levels are derived for a fixed interval; random ones are not served here yet")


def _with_coth(setting: Setting, detector: Imperfect) -> tuple[Setting, Formula]:
    """The setting with a letter for coth(kappa/2) where it needs one, and coth(kappa/2)."""
    if not free_letters(detector.eta):
        return setting, detector.c
    return changed(setting, letters=(*setting.letters, Letter(COTH, POSITIVE))), letter(COTH)


def _size(setting: Setting) -> int:
    size = getattr(setting.space, "size", None)
    if not isinstance(size, int):
        raise NotCovered("levels are derived for finite graphs")
    return size


def _gathered(factors: Sequence[Factor]) -> list[Factor]:
    """Equal factors as one, their multiplicities added; in the order of degree and text."""
    out: list[Factor] = []
    for p, multiplicity in factors:
        same = next((k for k, (f, _) in enumerate(out) if len(f) == len(p) and f == p), None)
        if same is None:
            out.append((p, multiplicity))
        else:
            out[same] = (p, out[same][1] + multiplicity)
    return sorted(out, key=lambda f: (len(f[0]), [repr(c) for c in reversed(f[0])]))


# -- a level's own field


@dataclass(frozen=True)
class Place:
    """Where one level, or all roots of one factor, are computed: a field, the root in it, and the way into it.

    `polynomial` is None where the root is written out.  `letter` names it otherwise.
    """

    field: Field
    root: Element
    polynomial: Polynomial | None
    letter: str

    def taken(self, p: Sequence[Element]) -> Polynomial:
        """A polynomial over the base field, over this one."""
        return [self._one(x) for x in p]

    def _one(self, x: Element) -> Element:
        if x.field is self.field:
            return x
        if isinstance(self.field, WithRoot) and self.field.below is x.field:
            return self.field.lift(x)
        return self.field.element(x.field.formula(x))

    def ratio(self, top: Element, down: Element, exponent: int) -> Formula:
        """top/down^exponent: divided out where that is exact and shorter, else as a fraction."""
        if exponent == 0:
            return self.field.formula(top)
        bottom = self.field.formula(down)
        below = bottom if exponent == 1 else power(bottom, number(exponent))
        plain = times(self.field.formula(top), inverse(below))
        if self.polynomial is not None and len(self.polynomial) - 1 > INVERTED_DEGREE:
            return plain
        divided = self.field.formula(top * _power(self.field.one / down, exponent))
        return divided if self.polynomial is None or len(text(divided)) <= len(text(plain)) else plain


def _power(x: Element, n: int) -> Element:
    out = x
    for _ in range(n - 1):
        out = out * x
    return out


def places(spectrum: Spectrum, factor: Polynomial, letter: str) -> list[Place]:
    """The roots of a factor of the spectrum's q: see `places_in`."""
    return places_in(spectrum.setting, spectrum.watched.formulas(), spectrum.field, factor, letter)


def places_in(
    setting: Setting, formulas: Sequence[Formula], field: Field, factor: Polynomial, letter: str
) -> list[Place]:
    """The roots of a factor: written out for degree one and, where the root of the discriminant has a place in an
    exact field, for degree two; else one place for all of them.  `formulas` are what the field was made for."""
    if len(factor) == 2:
        return [Place(field, -factor[0], None, letter)]
    if len(factor) == 3:
        try:
            return _quadratic(setting, formulas, field, factor, letter)
        except NotCovered:
            pass
    wider = WithRoot(field, letter, factor[:-1])
    return [Place(wider, wider.root, factor, letter)]


def _quadratic(
    setting: Setting, formulas: Sequence[Formula], field: Field, factor: Polynomial, letter: str
) -> list[Place]:
    """E = -b/2 -+ s sqrt(d), the squares in b^2/4 - c taken out of the root."""
    half = factor[1].scaled(Fraction(1, 2))
    outer, inner = _square_out(half * half - factor[0])
    root = call("sqrt", field.formula(inner))
    wider = Field.of([*formulas, root], setting.domains())
    shift = wider.element(field.formula(outer)) * wider.element(root)
    middle = -wider.element(field.formula(half))
    return [Place(wider, middle - shift, None, letter), Place(wider, middle + shift, None, letter)]


def _square_out(x: Element) -> tuple[Element, Element]:
    """x = outer^2 inner, inner with integer content and without square factors that show."""
    if x.den is not None:
        raise NotCovered("a discriminant with a denominator")
    field = x.field
    content, factors = x.num.factor()
    outer, inner = field.one, field.one
    for f, multiplicity in factors:
        part = Element(field, f)
        outer = outer * _power(part, int(multiplicity) // 2) if multiplicity > 1 else outer
        inner = inner * part if multiplicity % 2 else inner
    top, bottom = int(content.p), int(content.q)
    outside, left = _square_in(top * bottom)
    return outer.scaled(Fraction(outside, bottom)), inner.scaled(Fraction(left))


def _square_in(n: int) -> tuple[int, int]:
    """n = s^2 m, s as large as small primes show."""
    s, m, d = 1, n, 2
    while d * d <= abs(m) and d < 10_000:
        while m % (d * d) == 0:
            s, m = s * d, m // (d * d)
        d += 1
    return s, m


@dataclass(frozen=True)
class Level:
    """One level, or all roots of one factor: formulas for E_0, for each power of tau in energy and rate, and weight."""

    place: Place
    multiplicity: int
    zeroth: Formula
    energy: Mapping[int, Formula]
    rate: Mapping[int, Formula]
    weight: Formula | None
