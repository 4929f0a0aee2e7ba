"""Topic `asymptotics` on a finite graph: the poles of phi(z) outside the unit circle, and the law that they make.

    phi(z) = sqrt(eta) N(z)/D(z),   D(z) = prod_j (1 - lambda_j z),   N(z) = sum_l q_l z z_l prod_(k != l) (1 - z z_k)

w phases z_l = exp(-i E_l tau) are seen (hbar = 1); the lambda_j, |lambda_j| < 1, are the eigenvalues other than 0 of
the undetected step on the bright space, the roots of P(x) = x^m D(1/x).  Partial fractions give, with s = 0 where the
degree of N is at most m and s = 1 where it is m + 1,

    phi_n = sqrt(eta) sum_x B(x) x^(n-1-s)/P'(x),   P(x) = 0,   B(x) = x^(m+s) N(1/x),   n > s,
    F_n = |phi_n|^2,     S_n = 1 - P_det + sum_(k>n) F_k,

and the pole nearest to the circle, largest |lambda|, wins.  One or two poles are solved for; which of several is
nearest, and how near, are numbers at a point, certified from the step itself (`checks/asymptotics/poles.py`).  Valid
where no two poles coincide.  Derived here.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.levels import Levels
from derive.algebra.phases import trigonometric
from derive.derivations.asymptotics import finite_steps as steps
from derive.derivations.detection.topic import total_probability, valid_for
from derive.derivations.renewal.topic import MOST_EXPANDED, closed_levels, denominator
from derive.derivations.sight import Sight
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import (
    I_UNIT,
    ONE,
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
    walk,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import EXACTLY, Claim, Derivation, Kind, Prose

N, TWO, HALF = letter("n"), number(2), number(Fraction(1, 2))
LATE = Kind("limit", "as n -> infinity", toward=(("n", constant("infinity")),))
LONGEST_LAW = 2_500
"""Characters of a law that is still printed."""
ONE_DETECTOR = "On a finite graph late asks are derived for one detector with one state, asked at fixed intervals."
ONE_LEVEL = "One level is all that the detector sees: what the first ask misses is never seen."
NEVER = "This start is never detected."
SOURCES = ("phys-rev-e-95-032141",)


@dataclass(frozen=True)
class Tail:
    """P (monic), B for every part of the start, both with their constant terms first, and s."""

    sight: Sight
    levels: Levels
    p: list[Element]
    tops: list[list[Element]]
    late: int

    @property
    def poles(self) -> int:
        return len(self.p) - 1

    @property
    def is_real(self) -> bool:
        """Whether poles come in conjugate pairs."""
        return all(self.levels.field.conjugate(c) == c for c in self.p)

    @property
    def eta(self) -> Formula:
        return self.sight.setting.detectors[0].efficiency

    @property
    def weights(self) -> list[Formula]:
        return [w for w, _ in self.sight.explored.mixture]


def derive_finite(setting: Setting, terms: int) -> Derivation:
    """The laws of phi_n, F_n and S_n, and the `terms` nearest moduli of poles."""
    if len(setting.detectors) != 1 or setting.detectors[0].rank != 1 or setting.interval.law != "fixed":
        raise NotCovered(ONE_DETECTOR)
    sight = Sight(setting)
    if total_probability(sight) == ZERO:
        raise NotCovered(NEVER)
    tail = _tail(sight)
    poles = tail.poles if tail is not None else sight.phases - (setting.detectors[0].efficiency == ONE)
    if not poles:
        raise NotCovered(ONE_LEVEL)
    laws, notes = _laws(tail) if tail is not None else ([], (_NO_LEVELS,))
    valid = f"{valid_for(sight)}; no two poles at one place"
    claims = tuple(
        Claim(c.id, c.topic, c.quantity, c.value, c.kind, valid_for=valid)
        for c in (*laws, *_numbers(sight, tail, poles, terms))
    )
    written = steps.written(setting.detectors[0].efficiency, tail, claims)
    return Derivation("asymptotics", claims, written, (*notes, *sight.warning()), SOURCES)


_NO_LEVELS: Prose = ("The seen energies have no closed form here, or are too many to be expanded, so the law is told "
                     "by the numbers of its leading poles.",)


def _tail(sight: Sight) -> Tail | None:
    """The fraction in z, turned round; None where levels have no closed form, or are too many."""
    levels = closed_levels(sight)
    if levels is None or levels.size > MOST_EXPANDED:
        return None
    d = denominator(sight, levels)
    m = len(d) - 1
    numerators = [_numerator(levels, row) for row in levels.s]
    late = int(any(len(top) > m + 1 for top in numerators))
    tops = [_turned(top, d, late) for top in numerators]
    return Tail(sight, levels, d[::-1], tops, late)


def _turned(top: list[Element], d: list[Element], late: int) -> list[Element]:
    """x^(m+s) N(1/x), its power x^m taken off by P, which has a 1 there."""
    length = len(d) + late
    found = [*([d[0].field.zero] * (length - len(top))), *reversed(top)]
    found = [c - found[len(d) - 1] * p for c, p in zip(found, d[::-1], strict=False)]
    return found[: len(d) - 1]


def _numerator(levels: Levels, row: Sequence[Element]) -> list[Element]:
    """N(z) = sum_l p_l s_l z z_l prod_(k != l) (1 - z z_k), constant term first."""
    field = levels.field
    total = [field.zero] * (levels.size + 1)
    for place, (p, s) in enumerate(zip(levels.p, row, strict=True)):
        part = [field.zero, p * s * levels.z[place]]
        for k, z in enumerate(levels.z):
            if k != place:
                part = [a - z * b for a, b in zip([*part, field.zero], [field.zero, *part], strict=True)]
        total = [a + b for a, b in zip(total, part, strict=True)]
    while total and not total[-1]:
        total.pop()
    return total


# -- laws


def _laws(tail: Tail) -> tuple[list[Claim], tuple[Prose, ...]]:
    """phi_n for a pure start, F_n, and S_n behind a perfect detector."""
    one = _OnePole(tail) if tail.poles == 1 else _ManyPoles(tail)
    root = [] if tail.eta == ONE else [call("sqrt", tail.eta)]
    share = [] if tail.eta == ONE else [tail.eta]
    kind = LATE if tail.late else EXACTLY
    claims = []
    if len(tail.tops) == 1:
        claims.append(_law("amplitude", "detection amplitude", times(*root, one.amplitude(0)), kind))
    claims.append(_law("F", "detection probability", _mixed(tail, share, one.probability), kind))
    if tail.eta == ONE and _is_algebraic(tail.sight.setting.interval.length):
        value = plus(*_dark(tail.sight), _mixed(tail, share, one.beyond))
        claims.append(_law("survival", "survival probability", value, EXACTLY))
    kept = [c for c in claims if isinstance(c.value, Formula) and len(text(c.value)) <= LONGEST_LAW]
    notes: tuple[Prose, ...] = ()
    if len(kept) < len(claims):
        notes = (("Laws of more than some thousand characters are left out.",),)
    return kept, notes


def _law(name: str, about: str, value: Formula, kind: Kind) -> Claim:
    return Claim(f"asymptotics.{name}", "asymptotics", Quantity(about), value, kind)


def _is_algebraic(length: Formula) -> bool:
    """Whether the interval is rational at rational letters, which repeating the experiment many times asks for."""
    return not any(node.head in ("constant", "call") for node in walk(length))


def _dark(sight: Sight) -> list[Formula]:
    """1 - P_det, where it is not 0."""
    field = Field.of([total_probability(sight)], sight.setting.domains())
    dark = field.one - field.element(total_probability(sight))
    return [field.formula(dark)] if dark else []


def _mixed(tail: Tail, front: list[Formula], part: Callable[[int], Formula]) -> Formula:
    """The mean over the start's mixture."""
    weights = tail.weights
    if len(weights) == 1:
        return times(*front, part(0))
    return times(*front, plus(*(times(w, part(k)) for k, w in enumerate(weights))))


def _asks(more: int) -> Formula:
    """n + more."""
    return plus(N, number(more)) if more else N


class _OnePole:
    """phi_n = B(lambda) lambda^(n-1-s): everything in closed form."""

    def __init__(self, tail: Tail):
        self.tail, self.field = tail, tail.levels.field
        self.pole = -tail.p[0]
        self.square = self.pole * self.field.conjugate(self.pole)
        self.is_real = self.field.conjugate(self.pole) == self.pole

    def amplitude(self, part: int) -> Formula:
        return times(trigonometric(self._top(part)), self._raised(_asks(-1 - self.tail.late)))

    def probability(self, part: int) -> Formula:
        return times(trigonometric(self._strength(part)), self._squared(-1 - self.tail.late))

    def beyond(self, part: int) -> Formula:
        """sum_(k>n) F_k."""
        share = trigonometric(self._strength(part) / (self.field.one - self.square))
        return times(_joined(share), self._squared(-self.tail.late))

    def _top(self, part: int) -> Element:
        total = self.field.zero
        for c in reversed(self.tail.tops[part]):
            total = total * self.pole + c
        return total

    def _strength(self, part: int) -> Element:
        top = self._top(part)
        return top * self.field.conjugate(top)

    def _raised(self, exponent: Formula) -> Formula:
        return power(trigonometric(self.pole), exponent)

    def _squared(self, less: int) -> Formula:
        """|lambda|^(2(n + less))."""
        if self.is_real:
            return self._raised(times(TWO, N) if not less else plus(times(TWO, N), number(2 * less)))
        return power(trigonometric(self.square), _asks(less))


def _joined(f: Formula) -> Formula:
    """A product with whole powers of one base put together."""
    powers: dict[Formula, Fraction] = {}
    for a in f.args if f.head == "times" else (f,):
        whole = a.head == "power" and a.args[1].head == "number" and a.args[0].head != "number"
        base, exponent = (a.args[0], a.args[1].args[0]) if whole else (a, Fraction(1))
        powers[base] = powers.get(base, Fraction(0)) + exponent
    return times(*(_raised(base, number(e)) for base, e in powers.items()))


class _ManyPoles:
    """Sums over the roots of P.  Where B is i times a real polynomial, the i stands in front."""

    def __init__(self, tail: Tail):
        self.tail = tail
        self.x, self.y = _bound_letters(tail.sight)
        self.tops = [_without_unit(top) for top in tail.tops]

    def amplitude(self, part: int) -> Formula:
        unit = [] if self.tops[part] == self.tail.tops[part] else [I_UNIT]
        return times(*unit, self._series(part))

    def probability(self, part: int) -> Formula:
        return power(call("abs", self._series(part)), TWO)

    def _series(self, part: int) -> Formula:
        """sum_x B(x) x^(n-1-s)/P'(x)."""
        body = times(self._share(part, self.x, False), _raised(letter(self.x), _asks(-1 - self.tail.late)))
        return self._summed(self.x, False, body)

    def beyond(self, part: int) -> Formula:
        """sum_(k>n) F_k = sum_xy c_x conj(c_y) (x y)^(n-s)/(1 - x y), y over the conjugate roots."""
        x, y = letter(self.x), letter(self.y)
        body = times(self._share(part, self.x, False), self._share(part, self.y, True),
                     power(times(x, y), _asks(-self.tail.late)), power(ONE - times(x, y), number(-1)))
        return self._summed(self.x, False, self._summed(self.y, True, body))

    def _share(self, part: int, name: str, mirrored: bool) -> Formula:
        """B(x)/P'(x)."""
        below = [c.scaled(Fraction(k)) for k, c in enumerate(self.tail.p)][1:]
        top, slope = (self._written(c, name, mirrored) for c in (self.tops[part], below))
        return top / slope

    def _summed(self, name: str, mirrored: bool, body: Formula) -> Formula:
        return Formula("rootsum", (name, self._written(self.tail.p, name, mirrored), body))

    def _written(self, p: Sequence[Element], name: str, mirrored: bool) -> Formula:
        """A polynomial, or the one with conjugate coefficients."""
        bar = self.tail.levels.field.conjugate
        return in_powers([bar(c) if mirrored else c for c in p], name)


def _without_unit(top: list[Element]) -> list[Element]:
    """B/i where that is real and B is not, else B."""
    if not any(top) or any(c.field.conjugate(c) != -c for c in top):
        return top
    unit = top[0].field.element(-I_UNIT)
    return [c * unit for c in top]


def in_powers(p: Sequence[Element], name: str) -> Formula:
    """sum_k p_k x^k, highest power first, the coefficients in sines and cosines."""
    x = letter(name)
    found = [times(trigonometric(c), _raised(x, number(k))) for k, c in reversed(list(enumerate(p))) if c]
    return plus(*found)


def _raised(x: Formula, exponent: Formula) -> Formula:
    return ONE if exponent == ZERO else x if exponent == ONE else power(x, exponent)


def _bound_letters(sight: Sight) -> tuple[str, str]:
    """Two letters that the worksheet has not taken."""
    taken = {x.name for x in sight.setting.letters}
    names = ("x", "y", "X", "Y", *(f"x{k}" for k in range(len(taken) + 2)))
    first, second, *_ = (n for n in names if n not in taken)
    return first, second


# -- numbers of the leading poles


def _numbers(sight: Sight, tail: Tail | None, poles: int, terms: int) -> list[Claim]:
    """Moduli and angles of the nearest poles, the tail's rate, and where the nearest stand alone."""
    known = _closed_modulus(tail) if tail is not None else None
    pairs = tail is None or tail.is_real
    found: list[Claim] = []
    for j in range(1, min(terms, (poles + 1) // 2 if pairs else poles) + 1):
        which = (("pole", j),)
        modulus = known if j == 1 and known is not None else operator("ρ", j)
        found.append(_number(f"pole.{j}.modulus", Quantity("pole modulus", which), modulus))
        if poles > 1 or not pairs:
            found.append(_number(f"pole.{j}.angle", Quantity("pole angle", which), operator("θ", j)))
    rate = times(TWO, call("log", known)) if known is not None else operator("κ")
    found.append(_number("rate", Quantity("tail rate"), rate))
    if poles > 1 and len(sight.explored.mixture) == 1:
        found.append(_number("from", Quantity("tail start"), operator("n", "tail")))
    return found


def _number(name: str, quantity: Quantity, value: Formula) -> Claim:
    return Claim(f"asymptotics.{name}", "asymptotics", quantity, value)


def _closed_modulus(tail: Tail) -> Formula | None:
    """1/|lambda| of one pole; of two with real t = their sum and q = their product, whether real or a pair,

    |lambda| = |(|t| + sqrt(t^2 - 4 q))/2|.
    """
    if tail.poles == 1:
        one = _OnePole(tail)
        size = call("abs", trigonometric(one.pole)) if one.is_real else power(trigonometric(one.square), HALF)
        return power(size, number(-1))
    if tail.poles == 2 and tail.is_real:
        t, q = -tail.p[1], tail.p[0]
        apart = call("sqrt", trigonometric(t * t - q.scaled(Fraction(4))))
        return times(TWO, power(call("abs", plus(call("abs", trigonometric(t)), apart)), number(-1)))
    return None
