"""Topic `absorber` for random intervals: the averaged master equation, and the potential that serves survival alone.

Independent intervals with mean m1 and second moment m2, a detector that keeps q = sqrt(1 - eta) of an amplitude it
was asked about.  After n asks, t = n m1, the averaged state off the detector obeys

    d rho/dt = -i [A, rho] - gamma_1 {V V†, rho} - gamma_2 [A, [A, rho]] + O(m1^2),
    gamma_1 = m2/(2 m1) + m1 q/(1 - q),      gamma_2 = (m2 - m1^2)/(2 m1).

The double commutator keeps the trace, so survival (not states, positions, or detection from superpositions) also
follows from A - i V V†/Gamma with Gamma = 1/gamma_1, wrong by O(m1^2) at fixed t.  Derived here.
"""

from __future__ import annotations

from fractions import Fraction

from derive.derivations.absorber import steps
from derive.derivations.imperfect import Imperfect
from derive.errors import NotCovered
from derive.exact.field import Field
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    Formula,
    free_letters,
    inverse,
    number,
    operator,
    order,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import POSITIVE, Setting
from derive.record.said import Claim, Derivation, Line, Step

VALID = "small h*tau*coth(kappa/2), t = n*tau fixed, tau the mean interval; wrong by O(tau^2)"
SURVIVAL = "survival alone, from a start off the detector; " + VALID


def derive_averaged(setting: Setting, detector: Imperfect) -> Derivation:
    """Loss and dephasing of the averaged state, and the strength that serves survival."""
    if detector.is_weak:
        raise NotCovered("with random intervals the efficiency is taken free of tau")
    spread = inverse(setting.interval.shape) if setting.interval.shape is not None else ONE  # (m2 - m1^2)/m1^2
    loss, dephasing = _coefficients(detector, spread)
    claims = [
        _claim("averaged.loss", "averaged loss", loss, VALID),
        _claim("averaged.dephasing", "averaged dephasing", dephasing, VALID),
        Claim("absorber.plain.strength", "absorber", Quantity("absorber strength", (("absorber", "plain"),)),
              _tidy(inverse(loss), detector), valid_for=SURVIVAL),
    ]
    told = (*steps.one_step(detector.is_perfect), *_steps(setting, claims))
    note = ("Dressed absorber, ancilla and cascade match higher orders of a fixed interval; with random ones the "
            "dephasing comes before them.",)
    return Derivation("absorber", tuple(claims), told, (note,))


def _coefficients(detector: Imperfect, spread: Formula) -> tuple[Formula, Formula]:
    """m2 = (1 + spread) m1^2; q/(1 - q)."""
    half = number(Fraction(1, 2))
    q = detector.q
    held = () if detector.is_perfect else (times(q, inverse(plus(ONE, times(MINUS_ONE, q)))),)
    loss = times(TAU, plus(times(half, plus(ONE, spread)), *held))
    return _tidy(loss, detector), _tidy(times(half, TAU, spread), detector)


def _tidy(f: Formula, detector: Imperfect) -> Formula:
    """Numbers gathered, unless the efficiency has letters."""
    if free_letters(detector.eta):
        return f
    field = Field.of([f], {"tau": POSITIVE, **detector.domains})
    return field.formula(field.element(f))


def _claim(name: str, quantity: str, value: Formula, valid: str) -> Claim:
    return Claim(f"absorber.{name}", "absorber", Quantity(quantity), value, valid_for=valid)


def _steps(setting: Setting, claims: list[Claim]) -> tuple[Step, ...]:
    rho, a, b, h = operator("rho"), operator("A"), operator("B", 0), operator("H")
    m1, m2, s = operator("m", 1), operator("m", 2), operator("s")
    loss, dephasing, gamma = operator("gamma", 1), operator("gamma", 2), operator("Gamma")
    minus_i = times(MINUS_ONE, I_UNIT)
    inner = plus(times(a, rho), times(MINUS_ONE, rho, a))
    two = number(2)
    outer = plus(times(power(a, two), rho), times(number(-2), a, rho, a), times(rho, power(a, two)))
    law = "gamma law of shape s" if setting.interval.shape is not None else "exponential law"
    second = times(plus(ONE, inverse(s)), power(m1, number(2))) if setting.interval.shape is not None else times(
        number(2), power(m1, number(2)))
    values = {c.id: c.value for c in claims}
    shown = {name: values[f"absorber.{name}"] for name in ("averaged.loss", "averaged.dephasing", "plain.strength")}
    formulas = {name: f for name, f in shown.items() if isinstance(f, Formula)}
    expanded = plus(
        rho,
        times(minus_i, m1, plus(times(h, rho), times(MINUS_ONE, rho, h))),
        times(number(Fraction(-1, 2)), m2,
              plus(times(power(h, two), rho), times(number(-2), h, rho, h), times(rho, power(h, two)))),
    )
    equation = times(m1, plus(
        times(minus_i, inner),
        times(MINUS_ONE, loss, plus(times(b, rho), times(rho, b))),
        times(MINUS_ONE, dephasing, outer),
    ))
    q = operator("q")
    return (
        Step(
            (f"Intervals of {law} with mean ", m1, " = ", TAU, " have the second moment", ),
            (Line(m2, second),),
        ),
        Step(
            ("One interval takes a state ", rho, " on average to ", operator("rho", 1), ", to second order",),
            (Line(operator("rho", 1), expanded),),
        ),
        Step(
            ("Off the detector a state loses ", times(m2, b), " / 2 from each side in its own interval; what a “no” "
             "leaves on the detector, ", q, " of it from ask to ask, comes back in later intervals, which are "
             "independent of the first. Of the second order an evolution for the mean time accounts for the square of ",
             m1, ". What is left, with ", operator("A"), " = QHQ and ", b, " = V V†, changes the averaged state from "
             "ask to ask by"),
            (
                Line(operator("delta", "rho"), equation),
                Line(loss, plus(times(number(Fraction(1, 2)), m2, inverse(m1)),
                                times(m1, q, inverse(plus(ONE, times(MINUS_ONE, q)))))),
                Line(dephasing, times(number(Fraction(1, 2)), plus(m2, times(MINUS_ONE, power(m1, number(2)))),
                                      inverse(m1))),
            ),
            where=("so that at fixed ", operator("t"), " = ", operator("n"), m1, " states are right up to ",
                   order(power(m1, number(2))), "; here ", q, " is the square root of 1 − η."),
        ),
        Step(("The loss is",), (Line(loss, formulas["averaged.loss"]),), earns="absorber.averaged.loss"),
        Step(
            ("and superpositions of levels of ", operator("A"), " lose their phase by",),
            (Line(dephasing, formulas["averaged.dephasing"]),), earns="absorber.averaged.dephasing",
        ),
        Step(
            ("The double commutator keeps the trace: survival alone, neither states nor positions, also follows from a "
             "potential −i", gamma, " on the detector with ", gamma, " = 1/", loss, ":"),
            (Line(gamma, formulas["plain.strength"]),), earns="absorber.plain.strength",
        ),
    )
