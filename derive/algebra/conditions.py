"""What must not vanish for an answer at generic letters to hold, taken apart into short factors.

An exact answer divides by numbers that are not identically zero; where letters take values that make one of them
zero the answer may be another.  A factor that its letter's domain keeps away from zero is left out.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from derive.exact.arguments import is_positive
from derive.exact.field import Element, Field
from derive.formula.text import text
from derive.formula.tree import Formula, negate

Poly = Any  # flint's fmpq_mpoly


def conditions(field: Field, divisors: Iterable[Element]) -> tuple[Formula, ...]:
    """Factors of numerators and denominators that may vanish, shortest first, each once up to its sign."""
    found: dict[str, Formula] = {}
    for x in divisors:
        for f in (x.num, x.den):
            if f is not None and not f.is_constant():
                for factor, _ in _cleared(field, f).factor()[1]:
                    _note(field, Element(field, field.reduce(factor)), found)
    return tuple(sorted(found.values(), key=lambda f: (len(text(f)), text(f))))


def _note(field: Field, factor: Element, found: dict[str, Formula]) -> None:
    shown = field.formula(factor)
    if shown.head == "number" or is_positive(shown, field.domains) or is_positive(negate(shown), field.domains):
        return
    if _is_phase(field, factor) or text(negate(shown)) in found:
        return
    found.setdefault(text(shown), shown)


def _is_phase(field: Field, factor: Element) -> bool:
    """u or 1/u alone never vanishes."""
    degrees = [int(e) for e in factor.num.degrees()]
    named = [n for n, k in field.index.items() if degrees[k]]
    return len(list(factor.num.terms())) == 1 and all(n.startswith(("unit", "growth")) for n in named)


def _cleared(field: Field, f: Poly) -> Poly:
    """f times a power of every u, so that no 1/u is left."""
    for name, _ in field.relations:
        if name + "bar" in field.gen:
            k = int(f.degrees()[field.index[name + "bar"]])
            f = field.reduce(f * field.gen[name] ** k)
    return f
