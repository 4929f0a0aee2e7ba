"""Where a refuted formula goes wrong, in one sentence, and the formula that it should have been.

Slips are undone one at a time: a constant or a power in front, a part of the formula that is too large, too small, of
the wrong sign or one too many, a missing term, a conjugate, an index, a function, an exponent.  A slip is named only
where the mended formula meets the right value at every sampled point to all digits, and the roads then accept it as a
claim.  Else: where it does hold (to which order, with which letter 0), or the smallest counterexample.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import islice

from flint import acb, ctx

from derive.checks.diagnose.constants import recognised
from derive.checks.diagnose.edits import Place, collected, edits, places, short
from derive.checks.diagnose.sights import Sight, is_slow, right_formula, root_sights, sights
from derive.errors import FormulaFault
from derive.formula.text import text
from derive.formula.tree import I_UNIT, ONE, PI, TAU, ZERO, Formula, free_letters, letter, number, plus, power, times
from derive.numerics.precision import bits_for
from derive.problem.setting import Check, Relation, Setting
from derive.record.said import Claim, Expansion, Kind, Matrix, PerRoot

Accepts = Callable[[Claim], bool]
SPARE_DIGITS = 30
SLOW_DIGITS = 18
MOST_EDITS = 6_000
MOST_PLACES = 120
MOST_CELLS = 40
MOST_SLOW = 20  # edits and places of a formula whose every value is an integral
TRIED = 4
"""Mended formulas that the roads are asked about, at most."""
_FACTORS = (2, Fraction(1, 2), 4, Fraction(1, 4), 3, Fraction(1, 3), -1)
IN_THE_LIMIT = (*(number(q) for q in _FACTORS), PI, power(PI, number(-1)))
EXPONENTS = (1, -1, 2, -2, 3, -3, 4, -4)


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """What is wrong, in words, and the claim that is accepted instead; `None` where only a counterexample is known."""

    words: str
    mended: Claim | None = None
    slip: str = ""


def diagnose(
    setting: Setting, claim: Claim, derived: Sequence[Claim], effort: Check, accepts: Accepts
) -> Diagnosis | None:
    """The first slip, in the order of likelihood, whose undoing is accepted; None where nothing holds."""
    if claim.kind.name in ("upper", "lower"):
        return _other_bound(claim, accepts)
    if isinstance(claim.value, Formula) and is_slow(claim.value):
        effort = replace(effort, digits=min(effort.digits, SLOW_DIGITS))  # the roads see to the others
    with ctx.workprec(bits_for(effort.digits + SPARE_DIGITS, 64)):
        if isinstance(claim.value, Matrix):
            return _matrix(setting, claim, derived, effort, accepts)
        if isinstance(claim.value, PerRoot):
            return _per_root(setting, claim, claim.value, derived, effort, accepts)
        if not isinstance(claim.value, Formula):
            return None
        seen = sights(setting, claim, derived, effort)
        if not seen:
            return _in_the_limit(claim, accepts)
        return _formula(setting, claim, derived, seen, effort, accepts)


def _per_root(
    setting: Setting, claim: Claim, value: PerRoot, derived: Sequence[Claim], effort: Check, accepts: Accepts
) -> Diagnosis | None:
    """The formula at the roots, beside the right values of the levels that they name."""

    def at_roots(one: Claim) -> Claim:
        return replace(one, value=replace(value, formula=one.value)) if isinstance(one.value, Formula) else one

    alone = replace(claim, value=value.formula)
    seen = root_sights(setting, claim, value, derived, effort)
    found = _formula(setting, alone, derived, seen, effort, lambda one: accepts(at_roots(one))) if seen else None
    return found if found is None or found.mended is None else replace(found, mended=at_roots(found.mended))


def _formula(
    setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight], effort: Check, accepts: Accepts
) -> Diagnosis | None:
    for slip, words, f in islice(_slips(claim, setting, derived, seen), TRIED):
        mended = replace(claim, value=f)
        if accepts(mended):
            more = "" if words.endswith(" is right") else f"; {short(f)} is accepted"
            return Diagnosis(f"{words}{more}.", mended, slip)
    return _holds_elsewhere(setting, claim, derived, seen, effort, accepts)


Slip = tuple[str, str, Formula]


def _slips(claim: Claim, setting: Setting, derived: Sequence[Claim], seen: list[Sight]) -> Iterator[Slip]:
    """(kind, words, mended formula) of everything that meets the right values at every sight."""
    f = claim.value
    if not isinstance(f, Formula):
        return
    tried: set[Formula] = set()
    for make in (_in_front, _at_a_place, _by_edits, _missing_term):
        for slip, words, new in make(f, setting, claim, derived, seen):
            if new not in tried and all(s.agrees(new) for s in seen):
                tried.add(new)
                yield slip, words, new


# -- a factor: of the whole formula, or of a part on which it depends linearly


def _in_front(
    f: Formula, setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight]
) -> Iterator[Slip]:
    yield from _scaled(places(f)[0], seen)


def _at_a_place(
    f: Formula, setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight]
) -> Iterator[Slip]:
    most = MOST_SLOW if is_slow(f) else MOST_PLACES
    for place in [p for p in places(f) if p.affine and not p.top][:most]:
        yield from _scaled(place, seen)


def _scaled(place: Place, seen: list[Sight]) -> Iterator[Slip]:
    """What number, times at most a power of one letter, belongs in front of the part."""
    ratios = _ratios(place, seen)
    if ratios is None:
        return
    for name, m in [("", 0), *((x, e) for x in sorted(seen[0].values.balls) for e in EXPONENTS)]:
        monomial = power(letter(name), number(m)) if name and m != 1 else letter(name) if name else ONE
        constants = _divided(ratios, monomial, seen)
        kappa = recognised(seen[0].padded(constants[0])) if constants and _constant(constants, seen) else None
        if kappa is not None and kappa != ONE or kappa is not None and name:
            new = _scaled_part(place.node, kappa, monomial)
            try:
                yield ("power" if name else "factor"), _factor_words(place, kappa, name, m), collected(place.put(new))
            except FormulaFault:
                continue


def _scaled_part(node: Formula, kappa: Formula, monomial: Formula) -> Formula:
    return ZERO if kappa == ZERO else times(kappa, node, *(() if monomial == ONE else (monomial,)))


def _ratios(place: Place, seen: list[Sight]) -> list[tuple[acb, Sight]] | None:
    """c with f[c*part] = right at every sight: f[part -> 0] + c*(f - f[part -> 0]); None where there is no such c."""
    try:
        whole, without = place.put(place.node), place.put(ZERO)
    except FormulaFault:
        return None
    found: list[tuple[acb, Sight]] = []
    for s in seen:
        full, rest = s.said(whole), s.said(without)
        if full is None or rest is None:
            return None
        one = _one_ratio(s, full, rest)
        if one is None:
            return None
        found.extend((c, s) for c in one)
    return found


def _one_ratio(s: Sight, full: list[acb], rest: list[acb]) -> list[acb] | None:
    """The ratios of the coefficients of one sight; what is zero on both sides says nothing."""
    out = []
    for a, r, right in zip(full, rest, s.seen, strict=True):
        part, wanted = a - r, right - r
        if part.contains(0):
            if not s.same(wanted, acb(0)):
                return None
            continue
        out.append(wanted / part)
    return out or None


def _divided(ratios: list[tuple[acb, Sight]], monomial: Formula, seen: list[Sight]) -> list[acb] | None:
    if monomial == ONE:
        return [c for c, _ in ratios]
    found = []
    for c, s in ratios:
        name = next(iter(free_letters(monomial)))
        ball = s.values.balls.get(name)
        if ball is None or ball.contains(0):
            return None
        exponent = monomial.args[1].args[0] if monomial.head == "power" else 1
        found.append(c / ball ** int(exponent))
    return found


def _constant(constants: list[acb], seen: list[Sight]) -> bool:
    return all(seen[0].same(c, constants[0]) for c in constants)


def _factor_words(place: Place, kappa: Formula, name: str, m: int) -> str:
    what = "" if place.top else f"{short(place.node)} "
    if kappa == ZERO:
        return f"{short(place.node)} is too much"
    if place.top and _is_whole(place.node) and _is_whole(times(kappa, place.node)):
        return f"{short(times(kappa, place.node))} is right"
    if name:
        factor = "" if kappa == ONE else f", and lacks a factor {short(kappa)}"
        what = what or "the formula "
        more = short(letter(name) if m == 1 else power(letter(name), number(m)))
        return f"{what}lacks a factor {more}{factor}" if m > 0 else f"{what}has {_inverse_of(name, m)} too much{factor}"
    if kappa == number(-1):
        return f"{what}has the wrong sign" if what else "the sign is wrong"
    sign = ""
    if kappa.head == "number" and kappa.args[0] < 0 or (kappa.head == "times" and _negative(kappa)):
        sign, kappa = "of the wrong sign and ", times(number(-1), kappa)
    if kappa.head == "number" and 0 < kappa.args[0] < 1:
        return f"{what}{sign}too large by {short(number(1 / kappa.args[0]))}"
    if I_UNIT in (kappa, *kappa.args):
        return f"{what}{sign}lacks a factor {short(kappa)}"
    return f"{what}{sign}too small by {short(kappa)}"


def _is_whole(f: Formula) -> bool:
    return f.head == "number" and bool(f.args[0].denominator == 1)


def _inverse_of(name: str, m: int) -> str:
    return name if m == -1 else f"{name}^{-m}"


def _negative(f: Formula) -> bool:
    return bool(f.args[0].head == "number" and f.args[0].args[0] < 0)


# -- changes of other parts


def _by_edits(
    f: Formula, setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight]
) -> Iterator[Slip]:
    domains = setting.domains()
    for edit in islice(edits(f, domains), MOST_SLOW if is_slow(f) else MOST_EDITS):
        if seen[0].agrees(edit.formula):
            yield "edit", edit.words, edit.formula


def _missing_term(
    f: Formula, setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight]
) -> Iterator[Slip]:
    """A term of the derived formula that the claim lacks, or a missing constant."""
    right = right_formula(claim, derived)
    terms = right[0].args if right is not None and right[0].head == "plus" else ()
    for term in terms:
        yield "term", f"the term {short(term)} is missing", f + term
    gaps = []
    for s in seen:
        said = s.said(f)
        gaps += [] if said is None else [s.seen[0] - said[0]]
    kappa = recognised(gaps[0]) if gaps and _constant(gaps, seen) else None
    if kappa is not None:
        yield "term", f"{short(kappa)} is missing", f + kappa


# -- where it holds all the same


def _holds_elsewhere(
    setting: Setting, claim: Claim, derived: Sequence[Claim], seen: list[Sight], effort: Check, accepts: Accepts
) -> Diagnosis | None:
    for x in setting.letters:
        special = Relation(letter(x.name), "=", ZERO)
        there = sights(setting, claim, derived, effort, (special,))
        if there and isinstance(claim.value, Formula) and all(s.agrees(claim.value) for s in there):
            narrowed = replace(claim, assume=(*claim.assume, special))
            if accepts(narrowed):
                return Diagnosis(f"it holds only where {x.name} = 0.", narrowed, "case")
    return _right_to_order(claim, seen, accepts) or _in_the_limit(claim, accepts)


def _in_the_limit(claim: Claim, accepts: Accepts) -> Diagnosis | None:
    """Right in the limit, and not as close to it as is claimed."""
    kind = claim.kind
    if kind.name != "limit":
        return None
    if kind.error is None and kind.within is None:
        return _scaled_in_the_limit(claim, accepts)
    ends = [f"{n} -> {text(to)}" for n, to in kind.toward]
    besides = (", up to a phase" if kind.phase else "") + (", smooth part" if kind.smooth else "")
    phrase = f"as {', then '.join(ends)}{besides}"
    bare = replace(claim, kind=replace(kind, phrase=phrase, error=None, within=None))
    if not accepts(bare):
        return None
    missed = "the error that is claimed is not kept" if kind.error is not None else "it is not as close as is claimed"
    return Diagnosis(f"it holds in the limit only; {missed}.", bare, "limit")


def _scaled_in_the_limit(claim: Claim, accepts: Accepts) -> Diagnosis | None:
    """Right in the limit but for a factor, where what is lost on the way hides it."""
    if not isinstance(claim.value, Formula):
        return None
    for kappa in IN_THE_LIMIT:
        f = times(power(kappa, number(-1)), claim.value)
        mended = replace(claim, value=f)
        if accepts(mended):
            words = "of the wrong sign" if kappa == number(-1) else f"off by a factor {short(kappa)}"
            return Diagnosis(f"in the limit it is {words}; {short(f)} is accepted.", mended, "factor")
    return None


def _other_bound(claim: Claim, accepts: Accepts) -> Diagnosis | None:
    """A bound on the other side."""
    other, words = ("lower", "a lower bound") if claim.kind.name == "upper" else ("upper", "an upper bound")
    turned = replace(claim, kind=replace(claim.kind, name=other, phrase=f"as {words}"))
    return Diagnosis(f"it is {words}, not the other.", turned, "bound") if accepts(turned) else None


def _right_to_order(claim: Claim, seen: list[Sight], accepts: Accepts) -> Diagnosis | None:
    """Right below tau^j and wrong from there."""
    orders = []
    for s in seen:
        said = s.said(claim.value) if isinstance(claim.value, Formula) else None
        if said is None or len(said) < 2:
            return None
        orders.append(next((k for k, (a, b) in enumerate(zip(said, s.seen, strict=True)) if not s.same(a, b)), None))
    wrong = [k for k in orders if k is not None]
    if not wrong or min(wrong) < 1 or all(b.contains(0) for s in seen for b in s.seen[: min(wrong)]):
        return None
    j = min(wrong)
    narrowed = replace(claim, kind=Kind("order", f"up to O({_power_of_tau(j)})", j, claim.kind.fixed))
    if not accepts(narrowed):
        return None
    words = f"it is right up to O({_power_of_tau(j)}) and wrong from {_power_of_tau(j)} on."
    return Diagnosis(words, narrowed, "order")


def _power_of_tau(j: int) -> str:
    return text(TAU if j == 1 else power(TAU, number(j)))


# -- matrices: the entries that differ, each by itself; or one slip in all


def _matrix(
    setting: Setting, claim: Claim, derived: Sequence[Claim], effort: Check, accepts: Accepts
) -> Diagnosis | None:
    """The same slip in every wrong entry, told once."""
    value = claim.value
    if not isinstance(value, Matrix) or claim.quantity is None:
        return None
    fixed: Cells = {}
    told: list[tuple[tuple[int, int], Slip]] = []
    cells, truth, known = _both(claim, derived)
    different = [place for place in sorted({*cells, *truth}) if cells.get(place, ZERO) != truth.get(place, ZERO)]
    if len(different) > MOST_CELLS:
        return None
    for place in different:
        f = cells.get(place, ZERO)
        alone, right = replace(claim, value=f), replace(claim, value=truth.get(place, ZERO), kind=known)
        seen = sights(setting, alone, [right], effort)
        if not seen:
            return None
        if all(s.agrees(f) for s in seen):
            continue
        slip = next(_slips(alone, setting, [right], seen), None) if len(told) < TRIED else None
        if slip is None:
            return None
        fixed[place] = slip[2]
        told.append((place, slip))
    if not told:
        return None
    mended = replace(claim, value=_matrix_of(value.size, cells | fixed))
    if not accepts(mended):
        return None
    (x, y), (kind, words, f) = told[0]
    others = len(told) - 1
    more = f", and so {'are' if others > 1 else 'is'} {others} more" if others else ""
    return Diagnosis(f"entry ({x}, {y}): {words}; {short(f)} is accepted{more}.", mended, kind)


Cells = dict[tuple[int, int], Formula]


def _both(claim: Claim, derived: Sequence[Claim]) -> tuple[Cells, Cells, Kind]:
    """Claimed entries, derived ones of the same quantity, and how the derived ones hold; none where none is derived."""
    mine = {(x, y): f for x, y, f in claim.value.entries()} if isinstance(claim.value, Matrix) else {}
    for other in derived:
        if other.quantity == claim.quantity and isinstance(other.value, Matrix):
            return mine, {(x, y): f for x, y, f in other.value.entries()}, other.kind
        if other.quantity == claim.quantity and isinstance(other.value, Expansion):
            return mine, _summed_up(other.value), other.kind
    return {}, {}, claim.kind


def _summed_up(series: Expansion) -> Cells:
    """The entries of a truncated series of matrices as polynomials."""
    terms: dict[tuple[int, int], list[Formula]] = {}
    for k, term in zip(series.powers, series.terms, strict=True):
        for x, y, f in term.entries() if isinstance(term, Matrix) else ():
            terms.setdefault((x, y), []).append(times(f, power(letter(series.letter), number(k))) if k else f)
    return {place: plus(*found) for place, found in terms.items()}


def _matrix_of(size: int, cells: Cells) -> Matrix:
    rows: dict[int, list[tuple[int, Formula]]] = {}
    for (x, y), f in sorted(cells.items()):
        if f != ZERO:
            rows.setdefault(x, []).append((y, f))
    return Matrix(size, (), tuple((x, tuple(row)) for x, row in sorted(rows.items())))
