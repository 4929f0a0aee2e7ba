"""The cascade of M sites beside a detector of rank one: energies O(tau^(2M+2)), rates O(tau^(2M+3)).

With u = C - eps, x = tau u, nu_k = D†(H - C)^k D and 1/x - (1/2) cot(x/2) = sum_j beta_j x^(2j-1),

    Y = tau [ F(x) - i c/2 ],   F = sum_k f_k x^k,   f_k = sum_j beta_j binomial(2j-1, k) nu_(2j-1-k) tau^(2j-1-k).

F is replaced by Pade's fraction through x^(2M-1) (degrees M over M-1 for odd M, M-1 over M for even M), and F or 1/F
written as alpha x + beta + 1/(alpha_1 x + beta_1 + ...).  Then 1/Y is a chain of sites beside the detector:

    M odd    N_01^2 = 1/(alpha tau^2),         N_11 = C + (beta - i c/2)/(alpha tau)
    M even   N_00 = -2 i th/tau,  N_01^2 = 4 th^2/(alpha tau^2),  N_11 = C + (beta + 2 i th)/(alpha tau)
    both     N_(k,k+1)^2 = -1/(alpha_(k-1) alpha_k tau^2),      N_(k+1,k+1) = C + beta_k/(alpha_k tau),  k >= 1

th = tanh(kappa/2), c = 1/th.  Series in tau are kept as far as the order claimed needs.  M = 1 is the lossy ancilla,
M = 2 has closed forms (`absorber_kinds.py`).  Derived here.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb

from derive.algebra.pade import Tau, continued, inverted, multiplied, negative, pade
from derive.derivations.imperfect import Imperfect
from derive.derivations.watched import Watched
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, TAU, ZERO, Formula, call, inverse, number, plus, power, times
from derive.problem.setting import Setting
from derive.record.said import Matrix

MOST_SITES = 10


def cascade_network(setting: Setting, detector: Imperfect, sites: int) -> Matrix:
    """N for M sites: row 0 the detector (what is added to it), rows 1 ... M the sites."""
    watched = Watched(setting, sites)
    c, nu = _central_moments(watched, 2 * sites)
    fraction = _fraction(watched.field, nu, sites)
    cells = _cells(watched.field, detector, watched.field.formula(c), fraction, sites)
    rows = tuple(
        (x, tuple((y, cells[x, y]) for y in range(sites + 1) if cells.get((x, y), ZERO) != ZERO))
        for x in range(sites + 1)
    )
    return Matrix(sites + 1, (), tuple((x, row) for x, row in rows if row))


def _central_moments(watched: Watched, highest: int) -> tuple[Element, list[Element]]:
    """C and nu_0 ... nu_highest."""
    d = watched.d[0]
    c = watched.inner(d, watched.hamiltonian(d))
    vectors = [d]
    for _ in range((highest + 1) // 2):
        last = vectors[-1]
        image = watched.hamiltonian(last)
        shifted = {x: image.get(x, watched.field.zero) - c * last.get(x, watched.field.zero)
                   for x in sorted({*image, *last})}
        vectors.append({x: f for x, f in shifted.items() if f})
    return c, [watched.inner(vectors[k // 2], vectors[k - k // 2]) for k in range(highest + 1)]


def half_cotangent(n: int) -> list[Fraction]:
    """beta_1 ... beta_n: 1/12, 1/720, 1/30240, ...; from cot = cos/sin by division of series."""
    cos = [Fraction((-1) ** k, _factorial(2 * k) * 4**k) for k in range(n + 1)]
    sin = [Fraction((-1) ** k, _factorial(2 * k + 1) * 2 * 4**k) for k in range(n + 1)]
    quotient: list[Fraction] = []
    for k in range(n + 1):
        quotient.append((cos[k] - sum((quotient[m] * sin[k - m] for m in range(k)), Fraction(0))) / sin[0])
    return [-q / 2 for q in quotient[1:]]


def _factorial(n: int) -> int:
    return n * _factorial(n - 1) if n > 1 else 1


def _fraction(field: Field, nu: list[Element], sites: int) -> list[tuple[Tau, Tau]]:
    """(alpha, beta), (alpha_1, beta_1), ... of F (odd M) or 1/F (even M), each as far as it is needed."""
    n = 2 * sites
    beta = half_cotangent(sites)
    f: list[Tau] = []
    for k in range(n):
        series = [field.zero] * n
        for j in range(1, sites + 1):
            rest = 2 * j - 1 - k
            if rest >= 0:
                series[rest] = nu[rest].scaled(beta[j - 1] * comb(2 * j - 1, k))
        f.append(series)
    if sites % 2:
        above, below = pade(f, sites, sites - 1)
    else:
        below, above = pade(f, sites - 1, sites)
    levels = continued(above, below)
    return [(_cut(a, n - k % 2 * 2), _cut(b, n - k % 2 * 2)) for k, (a, b) in enumerate(reversed(levels))][::-1]


def _cut(series: Tau, terms: int) -> Tau:
    """The first `terms` coefficients: at small x every second level, the innermost being one, is needed less."""
    return [x if k < terms else x.field.zero for k, x in enumerate(series)]


def _cells(
    field: Field, detector: Imperfect, c: Formula, fraction: list[tuple[Tau, Tau]], sites: int
) -> dict[tuple[int, int], Formula]:
    even = sites % 2 == 0
    alpha, beta = fraction[0]
    lead = inverted(alpha)
    cells: dict[tuple[int, int], Formula] = {}
    front: tuple[Formula, ...] = (detector.tidy(times(number(2), detector.th)),) if even else ()
    cells[0, 1] = cells[1, 0] = times(*front, _root(field, lead), inverse(TAU))
    if even:
        cells[0, 0] = detector.tidy(times(number(-2), I_UNIT, detector.th, inverse(TAU)))
    imaginary = times(number(2), I_UNIT, detector.th) if even else times(number(Fraction(-1, 2)), I_UNIT, detector.c)
    decay = detector.tidy(times(imaginary, inverse(TAU)))
    cells[1, 1] = _sum(c, _over_tau(field, multiplied(beta, lead)), times(_series(field, lead), decay))
    for k in range(2, sites + 1):
        following, shift = fraction[k - 1]
        joined = negative(inverted(multiplied(fraction[k - 2][0], following)))
        cells[k - 1, k] = cells[k, k - 1] = times(_root(field, joined), inverse(TAU))
        cells[k, k] = _sum(c, _over_tau(field, multiplied(shift, inverted(following))))
    return cells


def _root(field: Field, series: Tau) -> Formula:
    """sqrt(series), with i in front where it begins below zero."""
    first = field.formula(series[0])
    below = first.head == "number" and first.args[0] < 0
    inner = call("sqrt", _series(field, negative(series) if below else series))
    return times(I_UNIT, inner) if below else inner


def _series(field: Field, series: Tau, shift: int = 0) -> Formula:
    """sum_k series_k tau^(k + shift)."""
    terms = []
    for k, x in enumerate(series):
        if x:
            e = k + shift
            step = () if e == 0 else (TAU if e == 1 else inverse(TAU) if e == -1 else power(TAU, number(e)),)
            terms.append(times(field.formula(x), *step))
    return plus(*terms)


def _over_tau(field: Field, series: Tau) -> Formula:
    return _series(field, series, -1)


def _sum(*terms: Formula) -> Formula:
    return plus(*(f for f in terms if f != ZERO))
