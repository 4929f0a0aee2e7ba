"""Figures of a late-time law: the law stretched to a constant size, and how far off it is, scale by scale."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

from flint import acb, arb

from derive.checks.trend import BLOCK, total
from derive.numerics.decimals import rounded
from derive.problem.points import Point
from derive.record.said import Curve, Plot

DIGITS = 6
SHOWN = 60
"""Asks in the first figure."""
FIRST_BLOCK, BLOCKS = 20, 8
DECAY = Fraction(3)
"""F_n falls like n^-3 on the line and the half line."""


def late_plots(
    law: Callable[[int], acb], phi: Sequence[arb], point: Point, expected: str, decay: Fraction = DECAY
) -> tuple[Plot, ...]:
    """n^decay F_n by both roads, and the relative error at 20, 40, 80, ...; `expected` says how it should fall."""
    return (_law_plot(law, phi, point, decay), _error_plot(law, phi, point, expected))


def _at(point: Point) -> str:
    return ", ".join(f"{name} = {value}" for name, value in point.text())


def _law_plot(law: Callable[[int], acb], phi: Sequence[arb], point: Point, decay: Fraction) -> Plot:
    asks = range(1, SHOWN + 1)
    x = tuple(str(n) for n in asks)
    front = {n: arb(n) ** (arb(decay.numerator) / decay.denominator) for n in asks}
    stretched = tuple(rounded(law(n).real * front[n], DIGITS) for n in asks)
    measured = tuple(rounded(phi[n] * phi[n] * front[n], DIGITS) for n in asks)
    whole = decay.denominator == 1
    return Plot(
        "asymptotics.law",
        f"From early on the probability of a first click, times n^{decay if whole else f'({decay})'}, follows the law "
        f"({_at(point)}).",
        r"ask $n$",
        rf"$n^{decay if whole else f'{{{decay}}}'} F_n$",
        (Curve("law", "derived", x, stretched), Curve("experiment", "measured", x, measured)),
    )


def _error_plot(law: Callable[[int], acb], phi: Sequence[arb], point: Point, expected: str) -> Plot:
    scales = [FIRST_BLOCK << j for j in range(BLOCKS) if (FIRST_BLOCK << j) + BLOCK < len(phi)]
    errors = [_error(law, phi, scale) for scale in scales]
    x = tuple(map(str, scales))
    return Plot(
        "asymptotics.error",
        f"The law's relative error, summed over {BLOCK} asks from n on, falls by {expected} a doubling ({_at(point)}).",
        r"ask $n$",
        r"$\sum |\Delta F_n| / \sum F_n$",
        (Curve(f"{expected} per doubling", "measured", x, tuple(rounded(e, DIGITS) for e in errors)),),
        "log",
        "log",
    )


def _error(law: Callable[[int], acb], phi: Sequence[arb], scale: int) -> arb:
    asks = range(scale, scale + BLOCK)
    return total(abs(law(n).real - phi[n] * phi[n]) for n in asks) / total(phi[n] * phi[n] for n in asks)
