"""Ways in which a formula goes wrong on its way to paper, and some in which it only looks different.

Each way takes a formula, its letters, the order it holds to (None: exactly) and a seeded source of chance, and gives
a changed formula or None.  Trees only; nothing here knows how formulas are derived or judged.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from random import Random

from derive.errors import FormulaFault
from derive.formula.tree import (
    I_UNIT,
    ONE,
    PI,
    TAU,
    Formula,
    bound_letter,
    call,
    children,
    free_letters,
    letter,
    negate,
    number,
    power,
    rebuild,
    replace,
    times,
    walk,
)


@dataclass(frozen=True)
class Given:
    """A formula with what its changes may speak of."""

    formula: Formula
    letters: tuple[str, ...]
    whole: tuple[str, ...]
    order: int | None
    chance: Random


@dataclass(frozen=True)
class Mutant:
    kind: str
    way: str
    formula: Formula


Way = Callable[[Given], "Formula | None"]


def _places(f: Formula, wanted: Callable[[Formula], bool]) -> list[tuple[Formula, Callable[[Formula], Formula]]]:
    """(part, how to put another there) of every wanted part."""
    found: list[tuple[Formula, Callable[[Formula], Formula]]] = []

    def look(node: Formula, put: Callable[[Formula], Formula]) -> None:
        if wanted(node):
            found.append((node, put))
        for k, part in enumerate(node.args):
            if isinstance(part, Formula):
                look(part, lambda new, k=k, node=node, put=put: put(  # type: ignore[misc]
                    rebuild(node, (*node.args[:k], new, *node.args[k + 1 :]))))

    look(f, lambda new: new)
    return found


def _change(wanted: Callable[[Formula], bool], made: Callable[[Given, Formula], Formula | None]) -> Way:
    """One wanted part, by chance, changed."""

    def way(g: Given) -> Formula | None:
        places = _places(g.formula, wanted)
        if not places:
            return None
        node, put = g.chance.choice(places)
        new = made(g, node)
        return None if new is None else put(new)

    return way


def _scaled(c: Formula) -> Way:
    return lambda g: times(c, g.formula)


def _is_call(*names: str) -> Callable[[Formula], bool]:
    return lambda f: f.head == "call" and f.args[0] in names


def _called(name: str) -> Callable[[Given, Formula], Formula]:
    return lambda g, f: Formula("call", (name, *f.args[1:]))


def _argument(c: int | Fraction) -> Callable[[Given, Formula], Formula]:
    return lambda g, f: Formula("call", (*f.args[:-1], times(number(c), f.args[-1])))


def _terms(c: Formula | None) -> Callable[[Given, Formula], Formula | None]:
    """One term of a sum times c; None takes it out."""

    def made(g: Given, f: Formula) -> Formula | None:
        k = g.chance.randrange(len(f.args))
        rest = (times(c, f.args[k]),) if c is not None else ()
        return rebuild(f, (*f.args[:k], *rest, *f.args[k + 1 :]))

    return made


def _factor_out(g: Given, f: Formula) -> Formula:
    k = g.chance.randrange(len(f.args))
    return rebuild(f, (*f.args[:k], *f.args[k + 1 :]))


def _whole_number(f: Formula) -> bool:
    return f.head == "number" and f.args[0].denominator == 1 and abs(f.args[0]) >= 2


def _plus_number(d: int) -> Callable[[Given, Formula], Formula]:
    return lambda g, f: number(f.args[0] + d)


def _denominator(g: Given, f: Formula) -> Formula:
    return number(Fraction(f.args[0].numerator, f.args[0].denominator + 1))


def _everywhere(d: int) -> Way:
    def way(g: Given) -> Formula | None:
        names = [n for n in g.whole if n in free_letters(g.formula)]
        return replace(g.formula, {n: letter(n) + number(d) for n in names[:1]}) if names else None

    return way


def _one_letter(d: int) -> Way:
    def way(g: Given) -> Formula | None:
        counters = {*g.whole, *(b for n in walk(g.formula) if (b := bound_letter(n)))}
        wanted = _change(lambda f: f.head == "letter" and f.args[0] in counters, lambda g, f: f + number(d))
        return wanted(g)

    return way


def _other_letter(g: Given) -> Formula | None:
    names = [n for n in g.letters if n not in g.whole]
    used = [n for n in names if n in free_letters(g.formula)]
    others = [n for n in names if n not in used[:1]]
    return replace(g.formula, {used[0]: letter(g.chance.choice(others))}) if used and others else None


def _swapped(g: Given) -> Formula | None:
    used = [n for n in g.letters if n in free_letters(g.formula) and n not in g.whole]
    if len(used) < 2:
        return None
    a, b = g.chance.sample(used, 2)
    return replace(g.formula, {a: letter(b), b: letter(a)})


def _exponent(d: int) -> Callable[[Given, Formula], Formula]:
    def made(g: Given, f: Formula) -> Formula:
        e = f.args[1].args[0] + d
        return ONE if e == 0 else f.args[0] if e == 1 else power(f.args[0], number(e))

    return made


def _numeric_power(f: Formula) -> bool:
    return f.head == "power" and f.args[1].head == "number"


def _by_letter(e: int) -> Way:
    def way(g: Given) -> Formula | None:
        names = [n for n in g.letters if n not in g.whole]
        return times(g.formula, power(letter(g.chance.choice(names)), number(e))) if names else None

    return way


def _free_letter(f: Formula) -> bool:
    return f.head == "letter"


def _is_free(g: Given, f: Formula) -> Formula | None:
    return power(f, number(2)) if f.args[0] in free_letters(g.formula) else None


def _added(make: Callable[[Given], Formula | None]) -> Way:
    def way(g: Given) -> Formula | None:
        more = make(g)
        return None if more is None else g.formula + more

    return way


def _a_letter(g: Given) -> Formula | None:
    names = [n for n in g.letters if n not in g.whole]
    return times(number(Fraction(1, 7)), letter(g.chance.choice(names))) if names else None


def _beyond(scale: int) -> Callable[[Given], Formula | None]:
    """What the claim's O(...) leaves open."""
    return lambda g: None if g.order is None else times(number(scale), power(TAU, number(g.order)))


def _within(g: Given) -> Formula | None:
    """The last power of tau that the claim still speaks of."""
    if g.order is None:
        return None
    return times(number(Fraction(1, 9)), power(TAU, number(g.order - 1))) if g.order > 1 else number(Fraction(1, 9))


def _reversed(g: Given) -> Formula | None:
    def turn(f: Formula) -> Formula:
        args = tuple(turn(a) if isinstance(a, Formula) else a for a in f.args)
        return rebuild(f, tuple(reversed(args)) if f.head in ("plus", "times") else args)

    return turn(g.formula)


def _one_minus(g: Given, f: Formula) -> Formula | None:
    other = {"sin": "cos", "cos": "sin"}[f.args[0].args[0]]
    return ONE - power(call(other, f.args[0].args[1]), number(2))


def _trigonometric_square(f: Formula) -> bool:
    return f.head == "power" and f.args[1] == number(2) and _is_call("sin", "cos")(f.args[0])


def _over_itself(g: Given) -> Formula | None:
    names = [n for n in g.letters if n not in g.whole]
    return times(g.formula, letter(names[0]), power(letter(names[0]), number(-1))) if names else None


_ANY_CALL = _is_call("sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "exp", "sqrt")

WAYS: dict[str, tuple[str, Way]] = {
    "twice": ("factor", _scaled(number(2))),
    "half": ("factor", _scaled(number(Fraction(1, 2)))),
    "three times": ("factor", _scaled(number(3))),
    "a quarter": ("factor", _scaled(number(Fraction(1, 4)))),
    "four thirds": ("factor", _scaled(number(Fraction(4, 3)))),
    "times pi": ("factor", _scaled(PI)),
    "over pi": ("factor", _scaled(power(PI, number(-1)))),
    "times sqrt 2": ("factor", _scaled(call("sqrt", number(2)))),
    "times i": ("factor", _scaled(I_UNIT)),
    "one term doubled": ("factor", _change(lambda f: f.head == "plus", _terms(number(2)))),
    "one term times 3/2": ("factor", _change(lambda f: f.head == "plus", _terms(number(Fraction(3, 2))))),
    "negated": ("sign", _scaled(number(-1))),
    "one term negated": ("sign", _change(lambda f: f.head == "plus", _terms(number(-1)))),
    "argument negated": ("sign", _change(_ANY_CALL, _argument(-1))),
    "i negated": ("sign", _change(lambda f: f == I_UNIT, lambda g, f: negate(f))),
    "conjugated": ("sign", lambda g: call("conj", g.formula)),
    "a number + 1": ("index", _change(_whole_number, _plus_number(1))),
    "a number - 1": ("index", _change(_whole_number, _plus_number(-1))),
    "a denominator + 1": ("index", _change(lambda f: f.head == "number", _denominator)),
    "size + 1 everywhere": ("index", _everywhere(1)),
    "size - 1 everywhere": ("index", _everywhere(-1)),
    "one index + 1": ("index", _one_letter(1)),
    "one index - 1": ("index", _one_letter(-1)),
    "another letter": ("index", _other_letter),
    "two letters swapped": ("index", _swapped),
    "sin to cos": ("function", _change(_is_call("sin"), _called("cos"))),
    "cos to sin": ("function", _change(_is_call("cos"), _called("sin"))),
    "sin to tan": ("function", _change(_is_call("sin"), _called("tan"))),
    "exp to cosh": ("function", _change(_is_call("exp"), _called("cosh"))),
    "root left out": ("function", _change(_is_call("sqrt"), lambda g, f: f.args[1])),
    "argument doubled": ("function", _change(_ANY_CALL, _argument(2))),
    "argument halved": ("function", _change(_ANY_CALL, _argument(Fraction(1, 2)))),
    "exponent + 1": ("power", _change(_numeric_power, _exponent(1))),
    "exponent - 1": ("power", _change(_numeric_power, _exponent(-1))),
    "a letter squared": ("power", _change(_free_letter, _is_free)),
    "times a letter": ("power", _by_letter(1)),
    "over a letter": ("power", _by_letter(-1)),
    "times a letter squared": ("power", _by_letter(2)),
    "times tau": ("power", lambda g: times(g.formula, TAU)),
    "a term dropped": ("term", _change(lambda f: f.head == "plus", _terms(None))),
    "a factor dropped": ("term", _change(lambda f: f.head == "times", _factor_out)),
    "a constant added": ("term", _added(lambda g: number(Fraction(1, 1000)))),
    "a letter added": ("term", _added(_a_letter)),
    "the last order changed": ("term", _added(_within)),
    "beyond the order": ("beyond", _added(_beyond(5))),
    "far beyond the order": ("beyond", _added(_beyond(10**6))),
    "reversed": ("same", _reversed),
    "over itself": ("same", _over_itself),
    "added and taken away": ("same", _added(lambda g: (m := _a_letter(g)) and m - m)),
    "1 - cos^2 for sin^2": ("same", _change(_trigonometric_square, _one_minus)),
}
"""name -> (kind, way): more than thirty, and what changes nothing besides."""


def mutants(given: Given, most: int) -> Iterator[Mutant]:
    """Different changed formulas, every way once before any comes again."""
    seen = {given.formula}
    count = 0
    order = list(WAYS)
    given.chance.shuffle(order)
    for _ in range(3):
        for name in order:
            kind, way = WAYS[name]
            try:
                f = way(given)
            except FormulaFault:
                continue
            if f is None or f in seen or count >= most or "order" in {n.head for n in walk(f)}:
                continue
            seen.add(f)
            count += 1
            yield Mutant(kind, name, f)


def nodes(f: Formula) -> int:
    return 1 + sum(nodes(c) for c in children(f))
