"""Random intervals: the averaged master equation checked by moments, and by averaged evolution repeated in balls.

    exact   m1, m2 from the law's characteristic function (1 + i theta x)^(-s) = 1 - i m1 x - m2 x^2/2 + ...;
            loss = m2/(2 m1) + m1 q/(1 - q),  dephasing = (m2 - m1^2)/(2 m1),  strength = 1/loss
    trend   || [average and ask]^n on range(Q) - exp(t (-i[A,.] - g {V V†,.} - d [A,[A,.]])) ||, t = n m1 fixed,
            m1 halved: falls like m1^2; for a strength, survival of three starts beside exp(-i (A - i V V†/Gamma) t)
"""

from __future__ import annotations

from dataclasses import replace

from flint import acb, acb_mat, arb

from derive.checks.absorber.levels import finding_of, settle, with_precision
from derive.checks.absorber.runs import Run
from derive.checks.absorber.slopes import ROAD, Slope
from derive.checks.absorber.slow import Near
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.exact.field import Element
from derive.formula.text import text
from derive.formula.tree import ONE, TAU, Formula
from derive.numerics import averaged, nullstep
from derive.numerics.evaluate import enclose
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.points import Point
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

ORDER = 2  # errors of the averaged equation at fixed t
ASKS = 64  # at the first mean interval, once what is on the detector has died out
SCALE = 64  # the first mean interval has h m1 c <= 1/64: dephasing shows late
NAMES = {"averaged loss": "loss", "averaged dephasing": "dephasing"}


def is_random(setting: Setting) -> bool:
    return setting.interval.law != "fixed"


def shape_of(setting: Setting) -> Formula:
    """s: exponential intervals are gamma intervals of shape 1."""
    return ONE if setting.interval.shape is None else setting.interval.shape


# -- exact


def check_random_exact(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    found = {}
    for claim in claims:
        try:
            finding = _exactly(setting, claim, effort)
        except (NotCovered, ZeroDivisionError):
            continue
        if finding is not None:
            found[claim.id] = finding
    return found


def _exactly(setting: Setting, claim: Claim, effort: Check) -> Finding | None:
    value = claim.value
    if claim.quantity is None or claim.kind.name != "exactly" or not isinstance(value, Formula):
        return None
    near = Near(setting, 1, [value, TAU, shape_of(setting)])
    residual = _residual(near, setting, claim.quantity.name, near.field.element(value))
    if residual is None:
        return None
    if not residual:
        return Finding("proved", "exact", evidence="the law's moments leave an exact zero")
    left = near.field.formula(residual)
    for point in sample_points(setting, effort, claim.assume):
        if is_surely_nonzero(left, point):
            evidence = f"the law's moments leave {text(left)} instead of 0"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{text(left)} vanishes where tried")


def _residual(near: Near, setting: Setting, name: str, x: Element) -> Element | None:
    """Claimed minus what the moments give."""
    one, tau, s = near.field.one, near.field.element(TAU), near.field.element(shape_of(setting))
    theta = tau / s
    m1, m2 = s * theta, s * (s + one) * theta * theta
    loss = m2 / (m1 + m1) + m1 * near.q / (one - near.q)
    if name == "averaged loss":
        return x - loss
    if name == "averaged dephasing":
        return x - (m2 - m1 * m1) / (m1 + m1)
    return x * loss - one if name == "absorber strength" else None


# -- trend


def check_random_trend(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> Seen:
    return Seen({c.id: _trend(setting, c, effort) for c in claims if c.quantity is not None})


def _trend(setting: Setting, claim: Claim, effort: Check) -> Finding:
    try:
        results = []
        for point in sample_points(setting, effort, claim.assume)[:2]:
            run, slopes = _at(setting, claim, point.without("tau"), effort.digits)
            results.append((run, slopes))
            if any(s.verdict == "refuted" for _, s in slopes):
                break
    except (NotCovered, OutsideValidity) as reason:
        return Finding("untested", ROAD, evidence=f"{reason}.")
    except NeedsPrecision as reason:
        return Finding("undecided", ROAD, evidence=f"{reason}.")
    return finding_of(results, "the averaged equation falls by 4")


def _at(setting: Setting, claim: Claim, point: Point, digits: int) -> tuple[Run, list[tuple[str, Slope]]]:
    held: list[Run] = []

    def compute() -> list[tuple[str, Slope]]:
        walk = Averaged(setting, point)
        held[:] = [walk.run]
        return [walk.judge(claim, digits)]

    slopes = with_precision(compute)
    return held[0], slopes


class Averaged:
    """Averaged evolution at one point, the mean interval halved again and again."""

    def __init__(self, setting: Setting, point: Point):
        self.run = Run(replace(setting, interval=replace(setting.interval, law="fixed", shape=None)), point)
        self.shape = enclose(shape_of(setting), self.run.values).real
        self.m = self.run.seen
        self.inside = averaged.both_sides(self.m)
        self._repeated: dict[int, acb_mat] = {}

    def mean(self, j: int) -> arb:
        return self.run.tau(j) * 4 / SCALE

    def asks(self, j: int) -> int:
        kept = self.run.q(0).real
        died = int((-(arb(12) / kept.log())).upper().ceil().unique_fmpz() or 0) if kept > 0 else 0
        return max(ASKS, died) * 2**j

    def repeated(self, j: int) -> acb_mat:
        if j not in self._repeated:
            step = averaged.averaged_step(self.m, self.mean(j), self.shape, self.run.q(0))
            self._repeated[j] = self.inside * nullstep.power(step, self.asks(j)) * self.inside
        return self._repeated[j]

    def due(self, j: int) -> dict[str, arb]:
        """Loss and dephasing from the law's moments."""
        m1, kept = self.mean(j), self.run.q(0).real
        m2 = m1 * m1 * (1 + 1 / self.shape)
        return {"loss": m2 / (2 * m1) + m1 * kept / (1 - kept), "dephasing": (m2 - m1 * m1) / (2 * m1)}

    def judge(self, claim: Claim, digits: int) -> tuple[str, Slope]:
        value, quantity = claim.value, claim.quantity
        if quantity is None or not isinstance(value, Formula) or claim.kind.name != "exactly":
            raise NotCovered("what belongs to random intervals is claimed exactly, as a formula")
        if quantity.name in NAMES:
            name = NAMES[quantity.name]
            return "averaged states", settle(lambda j: self._states(name, value, j), ORDER, arb(1), digits)
        if quantity.name == "absorber strength" and quantity.key("absorber") == "plain":
            return "survival", settle(lambda j: self._survival(value, j), ORDER, arb(1), digits)
        raise NotCovered("with random intervals nothing is derived for this quantity")

    def _value(self, value: Formula, j: int) -> arb:
        return enclose(value, self.run.values.with_letter("tau", acb(self.mean(j)))).real

    def _states(self, name: str, value: Formula, j: int) -> arb:
        parts = {**self.due(j), name: self._value(value, j)}
        generator = averaged.master(self.m, parts["loss"], parts["dephasing"])
        evolved = (generator * acb(self.mean(j) * self.asks(j))).exp()
        return nullstep.bound_entries(self.repeated(j) - self.inside * evolved * self.inside)

    def _survival(self, value: Formula, j: int) -> arb:
        """The largest difference of survival over starts on one state of the basis and on sums of two."""
        size, time = self.m.size, self.mean(j) * self.asks(j)
        v = self.m.q * self.m.hamiltonian * nullstep.on_detector(self.m)
        a = self.m.q * self.m.hamiltonian * self.m.q - v * nullstep.dagger(v) * (acb(0, 1) / self._value(value, j))
        evolved = (a * acb(0, -time)).exp()
        form = nullstep.dagger(evolved) * self.m.q * evolved
        measured = self.repeated(j)
        found = arb(0)
        for x in range(self.m.rank, size):
            for y in range(self.m.rank, size):
                kept = acb(0)
                for z in range(size):
                    kept += measured[z * size + z, x * size + y]
                found = found.max((kept - form[y, x]).abs_upper())
        return found
