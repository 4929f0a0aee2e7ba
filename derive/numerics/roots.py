"""All roots of a polynomial given as a formula, as balls that hold one root each.

Where every coefficient is rational the roots are exact data (square-free part over Q, so repeated roots cost
nothing); otherwise the coefficients are balls and the roots are isolated by `acb_poly.roots`, which fails, and
says so, where two roots come too close for the precision.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from flint import acb, acb_poly, arb, ctx, fmpq, fmpq_poly, fmpz_poly

from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.tree import Formula, free_letters
from derive.numerics.fractions import numerator

if TYPE_CHECKING:
    from derive.numerics.evaluate import Values

HIGHEST_DEGREE = 400


def enclose_roots(polynomial: Formula, name: str, values: Values) -> list[acb]:
    """All distinct complex roots of `polynomial` in the letter `name`, one ball each, sorted by midpoint.

    A ratio of polynomials with rational coefficients has the roots of what is above the line.
    """
    exact = _over_rationals(polynomial, name, values)
    if exact is None:
        exact = numerator(polynomial, name, values.exact)
    if exact is not None:
        return sorted((x for x, _ in _square_free(exact).complex_roots()), key=_place)
    return sorted(isolated(_over_balls(polynomial, name, values)), key=_place)


def real_roots(polynomial: Formula, name: str, values: Values) -> list[acb]:
    """The distinct real roots, ascending.  A root counts as real only where that is certain."""
    exact = _over_rationals(polynomial, name, values)
    if exact is not None:
        found = [x for x, _ in _square_free(exact).complex_roots() if x.imag.is_zero()]
        return sorted(found, key=_place)
    p = _over_balls(polynomial, name, values)
    if not all(c.imag.is_zero() for c in p.coeffs()):
        raise NotCovered("root counts real roots of a real polynomial; this one has complex coefficients")
    return sorted(_certainly_real(isolated(p)), key=_place)


def _certainly_real(roots: list[acb]) -> list[acb]:
    """Of the isolated roots of a real polynomial, those that are their own conjugates."""
    real = []
    for x in roots:
        if not x.imag.contains(0):
            continue
        mirror = x.conjugate()
        if sum(1 for y in roots if y.overlaps(mirror)) > 1:
            raise NeedsPrecision("two roots cannot be told apart")
        real.append(acb(x.real))
    return real


def _place(x: acb) -> tuple[Fraction, Fraction]:
    return _exactly(x.real), _exactly(x.imag)


def _exactly(x: Any) -> Fraction:
    """The midpoint of a ball, as a Fraction."""
    mantissa, exponent = x.mid().man_exp()
    m, e = int(mantissa), int(exponent)
    return Fraction(m * 2**e) if e >= 0 else Fraction(m, 2**-e)


def _square_free(p: fmpq_poly) -> fmpz_poly:
    if p.degree() < 1:
        raise OutsideValidity("the polynomial has no roots: it is constant here")
    return (p // p.gcd(p.derivative())).numer()


def isolated(p: acb_poly, tolerance: arb | None = None) -> list[acb]:
    """The roots of a square-free polynomial, a ball each; `NeedsPrecision` where they cannot be told apart."""
    tolerance = arb(2) ** (-ctx.prec * 3 // 4) if tolerance is None else tolerance
    try:
        return list(p.roots(tol=tolerance, maxprec=2 * ctx.prec))
    except ValueError as fault:
        raise NeedsPrecision("roots too close to be told apart, or a polynomial that is not square-free") from fault


def _over_rationals(f: Formula, name: str, values: Values) -> fmpq_poly | None:
    """f as a polynomial over Q, None where some letter or number in it is not rational."""
    return _polynomial(f, name, lambda g: _rational_constant(g, values), fmpq_poly)


def _rational_constant(g: Formula, values: Values) -> Any:
    if g.head == "number":
        return fmpq(g.args[0].numerator, g.args[0].denominator)
    if g.head == "letter" and g.args[0] in values.exact:
        q = values.exact[g.args[0]]
        return fmpq(q.numerator, q.denominator)
    return None


def _over_balls(f: Formula, name: str, values: Values) -> acb_poly:
    from derive.numerics.evaluate import enclose  # the two walk each other's formulas

    p = _polynomial(f, name, lambda g: None if name in free_letters(g) else enclose(g, values), acb_poly)
    if p is None:
        raise NotCovered(f"this is no polynomial in {name}")
    coefficients = p.coeffs()
    while coefficients and coefficients[-1].is_zero():
        coefficients.pop()
    if len(coefficients) < 2:
        raise OutsideValidity("the polynomial has no roots: it is constant here")
    if coefficients[-1].contains(0):
        raise NeedsPrecision("the degree of a polynomial is not known")
    return acb_poly(coefficients)


def _polynomial(f: Formula, name: str, constant: Callable[[Formula], Any], ring: Any) -> Any:
    """f in the polynomial ring `ring`; `constant` gives an element of its field, or None to look inside."""
    if f.head == "letter" and f.args[0] == name:
        return ring([0, 1])
    inner = constant(f)
    if inner is not None:
        return ring([inner])
    if f.head in ("plus", "times"):
        parts = [_polynomial(a, name, constant, ring) for a in f.args]
        return None if any(p is None for p in parts) else _together(parts, f.head, ring)
    if f.head == "power":
        return _powered(f, name, constant, ring)
    return None


def _together(parts: list[Any], head: str, ring: Any) -> Any:
    total = ring([0]) if head == "plus" else ring([1])
    for p in parts:
        total = total + p if head == "plus" else total * p
    return total


def _powered(f: Formula, name: str, constant: Callable[[Formula], Any], ring: Any) -> Any:
    base, exponent = f.args
    if exponent.head != "number" or exponent.args[0].denominator != 1:
        return None
    n, p = exponent.args[0].numerator, _polynomial(base, name, constant, ring)
    if p is None:
        return None
    if n < 0:
        if p.degree() > 0:
            return None
        value = p[0]
        return ring([value**n]) if value != 0 else None
    if n * max(p.degree(), 1) > HIGHEST_DEGREE and p.degree() > 0:
        raise NotCovered(f"a polynomial of degree {n * p.degree()}; at most {HIGHEST_DEGREE} is served")
    return p**n
