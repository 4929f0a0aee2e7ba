"""Road "trend": a law for n -> infinity, laid beside measured values at n, 2n, 4n, 8n.

At each scale N the claim and the measurement are compared at BLOCKS blocks of 40 consecutive n between N and 2N:

    gap  = sum |claimed - measured|,     size = sum |measured|      (balls; "narrow": the gap known to one part in 1000)

Summed over blocks, an oscillating law is compared with its own envelope; ratios at its zeros play no part.  What the
last three doublings must show:

    error O(n^-e)   agrees: the gap falls like n^-(e - 0.1) or faster, on average over the three
                    refuted: slower than n^-(e - 0.4), and no faster at the end than before; or as a bare limit is
    within r        agrees: gap/size below r at each of the last three; refuted: above r there, and falling by less
                    than a factor 0.8 in each
    bare limit      agrees: gap/size falls by a factor 0.8 or less in each; refuted: by more than 0.95 in each
    otherwise       undecided: the scales are raised, and it stays undecided if that does not help

A gap that no precision tells from 0 has fallen.  Common practice for limits, with thresholds of our own.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from math import log2

from flint import arb

from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula, free_letters
from derive.numerics.evaluate import Values, enclose_real
from derive.record.said import Kind

ROAD = "trend"
BLOCK, BLOCKS = 40, 5
NODES = 12
DOUBLINGS = 3
NARROW = Fraction(1, 1000)
SHORT_OF, FLAT_BELOW, STILL_RISING = 0.1, 0.4, 0.15
FALLS, FLAT = 0.8, 0.95

At = Callable[[int], arb]


@dataclass(frozen=True, slots=True)
class Course:
    """Gap and size at the scales first, 2 first, 4 first, ..., 2^DOUBLINGS first.

    `places`: log2 of the n looked at, their mean at each scale; left out where it is the scale's own.
    """

    first: int
    gaps: tuple[arb, ...]
    sizes: tuple[arb, ...]
    letter: str = "n"
    places: tuple[float, ...] = ()

    @property
    def last(self) -> int:
        return self.first << DOUBLINGS

    def ratios(self) -> list[arb]:
        return [g / s for g, s in zip(self.gaps, self.sizes, strict=True)]

    def exponents(self) -> list[float]:
        """p of gap ~ n^-p from each scale to the next."""
        apart = [b - a for a, b in pairwise(self.places)] or [1.0] * DOUBLINGS
        return [fall / step for fall, step in zip(_slopes(self.gaps), apart, strict=True)]


def asks_at(scale: int) -> list[int]:
    """The n at which a scale is looked at."""
    step = max(scale // BLOCKS, BLOCK)
    return [scale + b * step + k for b in range(BLOCKS) for k in range(BLOCK)]


def last_ask(first: int) -> int:
    """The largest n of a course that begins at `first`."""
    return asks_at(first << DOUBLINGS)[-1]


def follow(claimed: At, measured: At, first: int) -> Course:
    """The course of a claim; `NeedsPrecision` where a gap is neither narrow nor 0."""
    gaps, sizes, places = [], [], []
    for j in range(DOUBLINGS + 1):
        asks = asks_at(first << j)
        places.append(sum(map(log2, asks)) / len(asks))
        pairs = [(claimed(n), measured(n)) for n in asks]
        gaps.append(_narrow(total(abs(c - m) for c, m in pairs), total(abs(c) for c, _ in pairs)))
        sizes.append(total(abs(m) for _, m in pairs))
    return Course(first, tuple(gaps), tuple(sizes), places=tuple(places))


def follow_smooth(claimed: At, measured: At, first: int) -> Course:
    """The same for a law's smooth part: one windowed mean a scale, over N/4 to both sides of N.

    Hann's window sin^2 takes what oscillates faster than 1/N down like N^-3; the claim, smooth, is averaged over
    NODES of the window's n.
    """
    gaps, sizes = [], []
    for j in range(DOUBLINGS + 1):
        N = first << j
        half = N // 4
        every = range(N - half + 1, N + half)
        some = every[:: max(1, len(every) // NODES)]
        seen, said = (_windowed(f, asks, N, half) for f, asks in ((measured, every), (claimed, some)))
        gaps.append(_narrow(abs(said - seen), abs(said)))
        sizes.append(abs(seen))
    return Course(first, tuple(gaps), tuple(sizes))


def _windowed(f: At, asks: range, N: int, half: int) -> arb:
    weights = [(arb.pi() * (n - N + half) / (2 * half)).sin() ** 2 for n in asks]
    return total(w * f(n) for w, n in zip(weights, asks, strict=True)) / total(weights)


def total(values: Iterable[arb]) -> arb:
    out = arb(0)
    for x in values:
        out += x
    return out


def _narrow(gap: arb, scale: arb) -> arb:
    """The gap, if it is known well enough."""
    if gap > 0 and gap.rad() < gap.lower() * NARROW.numerator / NARROW.denominator:
        return gap
    if gap.contains(0) and gap.upper() < scale.lower() * arb(10) ** -20:
        return gap
    raise NeedsPrecision("claim and measurement are too close for the precision at hand")


def verdict_of(course: Course, kind: Kind) -> tuple[str, str]:
    """(verdict, one sentence) that the course earns a claim of this kind."""
    off = course.ratios()[-1]
    far = f"off by {shown(off)} of the law at {course.letter} = {course.last}"
    if _fallen(course.gaps[-1]):
        return "agrees", f"no difference is seen at {course.letter} = {course.last}"
    if kind.error is not None:
        return _by_error(course, error_power(kind.error), far)
    if kind.within is not None:
        return _by_bound(course, kind.within, far)
    return _bare(course, far)


def _fallen(gap: arb) -> bool:
    return bool(gap.contains(0))


def error_power(error: Formula) -> Fraction:
    """e of O(n^-e), constant factors aside; logarithms are not read."""
    inner = error.args[0] if error.head == "order" else error
    power = Fraction(0)
    for f in inner.args if inner.head == "times" else (inner,):
        if f.head == "letter":
            power -= 1
        elif f.head == "power" and f.args[0].head == "letter" and f.args[1].head == "number":
            power -= f.args[1].args[0]
        elif free_letters(f):
            raise NotCovered("an error term that is no power of n is not followed")
    return power


def _slopes(values: Sequence[arb]) -> list[float]:
    """log2 of what each doubling divides by."""
    return [log2(float(a.mid()) / float(b.mid())) for a, b in zip(values, values[1:], strict=False)]


def _by_error(course: Course, e: Fraction, far: str) -> tuple[str, str]:
    slopes = course.exponents()
    mean = sum(slopes) / len(slopes)
    seen = f"the difference falls like {course.letter}^-{mean:.2f} over {DOUBLINGS} doublings"
    said = f"{far}; {seen}, claimed {course.letter}^-{float(e):g}"
    if mean >= float(e) - SHORT_OF:
        return "agrees", said
    short = mean <= float(e) - FLAT_BELOW and slopes[-1] <= slopes[0] + STILL_RISING
    return ("refuted" if short or _bare(course, far)[0] == "refuted" else "undecided"), said


def _by_bound(course: Course, within: Formula, far: str) -> tuple[str, str]:
    bound = enclose_real(within, Values({}))
    ratios = course.ratios()[1:]
    if all(r < bound for r in ratios):
        return "agrees", far
    slow = all(b > a * FALLS for a, b in zip(ratios, ratios[1:], strict=False))
    return ("refuted" if slow and all(r > bound for r in ratios) else "undecided"), far


def _bare(course: Course, far: str) -> tuple[str, str]:
    ratios = course.ratios()
    pairs = list(zip(ratios, ratios[1:], strict=False))
    falls = 2 ** (sum(_slopes(ratios)) / len(pairs))
    said = f"{far}; each doubling divides that by {falls:.2f}"
    if all(b < a * FALLS for a, b in pairs):
        return "agrees", said
    return ("refuted" if all(b > a * FLAT for a, b in pairs) else "undecided"), said


def shown(x: arb) -> str:
    """Two digits of a ball's middle, for a sentence."""
    return f"{float(x.mid()):.1e}"
