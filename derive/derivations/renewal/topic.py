"""Topic `renewal`: the generating function of the first click, its first terms and its poles.

    phi(z) = sum_n z^n phi_n = sqrt(eta) v(z)/(1 - a + a u(z)),     F_n = |phi_n|^2,   a = 1 - sqrt(1 - eta)
    u(z) = <d|(1 - z U)^-1|d> = sum_l p_l/(1 - z z_l),     v(z) = <d|z U (1 - z U)^-1|psi> = sum_l q_l z z_l/(1 - z z_l)

for one detector state d of efficiency eta and a fixed interval, z_l = exp(-i E_l tau), p_l = <d|E_l|d>,
q_l = <d|E_l|psi> (hbar = 1); phi converges for |z| <= 1.  A sum over conjugate energies that have no closed form is
written `rootsum`.  The poles are the zeros of the denominator: one equation for all of them.  Several detector states
and steps given in place of H: `renewal_several.py`.
Source: phys-rev-e-95-032141; the form for eta < 1 is derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from derive.algebra.levels import Levels
from derive.algebra.phases import trigonometric
from derive.algebra.polynomial import continuants, polynomial_formula
from derive.derivations.detection.topic import valid_for
from derive.derivations.moments.structured import amplitude_polynomial, derivative
from derive.derivations.moments.topic import efficiency_share, holds_cosine
from derive.derivations.renewal import steps
from derive.derivations.renewal.several import several
from derive.derivations.renewal.sums import bound_name, over_seen_energies
from derive.derivations.sight import Sight
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.formula.tree import I_UNIT, ONE, ZERO, Formula, call, letter, number, plus, power, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting, Wish
from derive.record.said import Claim, Derivation, PerRoot

SOURCES = ("phys-rev-e-95-032141",)
DEFAULT_TERMS = 4
MOST_EXPANDED = 8  # levels up to which terms and poles are expanded
MOST_COSINES = 4  # levels up to which cosines of fractions of pi are expanded; beyond, sums over roots are shorter
FIXED = "The generating function is derived for fixed intervals."
Z = letter("z")


def derive_renewal(setting: Setting, wish: Wish) -> Derivation:
    """phi(z), F_1 ... F_terms, and the equation of the poles."""
    if setting.interval.law != "fixed":
        raise NotCovered(FIXED)
    terms = wish.option("terms", DEFAULT_TERMS)
    if not isinstance(terms, int):
        raise TypeError(f"terms is {terms!r}, not an integer")
    sight = Sight(setting)
    valid = valid_for(sight)
    one = len(setting.detectors) == 1 and setting.detectors[0].rank == 1 and not sight.is_step
    found, notes = (_one_state(sight, terms), ()) if one else several(sight, terms)
    claims = [replace(c, valid_for=valid) for c in found]
    written = steps.written(claims) if one else steps.written_in_columns(claims)
    return Derivation("renewal", tuple(claims), written, (*notes, *sight.warning()), SOURCES)


def _one_state(sight: Sight, terms: int) -> list[Claim]:
    levels = closed_levels(sight)
    return [*_amplitude(sight, levels), *_terms(sight, levels, terms), *_poles(sight, levels)]


def closed_levels(sight: Sight) -> Levels | None:
    """Levels with phases, those of one phase as one; None where energies have no closed form."""
    if sight.energies is None or (sight.phases > MOST_COSINES and any(holds_cosine(e) for e in sight.energies)):
        return None
    also = [efficiency_share(sight), *(w for w, _ in sight.explored.mixture)]
    try:
        return sight.with_phases(also)
    except NotCovered:
        return None


# -- the generating function


def _amplitude(sight: Sight, levels: Levels | None) -> list[Claim]:
    """phi(z) for a pure start."""
    if len(sight.parts) != 1:
        return []
    above, below = _sums(sight, levels)
    eta, a = sight.setting.detectors[0].efficiency, efficiency_share(sight)
    bottom = below if a == ONE else plus(ONE, -a, times(a, below))
    value = times(*([] if eta == ONE else [call("sqrt", eta)]), above) / bottom
    return [Claim("renewal.amplitude", "renewal", Quantity("generating function"), value, source=SOURCES[0])]


def _sums(sight: Sight, levels: Levels | None) -> tuple[Formula, Formula]:
    """v(z) and u(z)."""
    if levels is not None:
        shown, p = levels.field.formula, levels.p
        z = [_phase_formula(sight, levels, k) for k in range(levels.size)]
        q = [shown(x * s) for x, s in zip(p, levels.s[0], strict=True)]
        v = plus(*(c * Z * x / (ONE - Z * x) for c, x in zip(q, z, strict=True) if c != ZERO))
        return v, plus(*(shown(c) / (ONE - Z * x) for c, x in zip(p, z, strict=True)))
    return _over_roots(sight)


def _phase_formula(sight: Sight, levels: Levels, k: int) -> Formula:
    return levels.field.formula(levels.z[k])


def _over_roots(sight: Sight) -> tuple[Formula, Formula]:
    """v and u with a sum over the roots of every factor of the seen energies' polynomial."""
    if not sight.generic:
        raise NotCovered("At this interval phases may coincide, and these energies have no closed form here.")
    name = bound_name(sight)
    x = call("exp", times(number(-1), I_UNIT, letter(name), sight.setting.interval.length))
    p, q = weights_in_energy(sight, name)
    above = over_seen_energies(sight, times(q, Z, x) / (ONE - Z * x), name)
    return above, over_seen_energies(sight, p / (ONE - Z * x), name)


def weights_in_energy(sight: Sight, name: str) -> tuple[Formula, Formula]:
    """p(E) and q(E) as functions of a seen energy E: p = a(E)/m'(E), q = p s(E)."""
    top = polynomial_formula(continuants(sight.space, 1), name)
    p = top / polynomial_formula(derivative(sight.factors, sight.field), name)
    return p, p * polynomial_formula(amplitude_polynomial(sight, sight.parts[0].overlaps), name)


# -- the first terms


def _terms(sight: Sight, levels: Levels | None, terms: int) -> list[Claim]:
    """F_1 ... F_terms, by the renewal recurrence phi_n = v_n - a sum_m u_(n-m) phi_m."""
    if levels is not None and levels.size <= MOST_EXPANDED:
        values = [trigonometric(x) for x in _expanded_terms(sight, levels, terms)]
    elif len(sight.parts) == 1 and sight.generic:
        values = _written_terms(sight, terms)
    else:
        return []
    return [
        Claim(f"renewal.F.{n}", "renewal", Quantity("detection probability", (("ask", n),)), f, source=SOURCES[0])
        for n, f in enumerate(values, start=1)
    ]


def _expanded_terms(sight: Sight, levels: Levels, terms: int) -> list[Element]:
    field = levels.field
    a, eta = field.element(efficiency_share(sight)), field.element(sight.setting.detectors[0].efficiency)
    weights = [field.element(w) for w, _ in sight.explored.mixture]
    found = [field.zero] * terms
    for weight, row in zip(weights, levels.s, strict=True):
        for n, amplitude in enumerate(amplitudes(levels, row, a, terms)):
            found[n] = found[n] + weight * eta * amplitude * field.conjugate(amplitude)
    return found


def amplitudes(levels: Levels, row: Sequence[Element], a: Element, terms: int) -> list[Element]:
    """phi_1 ... phi_terms without sqrt(eta)."""
    field = levels.field
    u, v, powers = [], [], [field.one] * levels.size
    for _ in range(terms):
        powers = [x * z for x, z in zip(powers, levels.z, strict=True)]
        u.append(_total(field.zero, [p * x for p, x in zip(levels.p, powers, strict=True)]))
        v.append(_total(field.zero, [p * s * x for p, s, x in zip(levels.p, row, powers, strict=True)]))
    phi: list[Element] = []
    for n in range(terms):
        phi.append(v[n] - a * _total(field.zero, [u[n - m - 1] * phi[m] for m in range(n)]))
    return phi


def _total(zero: Element, terms: Sequence[Element]) -> Element:
    for x in terms:
        zero = zero + x
    return zero


def _written_terms(sight: Sight, terms: int) -> list[Formula]:
    """The same with sums over roots."""
    name = bound_name(sight)
    p, q = weights_in_energy(sight, name)
    eta, a = sight.setting.detectors[0].efficiency, efficiency_share(sight)
    tau = sight.setting.interval.length
    phi: list[Formula] = []
    u: list[Formula] = []
    for n in range(1, terms + 1):
        x = call("exp", times(number(-n), I_UNIT, letter(name), tau))
        u.append(over_seen_energies(sight, times(p, x), name))
        v = over_seen_energies(sight, times(q, x), name)
        phi.append(plus(v, *(-(a * u[n - m - 2] * phi[m]) for m in range(n - 1))))
    return [eta * power(call("abs", f), number(2)) for f in phi]


# -- poles


def _poles(sight: Sight, levels: Levels | None) -> list[Claim]:
    """The denominator's equation D(z) = 0, the same for every start."""
    if levels is None or levels.size > MOST_EXPANDED:
        return []
    d = denominator(sight, levels)
    if len(d) < 2:
        return []
    field = levels.field
    polynomial = plus(*(times(field.formula(c), power(Z, number(k)) if k > 1 else Z) if k else field.formula(c)
                        for k, c in enumerate(d) if c))
    value: Formula | PerRoot = PerRoot(polynomial, "z", Z)
    if len(d) == 2:
        value = field.formula(-(d[0] / d[1]))
    return [Claim("renewal.pole.1", "renewal", Quantity("pole"), value)]


def denominator(sight: Sight, levels: Levels) -> list[Element]:
    """D = (1 - a) prod (1 - z z_l) + a sum_l p_l prod_{k != l} (1 - z z_k), constant term first, 1."""
    field = levels.field
    a = field.element(efficiency_share(sight))
    found = [(field.one - a) * c for c in _product(field.one, levels.z)]
    for n, p in enumerate(levels.p):
        rest = _product(field.one, [z for k, z in enumerate(levels.z) if k != n])
        found = [c + a * p * x for c, x in zip(found, [*rest, field.zero], strict=True)]
    while found and not found[-1]:
        found.pop()
    return found


def _product(one: Element, z: Sequence[Element]) -> list[Element]:
    out = [one]
    for x in z:
        out = [b - x * c for b, c in zip([*out, one.field.zero], [one.field.zero, *out], strict=True)]
    return out
