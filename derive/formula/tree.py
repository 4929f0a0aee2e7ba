"""The one expression type.

A `Formula` is a head and its arguments.  Normal form, kept by the constructors and by nothing else: sums and
products are flat; there is no minus and no division head (`a - b` is `a + (-1)*b`, `x/y` is `x*y^-1`); a product
has at most one rational, in front.  Nothing else is simplified: terms and factors stay in the order given.

| head       | args                              |
|------------|-----------------------------------|
| number     | (Fraction,)                       |
| letter     | (name,)                           |
| constant   | (name,): i, pi, euler_gamma, infinity |
| plus, times| (Formula, ...), two or more       |
| power      | (base, exponent)                  |
| call       | (function name, Formula, ...)     |
| sum        | (bound letter, from, to, body)    |
| integral   | (bound letter, from, to, body)    |
| root       | (polynomial, bound letter, index) real roots, ascending, from 1 |
| rootsum    | (bound letter, polynomial, body)  over all roots of a square-free polynomial |
| operator   | (name, subscript or None, dagger) a letter that does not commute; printed, never parsed |
| order      | (Formula,)                        O(...) |

Two formulas are equal when head and arguments are; where a formula stood in its source (`span`) plays no part.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from fractions import Fraction
from typing import Any, Union

from derive.errors import FormulaFault

Exactly = Union["Formula", int, Fraction]  # noqa: UP007 - Formula is not defined yet


class Formula:
    """An expression; made by the constructors below, never changed."""

    __slots__ = ("head", "args", "span", "depth", "_hash")
    head: str
    args: tuple[Any, ...]
    span: tuple[int, int] | None
    depth: int
    _hash: int

    def __init__(self, head: str, args: tuple[Any, ...], span: tuple[int, int] | None = None):
        set_ = object.__setattr__
        set_(self, "head", head)
        set_(self, "args", args)
        set_(self, "span", span)
        set_(self, "depth", 1 + max((a.depth for a in args if isinstance(a, Formula)), default=0))
        set_(self, "_hash", hash((head, args)))

    def __setattr__(self, name: str, value: object) -> None:
        raise AttributeError("a Formula never changes")

    def __reduce__(self) -> tuple[Any, ...]:
        return (Formula, (self.head, self.args, self.span))

    def __hash__(self) -> int:
        return self._hash

    def __eq__(self, other: object) -> bool:
        if self is other:
            return True
        if not isinstance(other, Formula) or self._hash != other._hash:
            return False
        return self.head == other.head and self.args == other.args

    def __repr__(self) -> str:
        from derive.formula.text import text  # a cycle only for people at a prompt

        return f"Formula({text(self)!r})"

    def __add__(self, other: Exactly) -> Formula:
        return plus(self, formula(other))

    def __radd__(self, other: Exactly) -> Formula:
        return plus(formula(other), self)

    def __sub__(self, other: Exactly) -> Formula:
        return plus(self, negate(formula(other)))

    def __rsub__(self, other: Exactly) -> Formula:
        return plus(formula(other), negate(self))

    def __mul__(self, other: Exactly) -> Formula:
        return times(self, formula(other))

    def __rmul__(self, other: Exactly) -> Formula:
        return times(formula(other), self)

    def __truediv__(self, other: Exactly) -> Formula:
        return times(self, inverse(formula(other)))

    def __rtruediv__(self, other: Exactly) -> Formula:
        return times(formula(other), inverse(self))

    def __neg__(self) -> Formula:
        return negate(self)

    def __pow__(self, other: Exactly) -> Formula:
        return power(self, formula(other))


def formula(value: Exactly) -> Formula:
    """An int, a Fraction or a Formula, as a Formula.  Floats are refused: they are not exact."""
    if isinstance(value, Formula):
        return value
    if isinstance(value, bool) or not isinstance(value, (int, Fraction)):
        raise TypeError(f"{value!r} is not exact: give an int, a Fraction or a Formula")
    return number(value)


def number(value: int | Fraction) -> Formula:
    return Formula("number", (Fraction(value),))


def letter(name: str) -> Formula:
    return Formula("letter", (name,))


def constant(name: str) -> Formula:
    return Formula("constant", (name,))


def call(name: str, *args: Formula) -> Formula:
    return Formula("call", (name, *args))


def operator(name: str, sub: int | str | None = None, dagger: bool = False) -> Formula:
    """A letter that does not commute, such as A, B_0 or V with a dagger."""
    return Formula("operator", (name, sub, dagger))


def order(inner: Formula) -> Formula:
    """O(inner)."""
    return Formula("order", (inner,))


ZERO = number(0)
ONE = number(1)
MINUS_ONE = number(-1)
I_UNIT = constant("i")
PI = constant("pi")
TAU = letter("tau")


def plus(*terms: Formula) -> Formula:
    """Sum of the terms, flat and in order; of none, 0."""
    flat: list[Formula] = []
    for term in terms:
        flat.extend(term.args if term.head == "plus" else (term,))
    if not flat:
        return ZERO
    return flat[0] if len(flat) == 1 else Formula("plus", tuple(flat))


def times(*factors: Formula) -> Formula:
    """Product of the factors, flat and in order, its rational numbers gathered in front; of none, 1."""
    front, rest = Fraction(1), []
    for factor in factors:
        for f in factor.args if factor.head == "times" else (factor,):
            if f.head == "number":
                front *= f.args[0]
            else:
                rest.append(f)
    if not rest:
        return number(front)
    if front != 1:
        rest.insert(0, number(front))
    return rest[0] if len(rest) == 1 else Formula("times", tuple(rest))


def negate(f: Formula) -> Formula:
    return times(MINUS_ONE, f)


def inverse(f: Formula) -> Formula:
    """1/f, with the inverse carried into products and numeric powers."""
    if f.head == "number":
        if f.args[0] == 0:
            raise FormulaFault("this divides by zero.", "Write a denominator that is not 0.")
        return number(1 / f.args[0])
    if f.head == "times":
        return times(*(inverse(a) for a in f.args))
    if f.head == "power":
        base, exponent = f.args
        flipped = negate(exponent)
        return base if flipped == ONE else Formula("power", (base, flipped))
    return Formula("power", (f, MINUS_ONE))


def power(base: Formula, exponent: Formula) -> Formula:
    """base^exponent; only the exponent -1 is carried inwards."""
    return inverse(base) if exponent == MINUS_ONE else Formula("power", (base, exponent))


def is_number(f: Formula) -> bool:
    return f.head == "number"


def children(f: Formula) -> tuple[Formula, ...]:
    return tuple(a for a in f.args if isinstance(a, Formula))


def walk(f: Formula) -> Iterator[Formula]:
    """Every node of f, parents first.  Depth is bounded by the grammar, size by its limits."""
    stack = [f]
    while stack:
        node = stack.pop()
        yield node
        stack.extend(reversed(children(node)))


def bound_letter(f: Formula) -> str | None:
    """The letter that sum, integral, root or rootsum binds in its body, else None."""
    if f.head in ("sum", "integral", "rootsum"):
        return str(f.args[0])
    return str(f.args[1]) if f.head == "root" else None


def free_letters(f: Formula) -> set[str]:
    """Names of the letters f depends on; bound ones do not count."""
    if f.head == "letter":
        return {f.args[0]}
    inner: set[str] = set()
    bound = bound_letter(f)
    bodies = _bodies(f)
    for child in children(f):
        names = free_letters(child)
        inner |= names - {bound} if any(child is b for b in bodies) else names
    return inner


def _bodies(f: Formula) -> tuple[Formula, ...]:
    """The arguments in which the bound letter of f is bound."""
    if f.head in ("sum", "integral"):
        return (f.args[3],)
    if f.head == "root":
        return (f.args[0],)
    return f.args[1:] if f.head == "rootsum" else ()


def rebuild(f: Formula, args: tuple[Any, ...]) -> Formula:
    """f's head over new arguments, through the constructors, so that the normal form holds."""
    makers: dict[str, Callable[..., Formula]] = {"plus": plus, "times": times, "power": power}
    if f.head in makers:
        return makers[f.head](*args)
    return Formula(f.head, args)


def replace(f: Formula, values: dict[str, Formula]) -> Formula:
    """f with letters replaced; a bound letter is never touched."""
    if f.head == "letter":
        return values.get(f.args[0], f)
    if not children(f):
        return f
    bound = bound_letter(f)
    inside = {k: v for k, v in values.items() if k != bound} if bound else values
    bodies = _bodies(f)
    args = tuple(
        replace(a, inside if any(a is b for b in bodies) else values) if isinstance(a, Formula) else a
        for a in f.args
    )
    return rebuild(f, args)
