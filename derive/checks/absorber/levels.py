"""Road `trend` for absorbers' levels: certified eigenvalues of both evolutions as tau is halved.

    measured   eps = i log(lambda)/tau,  lambda the slow eigenvalues of K = (1 - (1 - q) P) exp(-i H tau)
    absorber   slow eigenvalues of its non-Hermitian matrix
    error      the largest difference over bright levels, of energies (Re) and of rates (-2 Im)

A claimed O(tau^p) asks the error of the absorber, as it is defined, to fall that fast; a claimed parameter, put in
the absorber's matrix, asks both errors to fall as fast as the absorber promises.  The first interval has
h tau coth(kappa/2) between 1/8 and 1/4.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from flint import arb

from derive.checks.absorber.runs import Run
from derive.checks.absorber.secular import attached, claimed_power, network_beside
from derive.checks.absorber.slopes import FIRST_HALVINGS, MOST_HALVINGS, ROAD, Slope, judge_slope
from derive.errors import NotCovered
from derive.formula.tree import Formula
from derive.numerics.precision import retry
from derive.record.said import Claim, Finding, Matrix

FIRST_BITS, MOST_BITS = 256, 4096
FIXED = {"plain": (2, 3), "dressed": (4, 3), "ancilla": (4, 5), "cascade": (6, 7)}
WEAK = {"plain": (2, 2), "dressed": (4, 4), "ancilla": (4, 4), "cascade": (6, 6)}
NAMES = {"absorber strength": "strength", "absorber coupling": "coupling", "absorber loss": "loss"}
KINDS = tuple(FIXED)
HAS = {
    "plain": ("strength",), "dressed": ("strength", "coupling"), "ancilla": ("coupling", "loss"),
    "cascade": ("strength", "coupling", "loss"),
}


class LevelClaim:
    """What a claim asks: per error (0 energies, 1 rates) the power of tau, and the parameters it puts in."""

    def __init__(self, claim: Claim):
        if claim.quantity is None or claim.kind.name != "exactly":
            raise NotCovered("an absorber's parameters and error orders are claimed exactly")
        self.kind = str(claim.quantity.key("absorber"))
        if self.kind not in KINDS:
            raise NotCovered(f"no absorber is called {self.kind}; known: {', '.join(KINDS)}")
        self.claimed: dict[str, Formula | Matrix] = {}
        self.power: int | None = None
        name = claim.quantity.name
        self.which = {"energy error": (0,), "rate error": (1,)}.get(name, (0, 1))
        if name in NAMES:
            if not isinstance(claim.value, (Formula, Matrix)):
                raise NotCovered("a parameter is claimed as a formula")
            if NAMES[name] not in HAS[self.kind]:
                raise NotCovered(f"the absorber {self.kind} has {' and '.join(HAS[self.kind])}, and no {NAMES[name]}")
            self.claimed = {NAMES[name]: claim.value}
        else:
            self.power = claimed_power(claim)

    def wanted(self, run: Run, which: int) -> int:
        if self.power is not None:
            return self.power
        value = self.claimed.get("coupling")
        if isinstance(value, Matrix):
            return 2 * attached(value) + 2 + (0 if run.weak else which)
        return (WEAK if run.weak else FIXED)[self.kind][which]


def is_about_levels(claim: Claim) -> bool:
    return claim.quantity is not None and claim.quantity.name in (*NAMES, "energy error", "rate error")


def judge_levels(claim: Claim, claims: tuple[Claim, ...], run: Run, digits: int) -> list[tuple[str, Slope]]:
    """(what, slope) at one point."""
    asked = LevelClaim(claim)
    beside = network_beside(claims) if asked.kind == "cascade" and asked.power is not None else None
    if beside is not None:
        asked.claimed = {"coupling": beside}

    network = asked.claimed.get("coupling")
    later = max(0, attached(network) - 2) if isinstance(network, Matrix) else 0  # long cascades settle at smaller tau

    def slope(which: int) -> Slope:
        p = asked.wanted(run, which)
        return settle(lambda j: run.errors(asked.kind, j + later, asked.claimed)[which], p, run.m.h, digits)

    found = [(("energies", "rates")[which], slope(which)) for which in asked.which]
    ratio = run.due_over_claimed(asked.kind, FIRST_HALVINGS, asked.claimed)
    if ratio is None:
        return found
    told = f" (what the secular equation gives is {ratio} times the claimed value)"
    return [(what, Slope(s.verdict, s.ratio + told if s.verdict == "refuted" else s.ratio)) for what, s in found]


def settle(error: Callable[[int], arb], p: int, scale: arb, digits: int) -> Slope:
    """Halve until the slope decides, FIRST_HALVINGS times at least and MOST_HALVINGS at most."""
    errors = [error(j) for j in range(FIRST_HALVINGS + 1)]
    while True:
        slope = judge_slope(errors, p, scale, digits)
        if slope.verdict != "undecided" or len(errors) > MOST_HALVINGS:
            return slope
        errors.append(error(len(errors)))


def finding_of(results: Sequence[tuple[Run, list[tuple[str, Slope]]]], due: str) -> Finding:
    """The worst over points and errors, with the point where it is refuted."""
    if not results:
        return Finding("untested", ROAD, evidence="No sampled point met the assumptions.")
    for run, slopes in results:
        for what, slope in slopes:
            if slope.verdict == "refuted":
                evidence = f"{what}: the error {slope.ratio}; {due}"
                return Finding("refuted", ROAD, points=len(results), point=run.point.text(), evidence=evidence)
    open_ones = [f"{what}: {s.ratio}" for _, slopes in results for what, s in slopes if s.verdict != "agrees"]
    if open_ones:
        return Finding("undecided", ROAD, points=len(results), evidence=open_ones[0])
    last = "; ".join(f"{what}: the error {s.ratio}" for what, s in results[0][1])
    return Finding("agrees", ROAD, points=len(results), evidence=last)


def with_precision(compute: Callable[[], list[tuple[str, Slope]]]) -> list[tuple[str, Slope]]:
    return retry(lambda bits: compute(), FIRST_BITS, MOST_BITS)
