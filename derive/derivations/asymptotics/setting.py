"""What the late-time law needs of a setting: half the band's width in phase, where its edges fall, and the waves.

H_xy = h on every bond of a line or a half line.  a = 2|h| tau; `turns` is a/pi where that is a rational number.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from derive.derivations.asymptotics.band import Pair, Wave
from derive.errors import NotCovered
from derive.exact.arguments import is_positive
from derive.exact.field import Field
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    Formula,
    bound_letter,
    call,
    constant,
    free_letters,
    inverse,
    letter,
    negate,
    number,
    order,
    power,
    rebuild,
    replace,
    times,
    walk,
)
from derive.problem.setting import Lattice, Relation, Setting
from derive.record.said import Kind

PI_LOW, PI_HIGH = Fraction(314159265358979323846, 10**20), Fraction(314159265358979323847, 10**20)
SERVED = "of infinite graphs the line, the half line and the square lattice are derived"


@dataclass(frozen=True)
class Watch:
    """A watched line or half line: |h|, a (in tau), w^d with w = -i h/|h|, the waves, and where a stands to pi.

    `below`: a < pi surely.  `turns`: a/pi where it is rational.
    """

    name: str
    size: Formula
    a: Formula
    phase: Formula
    distance: int
    detector: int
    pair: Pair
    below: bool
    turns: Fraction | None

    @property
    def meets(self) -> int | None:
        """k where a = k pi: both edges of the band on one point."""
        whole = self.turns is not None and self.turns.denominator == 1
        return int(self.turns) if whole and self.turns is not None else None


@dataclass(frozen=True)
class Band:
    """|h| and h/|h|, a = 2|h| tau, whether a < pi surely, and a/pi where it is rational."""

    size: Formula
    unit: Formula
    a: Formula
    below: bool
    turns: Fraction | None


def watch(setting: Setting, impurities: int = 0) -> Watch:
    """The setting as a `Watch`; `NotCovered` where the topic does not reach."""
    space = setting.space
    if not isinstance(space, Lattice) or space.name not in ("line", "half line"):
        raise NotCovered(f"{SERVED}; this graph is none of them")
    band = band_of(setting, impurities)
    d, x = places(setting)
    unit = call("conj", band.unit) if x < d and band.unit not in (ONE, MINUS_ONE) else band.unit
    phase = _unit_power(unit, abs(d - x))
    pair = _pair(space.name, d, x)
    return Watch(space.name, band.size, band.a, phase, abs(d - x), d, pair, band.below, band.turns)


def band_of(setting: Setting, impurities: int = 0) -> Band:
    """What one perfect detector on a lattice, uniform but for at most `impurities` sites, sees of the band."""
    space = setting.space
    if not isinstance(space, Lattice) or space.hopping is None:
        raise NotCovered(f"{SERVED}; this graph is none of them")
    if len(space.energies) > impurities:
        most = "one site energy at most" if impurities else "no site energies"
        raise NotCovered(f"{SERVED} with {most}")
    if len(setting.detectors) != 1 or setting.detectors[0].efficiency != ONE:
        raise NotCovered(f"{SERVED} with one perfect detector")
    if setting.interval.law != "fixed":
        raise NotCovered(f"{SERVED} for intervals of fixed length")
    size, unit = _polar(space.hopping, setting)
    exact = times(number(2), size, setting.interval.length)
    turns = rational_part(exact * inverse(PI), setting)
    return Band(size, unit, times(number(2), size, TAU), _is_below(exact, turns, setting), turns)


def late_kind(left_out: Fraction) -> Kind:
    """As n -> infinity, with the error that the next term makes, n^left_out."""
    shown = f"n^{left_out}" if left_out.denominator == 1 else f"n^({left_out})"
    error = order(power(letter("n"), number(left_out)))
    return Kind("limit", f"as n -> infinity, error O({shown})", toward=(("n", constant("infinity")),), error=error)


def sizes_hidden(f: Formula) -> tuple[Formula, dict[str, Formula]]:
    """f with every abs(...) a letter of its own, and what each stands for: a size is positive, what is in it need not
    be, and a field whose letters are all taken for positive must not see it."""
    held: dict[str, Formula] = {}

    def hidden(g: Formula) -> Formula:
        if g.head == "call" and g.args[0] == "abs":
            name = next((n for n, size in held.items() if size == g), f"size {len(held)}")
            held[name] = g
            return letter(name)
        if not any(isinstance(a, Formula) for a in g.args):
            return g
        return rebuild(g, tuple(hidden(a) if isinstance(a, Formula) else a for a in g.args))

    return hidden(f), held


def clear_of(f: Formula, setting: Setting) -> Formula:
    """f with its bound letters named otherwise where the worksheet has declared them."""
    taken = set(setting.domains())
    clashing = sorted({bound for node in walk(f) if (bound := bound_letter(node)) is not None and bound in taken})
    for name in clashing:
        fresh = next(c for c in (f"{name}{k}" for k in range(1, 1000)) if c not in taken)
        f = _renamed(f, name, fresh)
    return f


def _renamed(f: Formula, name: str, fresh: str) -> Formula:
    """f with the bound letter `name` called `fresh`, inside out."""
    args = tuple(_renamed(a, name, fresh) if isinstance(a, Formula) else a for a in f.args)
    if f.head in ("sum", "integral") and f.args[0] == name:
        return Formula(f.head, (fresh, *args[1:3], replace(args[3], {name: letter(fresh)})))
    return rebuild(f, args) if args else f


def places(setting: Setting) -> tuple[int, int]:
    """Sites of detector and start."""
    d = _site(setting.detectors[0].place, "the detector")
    if setting.start is None:
        raise NotCovered("the late-time law depends on the start, and there is none")
    if setting.start.distance is not None:
        return d, d + _site(setting.start.distance, "the start")
    if setting.start.place is None:
        raise NotCovered(f"{SERVED} for a start on one site")
    return d, _site(setting.start.place, "the start")


def _site(place: Formula | str | None, who: str) -> int:
    if not isinstance(place, Formula):
        raise NotCovered(f"{SERVED}, {who} standing on one site")
    if place.head != "number" or place.args[0].denominator != 1:
        raise NotCovered(f"{SERVED}, {who} standing on a numbered site")
    return int(place.args[0])


def _polar(h: Formula, setting: Setting) -> tuple[Formula, Formula]:
    """|h| and h/|h|."""
    domains = setting.domains()
    if is_positive(h, domains):
        return h, ONE
    if is_positive(negate(h), domains):
        return negate(h), MINUS_ONE
    size = call("abs", h)
    return size, h * inverse(size)


def _unit_power(unit: Formula, d: int) -> Formula:
    """(-i unit)^d."""
    if unit in (ONE, MINUS_ONE):
        turns = d % 4 if unit == MINUS_ONE else -d % 4
        return (ONE, I_UNIT, MINUS_ONE, times(MINUS_ONE, I_UNIT))[turns]
    turned = times(MINUS_ONE, I_UNIT, unit)
    return power(turned, number(d)) if d > 1 else turned if d else ONE


def _pair(name: str, d: int, x: int) -> Pair:
    """J_|d-x| on the line; on the half line the mirror image behind the end is subtracted."""
    if name == "line":
        return Pair(((1, 0),), ((1, abs(d - x)),), d == x)
    return Pair(_mirrored(d, d), _mirrored(d, x), d == x)


def _mirrored(d: int, x: int) -> Wave:
    """J_k - (-1)^(m+1) J_(k+2m+2), m the site nearer to the end."""
    k, m = abs(d - x), min(d, x)
    return ((1, k), ((-1) ** m, k + 2 * m + 2))


def rational_part(f: Formula, setting: Setting) -> Fraction | None:
    """f where it is a rational number, else None."""
    try:
        field = Field.of([f, PI], setting.domains())
        x = field.element(f)
    except (NotCovered, ZeroDivisionError):
        return None
    g = field.formula(x)
    return g.args[0] if g.head == "number" else None


def _is_below(exact: Formula, turns: Fraction | None, setting: Setting) -> bool:
    """a < pi: by number, or because the worksheet assumes it."""
    if turns is not None:
        return turns < 1
    if not free_letters(exact):
        value = rational_part(exact, setting)
        return value is not None and value < PI_LOW
    return any(_says_below(r, exact, setting) for r in setting.assume)


def _says_below(r: Relation, a: Formula, setting: Setting) -> bool:
    """Whether right - left (or left - right) is a positive multiple of pi - a."""
    if r.op not in ("<", ">"):
        return False
    smaller, larger = (r.left, r.right) if r.op == "<" else (r.right, r.left)
    if (smaller, larger) == (a, PI):
        return True
    gap = larger - smaller
    share = rational_part(gap * inverse(PI - a), setting)
    return share is not None and share > 0
