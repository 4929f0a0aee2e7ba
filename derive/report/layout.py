"""Formula -> boxes: signs, fractions, roots and fences as a person writes them.

`Layout(names).box(f)` is the one place where the look of a formula is decided; `names` gives the box of a letter
(see `derive.report.letters`).  `small` means inside a script, where fractions are written with a stroke.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction as Rational

from derive.formula.tree import Formula
from derive.report.arrange import arrange, ends_large, is_operator
from derive.report.boxes import (
    TIMES_DOT,
    Accent,
    Big,
    Box,
    Fence,
    Fraction,
    Mark,
    Root,
    Row,
    Script,
    Sign,
    Space,
    Stack,
    is_tall,
    listed,
    row,
)
from derive.report.factors import LARGE, Factors, is_divisor, moves_up, numbered, take_apart
from derive.report.letters import GREEK, named, operator_name, with_scripts

_WORDS = {
    **{w: w for w in ("log", "sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "Re", "Im")},
    "asin": "arcsin", "acos": "arccos", "atan": "arctan", "det": "det", "tr": "tr",
}
_RAISED = ("sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "log")
_SUBSCRIPTED = {"bessel_J": "J", "bessel_I": "I"}
_CONSTANTS: dict[str, Box] = {
    "i": Sign("i", "upright"),
    "pi": Sign("π", "letter"),
    "infinity": Sign("∞", "plain"),
    "euler_gamma": Script(Sign("γ", "letter"), sub=Sign("E", "upright")),
}
_BIG = {"sum": "∑", "integral": "∫", "rootsum": "∑"}


@dataclass(frozen=True)
class Layout:
    """Boxes for formulas whose letters are printed as `names` says.

    `marked` are terms and factors of the outermost formula to be underlined; inside them nothing is marked.
    """

    names: Mapping[str, Box]
    marked: frozenset[Formula] = frozenset()

    def box(self, f: Formula, small: bool = False) -> Box:
        """The box of f, arranged as a person writes it."""
        return self.of(arrange(f), small)

    def as_written(self, f: Formula, small: bool = False) -> Box:
        """The box of f in the order given."""
        return self.of(f, small)

    def of(self, f: Formula, small: bool = False) -> Box:
        if f.head in ("times", "number"):
            return self._signed(f, small)
        if f.head == "plus":
            return self._plus(f, small)
        if f.head == "power":
            return self._power(f, small)
        if f.head == "call":
            return self._call(f, small)
        return self._other(f, small)

    def _other(self, f: Formula, small: bool) -> Box:
        if f.head == "letter":
            return self.letter(f.args[0])
        if f.head == "constant":
            return _CONSTANTS[f.args[0]]
        if f.head == "operator":
            return operator_name(*f.args)
        if f.head == "order":
            return row(Sign("O", "letter"), _fence(self.of(f.args[0], small)))
        if f.head == "root":
            return self._root(f)
        return self._ranged(f, small)

    def letter(self, name: str) -> Box:
        return self.names.get(name) or named(name)

    # sums

    def _plus(self, f: Formula, small: bool) -> Box:
        return row(*(item for term in self.terms(f, small) for item in term))

    def terms(self, f: Formula, small: bool = False) -> list[tuple[Box, ...]]:
        """(sign, box) of each term; the first has no sign unless it is negative."""
        out: list[tuple[Box, ...]] = []
        terms = f.args if f.head == "plus" else (f,)
        inner = replace(self, marked=frozenset()) if len(terms) > 1 else self
        for n, term in enumerate(terms):
            negative, box = inner.unsigned(term, small)
            box = Mark(box) if inner is not self and term in self.marked else box
            if ends_large(term) and any(later.head != "order" for later in terms[n + 1 :]):
                box = _fence(box)
            if n == 0:
                out.append((Sign("−", "prefix"), box) if negative else (box,))
            else:
                out.append((Sign("−" if negative else "+", "binary"), box))
        return out

    def unsigned(self, f: Formula, small: bool = False) -> tuple[bool, Box]:
        """(is there a minus in front, the box of the rest)."""
        if f.head == "number":
            return f.args[0] < 0, _rational(abs(f.args[0]), small)
        if f.head != "times":
            return False, self.of(f, small)
        parts = take_apart(f)
        box = self._assembled(parts, small)
        lone_sum = parts.negative and len(f.args) == 2 and f.args[1].head == "plus"
        return parts.negative, _fence(box) if lone_sum and parts.front == 1 else box

    def _signed(self, f: Formula, small: bool) -> Box:
        negative, box = self.unsigned(f, small)
        return row(Sign("−", "prefix"), box) if negative else box

    # products

    def _assembled(self, parts: Factors, small: bool) -> Box:
        above, trailing = list(parts.above), list(parts.trailing)
        barred = bool(parts.below) or parts.front.denominator != 1
        if barred and (small or moves_up(parts)):
            above, trailing = above + trailing, []
        if not barred:
            return self._juxtaposed(numbered(parts.front.numerator, above + trailing), small)
        bar = self._barred(parts, above, small)
        if not trailing:
            return bar
        return _side_by_side([bar, *self._factors(trailing, small)])

    def _barred(self, parts: Factors, above: list[Formula], small: bool) -> Box:
        over = self._juxtaposed(numbered(parts.front.numerator, above), small)
        below = numbered(parts.front.denominator, parts.below)
        under = self._juxtaposed(below, small)
        if not small:
            return Fraction(over, under)
        if len(above) == 1 and above[0].head == "plus" and abs(parts.front.numerator) == 1:
            over = _fence(over)
        if len(below) > 1 or below[0].head == "plus":
            under = _fence(under)
        return row(over, Sign("/", "plain"), under)

    def _juxtaposed(self, factors: list[Formula], small: bool) -> Box:
        if len(factors) == 1 and not self.marked:
            return self.of(factors[0], small)
        return _side_by_side(self._factors(factors, small))

    def _factors(self, factors: list[Formula], small: bool) -> list[Box]:
        return [self._factor(a, small, n == len(factors) - 1) for n, a in enumerate(factors)]

    def _factor(self, f: Formula, small: bool, last: bool) -> Box:
        if self.marked:
            box = replace(self, marked=frozenset())._factor(f, small, last)
            return Mark(box) if f in self.marked else box
        box = self.of(f, small)
        loose = f.head in ("plus", "times") or (f.head in LARGE and not last)
        return _fence(box) if loose or (f.head == "number" and f.args[0] < 0) else box

    # powers

    def _power(self, f: Formula, small: bool) -> Box:
        base, exponent = f.args
        if is_divisor(f):
            return self._assembled(take_apart(f), small)
        if exponent.head == "number" and exponent.args[0] == Rational(1, 2):
            return Root(self.of(base))
        over = self.of(exponent, True)
        if base.head == "call" and base.args[0] in _RAISED and _is_count(exponent):
            return self._function(base, small, over)
        return with_scripts(self._base(base, small), None, over)

    def _base(self, f: Formula, small: bool) -> Box:
        box = self.of(f, small)
        tight = ("letter", "constant", "operator", "order")
        if f.head == "number":
            return box if f.args[0] >= 0 and f.args[0].denominator == 1 else _fence(box)
        if f.head in tight or (f.head == "call" and f.args[0] in ("abs", "floor", "Gamma", "binomial")):
            return box
        return _fence(box)

    # functions

    def _call(self, f: Formula, small: bool) -> Box:
        name, *args = f.args
        if name == "sqrt":
            return Root(self.of(args[0]))
        if name == "exp":
            return self._exponential(args[0], small)
        if name in ("abs", "floor"):
            left, right = ("|", "|") if name == "abs" else ("⌊", "⌋")
            inside = self.of(args[0], small)
            return Fence(left, inside, right, is_tall(inside))
        if name == "conj":
            return self._conjugate(args[0], small)
        if name == "factorial":
            return row(self._base(args[0], small), Sign("!", "plain"))
        if name == "binomial":
            return Stack(self.of(args[0], small), self.of(args[1], small))
        return self._function(f, small, None)

    def _exponential(self, f: Formula, small: bool) -> Box:
        inside = self.of(f, True)
        if is_tall(inside):
            return row(Sign("exp", "word"), _fence(self.of(f, small)))
        return Script(Sign("e", "upright"), sup=inside)

    def _conjugate(self, f: Formula, small: bool) -> Box:
        if is_operator(f):
            return with_scripts(self._base(f, small), None, Sign("∗", "plain"))
        return Accent("line", self.of(f, small))

    def _function(self, f: Formula, small: bool, exponent: Box | None) -> Box:
        """Name, exponent, argument; the argument goes without fences where it cannot be misread."""
        name, *args = f.args
        if name in _SUBSCRIPTED:
            head = with_scripts(Sign(_SUBSCRIPTED[name], "letter"), self.of(args.pop(0), True), exponent)
        else:
            head = with_scripts(_function_sign(name), None, exponent)
        boxes = [self.of(a, small) for a in args]
        if name in _RAISED and len(args) == 1 and _is_bare(args[0], small):
            return row(head, Space("word"), boxes[0])
        return row(head, _fence(listed(boxes)))

    # bound letters

    def _ranged(self, f: Formula, small: bool) -> Box:
        name = self.letter(f.args[0])
        body = self._summand(f.args[-1], small)
        if f.head == "rootsum":
            low = row(name, Sign(":", "relation"), self.of(f.args[1], True), Sign("=", "relation"),
                      Sign("0", "number"))
            return Big("∑", low, None, body)
        if f.head == "integral":
            body = row(body, Space("thin"), Sign("d", "upright"), name)
            return Big("∫", self.of(f.args[1], True), self.of(f.args[2], True), body)
        low = row(name, Sign("=", "relation"), self.of(f.args[1], True))
        return Big(_BIG[f.head], low, self.of(f.args[2], True), body)

    def _summand(self, f: Formula, small: bool) -> Box:
        """In fences where it is a sum, or where its minus would follow the large sign."""
        negative, _ = self.unsigned(f, small)
        box = self.of(f, small)
        return _fence(box) if negative or f.head == "plus" else box

    def _root(self, f: Formula) -> Box:
        """The n-th root of a polynomial, counted upwards from 1."""
        polynomial, name, index = f.args
        letter = self.letter(name)
        head = Script(Sign("root", "word"), sub=self.of(index, True))
        inside = row(letter, Sign(":", "relation"), self.of(polynomial), Sign("=", "relation"),
                     Sign("0", "number"))
        return row(head, Fence("{", inside, "}"))


def _rational(value: Rational, small: bool) -> Box:
    over, under = (Sign(str(part), "number") for part in (value.numerator, value.denominator))
    if value.denominator == 1:
        return over
    return row(over, Sign("/", "plain"), under) if small else Fraction(over, under)


def _side_by_side(boxes: list[Box]) -> Box:
    """Factors next to each other, with a dot where a digit would follow something."""
    out: list[Box] = []
    for n, box in enumerate(boxes):
        if n and _starts_with_digit(box):
            out.append(TIMES_DOT)
        elif n and (_is_function(box) or _is_function(boxes[n - 1])) and not isinstance(box, Fence):
            out.append(Space("word"))
        out.append(box)
    return row(*out)


def _starts_with_digit(box: Box) -> bool:
    if isinstance(box, Row):
        return bool(box.items) and _starts_with_digit(box.items[0])
    if isinstance(box, Script):
        return _starts_with_digit(box.base)
    return isinstance(box, Sign) and box.role == "number"


def _is_function(box: Box) -> bool:
    head = box.items[0] if isinstance(box, Row) and box.items else box
    if isinstance(head, Script):
        head = head.base
    return isinstance(head, Sign) and head.role == "word"


def _function_sign(name: str) -> Box:
    if name in _WORDS:
        return Sign(_WORDS[name], "word")
    if name in GREEK or len(name) == 1:
        return Sign(GREEK.get(name, name), "upright" if name == "Gamma" else "letter")
    if name == "elliptic_K":
        return Sign("K", "letter")
    return named(name) if "_" in name else Sign(name, "word")


def _is_bare(f: Formula, small: bool) -> bool:
    """An argument that needs no fences: one sign, or a plain fraction."""
    if small:
        return False
    if f.head in ("letter", "constant") or (f.head == "number" and f.args[0] >= 0):
        return True
    if f.head != "times":
        return False
    parts = take_apart(f)
    barred = bool(parts.below) or parts.front.denominator != 1
    return barred and not parts.negative and not parts.trailing


def _is_count(f: Formula) -> bool:
    return f.head == "number" and f.args[0].denominator == 1 and f.args[0] > 0


def _fence(box: Box) -> Box:
    return Fence("(", box, ")", is_tall(box))
