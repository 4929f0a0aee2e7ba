"""Formula -> ball, by a walk of its own over the tree.

`enclose(f, values)` is a complex ball (`acb`) that holds f at the given values of its letters.  The walk shares
nothing with the exact fields: it is the road that can disagree with them.  Principal branches.  A cut or a pole
that the balls cannot keep away from raises `NeedsPrecision`; one that is hit exactly raises `OutsideValidity`.

Functions and their cuts: log, sqrt and non-integer powers along (-oo, 0]; asin and acos along (-oo, -1] and
[1, oo); atan along the imaginary axis beyond +-i; elliptic_K(m) (m the parameter, K(0) = pi/2) along [1, oo);
bessel_J, bessel_I of non-integer order along (-oo, 0].
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction

from flint import acb, arb, fmpq

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, constant, walk
from derive.numerics.fractions import rational_at
from derive.numerics.improper import enclose_improper
from derive.numerics.infinite_sums import enclose_infinite_sum
from derive.numerics.roots import enclose_roots, real_roots

_INFINITY = constant("infinity")
LONGEST_SUM = 200_000
"""Terms of one sum; more are refused."""


class Values:
    """Balls by letter at one point and one precision, with the subformulas met so far.

    `exact` keeps the letters whose values are rational: a polynomial in those has exact roots.
    """

    def __init__(self, balls: Mapping[str, acb], exact: Mapping[str, Fraction] | None = None):
        self.balls = dict(balls)
        self.exact = dict(exact or {})
        self.seen: dict[Formula, acb] = {}

    @classmethod
    def at(cls, point: Mapping[str, Formula]) -> Values:
        """The values of letters given by formulas without letters, at the working precision."""
        nothing = cls({})
        balls = {name: enclose(f, nothing) for name, f in point.items()}
        exact = {name: f.args[0] for name, f in point.items() if f.head == "number"}
        return cls(balls, exact)

    def with_letter(self, name: str, ball: acb, exact: Fraction | None = None) -> Values:
        """The same values and one letter more (or another value for it)."""
        inner = Values({**self.balls, name: ball}, self.exact)
        inner.exact.pop(name, None)
        if exact is not None:
            inner.exact[name] = exact
        return inner


def enclose(f: Formula, values: Values) -> acb:
    """A finite ball that holds f.  `NeedsPrecision` where the balls are too wide for that."""
    ball = _value(f, values, False)
    if not ball.is_finite():
        raise NeedsPrecision("a value is not bounded at this precision")
    return ball


def enclose_analytic(f: Formula, values: Values) -> acb:
    """The same for a function that is analytic on the whole of the balls; `NeedsPrecision` where that is not seen."""
    ball = _value(f, values, True)
    if not ball.is_finite():
        raise NeedsPrecision("a function is not seen to be analytic on a ball")
    return ball


def enclose_real(f: Formula, values: Values) -> arb:
    """The real part of f's ball, where the imaginary part is surely compatible with 0; else `OutsideValidity`."""
    ball = enclose(f, values)
    if not ball.imag.contains(0):
        raise OutsideValidity("a real value is needed and this one is complex")
    return ball.real


def rational(value: Fraction | int) -> acb:
    """A rational number as a ball, rounded at the working precision."""
    q = Fraction(value)
    return acb(fmpq(q.numerator, q.denominator))


def _value(f: Formula, values: Values, analytic: bool) -> acb:
    """Ball of f; `analytic` asks for a function that is analytic on the whole ball (else not finite)."""
    if f.head == "number":
        return rational(f.args[0])
    if analytic:
        return _HEADS[f.head](f, values, True)
    known = values.seen.get(f)
    if known is None:
        known = values.seen[f] = _HEADS[f.head](f, values, False)
    return known


def _letter(f: Formula, values: Values, analytic: bool) -> acb:
    if f.args[0] not in values.balls:
        raise NotCovered(f"the letter {f.args[0]} has no value here")
    return values.balls[f.args[0]]


def _constant(f: Formula, values: Values, analytic: bool) -> acb:
    name = f.args[0]
    if name == "i":
        return acb(0, 1)
    if name == "infinity":
        raise NotCovered("infinity stands where a number is needed")
    return acb(arb.pi() if name == "pi" else arb.const_euler())


def _plus(f: Formula, values: Values, analytic: bool) -> acb:
    total = acb(0)
    for term in f.args:
        total += _value(term, values, analytic)
    return total


def _times(f: Formula, values: Values, analytic: bool) -> acb:
    product = acb(1)
    for factor in f.args:
        product *= _value(factor, values, analytic)
    return product


def _power(f: Formula, values: Values, analytic: bool) -> acb:
    base, exponent = f.args
    x = _value(base, values, analytic)
    if exponent.head == "number":
        return _rational_power(x, exponent.args[0], analytic)
    y = _value(exponent, values, analytic)
    whole = y.unique_fmpz() if y.is_exact() else None
    return integer_power(x, int(whole)) if whole is not None else _general_power(x, y, analytic)


def _rational_power(x: acb, q: Fraction, analytic: bool) -> acb:
    if q.denominator == 1:
        return integer_power(x, q.numerator)
    if q.denominator == 2:
        return integer_power(square_root(x, analytic), q.numerator)
    return _general_power(x, rational(q), analytic)


def integer_power(x: acb, n: int) -> acb:
    """x^n; n < 0 needs a ball away from 0."""
    if n < 0:
        away_from_zero(x)
    return x**n


def _general_power(x: acb, y: acb, analytic: bool) -> acb:
    if x.is_zero() and y.real > 0:
        return acb(0)
    away_from_zero(x)
    return x.pow(y, analytic=True) if analytic else off_cut(x).pow(y)


def away_from_zero(x: acb) -> acb:
    """x, where its ball does not hold 0."""
    if x.is_zero():
        raise OutsideValidity("division by zero, or the logarithm of zero")
    if x.contains(0):
        raise NeedsPrecision("a ball still holds zero")
    return x


def off_cut(x: acb) -> acb:
    """x, where its ball lies on one side of the cut (-oo, 0] (exactly on it counts as above)."""
    if not x.imag.is_zero() and x.imag.contains(0) and not x.real > 0:
        raise NeedsPrecision("a ball touches a branch cut")
    return x


def square_root(x: acb, analytic: bool = False) -> acb:
    """Principal square root."""
    if x.is_zero():
        return acb(0)
    if analytic:
        return x.sqrt(analytic=True)
    return x.sqrt() if x.contains(0) else off_cut(x).sqrt()  # around 0 wide, and still an enclosure


def logarithm(x: acb, analytic: bool = False) -> acb:
    """Principal logarithm."""
    away_from_zero(x)
    return x.log(analytic=True) if analytic else off_cut(x).log()


def _nowhere(x: acb, analytic: bool, f: Callable[[acb], acb]) -> acb:
    """A function that is analytic nowhere: not finite where analyticity is asked for."""
    return acb(arb.nan(), arb.nan()) if analytic else f(x)


def whole_below(x: acb) -> acb:
    """floor of a real ball that holds no jump."""
    if not x.imag.is_zero():
        raise OutsideValidity("floor takes a real number")
    low, high = x.real.lower().floor(), x.real.upper().floor()
    if not (low - high).is_zero():
        raise NeedsPrecision("a ball holds an integer that floor must decide about")
    return acb(low)


def _beyond_one(x: acb, analytic: bool) -> acb:
    """x, away from the cuts of asin and acos."""
    inside = x.real < 1 and x.real > -1
    ends = x.is_exact() and (x.real - 1).is_zero() | (x.real + 1).is_zero()
    if not (inside or ends or not x.imag.contains(0) or (x.imag.is_zero() and not analytic and _clear_of_one(x))):
        raise NeedsPrecision("a ball touches a branch cut")
    return x


def _clear_of_one(x: acb) -> bool:
    return bool(x.real > 1) or bool(x.real < -1)


def _atan(x: acb, analytic: bool) -> acb:
    off = not x.real.contains(0) or (x.imag < 1 and x.imag > -1)
    if not off and not (x.real.is_zero() and not analytic and _clear_of_one(acb(x.imag))):
        raise NeedsPrecision("a ball touches a branch cut")
    return x.atan()


def _elliptic_k(x: acb, analytic: bool) -> acb:
    if not (x.real < 1 or not x.imag.contains(0) or (x.imag.is_zero() and x.real > 1 and not analytic)):
        raise NeedsPrecision("a ball touches the branch cut of elliptic_K")
    return x.elliptic_k()


def _by_sine(x: acb, top: str, bottom: str) -> acb:
    return getattr(x, top)() / away_from_zero(getattr(x, bottom)())


_ONE_PLACE: dict[str, Callable[[acb, bool], acb]] = {
    "abs": lambda x, a: _nowhere(x, a, lambda z: acb(abs(z))),
    "Re": lambda x, a: _nowhere(x, a, lambda z: acb(z.real)),
    "Im": lambda x, a: _nowhere(x, a, lambda z: acb(z.imag)),
    "conj": lambda x, a: _nowhere(x, a, lambda z: z.conjugate()),
    "floor": lambda x, a: _nowhere(x, a, whole_below),
    "sqrt": square_root,
    "log": logarithm,
    "exp": lambda x, a: x.exp(),
    "sin": lambda x, a: x.sin(),
    "cos": lambda x, a: x.cos(),
    "tan": lambda x, a: _by_sine(x, "sin", "cos"),
    "cot": lambda x, a: _by_sine(x, "cos", "sin"),
    "sinh": lambda x, a: x.sinh(),
    "cosh": lambda x, a: x.cosh(),
    "tanh": lambda x, a: _by_sine(x, "sinh", "cosh"),
    "coth": lambda x, a: _by_sine(x, "cosh", "sinh"),
    "asin": lambda x, a: _beyond_one(x, a).asin(),
    "acos": lambda x, a: _beyond_one(x, a).acos(),
    "atan": _atan,
    "Gamma": lambda x, a: _gamma(x),
    "factorial": lambda x, a: _gamma(x + 1),
    "elliptic_K": _elliptic_k,
}


def _gamma(x: acb) -> acb:
    """Gamma(x), away from its poles at 0, -1, -2, ..."""
    if x.is_exact() and x.imag.is_zero() and x.real.is_integer() and not x.real > 0:
        raise OutsideValidity("Gamma has a pole here")
    return x.gamma()


def _binomial(n: acb, k: acb) -> acb:
    """Gamma(n+1)/(Gamma(k+1) Gamma(n-k+1)); for whole k >= 0 the product n (n-1) ... (n-k+1)/k!."""
    whole = k.unique_fmpz() if k.is_exact() else None
    if whole is None:
        return _gamma(n + 1) * (k + 1).rgamma() * (n - k + 1).rgamma()
    if whole < 0:
        return acb(0)
    return (n - k + 1).rising(k) / acb(arb.fac_ui(int(whole)))


def _bessel(x: acb, n: acb, kind: str, analytic: bool) -> acb:
    whole = n.unique_fmpz() if n.is_exact() else None
    if whole is None:
        if x.is_zero():
            raise OutsideValidity("a Bessel function of non-integer order at its branch point")
        if analytic and x.imag.contains(0) and not x.real > 0:
            raise NeedsPrecision("a ball touches a branch cut")
        off_cut(x)
    return x.bessel_j(n) if kind == "bessel_J" else x.bessel_i(n)


def one_place(name: str, x: acb) -> acb:
    """A function of one place at a ball, principal branch."""
    return _ONE_PLACE[name](x, False)


def _call(f: Formula, values: Values, analytic: bool) -> acb:
    name, *args = f.args
    exact = rational_at(args[0], values.exact) if name == "floor" and not analytic else None
    if exact is not None:
        return acb(exact.numerator // exact.denominator)  # no ball around a whole number can decide
    places = [_value(a, values, analytic) for a in args]
    if name == "binomial":
        return _binomial(*places)
    if name in ("bessel_J", "bessel_I"):
        return _bessel(places[1], places[0], name, analytic)
    return _ONE_PLACE[name](places[0], analytic)


def whole_number(f: Formula, values: Values, what: str) -> int:
    """The integer that f certainly is, else a complaint."""
    ball = enclose(f, values)
    found = ball.unique_fmpz()
    if found is None or not ball.is_exact():
        if not ball.contains_integer():
            raise OutsideValidity(f"{what} is no integer here")
        raise NeedsPrecision(f"{what} is not known to be an integer")
    return int(found)


def _sum(f: Formula, values: Values, analytic: bool) -> acb:
    name, low, high, body = f.args
    first = whole_number(low, values, "a sum's lower end")
    if high == _INFINITY:
        return _endless(name, first, body, values, analytic)
    last = whole_number(high, values, "a sum's upper end")
    if last - first >= LONGEST_SUM:
        raise NotCovered(f"a sum of {last - first + 1} terms; at most {LONGEST_SUM} are added up")
    total = acb(0)
    for k in range(first, last + 1):
        total += _value(body, values.with_letter(name, acb(k), Fraction(k)), analytic)
    return total


def _endless(name: str, first: int, body: Formula, values: Values, analytic: bool) -> acb:
    """A sum up to infinity."""

    def at(m: int) -> acb:
        return _value(body, values.with_letter(name, acb(m), Fraction(m)), analytic)

    return enclose_infinite_sum(body, name, first, lambda g: _value(g, values, analytic), at)


def _integral(f: Formula, values: Values, analytic: bool) -> acb:
    """Petras' algorithm (`acb.integral`): Gauss quadrature with an error bound from complex balls."""
    name, low, high, body = f.args
    if any(node == _INFINITY for end in (low, high) for node in walk(end)) and high != _INFINITY:
        raise NotCovered("an integral over this infinite range has no enclosure here")

    def integrand(x: acb, needs_analytic: bool) -> acb:
        try:
            return _value(body, values.with_letter(name, x), bool(needs_analytic))
        except (NeedsPrecision, OutsideValidity):
            return acb(arb.nan(), arb.nan())

    begin = enclose(low, values)
    if high == _INFINITY:
        return enclose_improper(integrand, begin)
    result = acb.integral(integrand, begin, enclose(high, values))
    if not result.is_finite():
        raise NeedsPrecision("an integral did not settle at this precision")
    return result


def _root(f: Formula, values: Values, analytic: bool) -> acb:
    polynomial, name, index = f.args
    place = whole_number(index, values, "a root's number")
    found = real_roots(polynomial, name, values)
    if not 1 <= place <= len(found):
        raise OutsideValidity(f"there are {len(found)} real roots here and number {place} is asked for")
    return found[place - 1]


def _rootsum(f: Formula, values: Values, analytic: bool) -> acb:
    name, polynomial, body = f.args
    total = acb(0)
    for x in enclose_roots(polynomial, name, values):
        total += _value(body, values.with_letter(name, x), analytic)
    return total


def _refused(f: Formula, values: Values, analytic: bool) -> acb:
    raise NotCovered(f"{f.head} has no numerical value")


_HEADS: dict[str, Callable[[Formula, Values, bool], acb]] = {
    "letter": _letter,
    "constant": _constant,
    "plus": _plus,
    "times": _times,
    "power": _power,
    "call": _call,
    "sum": _sum,
    "integral": _integral,
    "root": _root,
    "rootsum": _rootsum,
    "operator": _refused,
    "order": _refused,
}
