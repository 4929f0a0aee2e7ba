"""Text -> formula, by a grammar with limits.  Nothing a worksheet says is ever executed.

`parse("-x^2 + 2*n!")` gives a `Formula`; `parse_relations("0 < x <= 1")` a tuple of (left, op, right).
A leading sign binds weaker than `^`; `2^3^2` is `2^9`; `**` is read as `^`; products need their `*`.
"""

from __future__ import annotations

import re
from fractions import Fraction
from functools import lru_cache
from typing import Any

from lark import Lark, Token, Transformer
from lark.exceptions import UnexpectedInput

from derive.errors import FormulaFault
from derive.formula.tree import (
    ONE,
    Formula,
    call,
    inverse,
    negate,
    number,
    order,
    plus,
    power,
    times,
    walk,
)

LONGEST = 10_000  # characters
DEEPEST = 200  # nested nodes; every walk of a tree recurses at most this far
DIGITS = 1_000  # in one number
LARGEST_POWER = 100_000  # bits of a purely numeric power, so that no tower is ever built

FUNCTIONS: dict[str, int] = {
    **dict.fromkeys(("abs", "Re", "Im", "conj", "sqrt", "exp", "log", "sin", "cos", "tan", "cot"), 1),
    **dict.fromkeys(("sinh", "cosh", "tanh", "coth", "floor", "asin", "acos", "atan", "Gamma"), 1),
    **dict.fromkeys(("binomial", "bessel_J", "bessel_I"), 2),
    "elliptic_K": 1,
}
CONSTANTS = ("i", "pi", "euler_gamma", "infinity")
RESERVED = frozenset(
    ("sum", "integral", "root", "rootsum", "from", "to", "in", "O", "e", *CONSTANTS, *FUNCTIONS)
)
COMPARISONS = ("<=", ">=", "!=", "<", ">", "=")

_GRAMMAR = r"""
?start: expr
?expr: term | SIGN term -> signed | (SIGN? term) (SIGN term)+ -> plus
?term: factor | factor (OVER factor)+ -> times
?factor: post | post "^" exponent -> power
?exponent: factor | SIGN factor -> signed
?post: atom | atom "!" -> factorial
?atom: NUMBER -> number | NAME -> name | "(" expr ")"
     | NAME "(" expr ("," expr)* ")" -> call
     | "sum" "(" NAME "from" expr "to" expr ":" expr ")" -> sum
     | "integral" "(" NAME "from" expr "to" expr ":" expr ")" -> integral
     | "root" "(" expr "," NAME "," expr ")" -> root
     | "rootsum" "(" NAME "in" expr ":" expr ")" -> rootsum
     | "O" "(" expr ")" -> order
SIGN: "+" | "-"
OVER: "*" | "/"
NUMBER: /[0-9]+(\.[0-9]+)?/
NAME: /[A-Za-z][A-Za-z0-9_]*/
%ignore /[ \t]+/
"""

_TOKEN = re.compile(
    r"(?P<space>[ \t]+)|(?P<number>[0-9]+(\.[0-9]+)?)|(?P<name>[A-Za-z][A-Za-z0-9_]*)"
    r"|(?P<op>\*\*|<=|>=|!=|[-+*/^!(),:<>=])"
)


class _Builder(Transformer[Token, Formula]):
    """Tree nodes from grammar rules; each method is one alternative of the grammar."""

    def number(self, c: list[Any]) -> Formula:
        return number(Fraction(str(c[0])))

    def name(self, c: list[Any]) -> Formula:
        token = c[0]
        head = "constant" if token in CONSTANTS else "letter"
        return Formula(head, (str(token),), (token.start_pos, token.end_pos))

    def signed(self, c: list[Any]) -> Formula:
        return negate(c[1]) if c[0] == "-" else c[1]

    def plus(self, c: list[Any]) -> Formula:
        signed = c if isinstance(c[0], Token) else ["+", *c]
        return plus(*(self.signed(signed[k : k + 2]) for k in range(0, len(signed), 2)))

    def times(self, c: list[Any]) -> Formula:
        rest = (inverse(c[k + 1]) if c[k] == "/" else c[k + 1] for k in range(1, len(c), 2))
        return times(c[0], *rest)

    def power(self, c: list[Any]) -> Formula:
        return power(*c)

    def factorial(self, c: list[Any]) -> Formula:
        return call("factorial", c[0])

    def call(self, c: list[Any]) -> Formula:
        token, *args = c
        wanted = FUNCTIONS[str(token)]
        if len(args) != wanted:
            raise FormulaFault(
                f"{token} takes {wanted} argument{'s' if wanted > 1 else ''}, here are {len(args)}.",
                f"Write {token}({', '.join('xyz'[:wanted])}).",
                token.start_pos or 0,
            )
        return Formula("call", (str(token), *args), (token.start_pos, token.end_pos))

    def sum(self, c: list[Any]) -> Formula:
        name, low, high, body = c
        return Formula("sum", (_bindable(name), low, high, body))

    def integral(self, c: list[Any]) -> Formula:
        name, low, high, body = c
        return Formula("integral", (_bindable(name), low, high, body))

    def root(self, c: list[Any]) -> Formula:
        polynomial, name, index = c
        return Formula("root", (polynomial, _bindable(name), index))

    def rootsum(self, c: list[Any]) -> Formula:
        name, polynomial, body = c
        return Formula("rootsum", (_bindable(name), polynomial, body))

    def order(self, c: list[Any]) -> Formula:
        return order(c[0])


def _bindable(token: Token) -> str:
    if str(token) in RESERVED:
        raise FormulaFault(f"{token} is a reserved name.", "Bind another letter.", token.start_pos or 0)
    return str(token)


# The builder runs inside the parser, from the leaves up: no walk of ours recurses before the depth is known.
_parser = Lark(_GRAMMAR, parser="lalr", maybe_placeholders=False, transformer=_Builder())


def parse(source: str) -> Formula:
    """The formula that `source` says, or a `FormulaFault` with the position of the first fault."""
    if not isinstance(source, str):
        raise TypeError(f"a formula is text, not {type(source).__name__}")
    if len(source) > LONGEST:
        raise FormulaFault(f"this formula has {len(source)} characters.", f"The longest read is {LONGEST}.")
    return _parse(source)


@lru_cache(maxsize=4096)
def _parse(source: str) -> Formula:
    ready = source.replace("**", "^ ")  # keeps every position
    _scan(ready)
    try:
        f: Formula = _parser.parse(ready)  # type: ignore[assignment]
    except UnexpectedInput as fault:
        raise _unexpected(fault, ready) from None
    _limits(f)
    return f


def _limits(f: Formula) -> None:
    if f.depth > DEEPEST:
        raise FormulaFault(f"this formula nests {f.depth} deep.", f"The deepest read is {DEEPEST}.")
    for node in walk(f):
        if node.head == "power" and numeric_bits(node) > LARGEST_POWER:
            raise FormulaFault("this power is too large to be a number.", "Write a smaller exponent.")


def numeric_bits(f: Formula) -> float:
    """About how many bits the number f has, from its logarithms alone; 0 where f is no number.

    Only numbers, powers and products of numbers are looked at: that is where towers come from.
    """
    if f.head == "number":
        q = f.args[0]
        return float(max(abs(q.numerator), q.denominator).bit_length())
    if f.head == "power" and f.args[1].head in ("number", "power"):
        base, exponent = numeric_bits(f.args[0]), numeric_bits(f.args[1])
        if not base or not exponent:
            return 0.0
        return base * 2.0 ** min(exponent, 60) if exponent > 20 else base * _size(f.args[1])
    return 0.0


def _size(f: Formula) -> float:
    """|f| for a numeric f of at most 20 bits."""
    if f.head == "number":
        return abs(float(f.args[0]))
    return float(min(_size(f.args[0]) ** _size(f.args[1]), 1e9))


def _scan(source: str) -> None:
    """Refuse, with the way to write it, what the grammar would refuse without a reason."""
    previous: re.Match[str] | None = None
    position, depth = 0, 0
    if not source.strip():
        raise FormulaFault("there is no formula here.", "Write a number or a formula.")
    while position < len(source):
        token = _TOKEN.match(source, position)
        if token is None:
            raise _stray(source, position)
        position = token.end()
        if token.lastgroup == "space":
            continue
        _check_pair(source, previous, token)
        depth += {"(": 1, ")": -1}.get(token.group(), 0)
        if depth > DEEPEST:
            raise FormulaFault(f"more than {DEEPEST} parentheses are open here.", "", token.start())
        previous = token
    _check_last(source, previous)


def _stray(source: str, at: int) -> FormulaFault:
    c = source[at]
    if c == "." and source[at + 1 : at + 2].isdigit():
        digits = re.match(r"\.[0-9]+", source[at:])
        shown = digits.group() if digits else "."
        if at and source[at - 1].isdigit():
            return FormulaFault("a number has one point.", "", at)
        return FormulaFault(f"{shown} starts with its point.", f"Write 0{shown}.", at)
    if c == ".":
        return FormulaFault("a point stands here without digits behind it.", "Write 5 or 5.0.", at)
    return FormulaFault(f"the character {c!r} has no meaning in a formula.", _INSTEAD.get(c, ""), at)


_INSTEAD = {
    "π": "Write pi.",
    "−": "Write - for minus.",
    "–": "Write - for minus.",
    "·": "Write * for a product.",
    "×": "Write * for a product.",
    "÷": "Write / for a quotient.",
    "∞": "Write infinity.",
    "√": "Write sqrt(...).",
    "|": "Write abs(...).",
    "[": "Write round parentheses.",
    "]": "Write round parentheses.",
    "{": "Write round parentheses.",
    "}": "Write round parentheses.",
    "²": "Write ^2.",
    "³": "Write ^3.",
    "τ": "Write tau.",
    "\\": "This is worksheet syntax; LaTeX stands in a claim's latex.",
}


def _check_pair(source: str, before: re.Match[str] | None, token: re.Match[str]) -> None:
    """Two tokens next to each other that need something between them, and single tokens that need a reason."""
    kind, word = token.lastgroup, token.group()
    if kind == "number" and len(word) > DIGITS:
        raise FormulaFault(f"this number has {len(word)} digits.", f"At most {DIGITS} are read.", token.start())
    if kind == "name" and not _is_exponent_of_ten(before, token):
        _check_name(source, token)
    if word in ("<", ">", "=", "<=", ">=", "!="):
        mend = "A range is written  k from 1 to 3." if word == "=" else "Comparisons stand in assume."
        raise FormulaFault(f"a formula has no {word}.", mend, token.start())
    if before is None:
        return
    last = before.group()
    if _is_exponent_of_ten(before, token):
        raise FormulaFault(
            f"{last}{word} is not how a number is written here.",
            "Write a fraction such as 1/1000, or the digits in full, 0.001.",
            before.start(),
        )
    if last == "(" and word == ")":
        raise FormulaFault("nothing stands between these parentheses.", "Write what belongs there.", before.start())
    if last in ("*", "/") and word == "-":
        raise FormulaFault(f"{last} is followed by a sign.", f"Write {last}(-...).", token.start())
    if last == "!" and word == "!":
        raise FormulaFault("!! is not read.", "Write (n!)! for the factorial of a factorial.", token.start())
    _check_product(before, token)


def _is_exponent_of_ten(before: re.Match[str] | None, token: re.Match[str]) -> bool:
    """The e3 of 1e3 and the e of 1e-3."""
    if before is None or before.lastgroup != "number" or before.end() != token.start():
        return False
    return re.fullmatch(r"[eE][0-9]*", token.group()) is not None


_BETWEEN = ("from", "to", "in")


def _check_product(before: re.Match[str], token: re.Match[str]) -> None:
    last, word = before.group(), token.group()
    ends = before.lastgroup in ("number", "name") or last in (")", "!")
    begins = token.lastgroup in ("number", "name") or word == "("
    if not (ends and begins) or last in _BETWEEN or word in _BETWEEN:
        return
    if before.lastgroup == "name" and word == "(":
        return
    shown = f"Write {last}*{word}." if ")" not in last and word != "(" else "Put * between them."
    raise FormulaFault(f"{last} and {word} stand side by side.", shown, token.start())


def _check_name(source: str, token: re.Match[str]) -> None:
    word = token.group()
    opens = source[token.end() :].lstrip().startswith("(")
    if word == "e":
        raise FormulaFault("e is no number here.", "Write exp(1), or exp(x) for a power.", token.start())
    special = word in ("sum", "integral", "root", "rootsum", "O")
    if opens and word not in FUNCTIONS and not special and word not in _BETWEEN:
        raise FormulaFault(f"{word} is no function.", _nearest_function(word), token.start())
    if not opens and (word in FUNCTIONS or special):
        raise FormulaFault(f"{word} is a function's name.", f"Write {word}(...).", token.start())


_OTHER_NAMES = {
    "ln": "log(...)",
    "arcsin": "asin(...)",
    "arccos": "acos(...)",
    "arctan": "atan(...)",
    "fact": "n!",
    "factorial": "n!",
    "sgn": "it as a case of its own",
    "besselj": "bessel_J(n, x)",
    "besseli": "bessel_I(n, x)",
    "conjugate": "conj(...)",
}


def _nearest_function(word: str) -> str:
    from difflib import get_close_matches

    if word in _OTHER_NAMES:
        return f"Write {_OTHER_NAMES[word]}."
    close = get_close_matches(word, FUNCTIONS, n=1, cutoff=0.7)
    return f"Did you mean {close[0]}?" if close else f"For a product write {word}*(...)."


def _check_last(source: str, last: re.Match[str] | None) -> None:
    opened = source.count("(") - source.count(")")
    if opened > 0:
        raise FormulaFault(
            "a parenthesis is opened and not closed.", "Add ).", source.rfind("(")
        )
    if last is not None and last.group() in "+-*/^":
        raise FormulaFault(f"the formula ends with {last.group()}.", "Something is missing.", last.start())


def _unexpected(fault: UnexpectedInput, source: str) -> FormulaFault:
    at: int | None = getattr(fault, "pos_in_stream", None)
    at = len(source) if at is None else at
    shown = getattr(fault, "token", None)
    what = f"{shown} cannot stand here." if shown else "something is missing here."
    return FormulaFault(what, "", min(at, len(source)))


def parse_relations(source: str) -> tuple[tuple[Formula, str, Formula], ...]:
    """A comparison or a chain of them: "0 < x <= 1" gives (0, <, x) and (x, <=, 1)."""
    if len(source) > LONGEST:
        raise FormulaFault(f"this comparison has {len(source)} characters.", f"The longest read is {LONGEST}.")
    parts, ops, starts = _split(source)
    if not ops:
        raise FormulaFault("this is no comparison.", "Write one with < <= > >= != or =.")
    formulas = []
    for part, start in zip(parts, starts, strict=True):
        try:
            formulas.append(parse(part))
        except FormulaFault as fault:
            raise FormulaFault(fault.message, fault.mend, fault.position + start) from None
    return tuple((formulas[k], op, formulas[k + 1]) for k, op in enumerate(ops))


def _split(source: str) -> tuple[list[str], list[str], list[int]]:
    parts, ops, starts, begin, at = [], [], [0], 0, 0
    while at < len(source):
        op = next((c for c in COMPARISONS if source.startswith(c, at)), None)
        if op is None:
            at += 1
            continue
        parts.append(source[begin:at])
        ops.append(op)
        at += len(op)
        begin = at
        starts.append(begin)
    parts.append(source[begin:])
    return parts, ops, starts


__all__ = ["CONSTANTS", "FUNCTIONS", "ONE", "RESERVED", "parse", "parse_relations"]
