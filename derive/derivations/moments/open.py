"""Moments without a closed form that could be printed: Stein's equation is stated, and a road certifies the digits.

    Y_p - K† Y_p K = Y_(p-1),   Y_0 = 1   on the bright space (random intervals: K† Y K averaged),
    b_p = <psi|Y_p|psi>,   sum_n n^p F_n = sum_i (-1)^(p-i) i! S(p, i) b_i.

For one detector state at fixed intervals the equation is solved level by level (`algebra/stein.py` gives the solution);
else it is a linear system of m^2 equations for m bright dimensions.
"""

from __future__ import annotations

from collections.abc import Mapping

from derive.derivations.detection.topic import total_probability
from derive.derivations.sight import Sight
from derive.derivations.stated import has_equation
from derive.formula.tree import ZERO, Formula, operator
from derive.record.said import Prose


def completed(
    sight: Sight, values: Mapping[str, Formula], notes: tuple[Prose, ...], highest: int
) -> tuple[dict[str, Formula], tuple[Prose, ...]]:
    """The closed values, and symbols for those that are left to the equation, in their order."""
    wanted = ["mean", "conditional_mean", "variance", *(str(p) for p in range(3, highest + 1))]
    missing = [name for name in wanted if name not in values]
    if not missing or total_probability(sight) == ZERO or not has_equation(sight):
        return dict(values), notes
    listed = ", ".join(name.replace("_", " ") if not name.isdigit() else f"moment {name}" for name in missing)
    said = (f"Given by Stein's equation, with certified digits at the first point: {listed}.",)
    return {name: values.get(name) or symbol(name) for name in wanted}, (*notes, said)


def symbol(name: str) -> Formula:
    """What stands for a value that an equation gives."""
    short = {"mean": "1", "conditional_mean": "c"}
    return operator("Var") if name == "variance" else operator("M", short.get(name, name))
