"""Road "enclosure" for published numbers: each against the experiment, to the digits that were printed.

A printed decimal with d digits behind its point stands for every number within half a unit of the last one,
|true - printed| <= 10^-d/2; an integer likewise, d = 0; a fraction stands for itself.

    detection probability   F_n, the first click at ask n
    survival probability    S_n = 1 - F_1 - ... - F_n

The experiment is the repeated step in balls on a finite graph, and the renewal recursion in balls on a lattice.  All
numbers must hold at every sampled point: the worksheet says at which parameters they were printed.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from flint import acb_mat, arb, ctx, fmpq

from derive.checks.asymptotics.road import experiment
from derive.checks.seen import Seen
from derive.checks.summed import LARGEST, Bench, Experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.tree import Formula
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for
from derive.problem.points import Point
from derive.problem.setting import Check, Finite, Lattice, Setting, Unitary
from derive.record.said import Claim, Finding, Number, Table

ROAD = "enclosure"
QUANTITIES = ("detection probability", "survival probability")
MOST_ASKS = 20_000
ATTEMPTS = 4
SHOWN = 12  # measured numbers in the ledger, at most


def check_values(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for every table of published numbers."""
    findings: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    for claim in claims:
        if isinstance(claim.value, Table):
            try:
                findings[claim.id], numbers[claim.id] = _judged(setting, claim, claim.value, effort)
            except (NotCovered, OutsideValidity) as reason:
                findings[claim.id] = Finding("untested", ROAD, evidence=str(reason))
    return Seen(findings, numbers)


def _judged(setting: Setting, claim: Claim, table: Table, effort: Check) -> tuple[Finding, tuple[Number, ...]]:
    rows = [(int(parse(n).args[0]), q) for n, q in table.rows]
    points = sample_points(setting, effort, claim.assume)
    shown: list[Number] = []
    for count, point in enumerate(points, start=1):
        verdict, evidence, seen = _at(setting, claim, rows, point, effort)
        shown = shown or seen
        if verdict != "agrees":
            where = point.text() if verdict == "refuted" else ()
            return Finding(verdict, ROAD, points=count, point=where, evidence=evidence), tuple(shown)
    if not points:
        return Finding("untested", ROAD, evidence="no sampled point met the assumptions"), ()
    digits = min(significant(q) for _, q in rows)
    evidence = f"all {len(rows)} numbers round to what was printed"
    return Finding("agrees", ROAD, digits, len(points), evidence=evidence), tuple(shown)


def _at(
    setting: Setting, claim: Claim, rows: list[tuple[int, str]], point: Point, effort: Check
) -> tuple[str, str, list[Number]]:
    """(verdict, sentence, measured numbers) at one point, at rising precision."""
    last = max(n for n, _ in rows)
    if last > MOST_ASKS:
        raise NotCovered(f"at most {MOST_ASKS} asks are repeated, and number {last} is spoken of")
    for attempt in range(ATTEMPTS):
        with ctx.workprec(bits_for(effort.digits + max(len(q) for _, q in rows), 128) << attempt):
            try:
                clicks = _clicks(setting, point, last, effort.digits)
            except NeedsPrecision:
                continue
            seen = [(n, q, _quantity(claim, clicks, n)) for n, q in rows]
            misses = [_miss(n, q, x) for n, q, x in seen]
            shown = [_number(point, n, x, effort.digits) for n, _, x in seen[:SHOWN]]
            wrong = [m for m in misses if m]
            if wrong:
                more = f"; {len(wrong) - 1} more differ{'s' if len(wrong) == 2 else ''}" if len(wrong) > 1 else ""
                return "refuted", wrong[0] + more, shown
            if None not in misses:
                return "agrees", "", shown
    return "undecided", "a printed number lies on the edge of its rounding, or the balls stay too wide", []


def _quantity(claim: Claim, clicks: list[arb], n: int) -> arb:
    if claim.quantity is not None and claim.quantity.name == "survival probability":
        return arb(1) - sum(clicks[1 : n + 1], arb(0))
    return clicks[n]


def _miss(n: int, printed: str, seen: arb) -> str | None:
    """What is wrong with one number; "" where it is right, None where that stays open."""
    value, unit = Fraction(parse(printed).args[0]), rounding(printed)
    low, high = value - unit / 2, value + unit / 2
    if _ball(low) <= seen and seen <= _ball(high):
        return ""
    if seen < _ball(low) or seen > _ball(high):
        return f"n = {n}: printed {printed}, measured {rounded(seen, significant(printed) + 4)}"
    if unit == 0 and seen.contains(_ball(value)):
        return ""
    return None


def _ball(q: Fraction) -> arb:
    return arb(fmpq(q.numerator, q.denominator))


def rounding(printed: str) -> Fraction:
    """One unit of the last digit printed; 0 for a fraction."""
    if not printed.lstrip("-").replace(".", "", 1).isdigit():
        return Fraction(0)
    return Fraction(1, 10 ** len(printed.partition(".")[2]))


def significant(printed: str) -> int:
    """Digits printed, leading zeros aside."""
    return len("".join(c for c in printed if c.isdigit()).lstrip("0")) or 1


def _number(point: Point, n: int, x: arb, digits: int) -> Number:
    value, radius = with_radius(x, digits)
    return Number(value, radius, (*point.text(), ("n", str(n))), ROAD)


# -- the experiment


def _clicks(setting: Setting, point: Point, last: int, digits: int) -> list[arb]:
    """[0, F_1, ..., F_last]."""
    if isinstance(setting.space, Lattice):
        return [x * x for x in experiment(setting, point, digits).up_to(last)[: last + 1]]
    if not isinstance(setting.space, (Finite, Unitary)) or len(setting.space.rows) > LARGEST:
        raise NotCovered(f"published numbers are compared on up to {LARGEST} sites, and on lattices")
    return _repeated(Bench(1, digits).at(setting, point), last)


def _repeated(e: Experiment, last: int) -> list[arb]:
    """F_n of a mixture: what the detector takes of K^(n-1) psi."""
    if e.setting.start is None:
        raise NotCovered("no start is given")
    found = [arb(0)] * (last + 1)
    for w, v in e.setting.start.mixture:
        psi = acb_mat(e.step.size, 1, e.step.state(v, e.values))
        weight = _real(w, e)
        for n in range(1, last + 1):
            clicked = psi.conjugate().transpose() * e.step.all_clicks * psi
            found[n] += weight * clicked[0, 0].real
            psi = e.step.k * psi
    return found


def _real(f: Formula, e: Experiment) -> arb:
    return enclose(f, e.values).real
