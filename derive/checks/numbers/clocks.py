"""Where numbers are wanted: after n asks, or at a time t, which is the n-th ask's or falls behind it, n = floor(t/tau).
"""

from __future__ import annotations

from dataclasses import dataclass

from flint import ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.text import text
from derive.formula.tree import Formula, number, replace, times
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.points import decide
from derive.problem.points import Point, holds, rational_value
from derive.problem.setting import Relation, Setting, Wish

BITS = 256
"""For the quotient t/tau alone."""
MOST_ASKS = 10**9


@dataclass(frozen=True)
class Clock:
    """n asks and the time t, free of letters; `by_time`: the time was given, and n asks have come by then."""

    n: int
    t: Formula
    by_time: bool

    def at(self, with_time: bool = False) -> tuple[tuple[str, str], ...]:
        """(letter, text) pairs for a number's place."""
        asked = (("n", str(self.n)),)
        return (("t", text(self.t)), *asked) if self.by_time or with_time else asked

    def values(self) -> dict[str, Formula]:
        return {"n": number(self.n), "t": self.t}


@dataclass(frozen=True)
class Wants:
    """`asks` and `times` of one topic, as the worksheet gives them."""

    asks: tuple[int, ...] = ()
    times: tuple[Formula, ...] = ()

    @classmethod
    def of(cls, wish: Wish) -> Wants:
        asks, moments = wish.option("asks", ()), wish.option("times", ())
        return cls(asks if isinstance(asks, tuple) else (), moments if isinstance(moments, tuple) else ())

    def __bool__(self) -> bool:
        return bool(self.asks or self.times)

    def clocks(self, setting: Setting, point: Point) -> tuple[list[Clock], list[str]]:
        """Every clock at a point, asks first, each in the order given; and why others are left out."""
        values = point.mapping()
        tau = tidy(replace(setting.interval.length, values))
        found = [Clock(n, tidy(times(number(n), tau)), False) for n in dict.fromkeys(self.asks)]
        if self.times and setting.interval.law != "fixed":
            return found, ["at random intervals the number of asks by a time is itself random; asks are followed"]
        reasons: list[str] = []
        for moment in dict.fromkeys(self.times):
            t = tidy(replace(moment, values))
            try:
                found.append(Clock(asks_by(t, tau), t, True))
            except (NotCovered, OutsideValidity, NeedsPrecision) as reason:
                reasons.append(str(reason))
        return found, reasons


def tidy(f: Formula) -> Formula:
    """A rational value as a number, anything else as it is."""
    q = rational_value(f)
    return f if q is None else number(q)


def asks_by(t: Formula, tau: Formula) -> int:
    """floor(t/tau) for exact t > 0 and tau > 0; where balls hold a whole number, it is decided exactly."""
    exact, interval = rational_value(t), rational_value(tau)
    if exact is not None and interval is not None:
        return _allowed(exact // interval)
    with ctx.workprec(BITS):
        nothing = Values({})
        quotient = enclose_real(t, nothing) / enclose_real(tau, nothing)
        low, high = quotient.lower().floor(), quotient.upper().floor()
        if not quotient.is_finite():
            raise OutsideValidity(f"t = {text(t)} is no time here")
        last = _allowed(int(high.unique_fmpz()))
        if low == high or holds(Relation(t, "=", times(number(last), tau)), {}, decide):
            return last
    raise OutsideValidity(f"whether an ask comes before or after t = {text(t)} is not decided")


def _allowed(n: int) -> int:
    if n > MOST_ASKS:
        raise NotCovered(f"at most {MOST_ASKS:,} asks are followed, and a time holds {n:,}")
    return int(n)
