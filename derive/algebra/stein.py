"""Sums over all undetected steps in closed form, for one detector state.

K = (1 - a d d†) U, a = 1 - sqrt(1 - eta); Y_p = sum_m binomial(m+p-1, p-1) (K†)^m K^m, p >= 1, solves

    Y_p - K† Y_p K = Y_(p-1),    Y_0 = 1,     <psi|Y_p|psi> = sum_n binomial(n+p-1, p) F_n

on the bright space.  With z_j the phases seen, p_j their weights in d, <j|Y|k> = d_j conj(d_k) T_jk, R = Y_(p-1)
written the same way with rho, t = T p and c_jk = x/(1 - x), x the average of conj(z_j) z_k over the interval's law,

    T_jk = (1 + c_jk) rho_jk - c_jk (a t_j + a conj(t_k) - a^2 y)          j != k
    2 a Re t_j = rho_jj + a^2 y,      eta y = sum_j p_j rho_jj,      y = <d|Y|d>
    p_j T_jj = t_j - sum_{k != j} p_k T_jk.

At a fixed interval c_jk = -1/2 + (i/2) cot((E_j - E_k) tau/2), and since sum_j p_j Im t_j = 0 the imaginary parts
decouple: (1 - a/2) Im t_j = Im sum_{k != j} p_k [(1 + c_jk) rho_jk - c_jk (rho_jj + rho_kk)/2].  For exponential
intervals c_jk is imaginary and the factor 1 - a/2 is 1.  No system of equations is left.  For gamma intervals of
shape s, x = (1 - i (E_j - E_k) m/s)^(-s), the real parts of c_jk differ and w real equations stay,

    Im t_j + a sum_{k != j} p_k Re c_jk (Im t_j - Im t_k) = Im sum_{k != j} p_k [(1 + c_jk) rho_jk - c_jk (...)/2].

Derived here.

Check: y = w/eta at p = 1, the published mean return (commun-math-phys-320-543).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from derive.algebra.linear import Dense, eliminated
from derive.exact.field import Element, Field

HALF = Fraction(1, 2)


@dataclass(frozen=True)
class Bench:
    """What stays the same from moment to moment: weights, c_jk (diagonal unused), a, and 1/(1 - a/2) or 1.

    `coupled`: whether the imaginary parts are solved for together, `stretch` being of no use then.
    """

    field: Field
    p: Sequence[Element]
    c: Dense
    a: Element
    stretch: Element
    coupled: bool = False

    @property
    def efficiency(self) -> Element:
        return self.a + self.a - self.a * self.a


def fixed_interval(field: Field, p: Sequence[Element], z: Sequence[Element], a: Element) -> Bench:
    """c_jk = x/(1 - x), x = conj(z_j) z_k; all phases are different."""
    bars = [field.conjugate(x) for x in z]
    size = range(len(p))
    c = [[field.zero if j == k else _through(bars[j] * z[k]) for k in size] for j in size]
    return Bench(field, p, c, a, field.one / (field.one - a.scaled(HALF)))


def _through(x: Element) -> Element:
    return x / (x.field.one - x)


def exponential_interval(field: Field, p: Sequence[Element], energies: Sequence[Element], mean: Element,
                         i: Element, a: Element) -> Bench:
    """c_jk = i/((E_j - E_k) m) for an exponential law of mean m: x = 1/(1 - i (E_j - E_k) m)."""
    size = range(len(p))
    c = [[field.zero if j == k else i / ((energies[j] - energies[k]) * mean) for k in size] for j in size]
    return Bench(field, p, c, a, field.one)


def gamma_interval(field: Field, p: Sequence[Element], energies: Sequence[Element],
                   average: Callable[[Element], Element], a: Element) -> Bench:
    """c_jk = x/(1 - x), `average` giving x = (1 - i (E_j - E_k) m/s)^(-s) of a gamma law by the gap."""
    size = range(len(p))
    c = [[field.zero if j == k else _through(average(energies[j] - energies[k])) for k in size] for j in size]
    return Bench(field, p, c, a, field.one, coupled=True)


def whole_power(x: Element, n: int) -> Element:
    total = x
    for _ in range(n - 1):
        total = total * x
    return total


def first_source(bench: Bench) -> Dense:
    """rho of R = 1."""
    field, size = bench.field, range(len(bench.p))
    return [[field.one / bench.p[j] if j == k else field.zero for k in size] for j in size]


def summed(bench: Bench, rho: Dense) -> Dense:
    """T of Y for the source R given by rho."""
    field, p, c, a, size = bench.field, bench.p, bench.c, bench.a, range(len(bench.p))
    y = _sum(field, [p[j] * rho[j][j] for j in size]) / bench.efficiency
    shift = a * a * y
    real = [(rho[j][j] + shift) / (a + a) for j in size]
    t = [x + y for x, y in zip(real, _imaginary_parts(bench, rho), strict=True)]
    out = [[field.zero for _ in size] for _ in size]
    for j in size:
        for k in size:
            if j != k:
                inner = a * (t[j] + field.conjugate(t[k])) - shift
                out[j][k] = (field.one + c[j][k]) * rho[j][k] - c[j][k] * inner
        out[j][j] = (t[j] - _sum(field, [p[k] * out[j][k] for k in size if k != j])) / p[j]
    return out


def _imaginary_parts(bench: Bench, rho: Dense) -> list[Element]:
    """i Im t_j for all j."""
    right = [_imaginary(bench, rho, j) for j in range(len(bench.p))]
    if not bench.coupled:
        return right
    field, p, size = bench.field, bench.p, range(len(bench.p))
    rows: Dense = []
    for j in size:
        row = [-(bench.a * p[k] * _real(bench.c[j][k])) for k in size]
        row[j] = field.one - _sum(field, [row[k] for k in size if k != j])
        rows.append([*row, right[j]])
    return [row[-1] for row in eliminated(rows)[0]]


def _real(x: Element) -> Element:
    return (x + x.field.conjugate(x)).scaled(HALF)


def _imaginary(bench: Bench, rho: Dense, j: int) -> Element:
    """i Im t_j."""
    field, c = bench.field, bench.c
    terms = []
    for k, weight in enumerate(bench.p):
        if k != j:
            mean = (rho[j][j] + rho[k][k]).scaled(HALF)
            terms.append(weight * ((field.one + c[j][k]) * rho[j][k] - c[j][k] * mean))
    x = _sum(field, terms)
    return (x - field.conjugate(x)).scaled(HALF) * bench.stretch


def expectation(field: Field, t: Dense, q: Sequence[Element]) -> Element:
    """sum_jk conj(q_j) T_jk q_k, q_j = <d|E_j|psi>."""
    bars = [field.conjugate(x) for x in q]
    size = range(len(q))
    return _sum(field, [bars[j] * t[j][k] * q[k] for j in size for k in size])


def _sum(field: Field, terms: Sequence[Element]) -> Element:
    total = field.zero
    for x in terms:
        total = total + x
    return total
