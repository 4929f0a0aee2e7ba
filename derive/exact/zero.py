"""Is a formula exactly zero?"""

from __future__ import annotations

from derive.errors import NotCovered
from derive.exact.arguments import Domains
from derive.formula.tree import Formula


def vanishes(f: Formula, domains: Domains) -> bool | None:
    """True: zero for all values of its letters; False: not; None: not decided in a field known here.

    False means "not identically": at special values of the letters f may vanish all the same.
    """
    from derive.exact.field import Field

    try:
        field = Field.of([f], domains)
        return field.is_zero(field.element(f))
    except (NotCovered, ZeroDivisionError):
        return None
