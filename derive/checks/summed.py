"""Road "enclosure" for exact statistics: the experiment itself, summed over all asks in balls.

At every sample point U is built in balls, U and the ask are applied again and again by doubling (`numerics/asks.py`),
and what has not been summed is bounded with the exact dimension of the dark space at that point (`observed.py`).

    total probability   <psi|Z_0|psi>;    splitting probability: with one detector's clicks in place of all
    mean                <psi|Z_1|psi> = sum n F_n;    conditional mean: divided by the total probability
    moment p            sum n^p F_n from the Z_i by Stirling's numbers
    variance            of n given a click: sum n^2 F_n/P - (sum n F_n/P)^2
    bright dimension    sum over the detector's states d of <d|Z_1|d> with a perfect detector: each level counts as
                        many directions as the detector sees of it (commun-math-phys-329-1031)
    number of phases    <c|Z_1|c> for one state c in the detector's span, no smaller for any other
    dark state          <v|Z_0|v> = 0

Disjoint balls refute; overlapping ones narrower than 10^-digits of max(1, |value|) agree.  A derived moment that is
left to an equation is what the equation gives (`moments_solved.py`), and takes the number found at the first point.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cached_property

from flint import acb, arb, ctx

from derive.checks.asked import entries_of, formula_of, name_of
from derive.checks.gauge import Gauge
from derive.checks.moments.solved import Solved, is_open
from derive.checks.observed import Observed
from derive.checks.powers import stirling
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import ONE, TAU, Formula, formula, free_letters
from derive.formula.tree import replace as put
from derive.numerics.asks import Step, Sums, averaged_step, enclose_sums, measured_step
from derive.numerics.decimals import with_radius
from derive.numerics.evaluate import Values, enclose, enclose_real
from derive.numerics.frame import Frame, reached_frame
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, power_of_ten
from derive.problem.points import Point
from derive.problem.setting import Check, Interval, Setting, Unitary, Vector
from derive.problem.specialise import at_values
from derive.record.said import Claim, Finding, Matrix, Number, Value

ROAD = "enclosure"
LARGEST = 2000
"""Sites of the summed experiment; a larger one is left out, and the finding says so."""
WHOLE_UP_TO = 12
"""Sites up to which all of them are followed; beyond, what the detectors reach, if that is three quarters or less."""
LARGEST_WHOLE = 80
"""Sites of an experiment that follows all of them: a claimed dark state, a step given."""
ATTEMPTS = 4
SPARE_DIGITS = 6
Powers = dict[int, arb]


@dataclass
class Experiment:
    """The summed experiment at one point and one precision."""

    setting: Setting  # at the point: no letters left, but the interval's length is a number
    tau: Formula
    highest: int
    narrow: arb
    values: Values = field(default_factory=lambda: Values({}))
    whole: bool = False

    @cached_property
    def observed(self) -> Observed:
        return Observed(self.setting)

    @cached_property
    def step(self) -> Step:
        return self._step_of(self.setting)

    def _step_of(self, setting: Setting) -> Step:
        frame = self._frame(setting)
        if setting.interval.law != "fixed":
            known = None if frame is None else Observed(setting).phases
            return averaged_step(setting, self.values, frame, known)
        return measured_step(setting, self.values, enclose_real(self.tau, self.values), frame)

    @property
    def sites(self) -> int:
        return len(self.setting.space.rows)  # type: ignore[union-attr]

    def _frame(self, setting: Setting) -> Frame | None:
        """What H reaches from the detectors, where that saves work; None: all sites."""
        small = self.sites <= WHOLE_UP_TO and setting.interval.law == "fixed"
        if self.whole or small or isinstance(setting.space, Unitary):
            return None
        reach = _reach(setting)
        few = setting.interval.law != "fixed" or self.sites > LARGEST_WHOLE or 4 * reach <= 3 * self.sites
        return reached_frame(setting, self.values, reach) if few else None

    def _dark(self, setting: Setting, step: Step) -> int:
        """Exact dimension of what never clicks, within the step's frame."""
        bright = (self.observed if setting is self.setting else Observed(setting)).bright
        return step.size - bright

    @cached_property
    def sums(self) -> Sums:
        dark = self._dark(self.setting, self.step)
        return enclose_sums(self.step.undetected, self.step.all_clicks, dark, self.highest, self.narrow)

    @cached_property
    def solved(self) -> Solved:
        """Stein's equation at this point."""
        return Solved(self.setting, self.observed, self.highest)

    @cached_property
    def total(self) -> arb:
        return self.over_start(0)

    def over_start(self, p: int) -> arb:
        """sum_n binomial(n+p-1, p) F_n for the start, a mixture."""
        start = self.setting.start
        if start is None or not start.mixture:
            raise NotCovered("no start is given")
        total = arb(0)
        for w, v in start.mixture:
            psi = self.step.state(v, self.values)
            total += enclose(w, self.values).real * self.sums.enclose(p, psi)
        return total

    def clicked_first(self, claim: Claim) -> arb:
        """The probability that the claim's detector is the first to click."""
        name = claim.quantity.key("detector") if claim.quantity else None
        places = [k for k, w in enumerate(self.setting.detectors) if w.name == name]
        if len(places) != 1:
            raise NotCovered("which detector is not said")
        dark = self._dark(self.setting, self.step)
        sums = enclose_sums(self.step.undetected, self.step.clicks[places[0]], dark, 0, self.narrow)
        total = arb(0)
        for w, v in self.setting.start.mixture if self.setting.start is not None else ():
            total += enclose(w, self.values).real * sums.enclose(0, self.step.state(v, self.values))
        return total

    def moment(self, p: int) -> arb:
        """sum_n n^p F_n."""
        parts = [(c, i) for i, c in enumerate(stirling(p)) if c]
        return sum((self.over_start(i) * c for c, i in parts), arb(0))

    @property
    def perfect(self) -> bool:
        return all(w.efficiency == ONE for w in self.setting.detectors)

    def returns(self, vectors: Sequence[Vector]) -> arb:
        """Sum over the vectors of the mean return to a perfect detector that is spanned by them."""
        if self.perfect and list(vectors) == _vectors(self):
            return self._returned(self.sums, self.step, vectors)
        watcher = replace(self.setting.detectors[0], vectors=tuple(vectors), efficiency=ONE)
        alone = replace(self.setting, detectors=(watcher,))
        step = self._step_of(alone)
        sums = enclose_sums(step.undetected, step.all_clicks, self._dark(alone, step), 1, self.narrow)
        return self._returned(sums, step, vectors)

    def _returned(self, sums: Sums, step: Step, vectors: Sequence[Vector]) -> arb:
        return sum((sums.enclose(1, step.state(v, self.values)) for v in vectors), arb(0))


def _reach(setting: Setting) -> int:
    """Dimension of what H reaches from the detectors, whatever the interval makes of it; exact."""
    return Observed(replace(setting, interval=Interval(TAU))).bright


def _vectors(e: Experiment) -> list[Vector]:
    return [v for w in e.setting.detectors for v in w.vectors]


def _one_state(e: Experiment) -> list[Vector]:
    """A fixed superposition 3^-a of the detector's states, normalised."""
    vectors = _vectors(e)
    if len(vectors) == 1:
        return vectors
    amplitude: dict[int, Formula] = {}
    length = formula(0)
    for a, v in enumerate(vectors):
        c = formula(1) / formula(3**a)
        length = length + c * c
        for x, f in v:
            amplitude[x] = amplitude[x] + c * f if x in amplitude else c * f
    root = Formula("call", ("sqrt", length))
    return [tuple((x, f / root) for x, f in sorted(amplitude.items()))]


def _divided(top: arb, total: arb) -> arb:
    if total.contains(0):
        raise NeedsPrecision("the total probability is not told from 0")
    return top / total


MEASURED: dict[str, Callable[[Experiment, Claim], arb]] = {
    "total detection probability": lambda e, c: e.total,
    "splitting probability": lambda e, c: e.clicked_first(c),
    "mean": lambda e, c: e.moment(1),
    "conditional mean": lambda e, c: _divided(e.moment(1), e.total),
    "moment": lambda e, c: e.moment(_power(c)),
    "variance": lambda e, c: _divided(e.moment(2), e.total) - _divided(e.moment(1), e.total) ** 2,
    "bright dimension": lambda e, c: e.returns(_vectors(e)),
    "dark dimension": lambda e, c: e.sites - e.returns(_vectors(e)),
    "number of phases": lambda e, c: e.returns(_one_state(e)),
}


def _power(claim: Claim) -> int:
    p = claim.quantity.key("power") if claim.quantity else None
    if not isinstance(p, int):
        raise NotCovered("which moment is not said")
    return p


def highest_power(claim: Claim) -> int:
    """The p of the largest Z_p that the claim's quantity needs."""
    name = claim.quantity.name if claim.quantity else ""
    return {"variance": 2}.get(name, _power(claim) if name == "moment" else 1)


@dataclass
class Tally:
    """What one claim has met so far."""

    claim: Claim
    points: int = 0
    digits: int | None = None
    stopped: str = ""
    wide: str = ""
    refuted: tuple[Point, str] | None = None
    numbers: list[Number] = field(default_factory=list)
    value: Number | None = None

    def finding(self) -> Finding:
        if self.refuted is not None:
            point, text = self.refuted
            return Finding("refuted", ROAD, points=self.points, point=point.text(), evidence=text)
        if self.wide:
            return Finding("undecided", ROAD, self.digits, self.points, evidence=self.wide)
        if not self.points:
            return Finding("untested", ROAD, evidence=self.stopped or "no sampled point met the assumptions")
        evidence = "the experiment summed over all asks"
        if is_open(self.claim):
            evidence = "Stein's equation solved in balls, and the experiment summed over all asks"
        return Finding("agrees", ROAD, self.digits, self.points, evidence=evidence)


def check_summed(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for every claim about a quantity in the table above, and its measured numbers."""
    found: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    values: dict[str, Value] = {}
    mine = [c for c in claims if c.quantity is not None and c.quantity.name in (*MEASURED, "dark state")]
    bench = Bench(max((highest_power(c) for c in mine), default=1), effort.digits)
    for claim in mine:
        tally = Tally(claim)
        try:
            if claim.kind.name not in ("exactly", "upper", "lower"):
                raise NotCovered(f'"{claim.kind.phrase}" is not decided by summing over asks')
            _meet(setting, tally, effort, bench)
        except NotCovered as reason:
            tally.stopped = str(reason)
        found[claim.id] = tally.finding()
        numbers[claim.id] = tuple(tally.numbers)
        if tally.value is not None:
            values[claim.id] = tally.value
    return Seen(found, numbers, values=values)


def _meet(setting: Setting, tally: Tally, effort: Check, bench: Bench) -> None:
    """The claim at its points."""
    size = len(getattr(setting.space, "rows", ()))
    if size > LARGEST:
        raise NotCovered(f"the experiment is summed on at most {LARGEST} sites, and there are {size}")
    followed = isinstance(tally.claim.value, Matrix) or isinstance(setting.space, Unitary)
    if followed and size > LARGEST_WHOLE:
        raise NotCovered(f"all of at most {LARGEST_WHOLE} sites are followed, and there are {size}")
    if isinstance(tally.claim.value, Matrix):
        return _meet_state(setting, tally, effort, bench)
    for point in sample_points(setting, effort, tally.claim.assume):
        if tally.refuted is None:
            _compare(setting, formula_of(tally.claim), point, tally, bench)
    return None


def _compare(setting: Setting, value: Formula, point: Point, tally: Tally, bench: Bench) -> None:
    """Claim and experiment at one point, at rising precision."""
    digits = bench.digits
    for attempt in range(ATTEMPTS):
        with ctx.workprec(bits_for(digits + SPARE_DIGITS, 128) << attempt):
            try:
                experiment = bench.at(setting, point)
                if tally.claim.origin == "derived" and experiment.observed.bright < bench.reach(setting, tally.claim):
                    tally.stopped = "a point was left out: fewer directions are seen there than at generic values"
                    return
                measured = MEASURED[name_of(tally.claim)](experiment, tally.claim)
                claimed = _claimed(experiment, value, tally.claim, point, digits)
            except NeedsPrecision:
                continue
            except OutsideValidity as reason:
                tally.stopped = f"a point was left out: {reason}"
                return
            if _settled(tally, point, claimed, measured, digits):
                return
    tally.wide = f"the balls stay too wide for {digits} digits"


def _claimed(e: Experiment, value: Formula, claim: Claim, point: Point, digits: int) -> acb:
    """The claimed number: what an equation gives where one is stated; a long decimal stands for what rounds to it."""
    if is_open(claim):
        return acb(e.solved.value(claim, e.total))
    ball, places = enclose(value, Values.at(point.mapping())), _decimal_places(value, digits)
    return ball if places is None else ball + acb(arb(0, power_of_ten(-places)))


def _decimal_places(value: Formula, digits: int) -> int | None:
    """How many places a plain decimal has that shows two thirds of the digits compared; None for all else."""
    if value.head != "number":
        return None
    places, rest = 0, Fraction(value.args[0])
    while rest.denominator != 1 and places <= 10 * digits:
        places, rest = places + 1, rest * 10
    long = 3 * len(str(abs(rest.numerator))) >= 2 * digits
    return places if places and rest.denominator == 1 and long else None


def _settled(tally: Tally, point: Point, claimed: acb, measured: arb, digits: int) -> bool:
    gauge = Gauge(digits)
    scale = arb(1).max(arb(abs(measured).upper()))
    name = tally.claim.quantity.name if tally.claim.quantity else ""
    if not _surely_kept(tally.claim, claimed, measured):
        gauge.compare(name, claimed, acb(measured), scale)
    if gauge.misses:
        tally.refuted = (point, gauge.first_miss())
    elif gauge.wide:
        return False
    tally.points += 1
    if gauge.shared is not None:
        tally.digits = gauge.shared if tally.digits is None else min(tally.digits, gauge.shared)
    tally.numbers.append(Number(*with_radius(measured, digits), point.text(), ROAD))
    if tally.value is None and is_open(tally.claim):
        tally.value = Number(*with_radius(measured, digits + 2), point.text(), ROAD)
    return True


def _surely_kept(claim: Claim, claimed: acb, measured: arb) -> bool:
    """Whether a claimed bound is met with room to spare; one that is just met is compared like an equation."""
    if claim.kind.name not in ("upper", "lower") or not claimed.imag.contains(0):
        return False
    room = claimed.real - measured if claim.kind.name == "upper" else measured - claimed.real
    return bool(room > 0)


class Bench:
    """Experiments that claims at one point and one precision share."""

    def __init__(self, highest: int, digits: int):
        self.highest = highest
        self.digits = digits
        self._held: dict[tuple[Setting, Point, int], Experiment] = {}
        self._reach: dict[Setting, int] = {}

    def reach(self, setting: Setting, claim: Claim) -> int:
        """Bright dimension at generic letters and interval, those apart that the claim's assumptions give a value.

        0 where it is not known exactly.
        """
        fixed = [r for r in claim.assume if r.op == "=" and r.left.head == "letter" and r.left.args[0] != "tau"]
        setting = at_values(setting, {r.left.args[0]: r.right for r in fixed})
        if setting not in self._reach:
            try:
                self._reach[setting] = Observed(setting).bright
            except NotCovered:
                self._reach[setting] = 0
        return self._reach[setting]

    def at(self, setting: Setting, point: Point) -> Experiment:
        """The setting with every letter replaced, at the working precision."""
        key = (setting, point, ctx.prec)
        if key not in self._held:
            interval = setting.interval
            length = put(interval.length, point.mapping())
            shape = None if interval.shape is None else put(interval.shape, point.mapping())
            numbers = replace(at_values(setting, point.mapping()), interval=Interval(length, interval.law, shape))
            self._held[key] = Experiment(numbers, length, self.highest, power_of_ten(-self.digits - SPARE_DIGITS))
        return self._held[key]


def _meet_state(setting: Setting, tally: Tally, effort: Check, bench: Bench) -> None:
    """A claimed dark state: not zero, and never seen."""
    entries = entries_of(tally.claim)
    if not entries or any(y for _, y, _ in entries):
        raise NotCovered("a dark state is one column: entries [x, 0, amplitude]")
    letters = {n for _, _, f in entries for n in free_letters(f)}
    if "tau" in letters:
        raise NotCovered("a dark state does not depend on tau")
    for point in sample_points(setting, effort, tally.claim.assume):
        with ctx.workprec(bits_for(effort.digits + SPARE_DIGITS, 256)):
            e = replace(bench.at(setting, point), whole=True)
            values = Values.at(point.mapping())
            psi = e.step.state(tuple((x, f) for x, _, f in entries), values)
            length = sum((a.real * a.real + a.imag * a.imag for a in psi), arb(0))
            if length.contains(0):
                raise NotCovered("the state is not told from 0")
            scaled = [a / length.sqrt() for a in psi]
            if _settled(tally, point, acb(0), e.sums.enclose(0, scaled), effort.digits) and tally.refuted:
                return
