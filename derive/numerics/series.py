"""Formula -> power series in a formal, real, positive tau, with balls for coefficients.

`enclose_series(f, values, length)` gives the coefficients of tau^0 ... tau^(length-1).  tau is a formal letter here:
conj, Re, Im and abs act on the coefficients, which is what they mean for real tau.  Inside the walk a series may
start at a negative power (coth(g*tau), 1/tau); what is left of it in the end is refused.  Fractional powers of tau
and log(tau) are no power series: `OutsideValidity`.

Where a leading coefficient is a ball around 0 that is not exactly 0 nobody knows where the series starts:
`NeedsPrecision`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction

from flint import acb, acb_series, arb, ctx

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters
from derive.numerics.evaluate import (
    LONGEST_SUM,
    Values,
    away_from_zero,
    enclose,
    logarithm,
    off_cut,
    one_place,
    rational,
    square_root,
    whole_below,
    whole_number,
)

TAU_NAME = "tau"
MOST_TERMS = 400


@dataclass(frozen=True, slots=True)
class Series:
    """tau^start (body + O(tau^known)); `body` is an acb_series of precision `known`."""

    start: int
    body: acb_series

    @property
    def known(self) -> int:
        return int(self.body.prec)


@contextmanager
def _capped(length: int) -> Iterator[None]:
    """flint cuts every series at the process-wide `ctx.cap`; raise it for one computation only."""
    before = ctx.cap
    ctx.cap = length
    try:
        yield
    finally:
        ctx.cap = before


def enclose_series(f: Formula, values: Values, length: int) -> list[acb]:
    """Balls for the coefficients of tau^0 .. tau^(length-1) of f; other letters take their `values`."""
    spare = 2
    while length + spare <= MOST_TERMS:
        with _capped(length + spare):
            s = _Walk(values, length + spare).series(f)
        if s.start + s.known >= length:
            return _coefficients(s, length)
        spare *= 4
    raise NotCovered("too many terms cancel before the first one that is asked for")


def _coefficients(s: Series, length: int) -> list[acb]:
    s = _stripped(s)
    if s.start < 0 and s.body.length():
        raise OutsideValidity("the series in tau starts with a negative power")
    held = [acb(0)] * max(s.start, 0) + [acb(c) for c in s.body.coeffs()]
    held += [acb(0)] * (length - len(held))
    if not all(c.is_finite() for c in held[:length]):
        raise NeedsPrecision("a coefficient is not bounded at this precision")
    return held[:length]


def _series(coefficients: list[acb], known: int) -> acb_series:
    return acb_series(coefficients[:known], prec=known)


def _stripped(s: Series) -> Series:
    """The same series starting at its first coefficient that is not exactly 0."""
    coefficients = [acb(c) for c in s.body.coeffs()]
    zeros = next((n for n, c in enumerate(coefficients) if not c.is_zero()), len(coefficients))
    if zeros == 0:
        return s
    return Series(s.start + zeros, _series(coefficients[zeros:], s.known - zeros))


def _led(s: Series) -> Series:
    """The same series with a leading coefficient that is surely not 0."""
    s = _stripped(s)
    if not s.body.length():
        raise OutsideValidity("division by a series that vanishes to the order kept")
    away_from_zero(acb(s.body.coeffs()[0]))
    return s


def _from_zero(s: Series) -> acb_series:
    """The series as an acb_series that starts at tau^0."""
    s = _stripped(s)
    if s.start < 0:
        raise OutsideValidity("a function of tau is not analytic at tau = 0")
    return _series([acb(0)] * s.start + [acb(c) for c in s.body.coeffs()], s.start + s.known)


def _add(a: Series, b: Series) -> Series:
    start = min(a.start, b.start)
    known = min(a.start + a.known, b.start + b.known) - start
    return Series(start, _shifted(a, start, known) + _shifted(b, start, known))


def _shifted(s: Series, start: int, known: int) -> acb_series:
    return _series([acb(0)] * (s.start - start) + [acb(c) for c in s.body.coeffs()], known)


def _multiply(a: Series, b: Series) -> Series:
    return Series(a.start + b.start, a.body * b.body)


def _invert(s: Series) -> Series:
    s = _led(s)
    return Series(-s.start, 1 / s.body)


def _whole_power(s: Series, n: int) -> Series:
    if n < 0:
        s, n = _invert(s), -n
    result = None
    while n:
        if n & 1:
            result = s if result is None else _multiply(result, s)
        n >>= 1
        s = _multiply(s, s) if n else s
    return result if result is not None else Series(0, _series([acb(1)], s.known))


def _rational_power(s: Series, q: Fraction) -> Series:
    """s^q = tau^(start q) lead^q (1 + ...)^q, principal, tau > 0."""
    if q.denominator == 1:
        return _whole_power(s, q.numerator)
    s = _led(s)
    start = s.start * q
    if start.denominator != 1:
        raise OutsideValidity("a fractional power of tau is no term of a power series")
    lead = acb(s.body.coeffs()[0])
    root = square_root(lead) ** q.numerator if q.denominator == 2 else off_cut(lead).pow(rational(q))
    inner = _log(s.body / lead, acb(0)) * rational(q)
    return Series(int(start), inner.exp() * root)


def _log(s: acb_series, constant: acb) -> acb_series:
    """log s with a given constant term: constant + integral of s'/s."""
    return _integrated(s.derivative() / s, constant)


def _integrated(derivative: acb_series, constant: acb) -> acb_series:
    coefficients = [acb(c) for c in derivative.coeffs()]
    terms = [constant] + [c / (n + 1) for n, c in enumerate(coefficients)]
    return _series(terms, int(derivative.prec) + 1)


class _Walk:
    """One formula, one set of values, one length; subformulas met twice are computed once."""

    def __init__(self, values: Values, length: int):
        self.values = values
        self.length = length
        self.seen: dict[Formula, Series] = {}

    def series(self, f: Formula) -> Series:
        if f not in self.seen:
            self.seen[f] = self._found(f)
        return self.seen[f]

    def _found(self, f: Formula) -> Series:
        if TAU_NAME not in free_letters(f):
            return Series(0, _series([enclose(f, self.values)], self.length))
        heads: dict[str, Callable[[Formula], Series]] = {
            "letter": lambda g: Series(0, _series([acb(0), acb(1)], self.length)),
            "plus": lambda g: self._gathered(g, _add),
            "times": lambda g: self._gathered(g, _multiply),
            "power": self._power,
            "call": self._call,
            "sum": self._sum,
        }
        if f.head not in heads:
            raise NotCovered(f"{f.head} with tau inside is not expanded")
        return heads[f.head](f)

    def _gathered(self, f: Formula, join: Callable[[Series, Series], Series]) -> Series:
        total = self.series(f.args[0])
        for a in f.args[1:]:
            total = join(total, self.series(a))
        return total

    def _power(self, f: Formula) -> Series:
        base, exponent = f.args
        if exponent.head == "number":
            return _rational_power(self.series(base), exponent.args[0])
        s = _led(self.series(base))
        if s.start:
            raise OutsideValidity("tau to a power that is no number")
        grown = _log(s.body, logarithm(acb(s.body.coeffs()[0])))
        return Series(0, (grown * _from_zero(self.series(exponent))).exp())

    def _sum(self, f: Formula) -> Series:
        name, low, high, body = f.args
        first = whole_number(low, self.values, "a sum's lower end")
        last = whole_number(high, self.values, "a sum's upper end")
        if last - first >= LONGEST_SUM:
            raise NotCovered(f"a sum of {last - first + 1} terms; at most {LONGEST_SUM} are added up")
        total = Series(0, _series([], self.length))
        for k in range(first, last + 1):
            inner = _Walk(self.values.with_letter(name, acb(k), Fraction(k)), self.length)
            total = _add(total, inner.series(body))
        return total

    def _call(self, f: Formula) -> Series:
        name, *args = f.args
        if name in _LAURENT:
            return _LAURENT[name](self.series(args[0]))
        if name in ("bessel_J", "bessel_I"):
            return self._bessel(name, *args)
        if name == "binomial":
            return self._binomial(*args)
        return Series(0, _PLAIN[name](_from_zero(self.series(args[0]))))

    def _binomial(self, n: Formula, k: Formula) -> Series:
        upper, lower = _from_zero(self.series(n)), _from_zero(self.series(k))
        return Series(0, (upper + 1).gamma() * (lower + 1).rgamma() * (upper - lower + 1).rgamma())

    def _bessel(self, name: str, n: Formula, x: Formula) -> Series:
        """Taylor's series from J_n^(m) = 2^-m sum_j (-1)^j binomial(m, j) J_{n-m+2j}; without signs for I_n."""
        if TAU_NAME in free_letters(n):
            raise NotCovered("a Bessel function whose order depends on tau is not expanded")
        inner = _from_zero(self.series(x))
        order, at = enclose(n, self.values), acb(inner.coeffs()[0]) if inner.length() else acb(0)
        if order.unique_fmpz() is None or not order.is_exact():
            off_cut(away_from_zero(at))
        sign = -1 if name == "bessel_J" else 1
        values = [_bessel_derivative(name, order, at, m, sign) for m in range(self.length)]
        return Series(0, _composed(values, inner))


def _bessel_derivative(name: str, n: acb, x: acb, m: int, sign: int) -> acb:
    total, binomial = acb(0), 1
    for j in range(m + 1):
        order = n - m + 2 * j
        value = x.bessel_j(order) if name == "bessel_J" else x.bessel_i(order)
        total += value * (binomial * sign**j)
        binomial = binomial * (m - j) // (j + 1)
    return total / acb(2) ** m


def _composed(derivatives: list[acb], inner: acb_series) -> acb_series:
    """sum_m derivatives[m] (inner - inner(0))^m/m!, by Horner's rule."""
    coefficients = [acb(c) for c in inner.coeffs()]
    move = _series([acb(0), *coefficients[1:]], int(inner.prec))
    total = _series([], int(inner.prec))
    for m in range(len(derivatives) - 1, -1, -1):
        total = total * move + derivatives[m] / acb(arb.fac_ui(m))
    return total


def _each(change: Callable[[acb], acb]) -> Callable[[Series], Series]:
    """A function that acts on the coefficients one by one."""
    return lambda s: Series(s.start, _series([change(acb(c)) for c in s.body.coeffs()], s.known))


_conjugate = _each(lambda c: c.conjugate())


def _absolute(s: Series) -> Series:
    """|s| = sqrt(s conj(s)), tau > 0; the zero series stays zero."""
    if not _stripped(s).body.length():
        return s
    square = _each(lambda c: acb(c.real))(_multiply(s, _conjugate(s)))
    return _rational_power(square, Fraction(1, 2))


def _quotient(top: str, bottom: str) -> Callable[[Series], Series]:
    def of(s: Series) -> Series:
        inner = _from_zero(s)
        over, under = Series(0, _TRIG[top](inner)), Series(0, _TRIG[bottom](inner))
        return _multiply(over, _invert(under))

    return of


_TRIG: dict[str, Callable[[acb_series], acb_series]] = {
    "sin": lambda s: s.sin(),
    "cos": lambda s: s.cos(),
    "sinh": lambda s: (s * acb(0, 1)).sin() * acb(0, -1),
    "cosh": lambda s: (s * acb(0, 1)).cos(),
}
_LAURENT: dict[str, Callable[[Series], Series]] = {
    "conj": _conjugate,
    "Re": _each(lambda c: acb(c.real)),
    "Im": _each(lambda c: acb(c.imag)),
    "abs": _absolute,
    "sqrt": lambda s: _rational_power(s, Fraction(1, 2)) if _stripped(s).body.length() else s,
    "tan": _quotient("sin", "cos"),
    "cot": _quotient("cos", "sin"),
    "tanh": _quotient("sinh", "cosh"),
    "coth": _quotient("cosh", "sinh"),
}


def _constant_of(s: acb_series) -> acb:
    return acb(s.coeffs()[0]) if s.length() else acb(0)


def _logged(s: acb_series) -> acb_series:
    return _log(s, logarithm(_constant_of(s)))


def _arc_sine(s: acb_series, constant: acb, sign: int) -> acb_series:
    """constant + sign * integral of s'/sqrt(1 - s^2)."""
    inside = Series(0, 1 - s * s)
    slope = _from_zero(_rational_power(inside, Fraction(-1, 2)))
    return _integrated(s.derivative() * slope * sign, constant)


def _below(s: acb_series) -> acb_series:
    """floor: constant for small tau > 0 where the constant term is no integer."""
    constant = _constant_of(s)
    if constant.contains_integer():
        raise NeedsPrecision("floor jumps at tau = 0")
    return _series([whole_below(constant)], int(s.prec))


def _scalar(name: str, x: acb) -> acb:
    return one_place(name, x)


_PLAIN: dict[str, Callable[[acb_series], acb_series]] = {
    **_TRIG,
    "exp": lambda s: s.exp(),
    "log": _logged,
    "Gamma": lambda s: s.gamma(),
    "factorial": lambda s: (s + 1).gamma(),
    "elliptic_K": lambda s: s.elliptic_k(),
    "floor": _below,
    "asin": lambda s: _arc_sine(s, _scalar("asin", _constant_of(s)), 1),
    "acos": lambda s: _arc_sine(s, _scalar("acos", _constant_of(s)), -1),
    "atan": lambda s: _integrated(s.derivative() / (1 + s * s), _scalar("atan", _constant_of(s))),
}
