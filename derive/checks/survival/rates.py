"""First and last rate of survival on an explicit graph, against the levels that the detector reaches, in balls.

On what is reached, orthonormal from the detector's vectors d_a on, the eigenvectors v_j of H off the detector, from
certified eigenvalues, give at fixed x = t*tau and tau -> 0

    S(x) = w_dark + sum_j w_j exp(-gamma_j x),   gamma_j = coth(kappa/2) sum_a |<d_a|H|v_j>|^2,
                                                 w_j = |<v_j|psi>|^2,   |v_j| = 1

with no two levels alike (of a detector of rank one none are).

The first law's distance |law - S|/x must fall to 0.8 or less at each of three halvings of x (it is O(x)); the last
law's ratio to S, dark part off, must come as much nearer to 1 at each of three steps of x, or be within 10^-digits.
Where a distance stays within 5 per cent of itself, away from 0, that refutes.  Crossovers: mean rate times t is 1,
slowest rate times t is 1, in balls.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from flint import acb, acb_mat, arb, ctx

from derive.checks.survival.run import Experiment, experiment
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import ZERO, Formula, constant
from derive.numerics.decimals import rounded, spoken
from derive.numerics.evaluate import enclose
from derive.numerics.evolution import squared_norm
from derive.numerics.points import sample_points
from derive.numerics.precision import digits_of, power_of_ten, upper
from derive.numerics.spectrum import overlap
from derive.problem.setting import Check, Setting
from derive.record.said import Claim, Finding

FIRST, LAST = 1, 2
STEPS = 4
INTERVAL = Fraction(1, 16)
"""tau at which laws in t*tau are read off; any value serves."""


@dataclass(frozen=True)
class Modes:
    """w_dark, and (w_j, gamma_j) of every level that is reached."""

    dark: arb
    modes: tuple[tuple[arb, arb], ...]

    def bright(self, x: arb) -> arb:
        return sum((w * (-rate * x).exp() for w, rate in self.modes), arb(0))

    def mean(self) -> arb:
        return sum((w * rate for w, rate in self.modes), arb(0)) / self.bright(arb(0))

    def slowest(self) -> arb:
        """The least rate of a level on which the start surely is."""
        rates = [rate for w, rate in self.modes if w > 0]
        if not rates:
            raise NotCovered("nothing of the start is seen by the detector")
        least = rates[0]
        for rate in rates[1:]:
            least = least.min(rate)
        return least


def modes_of(run: Experiment) -> Modes:
    """Levels without the detector, their rates and the start's weights."""
    reached, r = run.reached, run.reached.rank
    m = reached.bright
    if not m:
        raise NotCovered("the detector reaches nothing")
    block = acb_mat(m, m, [reached.T[r + i, r + j] for i in range(m) for j in range(m)])
    vectors = _eigenvectors(block)
    couplings = [[reached.T[a, r + i] for i in range(m)] for a in range(r)]
    inside = [(w, [overlap(u, psi) for u in reached.basis], squared_norm(psi)) for w, psi in run.states]
    dark = sum((w * (length - squared_norm(c)) for w, c, length in inside), arb(0))
    found = []
    for v in vectors:
        norm = squared_norm(v)
        weight = sum((w * squared_norm([overlap(v, c[r:])]) for w, c, _ in inside), arb(0)) / norm
        seen = [sum((t * x for t, x in zip(line, v, strict=True)), acb(0)) for line in couplings]
        found.append((weight, run.coth * squared_norm(seen) / norm))
    return Modes(dark, tuple(found))


def _eigenvectors(block: acb_mat) -> list[list[acb]]:
    m = int(block.nrows())
    if m == 1:
        return [[acb(1)]]
    try:
        _, right = block.eig(right=True)
    except ValueError as fault:
        raise NeedsPrecision("levels closer than their enclosures") from fault
    return [[right[i, j] for i in range(m)] for j in range(m)]


def check_rates_law(setting: Setting, claim: Claim, effort: Check) -> Finding:
    """The law of the first or of the last regime, road "trend"."""
    which, value = _asked(claim)
    end, spoken_end = (ZERO, "0") if which == FIRST else (constant("infinity"), "infinity")
    if claim.kind.name != "limit" or claim.kind.toward != (("t", end),):
        raise NotCovered(f"this regime's law is compared as t -> {spoken_end}")
    run = _run(setting, claim, effort)
    with ctx.workprec(_bits(run)):
        modes = modes_of(run)
        measure = _first if which == FIRST else _last
        errors = [measure(value, run, modes, k) for k in range(STEPS)]
    what = "x is halved" if which == FIRST else "x grows"
    said = f"distances from the sum over levels as {what}, x = t*tau: {', '.join(rounded(e, 3) for e in errors)}"
    falls = [b < a * 4 / 5 or b < power_of_ten(-effort.digits) for a, b in zip(errors, errors[1:], strict=False)]
    if all(falls):
        return Finding("agrees", "trend", points=1, evidence=said)
    if errors[-1] > arb(1) / 1000 and all(b > a * 19 / 20 for a, b in zip(errors[1:], errors[2:], strict=False)):
        return Finding("refuted", "trend", points=1, point=run.point.without("tau").text(), evidence=said)
    return Finding("undecided", "trend", points=1, evidence=said)


def check_rates_crossover(setting: Setting, claim: Claim, effort: Check) -> Finding:
    """Where the first law stops and the last one starts to hold, road "enclosure"."""
    which, value = _asked(claim)
    run = _run(setting, claim, effort)
    with ctx.workprec(_bits(run)):
        modes = modes_of(run)
        x = enclose(value, run.values(INTERVAL, None)).real * _tau()
        seen = x * (modes.mean() if which == FIRST else modes.slowest())
        width = upper(acb(seen - 1))
    if not (seen - 1).contains(0):
        meaning = "the mean rate times t" if which == FIRST else "the slowest rate times t"
        evidence = f"{meaning} is {spoken(acb(seen))} there, not 1"
        return Finding("refuted", "enclosure", points=1, point=run.point.without("tau").text(), evidence=evidence)
    if not width < power_of_ten(-effort.digits):
        raise NeedsPrecision("balls stay too wide")
    return Finding("agrees", "enclosure", digits_of(width, arb(1)), 1)


def _asked(claim: Claim) -> tuple[int, Formula]:
    which = claim.quantity.key("regime") if claim.quantity else None
    if not isinstance(claim.value, Formula) or which not in (FIRST, LAST):
        raise NotCovered("on an explicit graph a regime is claimed as a formula, by its number, 1 or 2")
    return int(str(which)), claim.value


def _run(setting: Setting, claim: Claim, effort: Check) -> Experiment:
    for point in sample_points(setting, effort, claim.assume):
        try:
            return experiment(setting, point, effort.digits)
        except OutsideValidity:
            continue
    raise NotCovered("no sampled point met the assumptions")


def _bits(run: Experiment) -> int:
    return 400 + 8 * run.digits + 24 * run.reached.bright


def _tau() -> arb:
    return arb(INTERVAL.numerator) / INTERVAL.denominator


def _said(value: Formula, run: Experiment, x: arb) -> arb:
    return enclose(value, run.values(INTERVAL, None).with_letter("t", acb(x / _tau()))).real


def _first(value: Formula, run: Experiment, modes: Modes, k: int) -> arb:
    """|law - S|/x over the mean rate and the bright part, at x = 1/(8 2^k) mean lifetimes."""
    x = 1 / (8 * 2**k * modes.mean())
    gap = abs(_said(value, run, x) - modes.dark - modes.bright(x))
    return gap / (x * modes.mean() * modes.bright(arb(0)))


def _last(value: Formula, run: Experiment, modes: Modes, k: int) -> arb:
    """|law/S - 1| without the dark part, where the other levels have lost e^(-2(k+1)) and more against the slowest."""
    least, tiny = modes.slowest(), power_of_ten(-20)
    others = [(w, rate - least) for w, rate in modes.modes if w > 0 and rate - least > tiny]
    slow = sum((w for w, rate in modes.modes if w > 0 and not rate - least > tiny), arb(0))
    if not others:
        gap, lost = least, arb(0)
    else:
        gap, lost = others[0][1], (1 + sum((w for w, _ in others), arb(0)) / slow).log()
        for _, other in others[1:]:
            gap = gap.min(other)
    x = (2 * (k + 1) + lost) / gap
    return abs((_said(value, run, x) - modes.dark) / modes.bright(x) - 1)
