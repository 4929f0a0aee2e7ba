"""Road "enclosure" for a claim about all of G(tau): the claimed function against i log(Q U Q)/tau at sampled tau.

    G(tau) = (i/tau) log(Q U(tau) Q) on range(Q),   h tau <= 1/4, so that the logarithm's own series converges fast

The whole graph counts here, not a ball of sites: no order is cut off.  A sampled tau above 1/(4h) is halved until it
fits, unless a relation speaks of tau; then such a point is left out.
"""

from __future__ import annotations

from fractions import Fraction
from math import ceil

from flint import acb, acb_mat, arb

from derive.checks.gauge import Gauge
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters, number
from derive.numerics.contour import enclose_log
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import step_matrix
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, retry
from derive.numerics.system import System, finite_space, projector, system
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding, Matrix

ROAD = "enclosure"
LARGEST = 60
"""Sites; a dense logarithm of more is not worth its time for such a claim."""
SPARE_BITS = 64


def check_closed(setting: Setting, claim: Claim, effort: Check) -> Finding:
    """The finding for a matrix, or an entry, that claims to be G(tau) exactly."""
    if finite_space(setting).size > LARGEST:
        return Finding("untested", ROAD, evidence=f"a closed form of G(tau) is compared on at most {LARGEST} sites")
    met, worst = 0, None
    try:
        for point in sample_points(setting, effort, claim.assume):
            small = _small_tau(setting, claim, point)
            if small is None:
                continue
            gauge = _beside(setting, claim, small, effort.digits)
            met += 1
            if gauge.misses:
                return Finding("refuted", ROAD, points=met, point=small.text(), evidence=gauge.first_miss())
            worst = min((d for d in (worst, gauge.shared) if d is not None), default=None)
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, worst, met, evidence=str(reason))
    except (NotCovered, OutsideValidity) as reason:
        return Finding("untested", ROAD, evidence=str(reason))
    if not met:
        return Finding("untested", ROAD, evidence="no sampled point has h*tau <= 1/4")
    return Finding("agrees", ROAD, worst, met, evidence="i log(Q U Q)/tau, summed at the sampled tau")


def _small_tau(setting: Setting, claim: Claim, point: Point) -> Point | None:
    """The point with tau halved until h tau <= 1/4; None where relations or the worksheet fix tau above that."""
    tau = point.mapping()["tau"]
    bound = retry(lambda bits: _norm_times_tau(setting, point), SPARE_BITS)
    if bound <= 1:
        return point
    fixed = any("tau" in free_letters(r.left) | free_letters(r.right) for r in (*setting.assume, *claim.assume))
    if fixed or tau.head != "number" or setting.interval.length.head != "letter":
        return None
    smaller: Fraction = tau.args[0] / 2 ** bound.bit_length()
    return Point(tuple((n, number(smaller) if n == "tau" else v) for n, v in point.values))


def _norm_times_tau(setting: Setting, point: Point) -> int:
    """4 h tau, rounded upwards."""
    values = Values.at(point.mapping())
    bound = 4 * system(setting, values).h * values.balls["tau"].real
    return ceil(float(bound.upper()))


def _beside(setting: Setting, claim: Claim, point: Point, digits: int) -> Gauge:
    """Every claimed entry against the measured G(tau), at rising precision."""

    def attempt(bits: int) -> Gauge:
        values = Values.at(point.mapping())
        gauge = Gauge(digits)
        s = system(setting, values)
        found = _generator(s, values.balls["tau"].real, bits)
        scale = s.h if s.h > 0 else arb(1)
        for (x, y), f in _pairs(claim, s.size):
            what = f"entry ({finite_space(setting).name(x)}, {finite_space(setting).name(y)}) of G(tau)"
            gauge.compare(what, acb(0) if f is None else enclose(f, values), found[x, y], scale)
        if gauge.wide and not gauge.misses:
            raise NeedsPrecision(gauge.wide)
        return gauge

    return retry(attempt, bits_for(digits, SPARE_BITS), 8 * bits_for(digits, SPARE_BITS))


def _generator(s: System, tau: arb, bits: int) -> acb_mat:
    """(i/tau) log(Q U Q), the energy E0 Q added back."""
    Q = projector(s)
    X = Q * step_matrix(s, tau) * Q - Q
    return enclose_log(X, (s.h * tau).expm1(), bits) * (acb(0, 1) / tau) + Q * acb(s.E0)


def _pairs(claim: Claim, size: int) -> list[tuple[tuple[int, int], Formula | None]]:
    """((x, y), claimed formula or None where zero is claimed)."""
    entry = claim.quantity.key("entry") if claim.quantity else None
    if isinstance(claim.value, Formula) and isinstance(entry, (tuple, list)):
        return [((int(entry[0]), int(entry[1])), claim.value)]
    if not isinstance(claim.value, Matrix):
        raise NotCovered("a generator is claimed as a matrix or by one entry")
    held = {(x, y): f for x, y, f in claim.value.entries()}
    places = [(int(entry[0]), int(entry[1]))] if isinstance(entry, (tuple, list)) else None
    return [(p, held.get(p)) for p in places or [(x, y) for x in range(size) for y in range(size)]]
