"""Figure of the tail on a finite graph: first clicks ask by ask, and the envelope that the nearest poles set."""

from __future__ import annotations

from collections.abc import Sequence

from flint import arb, ctx

from derive.checks.asymptotics.finite import measured_amplitudes
from derive.checks.asymptotics.poles import moduli_at
from derive.checks.summed import Bench
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.numerics.decimals import rounded
from derive.numerics.late_poles import Modulus, enclose_tail_start
from derive.numerics.points import sample_points
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Setting
from derive.record.said import Claim, Curve, Plot

SHOWN, BITS, DIGITS = 60, 512, 12


def tail_plot(setting: Setting, claims: Sequence[Claim], effort: Check) -> tuple[Plot, ...]:
    """At the first sample point, for a derived rate and a single start; none where poles are not isolated."""
    if not isinstance(setting.space, Finite) or not any(c.id == "asymptotics.rate" for c in claims):
        return ()
    for point in sample_points(setting, effort)[:1]:
        try:
            with ctx.workprec(BITS):
                return _drawn(setting, point)
        except (NeedsPrecision, NotCovered, OutsideValidity):
            return ()
    return ()


def _drawn(setting: Setting, point: Point) -> tuple[Plot, ...]:
    moduli = moduli_at(setting, point, DIGITS, BITS)
    if not moduli[0].shares:
        return ()
    seen = measured_amplitudes(Bench(1, DIGITS).at(setting, point), SHOWN)
    clicks = [(n, seen.probability(n)) for n in range(1, SHOWN + 1)]
    shown = [(n, f) for n, f in clicks if f > 0]
    envelope = [_envelope(moduli[0], n) for n in range(1, SHOWN + 1)]
    begins = rounded(enclose_tail_start(moduli, DIGITS), 3)
    where = ", ".join(f"{name} = {value}" for name, value in point.text())
    says = f"First clicks ask by ask at {where}; from ask {begins} on the nearest poles alone are within 1 per cent."
    curves = (
        Curve("nearest poles", "derived", tuple(str(n) for n in range(1, SHOWN + 1)), tuple(map(rounded, envelope))),
        Curve("experiment", "measured", tuple(str(n) for n, _ in shown), tuple(rounded(f) for _, f in shown)),
    )
    return (Plot("asymptotics.tail", says, "ask $n$", "$F_n$", curves, y_scale="log"),)


def _envelope(nearest: Modulus, n: int) -> arb:
    """(C_1 |lambda_1|^(n-1))^2."""
    amplitude = nearest.envelope * nearest.size ** (n - 1)
    return amplitude * amplitude
