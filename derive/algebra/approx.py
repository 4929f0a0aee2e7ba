"""Floating values, for choices that cannot change a result: in which order things are printed, say.

No promise is made about any digit.
"""

from __future__ import annotations

import cmath
from collections.abc import Callable, Mapping, Sequence

from derive.errors import NotCovered
from derive.formula.tree import Formula

_CALLS: dict[str, Callable[[complex], complex]] = {
    "sqrt": cmath.sqrt, "exp": cmath.exp, "log": cmath.log, "sin": cmath.sin, "cos": cmath.cos, "tan": cmath.tan,
    "sinh": cmath.sinh, "cosh": cmath.cosh, "tanh": cmath.tanh, "cot": lambda z: 1 / cmath.tan(z),
    "coth": lambda z: 1 / cmath.tanh(z), "conj": lambda z: z.conjugate(), "Re": lambda z: complex(z.real),
    "Im": lambda z: complex(z.imag), "abs": lambda z: complex(abs(z)),
}


def approx_value(f: Formula, values: Mapping[str, float]) -> complex:
    """f in floating point; `NotCovered` where a head has no value here."""
    if f.head == "number":
        return complex(float(f.args[0]))
    if f.head == "letter" and f.args[0] in values:
        return complex(values[f.args[0]])
    if f.head == "constant" and f.args[0] in ("i", "pi"):
        return 1j if f.args[0] == "i" else complex(cmath.pi)
    if f.head in ("plus", "times"):
        total = complex(0 if f.head == "plus" else 1)
        for a in f.args:
            total = total + approx_value(a, values) if f.head == "plus" else total * approx_value(a, values)
        return total
    if f.head == "power":
        return complex(approx_value(f.args[0], values) ** approx_value(f.args[1], values))
    if f.head == "call" and f.args[0] in _CALLS:
        return _CALLS[f.args[0]](approx_value(f.args[1], values))
    raise NotCovered(f"{f.head} has no floating value here")


def approx_real_roots(p: Sequence[float]) -> list[float]:
    """The roots of a real polynomial whose roots are all real, ascending; between two of them lies one of p'."""
    if len(p) == 2:
        return [-p[0] / p[1]]
    turns = approx_real_roots([k * c for k, c in enumerate(p)][1:])
    reach = 1 + max(abs(c / p[-1]) for c in p[:-1])
    ends = [-reach, *turns, reach]
    return [_bisected(p, low, high) for low, high in zip(ends, ends[1:], strict=False)]


def _bisected(p: Sequence[float], low: float, high: float) -> float:
    rising = _at(p, high) > 0 or _at(p, low) < 0
    for _ in range(80):
        middle = (low + high) / 2
        if (_at(p, middle) > 0) == rising:
            high = middle
        else:
            low = middle
    return (low + high) / 2


def _at(p: Sequence[float], x: float) -> float:
    total = 0.0
    for c in reversed(p):
        total = total * x + c
    return total
