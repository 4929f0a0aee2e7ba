"""Road "enclosure" for the bound state of an impurity on an infinite lattice: the part of u_n that never fades.

u_n is written out in balls (`numerics/impurity.py`) as free waves and tails; one tail turns for ever, and its phase
and size are the state's energy and its weight on the detector's site.  No resolvent is inverted off the band and no
square root of the claim's is taken.
"""

from __future__ import annotations

from collections.abc import Sequence

from flint import acb, arb

from derive.checks.gauge import Gauge
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.numerics.lattice import enclose_bound
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, retry
from derive.problem.points import Point
from derive.problem.setting import Check, Lattice, Setting
from derive.record.said import Claim, Finding

ROAD = "enclosure"
SEEN = "what turns for ever in the amplitudes between asks"
NAMES = ("bound state energy", "bound state weight")
MOST_BITS = 4096


def check_bound(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim about a bound state."""
    mine = [c for c in claims if c.quantity is not None and c.quantity.name in NAMES]
    return Seen({c.id: _finding(setting, c, effort) for c in mine})


def _finding(setting: Setting, claim: Claim, effort: Check) -> Finding:
    if not isinstance(setting.space, Lattice) or not setting.space.energies:
        return Finding("untested", ROAD, evidence="bound states are measured beside an impurity of a lattice")
    if not isinstance(claim.value, Formula) or claim.kind.name != "exactly":
        return Finding("untested", ROAD, evidence="a bound state's energy and weight are claimed exactly")
    met, worst, left_out = 0, None, ""
    try:
        for point in sample_points(setting, effort, claim.assume):
            try:
                gauge = _at_point(setting, claim, claim.value, point, effort.digits)
            except OutsideValidity as reason:
                left_out = f"a point was left out: {reason}"
                continue
            met += 1
            if gauge.misses:
                return Finding("refuted", ROAD, points=met, point=point.text(), evidence=gauge.first_miss())
            worst = min((d for d in (worst, gauge.shared) if d is not None), default=None)
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, worst, met or None, evidence=str(reason))
    except NotCovered as reason:
        return Finding("untested", ROAD, evidence=str(reason))
    if not met:
        return Finding("untested", ROAD, evidence=left_out or "no sampled point met the assumptions")
    return Finding("agrees", ROAD, worst, met, evidence=SEEN)


def _at_point(setting: Setting, claim: Claim, value: Formula, point: Point, digits: int) -> Gauge:
    name = claim.quantity.name if claim.quantity is not None else ""

    def attempt(bits: int) -> Gauge:
        values, gauge = Values.at(point.mapping()), Gauge(digits)
        measured = _measured(setting, values)[NAMES.index(name)]
        gauge.compare(name, enclose(value, values), acb(measured), abs(measured))
        if gauge.wide and not gauge.misses:
            raise NeedsPrecision(gauge.wide)
        return gauge

    return retry(attempt, bits_for(digits), MOST_BITS)


def _measured(setting: Setting, values: Values) -> tuple[arb, arb]:
    found = enclose_bound(setting, values)
    if not found:
        raise OutsideValidity("the impurity binds no state here")
    if len(found) > 1:
        raise NotCovered("more than one state is bound")
    return found[0]
