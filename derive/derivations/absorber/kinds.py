"""The absorbers that stand in for a detector, each as numbers, as formulas, and as words.

With Y(eps) the right side of P (H - eps)^-1 P = Y, what an absorber puts in place of the detector is Y cut off:

    plain     H - i Gamma P:                                                     Y = -i (tau/2) c
    dressed   detector at -i Gamma', its couplings times s:                      1/Y right to order tau^0
    ancilla   one lossy site at the detector's own energy beside each of its     Y right to order tau^3
              vectors: coupling k_a, loss -i l
    cascade   (rank one) a potential on the detector and two sites in a row      Y right to order tau^5

c = coth(kappa/2) = (1 + q)/(1 - q), q = sqrt(1 - eta); a perfect detector has c = 1.  Derived here; the constant of
the plain absorber is published (phys-rev-a-102-012218).
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from derive.algebra.paths import A, C, Paths, V, W, word
from derive.algebra.slow import Row, Slow, absorber_slow
from derive.derivations.imperfect import Imperfect
from derive.exact.field import Element, Field
from derive.exact.inverse import inverted
from derive.formula.tree import I_UNIT, ONE, TAU, ZERO, Formula, call, inverse, number, plus, power, times
from derive.problem.efficiency import half_coth, half_tanh, root_of


def parameters(d: Imperfect) -> dict[str, Formula]:
    """Entry id (without "absorber.") -> closed form, for plain, dressed and ancilla."""
    return {
        "plain.strength": d.tidy(times(number(2), half_tanh(d.q), inverse(TAU))),
        "dressed.strength": dressed_strength(d),
        "dressed.coupling": dressed_coupling(d),
        "ancilla.coupling": times(number(2), call("sqrt", number(3)), inverse(TAU)),
        "ancilla.loss": d.tidy(times(number(6), half_coth(d.q), inverse(TAU))),
        "return_factor": d.tidy(times(number(4), power(plus(ONE, d.q), number(-2)))),
    }


def _dressing(d: Imperfect) -> Formula:
    """1 + 4 q + q^2, q^2 = 1 - eta; s^2 = 3 (1 + q)^2/(2 (1 + 4 q + q^2)) = 1/(1 - th^2/3)."""
    if d.q == ZERO:
        return ONE
    eta = d.eta
    square = plus(number(2 - eta.args[0])) if eta.head == "number" else plus(number(2), times(number(-1), eta))
    return d.tidy(plus(square, times(number(4), d.q)))


def dressed_strength(d: Imperfect) -> Formula:
    """(2/tau) th s^2 = 3 eta/((1 + 4 q + q^2) tau)."""
    return d.tidy(times(number(3), d.eta, inverse(_dressing(d)), inverse(TAU)))


def dressed_coupling(d: Imperfect) -> Formula:
    """s = (1 + q) sqrt(3/2)/sqrt(1 + 4 q + q^2); in one root where q is a number."""
    if d.q.head == "number":
        q = d.q.args[0]
        return root_of(3 * (1 + q) ** 2 / (2 * (1 + 4 * q + q * q)))
    return times(plus(ONE, d.q), call("sqrt", number(Fraction(3, 2))), inverse(call("sqrt", _dressing(d))))


def network(
    d: Imperfect, energy: Formula, mu0: Formula, skew: Formula, squared: Formula
) -> dict[tuple[int, int], Formula]:
    """The two-site cascade beside a rank-one detector, 0 the detector (what is added to it), 1 and 2 the sites.

    b = 12/(1 + tau^2 mu_0/20), delta = tau^3 skew/60, energy = C, skew = mu_1 - C mu_0 and its square.  Complex
    symmetric.
    """
    square = power(TAU, number(2))
    shift = times(number(Fraction(1, 60)), square, skew)
    b5 = times(number(60), inverse(plus(ONE, times(number(Fraction(1, 20)), square, mu0))))
    uneven = times(number(Fraction(-1, 3600)), power(TAU, number(6)), squared)
    inner = b5 if skew == ZERO else plus(b5, uneven)
    entry = d.tidy(times(number(2), I_UNIT, call("sqrt", number(5)), d.th, inverse(TAU)))
    hop = times(call("sqrt", inner), inverse(TAU))
    return {
        (0, 0): d.tidy(times(number(-2), I_UNIT, d.th, inverse(TAU))),
        (0, 1): entry,
        (1, 0): entry,
        (1, 1): _sum(energy, times(number(-1), shift), d.tidy(times(number(-10), I_UNIT, d.th, inverse(TAU)))),
        (1, 2): hop,
        (2, 1): hop,
        (2, 2): _sum(energy, shift),
    }


def _sum(*terms: Formula) -> Formula:
    """The terms added, exact zeros left out."""
    return plus(*(f for f in terms if f != ZERO and ZERO not in f.args))


# -- as words: x H_FF at x = 0 and what follows, scaled so that every coefficient is real (x = -i tau)


def slow_of(kind: str, field: Field, c: Element, n: int) -> Slow:
    """The slow subspace of an absorber through order n; `c` is coth(kappa/2) in the field of coefficients."""
    one, zero = field.one, field.zero
    half = c.scaled(Fraction(1, 2))
    if kind == "plain":
        return absorber_slow(field, [[-half]], [one], (), n)
    if kind == "dressed":
        square = (c * c).scaled(Fraction(3)) / ((c * c).scaled(Fraction(3)) - one)
        return absorber_slow(field, [[-(half / square)]], [square], (), n)
    if kind == "ancilla":
        start = [[zero, field.rational(-12)], [one, -c.scaled(Fraction(6))]]
        return absorber_slow(field, inverted(start), [one, zero], (), n)
    th = one / c
    start = [
        [-th.scaled(Fraction(2)), (th * th).scaled(Fraction(20)), zero],
        [one, -th.scaled(Fraction(10)), field.rational(-60)],
        [zero, one, zero],
    ]
    return absorber_slow(field, inverted(start), [one, zero, zero], _cascade_orders(field, n), n)


def _cascade_orders(field: Field, n: int) -> Sequence[list[Row]]:
    """What x H_FF of the cascade holds at order m besides x C: +-x^3 (mu_1 - C mu_0)/60, -60/(1 - x^2 mu_0/20)."""
    mu0 = word(field, W, V)
    shift = (word(field, W, A, V) - word(field, C) * mu0).scaled(Fraction(1, 60))
    power_of_mu0, found = word(field), []
    for m in range(1, n + 1):
        rows = [[Paths(field)] * 3 for _ in range(3)]
        if m == 3:
            rows[1][1], rows[2][2] = shift, -shift
        if m % 2 == 0:
            power_of_mu0 = power_of_mu0 * mu0
            rows[1][2] = power_of_mu0.scaled(-60 * Fraction(1, 20) ** (m // 2))
        if m == 6:
            rows[1][2] = rows[1][2] - shift * shift
        found.append(rows)
    return found

