"""A formula as a function of one of its letters, in balls: what does not depend on the letter is enclosed once."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

from flint import acb

from derive.formula.tree import Formula, bound_letter, free_letters, letter, rebuild
from derive.numerics.evaluate import Values, enclose

Moving = Callable[[acb, "Fraction | None"], acb]
"""The letter's ball, and its exact value where it is rational -> the formula's ball."""


def in_letter(f: Formula, name: str, values: Values) -> Moving:
    """f as a function of the letter `name`; the others take their `values`."""
    shared: dict[str, acb] = {}
    moving = _without_constants(f, name, values, shared)
    known = Values({**values.balls, **shared}, values.exact)
    return lambda ball, exact: enclose(moving, known.with_letter(name, ball, exact))


def _without_constants(
    f: Formula, name: str, values: Values, shared: dict[str, acb], bound: frozenset[str] = frozenset()
) -> Formula:
    """f with its largest parts that are free of the letter, and of what is bound around them, replaced by letters.

    Numbers stay, so that whole exponents and orders are seen to be whole.
    """
    if f.head in ("number", "letter", "constant"):
        return f
    if not free_letters(f) & {name, *bound}:
        constant = f"constant {len(shared)}"
        shared[constant] = enclose(f, values)
        return letter(constant)
    mine = bound_letter(f)
    inner = bound if mine is None else bound | {mine}

    def part(a: object) -> object:
        return _without_constants(a, name, values, shared, inner) if isinstance(a, Formula) else a

    return rebuild(f, tuple(part(a) for a in f.args))
