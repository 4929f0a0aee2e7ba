"""Formula -> the worksheet's own syntax, so that `parse(text(f)) == f`."""

from __future__ import annotations

from fractions import Fraction

from derive.formula.tree import Formula

_PLUS, _TIMES, _POWER, _ATOM = 1, 2, 3, 4


def text(f: Formula) -> str:
    """f in worksheet syntax.  Operators have no such syntax and are written for reading only."""
    return _WRITERS[f.head](f)


def _level(f: Formula) -> int:
    """How tightly the text of f binds."""
    if f.head == "plus":
        return _PLUS
    if f.head == "times":
        return _TIMES
    if f.head == "number":
        value = f.args[0]
        return _ATOM if value >= 0 and value.denominator == 1 else _TIMES
    if f.head == "power":
        return _TIMES if _is_divisor(f) else _POWER
    return _ATOM


def _within(f: Formula, level: int) -> str:
    """text(f), in parentheses if it binds less tightly than `level`."""
    return text(f) if _level(f) >= level else f"({text(f)})"


def _is_divisor(f: Formula) -> bool:
    """A numeric negative power is written below a bar."""
    return f.head == "power" and f.args[1].head == "number" and f.args[1].args[0] < 0


def _number(f: Formula) -> str:
    return str(f.args[0])


def _name(f: Formula) -> str:
    return str(f.args[0])


def _plus(f: Formula) -> str:
    first, *rest = (_term(a) for a in f.args)
    return first + "".join(f" - {t[1:]}" if t.startswith("-") else f" + {t}" for t in rest)


def _term(f: Formula) -> str:
    return text(f)


def _times(f: Formula) -> str:
    front, factors = Fraction(1), list(f.args)
    if factors[0].head == "number":
        front = factors.pop(0).args[0]
    sign = "-" if front < 0 else ""
    front = abs(front)
    split = next((n for n, a in enumerate(factors) if _is_divisor(a)), len(factors))
    above, below = factors[:split], factors[split:]
    if all(_is_divisor(a) for a in below):
        return sign + _fraction(front, above, below)
    return sign + _in_order(front, factors)


def _fraction(front: Fraction, above: list[Formula], below: list[Formula]) -> str:
    """Numerator over one denominator, all divisors being at the end."""
    over = [_within(a, _POWER) for a in above]
    if front.numerator != 1 or not over:
        over.insert(0, str(front.numerator))
    under = [_within(_flipped(a), _POWER) for a in below]
    if front.denominator != 1:
        under.insert(0, str(front.denominator))
    top = "*".join(over)
    if not under:
        return top
    return f"{top}/{under[0]}" if len(under) == 1 else f"{top}/({'*'.join(under)})"


def _in_order(front: Fraction, factors: list[Formula]) -> str:
    """Multipliers and divisors as they come."""
    out = str(front) if front != 1 or _is_divisor(factors[0]) else ""
    for a in factors:
        if _is_divisor(a):
            out += "/" + _within(_flipped(a), _POWER)
        else:
            out += ("*" if out else "") + _within(a, _POWER)
    return out


def _flipped(f: Formula) -> Formula:
    """The positive power that stands below the bar."""
    base, exponent = f.args
    up = -exponent.args[0]
    return base if up == 1 else Formula("power", (base, Formula("number", (up,))))


def _power(f: Formula) -> str:
    if _is_divisor(f):
        return "1/" + _within(_flipped(f), _POWER)
    base, exponent = f.args
    return f"{_within(base, _ATOM)}^{_within(exponent, _POWER)}"


def _call(f: Formula) -> str:
    name, *args = f.args
    if name == "factorial":
        return _within(args[0], _ATOM) + "!" if not _is_factorial(args[0]) else f"({text(args[0])})!"
    return f"{name}({', '.join(text(a) for a in args)})"


def _is_factorial(f: Formula) -> bool:
    return f.head == "call" and f.args[0] == "factorial"


def _ranged(f: Formula) -> str:
    name, low, high, body = f.args
    return f"{f.head}({name} from {text(low)} to {text(high)}: {text(body)})"


def _root(f: Formula) -> str:
    polynomial, name, index = f.args
    return f"root({text(polynomial)}, {name}, {text(index)})"


def _rootsum(f: Formula) -> str:
    name, polynomial, body = f.args
    return f"rootsum({name} in {text(polynomial)}: {text(body)})"


def _operator(f: Formula) -> str:
    name, sub, dagger = f.args
    return name + (f"_{sub}" if sub is not None else "") + ("†" if dagger else "")


def _order(f: Formula) -> str:
    return f"O({text(f.args[0])})"


_WRITERS = {
    "number": _number,
    "letter": _name,
    "constant": _name,
    "plus": _plus,
    "times": _times,
    "power": _power,
    "call": _call,
    "sum": _ranged,
    "integral": _ranged,
    "root": _root,
    "rootsum": _rootsum,
    "operator": _operator,
    "order": _order,
}
