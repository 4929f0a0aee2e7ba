"""One repetition of the experiment beside the truncated generator, at six intervals, in balls.

    e_k(tau) = || (Q U(tau))^n psi - exp(-i t G^(k)(tau)) psi ||,   t = n tau fixed,   G^(k) = sum_{j<=k} tau^j G_j

A start that overlaps the detector is asked once, exactly, and compared from there (n - 1 asks, t - tau).  Several
pure states with weights w: e^2 is the mean of their e^2.  Both sides leave out the common phase exp(-i E0 t).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from itertools import islice
from math import ceil, floor

from flint import acb, acb_mat, arb, ctx, fmpq

from derive.checks.reading import Entries, claimed_at, read_claim
from derive.errors import NotCovered
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import (
    ask_by_matrix,
    distance,
    evolve_and_ask,
    exponential_action,
    linear_action,
    norm,
    project_out,
    squared_norm,
    step_matrix,
)
from derive.numerics.system import SparseRow, State, System, finite_space, system, watched_sites
from derive.problem.balls import distances
from derive.problem.points import Point
from derive.problem.setting import Row, Setting
from derive.record.said import Claim

HALVINGS = 5
FEWEST_ASKS = 4
MOST_ASKS = 40
MOST_STATES = 4
ASKS_SHOWN = 60
MATRIX_WORK = 1e7
"""Products of two complex numbers above which U is built as a matrix on a dense graph: about 3 s, measured."""

Weighted = list[tuple[arb, State]]


@dataclass(frozen=True)
class Plan:
    """What is run, the same at every precision: intervals, asks at the first of them, sites to start on."""

    taus: tuple[Fraction, ...]
    asks: int
    start: tuple[int, ...]  # the site of a default start; empty: the setting's own

    @property
    def time(self) -> Fraction:
        return self.asks * self.taus[0]


@dataclass(frozen=True)
class Run:
    """errors[k][j]: order k at the j-th interval; survival after 0, 1, ... asks at the first one, by both roads."""

    errors: tuple[tuple[arb, ...], ...]
    measured: tuple[arb, ...]
    derived: tuple[arb, ...]


def plan_run(setting: Setting, point: Point, own_start: bool) -> Plan:
    """Intervals with h tau <= 1/4 and simple fractions; later than the signal needs to reach the detector."""
    with ctx.workprec(64):
        h = system(setting, Values.at(point.mapping())).h
        above = Fraction(*_ratio(h))
    first = Fraction(1, ceil(4 * above)) if above > Fraction(1, 4) else Fraction(floor(1 / (4 * above)) if above else 1)
    taus = tuple(first / 2**j for j in range(HALVINGS + 1))
    if own_start and setting.start:
        begun = {x for _, v in setting.start.mixture for x, _ in v}
    else:
        begun = {default_start(setting)}
    sites = () if own_start else tuple(begun)
    return Plan(taus, min(max(FEWEST_ASKS, (_steps_away(setting, begun) + 1) // 2), MOST_ASKS), sites)


def _ratio(x: arb) -> tuple[int, int]:
    mantissa, exponent = x.man_exp()
    m, e = int(mantissa), int(exponent)
    return (m << e, 1) if e >= 0 else (m, 1 << -e)


def _steps_away(setting: Setting, sites: set[int]) -> int:
    away = distances(finite_space(setting).rows, watched_sites(setting))
    return max((away[x] for x in sites if x in away), default=0)


def default_start(setting: Setting) -> int:
    """The lowest-numbered site next to the detector; if there is none, the lowest one that the detector leaves open."""
    rows, watched = finite_space(setting).rows, set(watched_sites(setting))
    beside = {y for x in watched for y, _ in rows[x]} - watched
    if beside:
        return min(beside)
    rank = sum(watcher.rank for watcher in setting.detectors)
    if rank < len(watched):
        return min(watched)
    open_sites = set(range(len(rows))) - watched
    if not open_sites:
        raise NotCovered("the detector covers every site, so nothing is left to evolve")
    return min(open_sites)


def run(setting: Setting, claim: Claim, point: Point, plan: Plan) -> Run:
    """Errors and survival at the working precision."""
    values = Values.at(point.mapping())
    s = system(setting, values)
    orders = _orders(claim, values, s.size)
    starts = _starts(setting, s, values, plan)
    asks = sum(plan.asks * 2**j for j in range(HALVINGS + 1)) * len(starts)
    steppers = _steppers(s, plan.taus, asks)
    errors: list[tuple[arb, ...]] = []
    for j, tau in enumerate(plan.taus):
        errors.append(_errors(s, orders, starts, tau, plan.asks * 2**j, steppers[j]))
    measured = _survival(s, starts, steppers[0])
    derived = _truncated_survival(s, orders, starts, _ball(plan.taus[0]), steppers[0])
    return Run(tuple(zip(*errors, strict=True)), measured, derived)


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))


def _orders(claim: Claim, values: Values, size: int) -> list[Entries]:
    """The claimed entries of G_0, G_1, ...: what is tested against the experiment."""
    entries = claimed_at(read_claim(claim), values, _never).entries
    return [entries[k] for k in sorted(entries)]


def _never(x: int, row: Row) -> bool:
    return False


def _starts(setting: Setting, s: System, values: Values, plan: Plan) -> Weighted:
    """(weight, normalised state), weights summing to 1."""
    if plan.start:
        return [(arb(1), _unit(s, [acb(int(x in plan.start)) for x in range(s.size)]))]
    mixture = setting.start.mixture if setting.start else ()
    if len(mixture) > MOST_STATES:
        raise NotCovered(f"a mixture of {len(mixture)} states; at most {MOST_STATES} are followed")
    weighted = []
    for weight, vector in mixture:
        psi = [acb(0)] * s.size
        for x, f in vector:
            psi[x] = enclose(f, values)
        length = norm(psi)
        weighted.append((enclose(weight, values).real, [a / length for a in psi]))
    total = sum((w for w, _ in weighted), arb(0))
    return [(w / total, psi) for w, psi in weighted]


def _unit(s: System, psi: State) -> State:
    """Q psi, normalised: a default start is off the detector."""
    off = project_out(s, psi)
    length = norm(off)
    return [a / length for a in off]


Stepper = Callable[[State], Iterator[State]]


def _steppers(s: System, taus: tuple[Fraction, ...], asks: int) -> list[Stepper]:
    """psi -> (QU)^n psi, n = 1, 2, ..., for every interval; by matrices where the graph is dense and the run long."""
    balls = [_ball(tau) for tau in taus]
    products = asks * s.entries * ctx.prec / 8  # a term of the exponential brings about 8 bits
    if products < MATRIX_WORK or s.entries * 8 < s.size * s.size:
        return [partial(evolve_and_ask, s, tau) for tau in balls]
    matrices: list[acb_mat] = [step_matrix(s, balls[-1])]
    while len(matrices) < len(balls):
        matrices.insert(0, matrices[0] * matrices[0])
    return [partial(ask_by_matrix, s, U) for U in matrices]


def _errors(
    s: System, orders: list[Entries], starts: Weighted, tau: Fraction, asks: int, stepper: Stepper
) -> tuple[arb, ...]:
    """e_0, e_1, ... at one interval."""
    squares = [arb(0)] * len(orders)
    for weight, psi in starts:
        left = asks
        if _touches(s, psi):
            psi, left = next(stepper(psi)), asks - 1
        seen = next(islice(stepper(psi), left - 1, None))
        for k, rows in enumerate(_generators(s, orders, _ball(tau), _ball(tau) * left)):
            gap = distance(seen, _evolved(rows, psi))
            squares[k] += weight * gap * gap
    return tuple(square.nonnegative_part().sqrt() for square in squares)


def _touches(s: System, psi: State) -> bool:
    """Whether the state overlaps the detector, or may."""
    for vector in s.detector:
        overlap = sum((a.conjugate() * psi[x] for x, a in vector), acb(0))
        if not overlap.is_zero():
            return True
    return False


def _generators(s: System, orders: list[Entries], tau: arb, time: arb) -> Iterator[list[SparseRow]]:
    """Rows of -i t (G^(k) - E0 Q) for k = 0, 1, ..., each made from the one before."""
    rows: list[dict[int, acb]] = [{x: acb(0, s.E0 * time)} for x in range(s.size)]
    for vector in s.detector:
        for x, a in vector:
            for y, b in vector:
                rows[x][y] = rows[x].get(y, acb(0)) - acb(0, s.E0 * time) * a * b.conjugate()
    factor = acb(0, -time)
    for entries in orders:
        for (x, y), value in entries.items():
            rows[x][y] = rows[x].get(y, acb(0)) + factor * value
        factor *= tau
        yield [tuple((y, row[y]) for y in sorted(row)) for row in rows]


def _evolved(rows: list[SparseRow], psi: State) -> State:
    return exponential_action(linear_action(rows), _bound(rows), psi)


def _bound(rows: list[SparseRow]) -> arb:
    """||M|| <= sqrt(largest row sum * largest column sum)."""
    columns = [arb(0)] * len(rows)
    widest = arb(0)
    for row in rows:
        total = arb(0)
        for y, value in row:
            size = value.abs_upper()
            total += size
            columns[y] += size
        widest = widest.max(total.upper())
    tallest = arb(0)
    for column in columns:
        tallest = tallest.max(column.upper())
    return (widest * tallest).sqrt()


def _survival(s: System, starts: Weighted, stepper: Stepper) -> tuple[arb, ...]:
    """S_0 ... S_n by the experiment."""
    total = [arb(0)] * (ASKS_SHOWN + 1)
    for weight, psi in starts:
        for n, state in enumerate([psi, *islice(stepper(psi), ASKS_SHOWN)]):
            total[n] += weight * squared_norm(state)
    return tuple(total)


def _truncated_survival(
    s: System, orders: list[Entries], starts: Weighted, tau: arb, stepper: Stepper
) -> tuple[arb, ...]:
    """The same by the truncated generator, from the first ask on where the start overlaps the detector."""
    *_, rows = _generators(s, orders, tau, tau)
    act, bound = linear_action(rows), _bound(rows)
    total = [arb(0)] * (ASKS_SHOWN + 1)
    for weight, psi in starts:
        states = [psi]
        if _touches(s, psi):
            states.append(next(stepper(psi)))
        while len(states) <= ASKS_SHOWN:
            states.append(exponential_action(act, bound, states[-1]))
        for n, state in enumerate(states):
            total[n] += weight * squared_norm(state)
    return tuple(total)
