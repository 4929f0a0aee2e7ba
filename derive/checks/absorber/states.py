"""Road `trend` for state maps and the return factor: the experiment repeated, against the absorber's evolution.

    maps      || Q K^n Q - L [exp(-i H_abs t)]_QQ R ||,  t = n tau fixed while tau is halved (Frobenius norm);
              from the detector  || Q K^n D - L [exp(-i H_abs t)]_QQ F D ||,  to it  || D† K^n Q - D† T [..] R ||
    factor    |Q K^n D|^2 / |Q exp(-i H_plain t) D|^2  as tau is halved

R = L(-tau)† (both evolutions read backwards are their own adjoints at -tau).  n starts where the fast states have
died out.
"""

from __future__ import annotations

from math import ceil

from flint import acb, acb_mat, arb

from derive.checks.absorber.levels import settle
from derive.checks.absorber.maps import MapClaim, read_map, whole_claim
from derive.checks.absorber.runs import Run
from derive.checks.absorber.slopes import Slope
from derive.errors import NotCovered
from derive.formula.tree import Formula
from derive.numerics import nullstep
from derive.numerics.evaluate import Values, enclose
from derive.record.said import Claim

FEWEST_ASKS, MOST_ASKS = 16, 4096
DIED_OUT = 14  # exp(-14) is left of the fast states at the first tau, exp(-224) at the fifth
FACTOR_ORDER = 1  # the ratio of probabilities approaches the factor at least this fast


def judge_map(claim: Claim, claims: tuple[Claim, ...], run: Run, digits: int) -> list[tuple[str, Slope]]:
    """States with their maps at one point."""
    if run.weak:
        raise NotCovered("state maps are for an efficiency that does not depend on tau")
    domains = run.setting.domains()
    mine = read_map(whole_claim(claim, claims), domains)
    if mine.side in ("left", "right"):
        return [("states", settle(lambda j: _both_sides(run, mine, j), mine.order, arb(1), digits))]
    left = _left_of(mine, claims, run)
    error = _entering if mine.side == "from detector" else _staying
    return [("states", settle(lambda j: error(run, mine, left, j), mine.order, arb(1), digits))]


def _left_of(mine: MapClaim, claims: tuple[Claim, ...], run: Run) -> MapClaim:
    for claim in claims:
        quantity = claim.quantity
        if quantity is None or quantity.name != "state map":
            continue
        if quantity.key("side") == "left" and quantity.key("absorber") == mine.kind:
            return read_map(claim, run.setting.domains())
    raise NotCovered("a map from or to the detector goes with the map on the left, which is not claimed here")


def asks(run: Run, j: int) -> int:
    """n at the j-th halving: t = n tau stays the same."""
    kept = run.q(0).real
    kappa = -kept.log() if kept > 0 else arb(DIED_OUT)
    first = max(FEWEST_ASKS, ceil(float((DIED_OUT / kappa).upper())))
    if first > MOST_ASKS:
        raise NotCovered("a detector this weak needs too many asks before its fast states are gone")
    return int(first * 2**j)


def matrix_at(run: Run, claim: MapClaim, j: int, sign: int = 1) -> acb_mat:
    """The claimed map at (sign) tau, N x N."""
    values, tau = run.at(j), run.tau(j) * sign
    free = Values(values.balls, values.exact)
    total = acb_mat(run.m.size, run.m.size)
    for k, rows in enumerate(claim.terms):
        for x, y, f in rows:
            total[x, y] = total[x, y] + enclose(f, free) * acb(tau**k)
    return total


def left_and_right(run: Run, claim: MapClaim, j: int) -> tuple[acb_mat, acb_mat]:
    """L and R, the one that is not claimed from the one that is."""
    given, other = matrix_at(run, claim, j), nullstep.dagger(matrix_at(run, claim, j, -1))
    return (given, other) if claim.side == "left" else (other, given)


def absorbed(run: Run, kind: str, j: int) -> acb_mat:
    """[exp(-i H_abs t)]_QQ."""
    if (kind, j) not in run.kept:
        matrix = run.absorber(kind, run.own(kind, j))
        once = (matrix * acb(0, -run.tau(j))).exp()
        inside = nullstep.inside(nullstep.power(once, asks(run, j)), run.m.size)
        run.kept[kind, j] = run.m.q * inside * run.m.q
    return run.kept[kind, j]


def repeated(run: Run, j: int) -> acb_mat:
    """K^n."""
    if ("", j) not in run.kept:
        run.kept["", j] = nullstep.power(run.step(j), asks(run, j))
    return run.kept["", j]


def _both_sides(run: Run, claim: MapClaim, j: int) -> arb:
    left, right = left_and_right(run, claim, j)
    measured = run.m.q * repeated(run, j) * run.m.q
    return nullstep.bound_entries(measured - left * absorbed(run, claim.kind, j) * right)


def _entering(run: Run, claim: MapClaim, left: MapClaim, j: int) -> arb:
    measured = run.m.q * repeated(run, j) * run.m.d
    fed = matrix_at(run, claim, j) * run.m.d
    return nullstep.bound_entries(measured - matrix_at(run, left, j) * absorbed(run, claim.kind, j) * fed)


def _staying(run: Run, claim: MapClaim, left: MapClaim, j: int) -> arb:
    bar = nullstep.dagger(run.m.d)
    measured = bar * repeated(run, j) * run.m.q
    right = nullstep.dagger(matrix_at(run, left, j, -1))
    held = bar * matrix_at(run, claim, j) * absorbed(run, claim.kind, j) * right
    return nullstep.bound_entries(measured - held)


# -- the return problem


def judge_factor(claim: Claim, run: Run, digits: int) -> list[tuple[str, Slope]]:
    """|measured/plain absorber - factor| as tau is halved, for a start on the detector."""
    value = claim.value
    if not isinstance(value, Formula):
        raise NotCovered("the return factor is claimed as a formula")
    gaps: dict[int, arb] = {}

    def error(j: int) -> arb:
        if j not in gaps:
            gaps[j] = abs(return_ratio(run, j) - enclose(value, run.at(j)).real)
        return gaps[j]

    slope = settle(error, FACTOR_ORDER, arb(1), digits)
    shown = return_ratio(run, 4).mid().str(6, radius=False)
    return [("survival after a start on the detector", Slope(slope.verdict, f"{slope.ratio}, the ratio being {shown}"))]


def return_ratio(run: Run, j: int) -> arb:
    """Survival of a start on the detector over what the plain absorber gives at face value, at the same time."""
    measured = run.m.q * repeated(run, j) * run.m.d
    matrix = run.absorber("plain", run.own("plain", j))
    once = (matrix * acb(0, -run.tau(j))).exp()
    face = run.m.q * nullstep.power(once, asks(run, j)) * run.m.d
    return (nullstep.bound_entries(measured) / nullstep.bound_entries(face)) ** 2
