"""Topic `levels`: energies and decay rates of the undetected evolution, order by order in tau.

An eigenvalue exp(-i eps tau) of Q U(tau) Q on the bright space is a level: eps = E_0 + sum_k e_k tau^k, energy Re eps,
rate -2 Im eps (of probability; hbar = 1).  Energies are even in tau and rates odd.  Below efficiency 1 it is one of
the slow eigenvalues of (1 - (1 - q) P) U, q = sqrt(1 - eta); c = (1 + q)/(1 - q) = coth(kappa/2), 1 at efficiency 1.

Rank one: the secular equation  (tau/2) <d|cot((H - eps) tau/2)|d> = -i c tau/2,  expanded, with x = -i tau:

    q(E) + h(E) Y(E, x) = 0,    Y = c x/2 - sum_n B_2n/(2n)! x^(2n) <d|(H - E)^(2n-1)|d>,   <d|(H-E)^(-1)|d> = -q/h

Higher rank: the generator G = sum_k x^k L_(k+1) on the bright space, reduced level by level (`algebra/reduction.py`).
Both give every coefficient exactly; one formula serves all roots of an irreducible factor of q.  Derived here.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace as changed
from fractions import Fraction
from math import comb, factorial

from derive.algebra.implicit import truncated_root
from derive.algebra.linear import Dense
from derive.algebra.local import Local, truncated_local_log
from derive.algebra.polynomial import Polynomial, at, multiplied, polynomial_formula, scaled
from derive.algebra.reduction import Branch, truncated_branches
from derive.algebra.slow_local import truncated_slow_log
from derive.derivations.imperfect import COTH
from derive.derivations.levels import steps
from derive.derivations.levels.order import counting, energies_at, in_order, reference_values
from derive.derivations.spectrum import Level, Place, Spectrum, places, places_in
from derive.errors import NotCovered
from derive.exact.adjoin import WithRoot
from derive.exact.field import Element
from derive.exact.sparse import Vector
from derive.formula.tree import I_UNIT, TAU, Formula, free_letters, inverse, number, plus, power, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Family, Finite, Relation, Setting, Wish
from derive.record.said import EXACTLY, Claim, Derivation, Expansion, Kind, Matrix, PerRoot, Step, Value

DEFAULT_ORDER = 3
SMALL = "small tau; letters at generic values"
SMALL_BESIDE = "h*tau*coth(kappa/2) well below 1, exp(-kappa) = sqrt(1 - eta); letters at generic values"
LETTERS = ("E", "x", "y", "lambda0")
"""Names for a root, the first one that the worksheet leaves free."""


def derive_levels(setting: Setting, wish: Wish) -> Derivation:
    """Bright levels to the order asked, dark levels exactly, and the secular equation they come from."""
    order = wish.option("order", DEFAULT_ORDER)
    if not isinstance(order, int):
        raise TypeError(f"order is {order!r}, not an integer")
    if isinstance(setting.space, Family):
        from derive.derivations.levels.families import derive_family_levels  # it builds on this module

        return derive_family_levels(setting, order)
    return finite_levels(setting, order)


def finite_levels(setting: Setting, order: int) -> Derivation:
    """The same on an explicit graph."""
    spectrum = Spectrum(setting)
    letter = free_letter(setting)
    found = in_order(setting, bright_levels(spectrum, order, letter))
    counted = counting(setting, [(level.place, level.zeroth) for _, level in found])
    valid = SMALL if spectrum.efficiency.is_perfect else SMALL_BESIDE
    claims = [changed(c, valid_for=valid) for index, level in found for c in _claims(index, level, order, counted)]
    dark = dark_claims(spectrum, letter)
    if spectrum.rank == 1 and letter == LETTERS[0]:  # E is the quantity's own letter
        claims.append(_secular(spectrum, order, letter))
    return Derivation(
        "levels", (*claims, *dark), _steps(spectrum, found, dark, order, letter), sources=()
    )


def matrix_of(setting: Setting) -> Matrix:
    """H of an explicit graph, for a step's line."""
    if not isinstance(setting.space, Finite):
        raise TypeError("a finite graph is needed here")
    return Matrix(setting.space.size, setting.space.rows)


def bright_levels(spectrum: Spectrum, order: int, letter: str) -> list[Level]:
    """By the secular equation for rank one, by reduction otherwise."""
    if not spectrum.bright.size:
        return []
    found = by_secular(spectrum, order, letter) if spectrum.rank == 1 else by_reduction(spectrum, order, letter)
    return [_written_level(spectrum, level) for level in found]


def _written_level(spectrum: Spectrum, level: Level) -> Level:
    """The level with coth(kappa/2) by the efficiency."""
    p = level.place.polynomial
    if p is not None and COTH in free_letters(polynomial_formula(p, level.place.letter)):
        raise NotCovered("a level of this detector splits with a root that holds the efficiency's letter")
    put = spectrum.written_out
    return changed(level, energy={k: put(f) for k, f in level.energy.items()},
                   rate={k: put(f) for k, f in level.rate.items()})


def free_letter(setting: Setting) -> str:
    taken = {x.name for x in setting.letters}
    return next(name for name in LETTERS if name not in taken)


# -- rank one: the secular equation


def by_secular(spectrum: Spectrum, order: int, letter: str) -> list[Level]:
    """Every level as a root of q(E) + h(E) Y(E, x) that moves with x."""
    further = [multiplied(spectrum.h, y) for y in y_terms(spectrum, order)]
    weight = spectrum.start_numerator() if spectrum.watched.start else None
    found = []
    for factor, _ in spectrum.factors:
        for place in places(spectrum, factor, letter):
            found.append(_moved(spectrum, place, further, weight, order))
    return found


def y_terms(spectrum: Spectrum, order: int) -> list[Polynomial]:
    """Coefficients of x, x^2, ..., x^order in Y, polynomials in E over the base field."""
    half = spectrum.coth.scaled(Fraction(1, 2))
    returns = _returns(spectrum, max(order - 1, 0))
    found: list[Polynomial] = []
    for m in range(1, order + 1):
        if m == 1:
            found.append([half])
        elif m % 2:
            found.append([])
        else:
            found.append(scaled(_around(returns, m - 1), -bernoulli(m) / factorial(m)))
    return found


def _returns(spectrum: Spectrum, highest: int) -> list[Element]:
    """<d|H^n|d>, n = 0 ... highest, one step after the other."""
    d = spectrum.watched.d[0]
    vector, found = d, [spectrum.field.one]
    for _ in range(highest):
        vector = spectrum.watched.hamiltonian(vector)
        found.append(spectrum.watched.inner(d, vector))
    return found


def _around(returns: Sequence[Element], n: int) -> Polynomial:
    """<d|(H - E)^n|d> in E."""
    return [returns[n - k].scaled(Fraction((-1) ** k * comb(n, k))) for k in range(n + 1)]


def bernoulli(n: int) -> Fraction:
    """B_n, B_1 = -1/2."""
    found: list[Fraction] = []
    for m in range(n + 1):
        rest = sum((comb(m + 1, k) * b for k, b in enumerate(found)), Fraction(0))
        found.append(Fraction(1) if m == 0 else -rest / (m + 1))
    return found[n]


def _moved(
    spectrum: Spectrum, place: Place, further: list[Polynomial], weight: Polynomial | None, order: int
) -> Level:
    moving = truncated_root(place.taken(spectrum.q), [place.taken(f) for f in further], place.root, order)
    _assert_real(moving.numerators)
    energy = {0: place.field.formula(place.root)}
    rate: dict[int, Formula] = {}
    for k, n in enumerate(moving.numerators, start=1):
        if n:
            sign = Fraction((-1) ** (k // 2)) if k % 2 == 0 else Fraction(2 * (-1) ** ((k - 1) // 2))
            (rate if k % 2 else energy)[k] = place.ratio(n.scaled(sign), moving.slope, 2 * k - 1)
    heavy = None if weight is None else place.ratio(at(place.taken(weight), place.root), moving.slope, 1)
    return Level(place, 1, energy[0], energy, rate, heavy)


def _assert_real(coefficients: Sequence[Element]) -> None:
    """In x = -i tau a level's coefficients are real: energies even, rates odd in tau, no fractional powers."""
    if any(x - x.field.conjugate(x) for x in coefficients):
        raise ArithmeticError("a level whose series in -i*tau is not real: a defect of the derivation")


# -- any rank: reduction inside the bright space


def by_reduction(spectrum: Spectrum, order: int, letter: str) -> list[Level]:
    """The generator's matrices on the bright space, reduced; degenerate levels split at the order that splits them."""
    family = bright_generator(spectrum, order)
    found = []
    for factor, multiplicity in spectrum.factors:
        for place in places(spectrum, factor, letter):
            taken = [[place.taken(row) for row in matrix] for matrix in family]
            for branch in truncated_branches(place.field, taken, place.root, multiplicity, letter):
                found += _branched(spectrum, place, branch)
    return found


def bright_generator(spectrum: Spectrum, order: int) -> list[Dense]:
    """L_1 ... L_(order+1) in the basis of the bright space: sum A^i V g_ij V† A^j there."""
    watched, bright, field = spectrum.watched, spectrum.bright, spectrum.field
    krylov = watched.krylov(max(order, 1))
    logs = _local_log(spectrum, krylov, order)
    n, r = bright.size, spectrum.rank
    inner = watched.inner
    left = [[[inner(u, v) / m for v in columns] for u, m in zip(bright.basis, bright.norms, strict=True)]
            for columns in krylov]
    right = [[[inner(v, u) for u in bright.basis] for v in columns] for columns in krylov]
    first = [[column.get(i, field.zero) for column in bright.columns] for i in range(n)]
    family = [first]
    for log in logs[1:]:
        total = [[field.zero] * n for _ in range(n)]
        for (i, j), block in log.local.items():
            for a in range(r):
                for b in range(r):
                    if block[a][b]:
                        _add_dyad(total, left[i], right[j][b], a, block[a][b])
        family.append(total)
    return family


def _local_log(spectrum: Spectrum, krylov: list[list[Vector]], order: int) -> list[Local]:
    """L_1 ... L_(order+1) in local form, of the undetected step or of the slow states'."""
    watched = spectrum.watched
    if spectrum.efficiency.is_perfect:
        return truncated_local_log(watched.moments(krylov, max(order - 3, 0)), order + 1)
    return truncated_slow_log(watched.moments(krylov, max(order - 1, 0)), spectrum.coth, order + 1)


def _add_dyad(total: Dense, left: list[list[Element]], right: list[Element], a: int, g: Element) -> None:
    for row, values in zip(total, left, strict=True):
        if values[a]:
            front = values[a] * g
            for k, y in enumerate(right):
                if y:
                    row[k] = row[k] + front * y


def _branched(spectrum: Spectrum, place: Place, branch: Branch) -> list[Level]:
    if branch.fractional:
        raise ArithmeticError("a watched level with fractional powers of tau: a defect of the derivation")
    _assert_real(branch.coefficients)
    if not branch.adjoined:
        return [_level_of(place, branch.coefficients, branch)]
    if place.polynomial is not None or len(branch.adjoined) > 1:
        raise NotCovered("a level of this detector needs a root of a polynomial over another root")
    name, low = branch.adjoined[0]
    factor = [*low, place.field.one]
    formulas = [*spectrum.watched.formulas(), place.field.formula(place.root)]
    found = []
    for inner in places_in(spectrum.setting, formulas, place.field, factor, name):
        if inner.polynomial is not None:
            inner = Place(branch.field, branch.coefficients[0], factor, name)
            values: Sequence[Element] = branch.coefficients
        else:
            values = [_written_out(branch, c, inner) for c in branch.coefficients]
        found.append(_level_of(inner, values, branch))
    return found


def _written_out(branch: Branch, x: Element, place: Place) -> Element:
    if not isinstance(branch.field, WithRoot):
        return x
    return at(place.taken(branch.field.coefficients(x)) or [place.field.zero], place.root)


def _level_of(place: Place, values: Sequence[Element], branch: Branch) -> Level:
    field = place.field
    even = {k: x for k, x in enumerate(values) if k % 2 == 0 and (x or not k)}
    energy = {k: field.formula(x.scaled(Fraction((-1) ** (k // 2)))) for k, x in even.items()}
    rate = {k: field.formula(x.scaled(Fraction(2 * (-1) ** (k // 2)))) for k, x in enumerate(values) if k % 2 and x}
    return Level(place, branch.multiplicity, field.formula(values[0]), energy, rate, None)


# -- claims


def _claims(index: int, level: Level, order: int, counted: tuple[Relation, ...]) -> list[Claim]:
    even, odd = remainders(order)
    said = [
        _claim(index, "energy", "level energy", _series(level, level.energy, even), _up_to(even)),
        _claim(index, "multiplicity", "level multiplicity", number(level.multiplicity), EXACTLY),
        _claim(index, "rate", "decay rate", _series(level, level.rate, odd), _up_to(odd)),
    ]
    if level.weight is not None:
        said.append(_claim(index, "weight", "level weight", _whole(level, level.weight), EXACTLY))
    return [changed(claim, assume=counted) for claim in said]


def remainders(order: int) -> tuple[int, int]:
    """The powers of tau at which the energy and the rate stop, given the highest power asked for."""
    return (order + 2, order + 1) if order % 2 == 0 else (order + 1, order + 2)


def _claim(index: int, name: str, quantity: str, value: Value, kind: Kind) -> Claim:
    return Claim(
        f"levels.{index}.{name}", "levels", Quantity(quantity, (("level", index),)), value, kind
    )


def _up_to(order: int) -> Kind:
    return Kind("order", f"up to O(tau^{order})" if order > 1 else "up to O(tau)", order)


def _series(level: Level, terms: Mapping[int, Formula], remainder: int) -> Value:
    if level.place.polynomial is None:
        powers = tuple(sorted(terms))
        return Expansion("tau", powers, tuple(terms[k] for k in powers), remainder)
    return _whole(level, in_tau(terms))


def in_tau(terms: Mapping[int, Formula]) -> Formula:
    """sum_k terms[k] tau^k."""
    return plus(*(times(terms[k], *([power(TAU, number(k)) if k > 1 else TAU] if k else [])) for k in sorted(terms)))


def _whole(level: Level, f: Formula) -> Value:
    p = level.place.polynomial
    return f if p is None else PerRoot(polynomial_formula(p, level.place.letter), level.place.letter, f)


def dark_claims(spectrum: Spectrum, letter: str) -> list[Claim]:
    """Energies and multiplicities of what is never seen, exact at every tau."""
    said = []
    values = reference_values(spectrum.setting)
    written = sorted(
        ((place, m) for p, m in spectrum.dark for place in places(spectrum, p, letter)),
        key=lambda one: energies_at(one[0], values),
    )
    counted = counting(spectrum.setting, [(place, place.field.formula(place.root)) for place, _ in written])
    for index, (place, m) in enumerate(written, start=1):
        zeroth = place.field.formula(place.root)
        value: Value = zeroth
        if place.polynomial is not None:
            value = PerRoot(polynomial_formula(place.polynomial, letter), letter, zeroth)
        for name, quantity, v in (
            ("energy", "dark level energy", value), ("multiplicity", "dark level multiplicity", number(m))
        ):
            keys = (("level", index),)
            said.append(
                Claim(f"levels.dark.{index}.{name}", "levels", Quantity(quantity, keys), v,
                      assume=counted, valid_for="every tau; letters at generic values")
            )
    return said


def _secular(spectrum: Spectrum, order: int, letter: str) -> Claim:
    """<d|(H-E)^(-1)|d> - Y(E, -i tau), whose zeros are the bright levels."""
    kept = order + 1 if order % 2 else order + 2  # the next term of Y is an even power
    return Claim(
        "levels.secular", "levels", Quantity("secular function"),
        secular_formula(spectrum, order, letter), _up_to(max(kept, 2)),
        valid_for="E no eigenvalue of H that the detector sees; small h*tau",
    )


def secular_formula(spectrum: Spectrum, order: int, letter: str) -> Formula:
    """-q/h + i c tau/2 - (tau^2/12) <d|(H-E)|d> - ...: (tau/2) <d|cot((H-E) tau/2)|d> + i c tau/2 to the order kept."""
    top, bottom = polynomial_formula(spectrum.q, letter), polynomial_formula(spectrum.h, letter)
    c = () if spectrum.efficiency.is_perfect else (spectrum.efficiency.c,)
    terms = [times(number(-1), top, inverse(bottom)), times(number(Fraction(1, 2)), I_UNIT, *c, TAU)]
    for m, y in enumerate(y_terms(spectrum, order), start=1):
        if m % 2 == 0 and y:
            sign = Fraction((-1) ** (m // 2 + 1))  # -Y, x^m = (-1)^(m/2) tau^m
            terms.append(times(polynomial_formula(scaled(y, sign), letter), power(TAU, number(m))))
    return plus(*terms)


def _steps(
    spectrum: Spectrum, found: list[tuple[int, Level]], dark: list[Claim], order: int, letter: str
) -> tuple[Step, ...]:
    perfect = spectrum.efficiency.is_perfect
    opening = steps.secular_equation(perfect) if spectrum.rank == 1 else steps.reduction(perfect)
    return (
        *steps.split(spectrum, letter),
        *opening,
        *(steps.on_this_graph(secular_formula(spectrum, order, letter), letter) if spectrum.rank == 1 else ()),
        *(s for index, level in found for s in steps.level(index, level, in_tau, remainders(order))),
        *steps.dark(dark),
    )

