"""Generating functions for several detector states, and for a step given in place of H.

With D (N x r) the states of all detectors, A and E the diagonal matrices of a_c = 1 - sqrt(1 - eta_c) and of
sqrt(eta_c), c = 1 ... r,

    u(z) = D† (1 - z U)^-1 D  (r x r),    v(z) = D† z U (1 - z U)^-1 psi  (r x 1),
    phi(z) = E [1 - A + u(z) A]^-1 v(z) = E D† z U (1 - z K)^-1 psi,      K = (1 - D A D†) U,

phi_c(z) = sum_n z^n phi_n,c converging for |z| <= 1, and F_n = sum_c |phi_n,c|^2 (hbar = 1).  Where the seen energies
have closed forms, (1 - z K)^-1 is expanded on the bright space by the recursion

    det(1 - z K) = sum_m c_m z^m,   c_m = -tr(K B_(m-1))/m,   B_m = K B_(m-1) + c_m,   B_0 = 1,

so that phi_c is a quotient of polynomials in z.  Else u and v stand as sums over the seen energies (`renewal_sums.py`)
and Cramer's rule solves for phi.
Source: phys-rev-e-95-032141 for one state; the matrix form is derived here.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from itertools import takewhile

from derive.algebra.linear import Dense, identity, shifted, times
from derive.algebra.phases import trigonometric
from derive.algebra.polynomial import Polynomial, trimmed
from derive.algebra.stepwise import coordinates
from derive.derivations.detection.splitting import Bench, bench_of, share_taken
from derive.derivations.renewal.sums import Sums
from derive.derivations.sight import Sight
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector
from derive.formula.text import text
from derive.formula.tree import ONE, ZERO, Formula, call, letter, number, power
from derive.formula.tree import plus as added
from derive.formula.tree import times as product
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import Claim, PerRoot, Prose

MOST_EXPANDED = 6  # bright dimensions up to which (1 - z K)^-1 is expanded
LONGEST = 4_000  # characters of a sum over roots that is still printed
MOST_BY_CRAMER = 3  # detector states, where u and v stand as sums over roots
TOO_MANY = f"Without closed energies generating functions are derived for {MOST_BY_CRAMER} detector states at most."
NOT_GENERIC = "At this interval phases may coincide, and these energies have no closed form here."
Z = letter("z")


def several(sight: Sight, terms: int) -> tuple[list[Claim], tuple[Prose, ...]]:
    """phi_c(z) for every detector state, F_1 ... F_terms, and the poles' equation where it is expanded; notes."""
    try:
        bench = bench_of(sight, MOST_EXPANDED)
    except NotCovered:
        return _over_roots(sight, terms)
    expanded = Expanded(bench)
    return [*_named(expanded.amplitudes()), *_asked(expanded.probabilities(terms)), *_poles(expanded)], ()


def _named(values: Sequence[Formula]) -> list[Claim]:
    return [
        Claim(f"renewal.amplitude.{c}", "renewal", Quantity("generating function", (("component", c),)), f)
        for c, f in enumerate(values, start=1)
    ]


def _asked(values: Sequence[Formula]) -> list[Claim]:
    return [
        Claim(f"renewal.F.{n}", "renewal", Quantity("detection probability", (("ask", n),)), f)
        for n, f in enumerate(values, start=1)
    ]


def states_of(setting: Setting) -> list[tuple[Formula, Formula]]:
    """(eta, a) for every state of every detector, in order."""
    return [(w.efficiency, share_taken(w)) for w in setting.detectors for _ in w.vectors]


# -- closed energies, or a step given


class Expanded:
    """det(1 - z K) and what multiplies psi in the numerators, on the bright space."""

    def __init__(self, bench: Bench):
        self.bench = bench
        self.field: Field = bench.field
        self.c, self.b = _resolvent(self.field, bench.k)
        self.bras = [coordinates_of_bra(bench, d) for d in bench.explored.d]
        self.parts = [
            (self.field.element(w), coordinates(bench.space, bench.explored.inner, self._vector(v)))
            for w, v in bench.explored.mixture
        ]

    def _vector(self, v: Sequence[tuple[int, Formula]]) -> Vector:
        return {x: self.field.element(f) for x, f in v}

    def amplitudes(self) -> list[Formula]:
        """phi_c(z), lowest terms where a common factor is seen; none for a mixture."""
        if len(self.parts) != 1:
            return []
        psi, found = self.parts[0][1], []
        moved = [_applied(self.bench.u, _applied(b, psi)) for b in self.b]
        for bra, (eta, _) in zip(self.bras, states_of(self.bench.explored.setting), strict=True):
            top = [self.field.zero, *(_dot(self.field, bra, v) for v in moved)]
            found.append(_quotient(self.field, trimmed(top), self.c, [] if eta == ONE else [call("sqrt", eta)]))
        return found

    def probabilities(self, terms: int) -> list[Formula]:
        """F_1 ... F_terms over the start's mixture."""
        field, found = self.field, [self.field.zero] * terms
        etas = [field.element(eta) for eta, _ in states_of(self.bench.explored.setting)]
        for weight, state in self.parts:
            for n in range(terms):
                moved = _applied(self.bench.u, state)
                for bra, eta in zip(self.bras, etas, strict=True):
                    f = _dot(field, bra, moved)
                    found[n] = found[n] + weight * eta * f * field.conjugate(f)
                state = _applied(self.bench.k, state)
        return [trigonometric(x) for x in found]


def _resolvent(field: Field, k: Dense) -> tuple[Polynomial, list[Dense]]:
    """c_0 ... c_N, zeros on top cut, and B_0 ... B_(N-1)."""
    c, b = [field.one], [identity(field, len(k))]
    for m in range(1, len(k) + 1):
        moved = times(k, b[-1])
        trace = field.zero
        for i in range(len(k)):
            trace = trace + moved[i][i]
        c.append(trace.scaled(Fraction(-1, m)))
        b.append(shifted(moved, -c[-1]))
    return trimmed(c), b[:-1]


def coordinates_of_bra(bench: Bench, d: Vector) -> list[Element]:
    """<d|u_j> for every bright basis vector."""
    return [bench.explored.inner(d, u) for u in bench.space.basis]


def _applied(a: Dense, v: Sequence[Element]) -> list[Element]:
    return [_dot(v[0].field, row, v) for row in a]


def _dot(field: Field, a: Sequence[Element], b: Sequence[Element]) -> Element:
    total = field.zero
    for x, y in zip(a, b, strict=True):
        if x and y:
            total = total + x * y
    return total


def _quotient(field: Field, top: Polynomial, bottom: Polynomial, front: list[Formula]) -> Formula:
    """front top/bottom as polynomials in z with trigonometric coefficients, a common power of z in front."""
    if not top:
        return ZERO
    lowest = next(k for k, c in enumerate(top) if c)
    z = [Z if lowest == 1 else power(Z, number(lowest))] if lowest else []
    return product(*front, *z, written(top[lowest:])) / written(bottom)


def written(p: Polynomial) -> Formula:
    """A polynomial in z, constant first, its coefficients as sines and cosines where they can be."""
    terms = []
    for k, c in enumerate(p):
        if c:
            terms.append(product(trigonometric(c), *([] if not k else [Z if k == 1 else power(Z, number(k))])))
    return added(*terms)


def _poles(expanded: Expanded) -> list[Claim]:
    if len(expanded.c) < 2:
        return []
    d = expanded.c
    value: Formula | PerRoot = PerRoot(written(d), "z", Z)
    if len(d) == 2:
        value = trigonometric(-(d[0] / d[1]))
    return [Claim("renewal.pole.1", "renewal", Quantity("pole"), value)]


# -- sums over roots


def _over_roots(sight: Sight, terms: int) -> tuple[list[Claim], tuple[Prose, ...]]:
    states = states_of(sight.setting)
    if len(states) > MOST_BY_CRAMER or sight.is_step:
        raise NotCovered(TOO_MANY)
    if not sight.generic:
        raise NotCovered(NOT_GENERIC)
    if len(sight.parts) != 1:
        raise NotCovered("Without closed energies generating functions are derived for a pure start.")
    sums = Sums(sight)
    left = _taken(sums.u(sums.turns()), states)
    right = sums.v(lambda f: product(Z, f.turn(1, sums.tau), sums.turns()(f)))
    below = _determinant(left)
    above = [_determinant(_with_column(left, c, right)) for c in range(len(states))]
    fronts = [[] if eta == ONE else [call("sqrt", eta)] for eta, _ in states]
    amplitudes = [product(*front, top) / below for front, top in zip(fronts, above, strict=True)]
    printed = list(takewhile(lambda f: len(text(f)) <= LONGEST, _recurrence(sums, states, terms)))
    left_out = f"From ask {len(printed) + 1} on the sums over roots are too long to be printed."
    return [*_named(amplitudes), *_asked(printed)], (((left_out,),) if len(printed) < terms else ())


def _taken(u: list[list[Formula]], states: Sequence[tuple[Formula, Formula]]) -> list[list[Formula]]:
    """1 - A + u A."""
    shares = [a for _, a in states]
    return [[_entry(a, f, c == b) for b, (f, a) in enumerate(zip(row, shares, strict=True))] for c, row in enumerate(u)]


def _entry(a: Formula, f: Formula, diagonal: bool) -> Formula:
    return added(*([ONE, -a] if diagonal and a != ONE else []), product(a, f))


def _with_column(rows: list[list[Formula]], c: int, column: Sequence[Formula]) -> list[list[Formula]]:
    return [[x if b == c else f for b, f in enumerate(row)] for row, x in zip(rows, column, strict=True)]


def _determinant(rows: list[list[Formula]]) -> Formula:
    """By the first row."""
    if len(rows) == 1:
        return rows[0][0]
    return added(*_cofactors(rows))


def _cofactors(rows: list[list[Formula]]) -> Iterator[Formula]:
    for c, f in enumerate(rows[0]):
        if f != ZERO:
            rest = _determinant([[x for b, x in enumerate(row) if b != c] for row in rows[1:]])
            yield product(f, rest) if c % 2 == 0 else -product(f, rest)


def _recurrence(sums: Sums, states: Sequence[tuple[Formula, Formula]], terms: int) -> Iterator[Formula]:
    """F_n = sum_c eta_c |f_n,c|^2, f_n = v_n - sum_m u_(n-m) A f_m."""
    u: list[list[list[Formula]]] = []
    f: list[list[Formula]] = []
    for n in range(1, terms + 1):
        back = [_back(u[n - m - 2], f[m], states) for m in range(n - 1)]
        f.append([added(x, *(-row[c] for row in back)) for c, x in enumerate(sums.v(sums.turn(n)))])
        u.append(sums.u(sums.turn(n)))
        squares = [power(call("abs", x), number(2)) for x in f[-1]]
        yield added(*(product(eta, x) for x, (eta, _) in zip(squares, states, strict=True)))


def _back(u: list[list[Formula]], f: Sequence[Formula], states: Sequence[tuple[Formula, Formula]]) -> list[Formula]:
    """u A f."""
    return [added(*(product(a, x, y) for x, y, (_, a) in zip(row, f, states, strict=True))) for row in u]
