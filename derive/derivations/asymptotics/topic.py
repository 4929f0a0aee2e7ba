"""Topic `asymptotics`: first detection at late asks, n -> infinity, on the line and the half line.

    phi_n = <d| U (Q U)^(n-1) |psi>,   F_n = |phi_n|^2,   phi(z) = sum_n z^n phi_n = v(z)/u(z)

The edges of the band, energies +-2|h|, make phi singular at z = exp(+-i a), a = 2|h| tau, and the singular terms
transfer one by one (`asymptotics_band.py`).  To K terms

    phi_n = w^d sum_(k=1)^K (2k-1)!! (a/n)^k [p_k J_k(a n) + q_k J_(k+1)(a n)] + O(n^(-K-3/2)),

w = -i h/|h|, d the distance of the start, p_k and q_k real; K = 1 is printed with the first term of Bessel's
functions, J_1(x) = -sqrt(2/(pi x)) cos(x + pi/4) + ... (DLMF 10.17.3).  Valid for every a that is no multiple of pi,
n (pi - a) and n a large.  At a = k pi the edges meet, and the law has no oscillation.

Sources: phys-rev-e-95-032141 for the return to first order; the rest is derived here.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from math import prod

from derive.derivations.asymptotics import steps
from derive.derivations.asymptotics.band import REAL, EdgeLaw, MeetingLaw, edge_law, meeting_law, rest_letters
from derive.derivations.asymptotics.density import derive_density
from derive.derivations.asymptotics.distance import derive_at_distance
from derive.derivations.asymptotics.finite import derive_finite
from derive.derivations.asymptotics.images import aliased_rest, edge_rest, meeting_rest
from derive.derivations.asymptotics.impurity import derive_impurity, is_edge_law
from derive.derivations.asymptotics.setting import Watch, band_of, clear_of, sizes_hidden, watch
from derive.derivations.asymptotics.square import derive_square
from derive.derivations.asymptotics.survival import survival_law
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import (
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    free_letters,
    letter,
    number,
    order,
    plus,
    power,
    replace,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import POSITIVE, Finite, Lattice, Setting, Wish
from derive.record.said import Claim, Derivation, Kind

DEFAULT_ORDER = 1
HIGHEST_ORDER = 4
N = letter("n")
INFINITY = constant("infinity")
TAIL = 100
"""The tail begins where the second term is this many times smaller than the first."""
LONGEST_START, LONGEST_LAW = 3_000, 9_000
"""Characters; a longer tail start is left out with a note, a longer law is refused."""
SOURCES = ("phys-rev-e-95-032141",)


@dataclass(frozen=True)
class Law:
    """phi_n = phase * real to the order asked, F_n, the power of n that is left out, and where the tail begins."""

    watch: Watch
    real: Formula
    square: Formula
    left_out: Fraction
    start: Formula
    valid: str
    rests: dict[str, Formula]

    @property
    def begins(self) -> bool:
        """Whether the second term says where the tail begins, in a formula that can be read."""
        return not is_trapping(self.watch) and len(text(self.start)) <= LONGEST_START


def derive_asymptotics(setting: Setting, wish: Wish) -> Derivation:
    """The laws of phi_n and F_n to `order` terms, and the ask from which the tail is the tail."""
    terms = wish.option("order", DEFAULT_ORDER)
    if not isinstance(terms, int):
        raise TypeError(f"order is {terms!r}, not an integer")
    if terms > HIGHEST_ORDER:
        raise NotCovered(f"late-time laws are derived to {HIGHEST_ORDER} terms, and {terms} are asked for")
    if isinstance(setting.space, Finite):
        return derive_finite(setting, terms)
    if isinstance(setting.space, Lattice) and setting.space.name == "density":
        return derive_density(setting, terms)
    if isinstance(setting.space, Lattice) and setting.space.energies and setting.space.name != "square lattice":
        return derive_impurity(setting, terms)
    if isinstance(setting.space, Lattice) and setting.space.name == "square lattice":
        return derive_square(setting, terms)
    far = setting.start.distance if setting.start is not None else None
    if far is not None and far.head == "letter" and isinstance(setting.space, Lattice) and setting.space.name == "line":
        return derive_at_distance(setting, band_of(setting), far, terms)
    if is_edge_law(watch(setting), terms):
        return derive_impurity(setting, terms)
    law = late_law(setting, terms)
    claims = _claims(law)
    if any(len(text(c.value)) > LONGEST_LAW for c in claims[:2] if isinstance(c.value, Formula)):
        raise NotCovered(f"the law to {terms} terms is too long to be printed here; ask for fewer")
    left, later = survival_law(setting, law.watch, terms, neat)
    written = (*steps.written(law, terms), *later)
    return Derivation("asymptotics", (*claims, *left), written, _notes(law), SOURCES)


def late_law(setting: Setting, terms: int) -> Law:
    seen = watch(setting)
    law = _meeting(seen, terms) if seen.meets is not None else _apart(seen, terms)
    real, square, start = (clear_of(f, setting) for f in (law.real, law.square, law.start))
    rests = {name: clear_of(f, setting) for name, f in law.rests.items()}
    return Law(law.watch, real, square, law.left_out, start, law.valid, rests)


def _claims(law: Law) -> tuple[Claim, ...]:
    amplitude = times(law.watch.phase, law.real)
    laws = (
        Claim("asymptotics.amplitude", "asymptotics", Quantity("detection amplitude"), amplitude,
              _late(law.left_out), valid_for=law.valid),
        Claim("asymptotics.F", "asymptotics", Quantity("detection probability"), law.square,
              _late(law.left_out - Fraction(3, 2)), valid_for=law.valid),
    )
    if not law.begins:
        return laws
    return (*laws, Claim("asymptotics.from", "asymptotics", Quantity("tail start"), law.start, valid_for=law.valid))


def is_trapping(seen: Watch) -> bool:
    """Sites between the end and the detector are cut off by frequent asking; what is in them leaks out slowly."""
    return seen.name == "half line" and seen.detector > 0


def _late(left_out: Fraction) -> Kind:
    """As n -> infinity, with the error that the next term makes."""
    error = order(power(N, number(left_out)))
    shown = f"n^{left_out}" if left_out.denominator == 1 else f"n^({left_out})"
    return Kind("limit", f"as n -> infinity, error O({shown})", toward=(("n", INFINITY),), error=error)


# -- edges apart


def _apart(seen: Watch, terms: int) -> Law:
    law = edge_law(seen.pair, max(terms, 2), not seen.below)
    rests = _edge_rests(seen, law)
    if terms == 1:
        p, q = (_inserted(law, side[0], seen.a, rests, seen.below) for side in (law.p, law.q))
        real, square = _first_term(seen, p, q), _first_square(seen.a, p, q)
    else:
        real = _bessel_sum(seen, law, terms, rests)
        square = power(real, number(2))
    return Law(seen, real, square, -terms - Fraction(3, 2), _start(seen, law, rests), _valid_apart(seen), rests)


def _start(seen: Watch, law: EdgeLaw, rests: dict[str, Formula]) -> Formula:
    """TAIL |C_2/C_1| = TAIL 3 a |h_1/h_0 - 1/(8 a^2)|."""
    first, second = (neat(_shown(law, x, seen.a), rests) for x in law.h)
    bend = neat(power(times(number(8), power(seen.a, number(2))), number(-1)), ())
    share = times(second, power(first, number(-1)))
    return times(number(3 * TAIL), seen.a, call("abs", replace(plus(share, -bend), rests)))


def _edge_rests(seen: Watch, law: EdgeLaw) -> dict[str, Formula]:
    """What the letters that occur in the law stand for."""
    rest = edge_rest if seen.below else aliased_rest
    used = _letters_in([*law.p, *law.q, *law.h])
    return {name: rest(seen.a, r.wave, r.j) for name, r in law.rests.items() if name in used}


def _letters_in(found: list[Element]) -> set[str]:
    """Names of the letters that these elements depend on."""
    return set().union(*(free_letters(x.field.formula(x)) for x in found))


def _inserted(law: EdgeLaw, x: Element, a: Formula, rests: dict[str, Formula], real: bool) -> Formula:
    """A coefficient in the user's letters; with aliasing the rests are complex, and its real part is meant."""
    if not real and not _letters_in([x]) & set(law.rests):
        x, real = (x + law.field.conjugate(x)).scaled(Fraction(1, 2)), True
    f = neat(_shown(law, x, a), rests)
    return replace(f if real else call("Re", f), rests)


def _shown(law: EdgeLaw, x: Element, a: Formula) -> Formula:
    return replace(law.field.formula(x), {"a": a})


def neat(f: Formula, rests: Iterable[str]) -> Formula:
    """f multiplied out, where an exact field holds it; every letter is taken for real, the rests among them."""
    bare, sizes = sizes_hidden(f)
    domains = dict.fromkeys(sorted(free_letters(bare) - set(rests)), POSITIVE) | dict.fromkeys(rests, REAL)
    try:
        field = Field.of([bare], domains)
        return replace(field.formula(field.element(bare)), sizes)
    except (NotCovered, ZeroDivisionError):
        return f


def _angle(a: Formula) -> Formula:
    return times(a, N) + times(PI, number(Fraction(1, 4)))


def _wave(a: Formula, p: Formula, q: Formula) -> Formula:
    """-(p cos + q sin)(a n + pi/4)."""
    terms = [-p * call("cos", _angle(a))] if p != ZERO else []
    terms += [-q * call("sin", _angle(a))] if q != ZERO else []
    return plus(*terms)


def _first_term(seen: Watch, p: Formula, q: Formula) -> Formula:
    """-sqrt(2 a/pi) (p cos + q sin)/n^(3/2)."""
    front = times(number(2), call("sqrt", times(seen.size, TAU, power(PI, number(-1)))))
    return times(front, _wave(seen.a, p, q), power(N, number(Fraction(-3, 2))))


def _first_square(a: Formula, p: Formula, q: Formula) -> Formula:
    wave = _wave(a, p, q)
    return times(number(2), a, power(wave, number(2)), power(PI, number(-1)), power(N, number(-3)))


def _bessel_sum(seen: Watch, law: EdgeLaw, terms: int, rests: dict[str, Formula]) -> Formula:
    """sum_k (2k-1)!! (a/n)^k [p_k J_k(a n) + q_k J_(k+1)(a n)]."""
    out, front = [], law.field.one
    for k in range(1, terms + 1):
        front = (front * law.field.element(letter("a"))).scaled(Fraction(2 * k - 1))
        for c, nu in ((law.p[k - 1], k), (law.q[k - 1], k + 1)):
            f = _inserted(law, front * c, seen.a, rests, seen.below)
            if f != ZERO:
                out.append(times(f, call("bessel_J", number(nu), times(seen.a, N)), power(N, number(-k))))
    return plus(*out)


def _valid_apart(seen: Watch) -> str:
    if seen.below:
        return f"n large beside 1/({text(seen.a)}) and 1/(pi - {text(seen.a)})"
    return f"{text(seen.a)} no multiple of pi (there the edges of the band meet), n large beside 1/({text(seen.a)})"


# -- edges on one point


def _meeting(seen: Watch, terms: int) -> Law:
    turns = seen.meets
    if turns is None:
        raise TypeError("the edges do not meet here")
    kept = max(terms, 2)
    law = meeting_law(seen.pair, kept, _vanishing(seen, turns, kept))
    used = _letters_in(law.h)
    rests = {name: meeting_rest(turns, r.wave, r.j) for name, r in law.rests.items() if name in used}
    c = [_over_root_pi(law, k, turns, rests) for k in range(kept)]
    body = plus(*(times(x, power(N, number(-k - Fraction(3, 2)))) for k, x in enumerate(c[:terms])))
    real = body if turns % 2 == 0 else times(power(number(-1), N), body)
    square = times(neat(power(c[0], number(2)), ()), power(N, number(-3))) if terms == 1 else power(body, number(2))
    start = times(number(TAIL), call("abs", neat(times(c[1], power(c[0], number(-1))), ())))
    valid = f"this interval alone, at which {text(seen.a)} = {text(times(number(turns), PI))} and the edges meet"
    return Law(seen, real, square, -terms - Fraction(3, 2), start, valid, rests)


def _vanishing(seen: Watch, turns: int, terms: int) -> frozenset[str]:
    """The rests that are 0 because images cancel in pairs."""
    found = rest_letters(seen.pair, terms + 2)
    return frozenset(name for name, r in found.items() if meeting_rest(turns, r.wave, r.j) == ZERO)


def _over_root_pi(law: MeetingLaw, k: int, turns: int, rests: dict[str, Formula]) -> Formula:
    """h_k/Gamma(-k - 1/2), with a = turns pi."""
    inside = law.field.formula(_hankel(law, k))
    root = call("sqrt", times(number(turns), PI))
    return replace(neat(times(replace(inside, {"root_a": root}), power(PI, number(Fraction(-1, 2)))), rests), rests)


def _hankel(law: MeetingLaw, k: int) -> Element:
    """sqrt(pi) h_k/Gamma(-k - 1/2) = (-1)^(k+1) (2k+1)!!/2^(k+1) h_k."""
    return law.h[k].scaled(Fraction((-1) ** (k + 1) * prod(range(1, 2 * k + 2, 2)), 2 ** (k + 1)))


def _notes(law: Law) -> tuple[tuple[str | Formula, ...], ...]:
    notes: list[tuple[str | Formula, ...]] = []
    if law.watch.meets is None:
        k = letter("k")
        notes.append((
            "At the intervals where ", law.watch.a, " = ", times(k, PI), " with whole ", k,
            " the two edges of the band fall on one point and the law has another form, without oscillation; give the "
            "interval that length to have it."))
    if is_trapping(law.watch):
        notes.append((
            "The sites between the end and the detector are emptied slowly, by exponentials that hide the law until "
            "they have faded; from which ask on the tail is the tail is therefore not stated.",))
    elif not law.begins:
        notes.append(("The ask from which the tail is the tail has a formula too long to be of use; it is left out.",))
    return tuple(notes)
