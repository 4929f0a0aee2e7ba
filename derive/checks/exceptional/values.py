"""Roads for values of a letter at which fewer phases are seen at any interval.

exact       at the claimed value the phases, counted by elimination (`observed.py`), are fewer than at generic letters;
            counts and total probabilities there as for any setting (`detection.py`)
enclosure   all zeros, enclosed, of det(mu_(j+k)), mu_m = <d|H^m|d>, as a polynomial over Q in exp(i phi) or in the
            letter over a positive one: the claimed value must be in its place; counts and probabilities at the claimed
            value by the experiment summed over all asks (`summed.py`)

A zero of a polynomial that is its own mirror image lies on the unit circle if its mirror image 1/conj(u) is no other
zero.  Places are counted letter by letter, ascending, phases within (-pi, pi].
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from flint import acb, arb, ctx, fmpq_poly

from derive.checks.asked import formula_of, name_of
from derive.checks.detection.road import check_detection
from derive.checks.gauge import Gauge
from derive.checks.observed import Observed, Sparse
from derive.checks.seen import Seen
from derive.checks.summed import SPARE_DIGITS, Tally, check_summed
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import ONE, TAU, Formula, letter
from derive.formula.tree import replace as put
from derive.numerics.decimals import with_radius
from derive.numerics.evaluate import Values, enclose
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for
from derive.problem.points import Point
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Domain, Interval, Letter, Setting
from derive.problem.specialise import at_values
from derive.record.said import Claim, Finding, Number

VALUE = "exceptional value"
THERE = {
    "phases at exceptional value": "number of phases",
    "total probability at exceptional value": "total detection probability",
}
KINDS = ("real", "positive", "nonnegative")


@dataclass(frozen=True)
class Place:
    """One zero: its letter, and its angle, or its multiple of `unit`."""

    name: str
    ball: arb
    unit: Formula


def check_values_exact(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """Fewer phases at the value, and what is claimed there."""
    found: dict[str, Finding] = {}
    for claim in _mine(claims):
        try:
            name, value = _value_for(setting, claim, claims)
            if name_of(claim) == VALUE:
                found[claim.id] = _drops(setting, claim, name, value)
            else:
                there, said = _there(setting, claim, name, value)
                found |= check_detection(there, [said], effort)
        except (NotCovered, ZeroDivisionError):
            continue
    return Seen(found)


def check_values_enclosed(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """The value in its place, and what is claimed there by the experiment."""
    found: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    for claim in _mine(claims):
        try:
            if name_of(claim) == VALUE:
                found[claim.id], numbers[claim.id] = _in_its_place(setting, claim, effort)
            else:
                there, said = _there(setting, claim, *_value_for(setting, claim, claims))
                seen = check_summed(there, [said], effort)
                found, numbers = {**found, **seen.findings}, {**numbers, **seen.numbers}
        except NotCovered as reason:
            found[claim.id] = Finding("untested", "enclosure", evidence=str(reason))
    return Seen(found, numbers)


def _mine(claims: Sequence[Claim]) -> list[Claim]:
    known = [c for c in claims if c.quantity is not None and c.quantity.name in (VALUE, *THERE)]
    return [c for c in known if isinstance(c.value, Formula) and c.kind.name == "exactly"]


def _which(claim: Claim) -> int:
    n = claim.quantity.key("value") if claim.quantity else None
    if not isinstance(n, int):
        raise NotCovered("which exceptional value is not said")
    return n


def _value_for(setting: Setting, claim: Claim, claims: Sequence[Claim]) -> tuple[str, Formula]:
    """The letter and the value that the claim speaks of: its own, or the one claimed under the same number."""
    place = _place(setting, _which(claim))
    if name_of(claim) == VALUE:
        return place.name, formula_of(claim)
    for other in sorted(_mine(claims), key=lambda c: c.origin != "derived"):
        if name_of(other) == VALUE and _which(other) == _which(claim):
            return place.name, formula_of(other)
    raise NotCovered("no claim says what the value is")


def _there(setting: Setting, claim: Claim, name: str, value: Formula) -> tuple[Setting, Claim]:
    """The setting at the value, at a free interval, and the claim as one about any setting."""
    said = put(formula_of(claim), {name: value})
    return _at(setting, name, value), replace(claim, quantity=Quantity(THERE[name_of(claim)]), value=said)


def _at(setting: Setting, name: str, value: Formula) -> Setting:
    return replace(at_values(setting, {name: value}), interval=Interval(TAU))


def _drops(setting: Setting, claim: Claim, name: str, value: Formula) -> Finding:
    usual, there = Observed(replace(setting, interval=Interval(TAU))).phases, Observed(_at(setting, name, value)).phases
    if there >= usual:
        evidence = f"at this value {there} phases are seen, as many as elsewhere, exactly"
        return Finding("refuted", "exact", evidence=evidence)
    if claim.origin != "derived":
        raise NotCovered("that fewer phases are seen there does not say which value it is")
    return Finding("proved", "exact", evidence=f"{there} phases in place of {usual}, exactly")


def _in_its_place(setting: Setting, claim: Claim, effort: Check) -> tuple[Finding, tuple[Number, ...]]:
    tally = Tally(claim)
    with ctx.workprec(bits_for(effort.digits + SPARE_DIGITS, 128)):
        place = _place(setting, _which(claim))
        for point in sample_points(setting, effort, claim.assume):
            values = Values.at(point.mapping())
            measured = place.ball * enclose(place.unit, values).real
            gauge = Gauge(effort.digits)
            scale = arb(1).max(arb(abs(measured).upper()))
            gauge.compare(VALUE, enclose(formula_of(claim), values), acb(measured), scale)
            bare = Point(tuple((n, v) for n, v in point.values if n not in ("tau", place.name)))
            if gauge.misses:
                tally.refuted = (bare, gauge.first_miss())
                break
            tally.wide = gauge.wide
            tally.points += 1
            shared = [d for d in (tally.digits, gauge.shared) if d is not None]
            tally.digits = min(shared) if shared else None
            tally.numbers.append(Number(*with_radius(measured, effort.digits), bare.text(), "enclosure"))
    finding = tally.finding()
    evidence = "all zeros of the moments' determinant enclosed, in order"
    return (replace(finding, evidence=evidence) if finding.verdict == "agrees" else finding), tuple(tally.numbers)


# -- where the determinant of the moments vanishes


def _place(setting: Setting, n: int) -> Place:
    found = [p for x in setting.letters if x.domain.kind in KINDS for p in _places(setting, x)]
    if not 1 <= n <= len(found):
        raise NotCovered(f"{len(found)} values are found at which the determinant of the moments vanishes")
    return found[n - 1]


def _places(setting: Setting, x: Letter) -> list[Place]:
    """The zeros that depend on this letter alone, ascending."""
    phases, lines, units = fmpq_poly([1]), fmpq_poly([1]), set()
    for polynomial, unit in _factors(setting, x.name):
        if unit is None:
            phases *= polynomial
        else:
            lines *= polynomial
            units.add(unit)
    if len(units) > 1 or (units and phases.degree() > 0):
        return []
    unit = next(iter(units), ONE)
    found = _angles(phases) if phases.degree() > 0 else _reals(lines)
    kept = [a for a in found if x.domain.kind == "real" or a > 0 or (a == 0 and x.domain.kind == "nonnegative")]
    return [Place(x.name, a, unit) for a in sorted(kept, key=lambda a: float(a.mid()))]


def _factors(setting: Setting, name: str) -> Iterable[tuple[fmpq_poly, Formula | None]]:
    """Factors of the determinant in this letter alone: in its phase (unit None), or over a positive letter."""
    determinant = _determinant(setting)
    field, num = determinant.field, _cleared(determinant)
    own = [f"unit{k}" for k, (m, d) in enumerate(field.needs.units.items()) if m == (letter(name),) and d == 1]
    for factor, _ in num.factor()[1]:
        used = [n for n, k in field.index.items() if int(factor.degrees()[k])]
        if used == own:
            yield _along(factor, field.index[own[0]]), None
        elif f"letter:{name}" in used and all(n.startswith("letter:") for n in used):
            unit = _unit([n.removeprefix("letter:") for n in used], setting.domains())
            homogeneous = len({sum(int(e) for e in m) for m, _ in factor.terms()}) == 1
            if len(used) == 1 or (len(used) == 2 and homogeneous and unit not in (None, name)):
                yield _along(factor, field.index[f"letter:{name}"]), letter(unit) if len(used) == 2 and unit else ONE


def _unit(names: Sequence[str], domains: Mapping[str, Domain]) -> str | None:
    """The letter that others are multiples of: the first declared one that is positive."""
    return next((n for n in domains if n in names and domains[n].is_positive), None)


def _cleared(x: Element) -> Any:
    """A multiple of x's numerator without 1/u."""
    field, num = x.field, x.num
    for k in range(len(field.needs.units)):
        degree = int(num.degrees()[field.index[f"unit{k}bar"]])
        num = field.reduce(num * field.gen[f"unit{k}"] ** degree)
    return num


def _along(factor: Any, k: int) -> fmpq_poly:
    """The coefficients by the powers of one generator, the others set to 1."""
    powers = {int(m[k]): c for m, c in factor.terms()}
    return fmpq_poly([powers.get(n, 0) for n in range(max(powers) + 1)])


def _determinant(setting: Setting) -> Element:
    """det(mu_(j+k)), j, k < w, by Bareiss' elimination: mu_m = sum over the detectors' states d of <d|H^m|d>."""
    observed = Observed(replace(setting, interval=Interval(TAU)))
    field, w = observed.field, observed.phases
    rows = [{x: field.conjugate(field.element(f)) for x, f in v} for v in observed.vectors]
    kets = [{x: field.element(f) for x, f in v} for v in observed.vectors]
    moments = []
    for _ in range(2 * w - 1):
        total = field.zero
        for row, ket in zip(rows, kets, strict=True):
            total = total + _dot(field, row, ket)
        moments.append(total)
        rows = [observed.moved(row) for row in rows]
    return _eliminated(field, [[moments[j + k] for k in range(w)] for j in range(w)])


def _dot(field: Field, row: Sparse, ket: Sparse) -> Element:
    total = field.zero
    for x, c in row.items():
        if x in ket:
            total = total + c * ket[x]
    return total


def _eliminated(field: Field, m: list[list[Element]]) -> Element:
    before = field.one
    for k in range(len(m) - 1):
        if not m[k][k]:
            raise NotCovered("a leading block of the moments is singular")
        for i in range(k + 1, len(m)):
            for j in range(k + 1, len(m)):
                m[i][j] = (m[i][j] * m[k][k] - m[i][k] * m[k][j]) / before
        before = m[k][k]
    return m[-1][-1]


def _angles(p: fmpq_poly) -> list[arb]:
    """Angles in (-pi, pi] of the zeros that surely lie on the unit circle."""
    roots = [r for r, _ in (p // p.gcd(p.derivative())).numer().complex_roots()]
    found = []
    for r in roots:
        if r.contains(0):
            continue
        mirror = 1 / r.conjugate()
        alike = [s for s in roots if s.overlaps(mirror)]
        if len(alike) == 1 and alike[0].overlaps(r):
            found.append(arb.pi() if r.imag.contains(0) and r.real < 0 else r.log().imag)
    return found


def _reals(p: fmpq_poly) -> list[arb]:
    if p.degree() < 1:
        return []
    return [r.real for r, _ in (p // p.gcd(p.derivative())).numer().complex_roots() if r.imag.is_zero()]
