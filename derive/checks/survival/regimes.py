"""Regimes of survival on equal paths of symbolic length, against the sum over levels at larger and larger sizes.

The sum is made from the family alone: path states are sines, S - w_dark = (1/m) (2/M) sum_k sin^2(j theta_k)
exp(-2 x sin^2(theta_k)), x = m T^2 tau t/M.  A law's distance e = |law/S - 1|, the dark part taken off both sides, is
taken in the middle (geometrically) of its window, while what its limit names grows by 2, 4, 8:

    1   the size, and the start's distance with it (j = M/8);    2   the size, j fixed;    3   t, from its crossover on

and agrees where e falls to 0.8 or less at every doubling; where it stays within 5 per cent of itself, away from 0, it
refutes.  Crossovers are compared with their meaning, in balls: mean rate times t is 1/2, the two power laws are equal,
slowest rate times t is 1.  Explicit graphs have a first and a last rate instead (`survival_rates.py`).
"""

from __future__ import annotations

from collections.abc import Sequence

from flint import acb, arb, ctx

from derive.checks.paths import Arms, arms_of
from derive.checks.survival.rates import check_rates_crossover, check_rates_law
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters, number
from derive.numerics.decimals import rounded, spoken
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, digits_of, power_of_ten, upper
from derive.problem.points import Point
from derive.problem.setting import Check, Family, Finite, Setting
from derive.problem.sized import whole_value
from derive.record.said import Claim, Finding

SIZES = (128, 256, 512, 1024)


def check_regimes(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """Findings, road "trend", for claims about a survival regime."""
    return _each(setting, claims, effort, "survival regime", "trend")


def check_crossovers(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """Findings, road "enclosure", for claims about a crossover time."""
    return _each(setting, claims, effort, "crossover time", "enclosure")


def _each(setting: Setting, claims: Sequence[Claim], effort: Check, name: str, road: str) -> dict[str, Finding]:
    wanted = [c for c in claims if c.quantity is not None and c.quantity.name == name]
    if not wanted or not isinstance(setting.space, (Finite, Family)):
        return {}
    found = {}
    for claim in wanted:
        try:
            if isinstance(setting.space, Finite):
                on_graph = check_rates_law if road == "trend" else check_rates_crossover
                found[claim.id] = on_graph(setting, claim, effort)
            else:
                judge = _law if road == "trend" else _crossover
                found[claim.id] = judge(setting, arms_of(setting), claim, effort)
        except (NotCovered, OutsideValidity) as reason:
            found[claim.id] = Finding("untested", road, evidence=f"{reason}.")
        except NeedsPrecision as reason:
            found[claim.id] = Finding("undecided", road, evidence=f"{reason}.")
    return found


class Paths:
    """The family at numbers: m, M, T, j, and the sum over levels."""

    def __init__(self, setting: Setting, arms: Arms, put: dict[str, Formula]):
        if arms.ring or setting.start is None or setting.start.distance is None:
            raise NotCovered("regimes are compared on equal paths, for a start at a distance")
        self.values = Values.at(put)
        self.M = whole_value(arms.length, put) + 1
        self.j = whole_value(setting.start.distance, put)
        self.m = whole_value(arms.count, put)
        self.scale = enclose(arms.T, self.values).real ** 2

    def x_of(self, t: arb, tau: arb) -> arb:
        return self.m * self.scale * tau * t / self.M

    def t_of(self, x: arb, tau: arb) -> arb:
        return x * self.M / (self.m * self.scale * tau)

    def slowest(self) -> arb:
        """2 sin^2(pi/M), the slowest rate in units of x/t."""
        return 2 * (arb.pi() / self.M).sin() ** 2

    def bright(self, x: arb) -> arb:
        """S without its dark part."""
        total = arb(0)
        for k in range(1, self.M):
            theta = arb.pi() * k / self.M
            total += (self.j * theta).sin() ** 2 * (-2 * x * theta.sin() ** 2).exp()
        return 2 * total / self.M / self.m

    def dark(self) -> arb:
        return 1 - arb(1) / self.m


def _points(setting: Setting, claim: Claim, effort: Check) -> tuple[Point, ...]:
    points = sample_points(setting, effort, claim.assume)
    if not points:
        raise NotCovered("no sampled point met the assumptions")
    return points


def _law(setting: Setting, arms: Arms, claim: Claim, effort: Check) -> Finding:
    which = claim.quantity.key("regime") if claim.quantity else None
    if not isinstance(claim.value, Formula) or which not in (1, 2, 3):
        raise NotCovered("a regime is claimed as a formula, by its number from 1 to 3")
    point = _points(setting, claim, effort)[0]
    with ctx.workprec(bits_for(40, 128)):
        errors = [_distance(setting, arms, claim.value, int(str(which)), point, k) for k in range(len(SIZES))]
    said = f"distances from the sum over levels at each doubling: {', '.join(rounded(e, 3) for e in errors)}"
    ratios = [b / a for a, b in zip(errors, errors[1:], strict=False)]
    if all(r < arb(4) / 5 for r in ratios):
        return Finding("agrees", "trend", points=1, evidence=said)
    if all(r > arb(19) / 20 for r in ratios[-2:]) and errors[-1] > arb(1) / 1000:
        return Finding("refuted", "trend", points=1, point=point.without("tau").text(), evidence=said)
    return Finding("undecided", "trend", points=1, evidence=said)


def _distance(setting: Setting, arms: Arms, law: Formula, which: int, point: Point, k: int) -> arb:
    """|law/S - 1| without the dark part, at the k-th doubling."""
    put = point.mapping()
    grown = SIZES[k] if which < 3 else SIZES[0]
    for name in _size_letters(setting):
        put[name] = number(grown)
    distance = setting.start.distance if setting.start else None
    if which == 1:
        if distance is None or distance.head != "letter":
            raise NotCovered("the first regime needs a start whose distance is a letter")
        put[str(distance.args[0])] = number(grown // 8)
    paths = Paths(setting, arms, put)
    tau = enclose(put["tau"], paths.values).real
    j = arb(paths.j)
    first, second, third = arb(1) / 2, j * j / 2, 1 / paths.slowest()
    x = {1: (first * second).sqrt(), 2: (second.max(first) * third).sqrt(), 3: third * (k + 1)}[which]
    t = paths.t_of(x, tau)
    said = enclose(law, paths.values.with_letter("t", acb(t))).real
    return abs((said - paths.dark()) / paths.bright(x) - 1)


def _size_letters(setting: Setting) -> list[str]:
    """Letters in the family's sizes, but for the number of arms."""
    family = setting.space
    sizes = family.sizes if isinstance(family, Family) else ()
    names = {n for key, f in sizes if key != "arms" for n in free_letters(f)}
    return sorted(names)


def _crossover(setting: Setting, arms: Arms, claim: Claim, effort: Check) -> Finding:
    which = claim.quantity.key("regime") if claim.quantity else None
    if not isinstance(claim.value, Formula) or which not in (1, 2, 3):
        raise NotCovered("a crossover time is claimed as a formula, by its number from 1 to 3")
    digits: list[int] = []
    points = _points(setting, claim, effort)
    for point in points:
        with ctx.workprec(bits_for(effort.digits, 128)):
            put = point.mapping()
            paths = Paths(setting, arms, put)
            x = paths.x_of(enclose(claim.value, paths.values).real, enclose(put["tau"], paths.values).real)
            seen = {1: 2 * x, 2: 2 * x / arb(paths.j) ** 2, 3: x * paths.slowest()}[int(str(which))]
            if not (seen - 1).contains(0):
                meaning = {1: "twice the mean rate times t", 2: "the ratio of the two power laws",
                           3: "the slowest rate times t"}[int(str(which))]
                evidence = f"{meaning} is {spoken(acb(seen))} there, not 1"
                return Finding("refuted", "enclosure", points=1, point=point.text(), evidence=evidence)
            width = upper(acb(seen - 1))
            if not width < power_of_ten(-effort.digits):
                raise NeedsPrecision("balls stay too wide")
            digits += [d for d in (digits_of(width, arb(1)),) if d is not None]
    return Finding("agrees", "enclosure", min(digits, default=None), len(points))
