"""One claim about levels laid beside what was measured at a point: which level it speaks of, how far it agrees."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import acb, arb

from derive.checks.levels.arms import arm_of, meant
from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import Formula, letter
from derive.numerics.decimals import spoken
from derive.numerics.evaluate import Values, enclose
from derive.numerics.multiplicity import enclose_spectrum, multiplicities
from derive.numerics.precision import digits_of, power_of_ten, upper
from derive.numerics.roots import enclose_roots
from derive.numerics.series import enclose_series
from derive.numerics.spectrum import Levels, Reached, enclose_secular, enclose_weights
from derive.numerics.system import System
from derive.problem.setting import Setting
from derive.record.said import Claim, Expansion, PerRoot, Value

OPEN_ORDERS = 6
TAU_BELOW = 97
LARGEST_COUNTED = 40
"""Sites up to which dark levels are found without being told where to look."""
PARTS = {"level energy": "energy", "decay rate": "rate", "level multiplicity": "multiplicity",
          "level weight": "weight", "secular function": "secular", "dark level energy": "dark",
          "dark level multiplicity": "dark"}


class Disjoint(Exception):
    """A claim and a measurement that have no number in common."""


@dataclass
class Measured:
    """Everything measured at one point; `order` is the highest coefficient."""

    setting: Setting
    values: Values
    s: System
    reached: Reached
    levels: Levels
    order: int
    digits: int
    q: acb | None = None  # sqrt(1 - eta); None for a perfect detector


def orders(claim: Claim) -> int:
    """How many coefficients in tau a claim speaks of, less one."""
    return (_remainder(claim) or (OPEN_ORDERS if _moves(claim) else 1)) - 1


def _remainder(claim: Claim) -> int | None:
    if isinstance(claim.value, Expansion):
        return claim.value.remainder
    return claim.kind.order if claim.kind.name == "order" else None


def _moves(claim: Claim) -> bool:
    """Whether the quantity depends on tau at all."""
    return claim.quantity is not None and claim.quantity.name in ("level energy", "decay rate", "secular function")


def closed(claim: Claim) -> bool:
    """Whether finitely many coefficients decide it."""
    return _remainder(claim) is not None or not _moves(claim)


def compare(claim: Claim, measured: Measured, claims: Sequence[Claim]) -> int | None:
    """Digits that claim and measurement share; `Disjoint` where they cannot both be right."""
    if claim.quantity is None:
        raise NotCovered("a claim without a quantity")
    part = PARTS[claim.quantity.name]
    if part == "secular":
        return _compare_secular(claim, measured)
    if part == "dark":
        return _compare_dark(claim, measured, claims)
    found: list[int] = []
    for index, values in targets(claim, measured, claims):
        for k, (said, seen) in enumerate(zip(*_pairs(claim, part, index, values, measured), strict=True)):
            scale = _scale(part, k, measured)
            what = f"{part} of level {index + 1}" + (f", coefficient of tau^{k}" if part in ("energy", "rate") else "")
            found += laid_beside(said, seen, scale, measured.digits, what)
    return min(found) if found else None


def laid_beside(said: acb, seen: acb, scale: arb, digits: int, what: str) -> list[int]:
    """The digits shared, as a list of one (none where both are exact)."""
    gap = said - seen
    if not gap.contains(0):
        raise Disjoint(f"{what}: claimed {spoken(said)}, measured {spoken(seen)}")
    width = upper(acb(gap.real.rad())) + upper(acb(gap.imag.rad()))
    if not width <= power_of_ten(-digits) * scale:
        raise NeedsPrecision("not narrow enough")
    shared = digits_of(width, scale)
    return [] if shared is None else [shared]


def _scale(part: str, k: int, measured: Measured) -> arb:
    return measured.reached.h ** (k + 1) if part in ("energy", "rate") else arb(1)


def _pairs(
    claim: Claim, part: str, index: int, values: Values, measured: Measured
) -> tuple[list[acb], list[acb]]:
    """What is claimed and what was measured, coefficient by coefficient."""
    if part in ("energy", "rate"):
        count = orders(claim) + 1
        line = measured.levels.coefficients[index][:count]
        seen = [acb(c.real) for c in line] if part == "energy" else [acb(-2 * c.imag) for c in line]
        return claimed_series(claim.value, values, count), seen
    said = _at_some_tau(claim, values)
    if part == "multiplicity":
        return [said], [acb(_alike(measured, index))]
    return [said], [acb(_weight(measured, index))]


def _at_some_tau(claim: Claim, values: Values) -> acb:
    """What is claimed of a quantity that does not depend on tau: a claim that does is wrong at one tau or another."""
    return enclose(_plain(claim.value), values.with_letter("tau", acb(1) / TAU_BELOW, Fraction(1, TAU_BELOW)))


def claimed_series(value: Value, values: Values, count: int) -> list[acb]:
    """Coefficients of tau^0 ... tau^(count-1)."""
    if isinstance(value, Expansion):
        parts = dict(zip(value.powers, value.terms, strict=True))
        return [enclose(_plain(parts[k]), values) if k in parts else acb(0) for k in range(count)]
    return enclose_series(_plain(value), values, count)


def _plain(value: object) -> Formula:
    if isinstance(value, PerRoot):
        return value.formula
    if isinstance(value, Formula):
        return value
    raise NotCovered(f"a value of this kind ({type(value).__name__}) says nothing about levels")


def _weight(measured: Measured, index: int) -> arb:
    start = measured.setting.start
    if start is None or not start.mixture:
        raise NotCovered("a weight needs a start")
    total = arb(0)
    for w, v in start.mixture:
        psi = [acb(0)] * measured.s.size
        for x, f in v:
            psi[x] = enclose(f, measured.values)
        weights = enclose_weights(measured.reached, measured.levels.zeroth, psi)
        total += enclose(w, measured.values).real * weights[index]
    return total


# -- which level a claim speaks of


def targets(claim: Claim, measured: Measured, claims: Sequence[Claim]) -> Iterator[tuple[int, Values]]:
    """(index from 0, values of the letters, a root or k among them) of every level the claim is about."""
    zeroth = measured.levels.zeroth
    which = claim.quantity.key("level") if claim.quantity else None
    named, rate = sibling(claim, claims, "energy"), sibling(claim, claims, "rate")
    if arm_of(claim) is not None:
        for e, values in meant(claim, measured.setting, measured.s, measured.values):
            yield _matching(acb(e), None, values, measured), values
    elif which == "k":
        for k in range(1, len(zeroth) + 1):
            yield k - 1, measured.values.with_letter("k", acb(k), Fraction(k))
    elif named is not None:
        for values, e0 in named_energies(named.value, measured.values):
            fits = _fitting(e0, rate, values, measured)
            yield _closest(fits, named, rate, values, measured), values
    elif isinstance(claim.value, PerRoot):
        for values, e0 in _at_roots(claim.value, measured.values):
            yield _only_level(e0, measured), values
    elif isinstance(which, int):
        if not 1 <= which <= len(zeroth):
            raise Disjoint(f"there are {len(zeroth)} bright levels, and number {which} is spoken of")
        yield which - 1, measured.values
    else:
        raise NotCovered("the claim does not say which level it is about")


def sibling(claim: Claim, claims: Sequence[Claim], part: str) -> Claim | None:
    """The derived claim about another part of this derived one's level: its energy at tau = 0 says which level."""
    if claim.origin != "derived":
        return None
    name = f"{claim.id.rsplit('.', 1)[0]}.{part}"
    return next((c for c in claims if c.id == name), None)


def named_energies(value: Value, values: Values) -> list[tuple[Values, acb]]:
    """(values with the root's letter, E_0) for an energy; one for each root."""
    if isinstance(value, PerRoot):
        roots = enclose_roots(value.polynomial, value.letter, values)
        inner = [values.with_letter(value.letter, x) for x in roots]
        return [(v, claimed_series(value, v, 1)[0]) for v in inner]
    return [(values, claimed_series(value, values, 1)[0])]


def _at_roots(value: PerRoot, values: Values) -> list[tuple[Values, acb]]:
    """The roots of a user's polynomial: energies at tau = 0, which say what levels are meant."""
    return named_energies(PerRoot(value.polynomial, value.letter, letter(value.letter)), values)


def _only_level(e0: acb, measured: Measured) -> int:
    """The one bright level with this energy at tau = 0."""
    if sum(acb(e).overlaps(e0) for e in measured.levels.zeroth) > 1:
        raise NotCovered(f"several bright levels have the energy {spoken(e0)} at tau = 0")
    return _matching(e0, None, measured.values, measured)


def _matching(e0: acb, rate: Claim | None, values: Values, measured: Measured) -> int:
    """The level with this energy at tau = 0; of several, one with the claimed leading rate."""
    return _fitting(e0, rate, values, measured)[0]


def _closest(fits: Sequence[int], energy: Claim, rate: Claim | None, values: Values, measured: Measured) -> int:
    """Of levels alike in energy and leading rate, the one that shares most coefficients with the derived claims."""
    if len(fits) == 1 or rate is None:
        return fits[0]

    def shared(k: int) -> int:
        pairs = [p for claim, part in ((energy, "energy"), (rate, "rate"))
                 for p in zip(*_pairs(claim, part, k, values, measured), strict=True)]
        return sum(said.overlaps(seen) for said, seen in pairs)

    return max(fits, key=shared)


def _fitting(e0: acb, rate: Claim | None, values: Values, measured: Measured) -> list[int]:
    """The levels with this energy at tau = 0; of several, those with the claimed leading rate."""
    near = [k for k, e in enumerate(measured.levels.zeroth) if acb(e).overlaps(e0)]
    if not near:
        raise Disjoint(f"no bright level has the energy {spoken(e0)} at tau = 0")
    if len(near) == 1 or rate is None:
        return near[:1]
    leading = claimed_series(rate.value, values, 2)[1]
    fits = [k for k in near if acb(-2 * measured.levels.coefficients[k][1].imag).overlaps(leading)]
    if not fits:
        raise Disjoint(f"no bright level of energy {spoken(e0)} at tau = 0 has a rate {spoken(leading)}*tau")
    return fits


def _alike(measured: Measured, index: int) -> int:
    """How many levels cannot be told from this one in any coefficient."""
    mine = measured.levels.coefficients[index]
    return sum(all(a.overlaps(b) for a, b in zip(mine, line, strict=True)) for line in measured.levels.coefficients)


# -- dark levels, the secular function


def _compare_dark(claim: Claim, measured: Measured, claims: Sequence[Claim]) -> int | None:
    named = sibling(claim, claims, "energy")
    if named is None:
        return _compare_counted(claim, measured)
    for values, e0 in _dark_energies(claim, named, measured, claims):
        bright = sum(acb(e).overlaps(e0) for e in measured.levels.zeroth)
        low, high = (m - bright for m in multiplicities(measured.s, e0, measured.digits))
        if high < 1:
            raise Disjoint(f"A has no dark level at {spoken(e0)}")
        if claim.id.endswith("multiplicity"):
            wanted = enclose(_plain(claim.value), values)
            if not any(wanted.overlaps(acb(m)) for m in range(low, high + 1)):
                raise Disjoint(f"the dark level at {spoken(e0)} is {high}-fold")
        if low != high:
            raise NeedsPrecision("a multiplicity that is not settled")
    return None


def _dark_energies(
    claim: Claim, named: Claim, measured: Measured, claims: Sequence[Claim]
) -> list[tuple[Values, acb]]:
    """The dark energies claimed; for a formula in k as many as the dark space has room for."""
    if arm_of(claim) is not None:
        ours = meant(claim, measured.setting, measured.s, measured.values)
        return [(v, _of_arm(claimed_series(named.value, v, 1)[0], e)) for e, v in ours]
    if claim.quantity is None or claim.quantity.key("level") != "k":
        return named_energies(named.value, measured.values)
    count = sibling(claim, claims, "multiplicity")
    room = left = measured.s.size - int(measured.reached.T.nrows())
    found: list[tuple[Values, acb]] = []
    while left > 0 and count is not None:
        k = len(found) + 1
        values = measured.values.with_letter("k", acb(k), Fraction(k))
        left -= _fold(enclose(_plain(count.value), values), k)
        found.append((values, claimed_series(named.value, values, 1)[0]))
    if left < 0:
        raise Disjoint(f"the levels of number 1 to {len(found)} are more than the {room} dark dimensions")
    return found


def _fold(said: acb, k: int) -> int:
    """A claimed multiplicity as the whole number it must be."""
    fold = said.unique_fmpz()
    if fold is None and said.contains_integer():
        raise NeedsPrecision("a multiplicity that is not settled")
    if fold is None or int(fold) < 1:
        raise Disjoint(f"dark level {k} is said to be {spoken(said)}-fold, and there are dark levels left")
    return int(fold)


def _of_arm(said: acb, e: arb) -> acb:
    if not said.overlaps(acb(e)):
        raise Disjoint(f"the arm has the level {spoken(acb(e))}, and {spoken(said)} is said")
    return said


def _compare_counted(claim: Claim, measured: Measured) -> int | None:
    """A user's claim about the n-th dark level by energy, or about all of them in k."""
    if measured.s.size > LARGEST_COUNTED:
        raise NotCovered(f"dark levels are counted on up to {LARGEST_COUNTED} sites")
    dark = []
    for e, m in enclose_spectrum(measured.s):
        left = m - sum(e.overlaps(b) for b in measured.levels.zeroth)
        if left > 0:
            dark.append((e, left))
    found: list[int] = []
    for n, values in _dark_targets(claim, [e for e, _ in dark], measured):
        e, m = dark[n]
        energy = claim.quantity is not None and claim.quantity.name == "dark level energy"
        seen, what = (acb(e), "energy") if energy else (acb(m), "multiplicity")
        said = _at_some_tau(claim, values)
        found += laid_beside(said, seen, measured.reached.h + 1, measured.digits, f"{what} of dark level {n + 1}")
    return min(found) if found else None


def _dark_targets(claim: Claim, dark: Sequence[arb], measured: Measured) -> Iterator[tuple[int, Values]]:
    """(index from 0, values of the letters) of every dark level the claim is about."""
    values = measured.values
    which = claim.quantity.key("level") if claim.quantity else None
    if isinstance(claim.value, PerRoot):
        for inner, e0 in _at_roots(claim.value, values):
            near = [k for k, e in enumerate(dark) if acb(e).overlaps(e0)]
            if not near:
                raise Disjoint(f"no dark level has the energy {spoken(e0)}")
            yield near[0], inner
    elif arm_of(claim) is not None:
        for e, inner in meant(claim, measured.setting, measured.s, measured.values):
            near = [k for k, d in enumerate(dark) if d.overlaps(e)]
            if not near:
                raise Disjoint(f"no dark level has the arm's energy {spoken(acb(e))}")
            yield near[0], inner
    elif which == "k":
        yield from ((n, values.with_letter("k", acb(n + 1), Fraction(n + 1))) for n in range(len(dark)))
    elif not isinstance(which, int):
        raise NotCovered("the claim does not say which dark level it is about")
    elif not 1 <= which <= len(dark):
        raise Disjoint(f"there are {len(dark)} dark levels, and number {which} is spoken of")
    else:
        yield which - 1, values


def _compare_secular(claim: Claim, measured: Measured) -> int | None:
    if measured.reached.rank != 1:
        raise NotCovered("the secular function is measured for a detector of rank one")
    E = measured.reached.E0 + 4 * measured.reached.h
    count = orders(claim) + 1
    values = measured.values.with_letter("E", acb(E))
    seen = enclose_secular(measured.reached, E, count - 1, measured.digits, measured.q)
    found: list[int] = []
    for k, (a, b) in enumerate(zip(claimed_series(claim.value, values, count), seen, strict=True)):
        scale = measured.reached.h ** (k - 1)
        found += laid_beside(a, b, scale, measured.digits, f"coefficient of tau^{k} at E = {spoken(acb(E))}")
    return min(found) if found else None
