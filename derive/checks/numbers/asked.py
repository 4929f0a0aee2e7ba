"""Numbers at the asks and times that a topic was asked for: what its laws say there, beside what is measured there.

Every claim about a quantity in `at_asks.READERS` is read at every clock, at [check].points or else at the first
sampled point.  The law is evaluated in balls (road "derived"); a generating function gives its n-th coefficient
(`numerics/circle_sums.py`).  The measured number is the experiment's own (road "enclosure").  A law that holds exactly
and is disjoint from the measured number is refuted.  Of a topic in `ENTRIES` a number for which no formula stands is
an entry of its own.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field, replace

from flint import acb, arb, ctx

from derive.checks.numbers.absorbed import survival_absorbed
from derive.checks.numbers.clocks import Clock, Wants
from derive.checks.numbers.readers import READERS, Readings
from derive.checks.seen import Seen
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters, letter
from derive.numerics.circle_sums import enclose_amplitudes
from derive.numerics.decimals import rounded, spoken, with_radius
from derive.numerics.evaluate import Values, enclose
from derive.numerics.moving import in_letter
from derive.numerics.points import decide, sample_points
from derive.numerics.precision import bits_for, digits_of, power_of_ten, upper
from derive.problem.points import Point, holds
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Relation, Setting
from derive.record.said import AtAsk, Claim, Finding, Number, Prose

ROAD, LAW = "enclosure", "derived"
ATTEMPTS = 5
SPARE_DIGITS = 6
DEEPEST_ZERO = 4
"""Times the digits asked for below which a number that is not told from 0 is looked at no closer."""
LONGEST_COEFFICIENT = 2_000
"""Asks up to which a generating function gives its coefficient: twice as many values of it are taken."""
LAWS_ALONE = ("survival density",)
"""A density leaves interference between levels out, which F_n/tau at one ask has in full."""
LAWS_OF_THE_WHOLE = ("total detection probability", "splitting probability")
"""Laws for all asks together, beside which stands what is measured within n."""
STANDS_IN = "absorber strength"
"""Of the plain absorber: its survival stands beside the experiment's and differs from it, small tau or not."""
ENTRIES = {"renewal": ("detection probability", "renewal.F.{n}")}
"""Topics whose numbers are entries where no formula stands: the quantity, and the entry's name."""


def numbers_asked(topic: str, setting: Setting, claims: Sequence[Claim], wants: Wants, effort: Check) -> Seen:
    """Rows of numbers, the same by claim, entries of their own, and refuted findings; notes on what is left out."""
    sheet = _Sheet(topic, setting, claims, effort)
    points = _points(setting, effort)
    for point in points:
        clocks, reasons = wants.clocks(setting, point)
        for reason in reasons:
            sheet.leave_out(reason)
        sheet.fill(point, clocks)
    if not points:
        sheet.leave_out("no point met the assumptions")
    return sheet.seen()


def _points(setting: Setting, effort: Check) -> tuple[Point, ...]:
    """The points of the worksheet's own, else the first drawn one."""
    own = sample_points(setting, replace(effort, samples=0)) if effort.points else ()
    return own or sample_points(setting, replace(effort, samples=1, points=()))[:1]


Wanted = tuple[Claim, Clock]


@dataclass
class _Sheet:
    """What has been found so far."""

    topic: str
    setting: Setting
    claims: Sequence[Claim]
    effort: Check
    rows: list[AtAsk] = field(default_factory=list)
    entries: dict[str, Claim] = field(default_factory=dict)
    findings: dict[str, Finding] = field(default_factory=dict)
    notes: dict[str, None] = field(default_factory=dict)

    def leave_out(self, reason: str) -> None:
        self.notes[f"Numbers asked of {self.topic}: {reason.rstrip('.')}."] = None

    def fill(self, point: Point, clocks: Sequence[Clock]) -> None:
        """Every claim at every clock of one point."""
        named = [c for c in (*self.claims, *self._own_entries(clocks)) if _name(c) in (*READERS, *LAWS_ALONE)]
        wanted = [(c, k) for c in named if _kept(c, point) for k in clocks if _is_at(c, k)]
        for clock in clocks:
            if clock.n == 0 and not any(k == clock for _, k in wanted):
                self.leave_out(f"t = {text(clock.t)} comes before the first ask")
        measured = self._measured(point, wanted)
        laws = Laws(self.setting, self.claims, point, self.effort.digits)
        for claim, clock in wanted:
            seen = measured.get((claim, clock))
            said = laws.at(claim, clock, seen)
            self._note(claim, clock, point, said, seen)

    def _own_entries(self, clocks: Sequence[Clock]) -> Iterator[Claim]:
        """A claim without a value yet for every ask that no claim is about."""
        if self.topic not in ENTRIES:
            return
        about, pattern = ENTRIES[self.topic]
        known = {c.quantity.key("ask") for c in self.claims if c.quantity is not None and c.quantity.name == about}
        for n in dict.fromkeys(k.n for k in clocks):
            if n not in known and n > 0:
                quantity = Quantity(about, (("ask", n),))
                yield Claim(pattern.format(n=n), self.topic, quantity, Number("", ""))

    def _measured(self, point: Point, wanted: Sequence[Wanted]) -> dict[Wanted, acb]:
        """The experiment read at rising precision, until every number has its digits."""
        asks = tuple(sorted({clock.n for _, clock in wanted}))
        found: dict[Wanted, acb] = {}
        for attempt in range(ATTEMPTS):
            bits = bits_for(self.effort.digits + SPARE_DIGITS, 128 + 8 * max(asks, default=1).bit_length())
            open_ = [w for w in wanted if w not in found or not _narrow(found[w], self.effort.digits)]
            if not open_:
                break
            with ctx.workprec(bits << attempt):
                readings = Readings(self.setting, point, asks, self.effort.digits)
                for claim, clock in open_:
                    self._read(readings, claim, clock, found)
        return {w: x for w, x in found.items() if _bounded(x, self.effort.digits)}

    def _read(self, readings: Readings, claim: Claim, clock: Clock, found: dict[Wanted, acb]) -> None:
        if _name(claim) not in READERS:
            return
        try:
            found[claim, clock] = acb(READERS[_name(claim)].read(readings, clock, claim))
        except (NotCovered, OutsideValidity) as reason:
            self.leave_out(str(reason))
        except NeedsPrecision:
            return

    def _note(self, claim: Claim, clock: Clock, point: Point, said: acb | None, seen: acb | None) -> None:
        """One row, or two where the number is complex; nothing where neither side has one.

        What a claim that says nothing about n leaves to be measured stands beside the derived entry once.
        """
        if said is None and (seen is None or claim.origin != "derived"):
            return
        by_time = _name(claim).startswith("classical") and "n" not in _letters(claim)
        place = (*point.text(), *clock.at(by_time))
        both = [x for x in (said, seen) if x is not None]
        for part in ("",) if all(x.imag.contains(0) for x in both) else ("real", "imaginary"):
            where = (*place, ("part", part)) if part else place
            values = [None if x is None else x.imag if part == "imaginary" else x.real for x in (said, seen)]
            self.rows.append(self._row(claim, where, *values))
        self._judge(claim, clock, point, said, seen)

    def _row(self, claim: Claim, where: tuple[tuple[str, str], ...], said: arb | None, seen: arb | None) -> AtAsk:
        digits = self.effort.digits
        law = None if said is None else _number(said, where, LAW, digits)
        measured = None if seen is None else _number(seen, where, ROAD, digits)
        return AtAsk(claim.id, claim.quantity, law, measured, _apart(said, seen, digits))

    def _judge(self, claim: Claim, clock: Clock, point: Point, said: acb | None, seen: acb | None) -> None:
        is_entry = isinstance(claim.value, Number)
        if is_entry and claim.id not in self.entries and seen is not None:
            value = _number(seen.real, (*point.text(), *clock.at()), ROAD, self.effort.digits)
            given = tuple(Relation(letter(name), "=", parse(where)) for name, where in point.text())
            self.entries[claim.id] = replace(claim, value=value, assume=given)
            with ctx.workprec(bits_for(2 * self.effort.digits)):
                self.findings[claim.id] = _entry_finding(said, seen)
        if said is None or seen is None or said.overlaps(seen) or clock.by_time or not _is_exact(claim):
            return
        evidence = f"n = {clock.n}: claimed {spoken(said)}, measured {spoken(seen)}"
        self.findings[claim.id] = Finding("refuted", ROAD, points=1, point=point.text(), evidence=evidence)

    def seen(self) -> Seen:
        numbers: dict[str, tuple[Number, ...]] = {}
        for row in self.rows:
            both = tuple(n for n in (row.law, row.measured) if n is not None)
            numbers[row.entry] = (*numbers.get(row.entry, ()), *both)
        notes: tuple[Prose, ...] = tuple((note,) for note in self.notes)
        return Seen(self.findings, numbers, notes=notes, claims=tuple(self.entries.values()), rows=tuple(self.rows))


def _name(claim: Claim) -> str:
    return claim.quantity.name if claim.quantity is not None else ""


def _letters(claim: Claim) -> set[str]:
    return free_letters(claim.value) if isinstance(claim.value, Formula) else set()


def _is_at(claim: Claim, clock: Clock) -> bool:
    """Whether the claim speaks of that ask."""
    ask = claim.quantity.key("ask") if claim.quantity is not None else None
    if _name(claim) == STANDS_IN and claim.quantity is not None and claim.quantity.key("absorber") != "plain":
        return False
    first = READERS[_name(claim)].first if _name(claim) in READERS else 0
    return clock.n >= first and ask in (None, clock.n)


def _is_exact(claim: Claim) -> bool:
    """Whether what is read at an ask must be what the law says there."""
    return claim.kind.name == "exactly" and _name(claim) != STANDS_IN


def _kept(claim: Claim, point: Point) -> bool:
    """Whether the point surely meets what the claim assumes."""
    return all(holds(r, point.mapping(), decide) is True for r in claim.assume)


def _narrow(x: acb, digits: int) -> bool:
    size = upper(x)
    if x.contains(0) and size < power_of_ten(-DEEPEST_ZERO * digits):
        return True
    return all(part.rad() <= size * power_of_ten(-digits - 1) for part in (x.real, x.imag))


def _bounded(x: acb, digits: int) -> bool:
    return x.is_finite() and all(part.rad() <= power_of_ten(-digits) for part in (x.real, x.imag))


def _number(x: arb, where: tuple[tuple[str, str], ...], road: str, digits: int) -> Number:
    """A number that is not told from 0 is 0 with its radius."""
    shown = arb(0, upper(x)) if x.contains(0) and not x.is_zero() else x
    value, radius = with_radius(shown, digits)
    return Number(value, radius, where, road)


def _apart(said: arb | None, seen: arb | None, digits: int) -> str:
    """How far law and measurement lie apart, in units of the measured number; "0" where they overlap."""
    if said is None or seen is None:
        return ""
    if said.overlaps(seen):
        return "0"
    return rounded((said - seen) / seen, 2) if not seen.contains(0) else ""


def _entry_finding(said: acb | None, seen: acb) -> Finding:
    """The experiment alone, or beside the generating function's coefficient."""
    beside = "" if said is None else ", beside the generating function's coefficient"
    gap = upper(seen - (seen if said is None else said))
    digits = digits_of(gap, arb(1) if seen.contains(0) else upper(seen))
    return Finding("agrees", ROAD, digits, 1, evidence=f"the experiment itself, in balls{beside}")


# -- what a law says


class Laws:
    """The claims' values at one point."""

    def __init__(self, setting: Setting, claims: Iterable[Claim], point: Point, digits: int):
        self.setting, self.point, self.digits = setting, point, digits
        derived = [c for c in claims if c.origin == "derived" and _name(c) == "generating function"]
        self.functions = [c.value for c in derived if isinstance(c.value, Formula)]
        self.complete = len(self.functions) == sum(w.rank for w in setting.detectors)

    def at(self, claim: Claim, clock: Clock, seen: acb | None) -> acb | None:
        """The law's ball; None where it says nothing about that clock."""
        try:
            if isinstance(claim.value, Number):
                return self._probability(clock.n, seen) if self.complete else None
            if not isinstance(claim.value, Formula):
                return None
            if _name(claim) == "generating function":
                return self._coefficient(claim.value, clock.n, _leading_zeros(seen))
            if _name(claim) in LAWS_OF_THE_WHOLE:
                return None
            if _name(claim) == STANDS_IN:
                f, t = claim.value, clock.t
                return self._bounded(lambda: acb(survival_absorbed(self.setting, self.point, f, t)))
            return self._enclosed(claim.value, clock)
        except (NotCovered, OutsideValidity, NeedsPrecision):
            return None

    def _enclosed(self, f: Formula, clock: Clock) -> acb:
        """f at a clock."""
        return self._bounded(lambda: enclose(f, Values.at({**self.point.mapping(), **clock.values()})))

    def _bounded(self, compute: Callable[[], acb]) -> acb:
        """At rising precision; the last ball that is no wider than what can be printed."""
        found: acb | None = None
        for attempt in range(ATTEMPTS):
            with ctx.workprec(bits_for(self.digits + SPARE_DIGITS, 64) << attempt):
                try:
                    found = compute()
                except NeedsPrecision:
                    continue
            if _narrow(found, self.digits):
                break
        if found is None or not _bounded(found, self.digits):
            raise NeedsPrecision("the law is not bounded there")
        return found

    def _probability(self, n: int, seen: acb | None) -> acb | None:
        """sum over the detectors' states of |[z^n] phi_c|^2."""
        small = _leading_zeros(seen)  # twice as many as the largest amplitude has
        parts = [self._coefficient(f, n, small) for f in self.functions]
        with ctx.workprec(bits_for(2 * (self.digits + small), 128)):
            known = [x.real * x.real + x.imag * x.imag for x in parts if x is not None]
            return acb(sum(known, arb(0))) if len(known) == len(parts) else None

    def _coefficient(self, f: Formula, n: int, zeros: int) -> acb | None:
        """[z^n] f, to the digits wanted behind so many zeros."""
        if n > LONGEST_COEFFICIENT or n < 1:
            return None
        digits = self.digits + SPARE_DIGITS + zeros
        with ctx.workprec(bits_for(1.5 * digits + 10, 128)):
            phi = in_letter(f, "z", Values.at(self.point.mapping()))
            return enclose_amplitudes(lambda z: phi(z, None), [n], digits)[0]


def _leading_zeros(x: acb | None) -> int:
    """Zeros in front of the first digit of a measured number that is told from 0."""
    if x is None or not upper(x) > 0 or x.contains(0):
        return 0
    return max(digits_of(upper(x), arb(1)) or 0, 0)
