"""Road "coefficient" for remainders: Taylor coefficients of the claim against the majorant, recomputed.

c_d h_d^d, h_d half the width of the spectrum that order d - 1 sees, c_d from the ball series of -log(2 - e^y).  None
below agrees; a claim that this road cannot support gets no finding from it.
"""

from __future__ import annotations

from collections.abc import Sequence

from flint import acb, acb_series, arb, ctx

from derive.checks.seen import Seen
from derive.checks.validity.place import REMAINDER, WORKING, promised
from derive.checks.validity.radius import distinct_points
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.bright import scaled_sector
from derive.numerics.evaluate import Values
from derive.numerics.promise import LARGEST
from derive.numerics.series import enclose_series
from derive.numerics.system import bound_norm, dense, finite_space, system, watched_sites
from derive.problem.balls import ball
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

SERIES = 16
"""Orders of the majorant that are compared one by one."""


def check_majorant(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    findings: dict[str, Finding] = {}
    for claim in claims:
        name = claim.quantity.name if claim.quantity else claim.id
        if name == REMAINDER and claim.kind.name == "upper" and isinstance(claim.value, Formula):
            finding = _majorised(setting, claim, claims, effort)
            if finding is not None:
                findings[claim.id] = finding
    return Seen(findings)


def _majorised(setting: Setting, claim: Claim, claims: Sequence[Claim], effort: Check) -> Finding | None:
    points = distinct_points(setting, effort, claim)
    order = promised(claim, claims).order
    try:
        for point in points:
            with ctx.workprec(WORKING):
                if not _covers(setting, claim, point, order):
                    return None
    except (NotCovered, NeedsPrecision, OutsideValidity):
        return None
    if not points:
        return None
    text = f"coefficients of tau^{order + 2} to tau^{SERIES}: none below the majorant's"
    return Finding("agrees", "coefficient", points=len(points), evidence=text)


def _covers(setting: Setting, claim: Claim, point: Point, order: int) -> bool:
    """Whether every coefficient of the claimed remainder is at least c_d h_d^d."""
    if not isinstance(claim.value, Formula):
        return False
    values = Values.at(point.mapping())
    claimed = enclose_series(claim.value, values, SERIES + 1)
    majorant = majorant_balls(SERIES)
    for d in range(order + 2, SERIES + 1):
        h = half_width(setting, values, d - 1)
        if not claimed[d].real >= (majorant[d] * h**d).lower() - arb(2) ** (-WORKING // 2):
            return False
    return True


def majorant_balls(n: int) -> list[arb]:
    """Coefficients 0 ... n of -log(2 - e^y), by the logarithm of a ball series."""
    old, ctx.cap = ctx.cap, n + 1
    try:
        inner = 2 - acb_series([0, 1], prec=n + 1).exp()
        return [acb(c).real for c in (-inner.log()).coeffs()]
    finally:
        ctx.cap = old


def half_width(setting: Setting, values: Values, steps: int) -> arb:
    """Half the width of H's spectrum on the sites within `steps` of the detector (all: the whole graph)."""
    rows = finite_space(setting).rows
    s = system(setting, values, ball(rows, watched_sites(setting), steps))
    if s.size > LARGEST:
        return bound_norm(s.rows)[1]
    return scaled_sector(dense(s), 0).h

