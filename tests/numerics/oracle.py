"""mpmath as the outside oracle for formulas: its own functions, evaluated from the worksheet's text."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

import mpmath
from flint import acb, arb, ctx

NAMES: dict[str, Any] = {
    "exp": mpmath.exp, "log": mpmath.log, "sqrt": mpmath.sqrt, "sin": mpmath.sin, "cos": mpmath.cos,
    "tan": mpmath.tan, "cot": mpmath.cot, "sinh": mpmath.sinh, "cosh": mpmath.cosh, "tanh": mpmath.tanh,
    "coth": mpmath.coth, "asin": mpmath.asin, "acos": mpmath.acos, "atan": mpmath.atan, "Gamma": mpmath.gamma,
    "bessel_J": mpmath.besselj, "bessel_I": mpmath.besseli, "elliptic_K": mpmath.ellipk,
    "binomial": mpmath.binomial, "factorial": mpmath.factorial, "floor": mpmath.floor, "abs": mpmath.fabs,
    "Re": mpmath.re, "Im": mpmath.im, "conj": mpmath.conj, "i": mpmath.mpc(0, 1),
}  # fmt: skip


def by_mpmath(source: str, values: Mapping[str, Any], digits: int = 60) -> Any:
    """A formula without sums, integrals and roots, by mpmath; whole numbers become mpf so that 1/3 is exact enough."""
    with mpmath.workdps(digits):
        numbers = re.sub(r"(?<![A-Za-z_0-9])(\d+)", r"mpf(\1)", source).replace("^", "**")
        names = {**NAMES, "mpf": mpmath.mpf, "pi": mpmath.pi(), "euler_gamma": mpmath.euler(), **values}
        return mpmath.mpc(eval(numbers, {"__builtins__": {}}, names))  # the test's own constants only


def as_ball(z: Any, slack: str = "1e-45") -> acb:
    """An mpmath number as a ball of relative radius about `slack`."""
    with mpmath.workdps(80):
        spread = mpmath.mpf(slack) * (1 + abs(z))
        real, imag = mpmath.nstr(z.real, 70), mpmath.nstr(z.imag, 70)
        radius = mpmath.nstr(spread, 5)
    with ctx.workprec(300):
        return acb(arb(f"{real} +/- {radius}"), arb(f"{imag} +/- {radius}"))


def log10_of(x: arb) -> float:
    """log10 of an upper bound of |x|, -inf for exact 0."""
    bound = abs(x).upper()
    return float((bound.log() / arb(10).log()).mid()) if bound > 0 else float("-inf")
