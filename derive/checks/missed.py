"""What an imperfect detector leaves of an amplitude that was there and gave no click, at a point, in balls."""

from __future__ import annotations

from flint import acb

from derive.errors import NotCovered
from derive.formula.tree import ONE
from derive.numerics.evaluate import Values, enclose
from derive.problem.efficiency import is_free_of_interval, missed
from derive.problem.setting import Setting


def missed_at(setting: Setting, values: Values) -> acb | None:
    """q = sqrt(1 - eta) of the one detector; None where it is perfect."""
    eta = setting.detectors[0].efficiency
    if eta == ONE:
        return None
    if not is_free_of_interval(eta):
        raise NotCovered("levels and survival are measured for an efficiency that does not depend on the interval")
    q = enclose(missed(eta, setting.domains()), values)
    return None if q.is_zero() else q
