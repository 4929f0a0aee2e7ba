"""What the plain absorber leaves by a time, in balls: S(t) = sum_psi w |exp(-i (H - i Gamma P) t) psi|^2.

No ask is made; the absorber stands in for the detector.  What stands beside it is the survival of the repeated
experiment after as many asks, from which it differs by O(tau) (Phys. Rev. A 102, 012218 (2020), from memory).
"""

from __future__ import annotations

from flint import acb, acb_mat, arb

from derive.errors import NotCovered
from derive.formula.tree import Formula
from derive.numerics import nullstep
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.problem.points import Point
from derive.problem.setting import Finite, Setting
from derive.problem.specialise import at_values

LARGEST = 64
"""Sites of the matrix that is exponentiated."""


def survival_absorbed(setting: Setting, point: Point, strength: Formula, t: Formula) -> arb:
    """S(t) with the claimed strength at a point, at the working precision."""
    if not isinstance(setting.space, Finite) or setting.space.size > LARGEST or len(setting.detectors) != 1:
        raise NotCovered(f"an absorber's survival is evolved on finite graphs of at most {LARGEST} sites")
    values = Values.at(point.mapping())
    there = at_values(setting, point.without("tau").mapping())
    if there.start is None or not there.start.mixture:
        raise NotCovered("no start is given")
    m = nullstep.measured_at(there, values)
    evolved = (nullstep.plain(m, enclose(strength, values)) * acb(0, -enclose_real(t, values))).exp()
    total = arb(0)
    for w, vector in there.start.mixture:
        psi = acb_mat(m.size, 1)
        for x, f in vector:
            psi[x, 0] = enclose(f, values)
        left = evolved * psi
        total += enclose(w, values).real * sum((abs(x) * abs(x) for x in left.entries()), arb(0))
    return total
