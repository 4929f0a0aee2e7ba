"""What belongs to what in a row of LaTeX: products without signs, functions and the sign of division.

One reading is taken, and only where there is one.  A function's argument is what stands in the parenthesis behind it,
or the single thing there if nothing but another function, an exponential, a sign or the end follows; a stroke
divides by the single thing behind it if a sign or the end follows.  Everything else is shown in both readings and
refused.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from derive.errors import FormulaFault
from derive.formula.text import text
from derive.formula.tree import Formula, call, inverse, number, order, power, times

MOST_LARGE = 40  # sums and integrals in one row
BESIDE = ("NUMBER", "LETTER", "ATOM", "FRACTION", "PAREN", "RAISED_PAREN")
PLACED = (*BESIDE, "EXP")
HEADS = ("FUNC", "CALLED", "SUM", "INT")


@dataclass(frozen=True, slots=True)
class Piece:
    """One thing in a row.  `formula` of a head is its exponent or lower limit, `base` its index or upper limit."""

    kind: str
    start: int
    end: int
    formula: Formula | None = None
    name: str = ""
    base: Formula | None = None


def product_of(pieces: Sequence[Piece]) -> Formula:
    """The formula that a row of pieces says."""
    if sum(p.kind in ("SUM", "INT") for p in pieces) > MOST_LARGE:
        raise FormulaFault(f"more than {MOST_LARGE} sums stand in one product.", "Use parentheses.", pieces[0].start)
    return _Row(tuple(pieces)).product(len(pieces))


class _Row:
    """Reads pieces from left to right."""

    def __init__(self, pieces: tuple[Piece, ...]):
        self.pieces = pieces
        self.at = 0

    def peek(self, ahead: int = 0) -> str:
        k = self.at + ahead
        return self.pieces[k].kind if k < len(self.pieces) else "END"

    def product(self, end: int) -> Formula:
        """Everything up to `end`, with each stroke dividing by one thing."""
        factors: list[Formula] = []
        due = ""
        while self.at < end:
            piece = self.pieces[self.at]
            if piece.kind in ("TIMES", "SLASH"):
                if due or not factors:
                    raise FormulaFault("nothing stands before this sign.", "Something is missing.", piece.start)
                due, self.at = piece.kind, self.at + 1
                continue
            if piece.kind == "DIFF":
                raise FormulaFault("this differential belongs to no integral.", "Take it out.", piece.start)
            self._neighbours(piece, bool(due) or not factors)
            factors.append(self._divisor(factors) if due == "SLASH" else self.factor())
            due = ""
        if due or not factors:
            last = self.pieces[min(self.at, len(self.pieces)) - 1]
            mend = "Something is missing; what has a sign of its own goes into parentheses."
            raise FormulaFault("the product ends with its sign.", mend, last.start)
        return times(*factors)

    def _neighbours(self, piece: Piece, first: bool) -> None:
        """Numbers side by side, a whole number before a fraction, and a number behind a letter."""
        if first or self.at == 0:
            return
        before = self.pieces[self.at - 1]
        if before.kind not in PLACED or before.formula is None or piece.formula is None:
            return
        here, there = piece.name or text(piece.formula), before.name or text(before.formula)
        if before.kind == "NUMBER" and piece.kind == "NUMBER":
            raise _two(f"{there} {here}", f"{there}{here}", f"{there}*{here}", "Write one number, or \\cdot.", piece)
        if before.kind == "NUMBER" and piece.kind == "FRACTION":
            mend = "Write \\cdot for the product, + for the sum."
            raise _two(f"{there} before {here}", f"{there} + {here}", f"{there}*{here}", mend, piece)
        if before.kind == "LETTER" and piece.kind == "NUMBER":
            mend = f"Write {here} {there} for the product."
            raise _two(f"{there}{here}", f"{there}*{here}", f"the letter {there}_{here}", mend, piece)

    def _divisor(self, factors: list[Formula]) -> Formula:
        """1/(the one thing behind the stroke)."""
        first = self.pieces[self.at]
        if first.kind in ("SUM", "INT"):
            raise FormulaFault("a stroke before a large sign leaves its end open.", "Use parentheses.", first.start)
        f = self.factor()
        if self.peek() in (*PLACED, *HEADS):
            product = times(*factors)
            following = self._shown_next()
            one, other = times(product, inverse(f), following), times(product, inverse(times(f, following)))
            mend = "Write \\frac{...}{...}, or parentheses."
            raise _two("this quotient", text(one), text(other), mend, first)
        return _inverse(f, first)

    def _shown_next(self) -> Formula:
        """What stands next, as well as it can be shown."""
        piece = self.pieces[self.at]
        if piece.kind in PLACED and piece.formula is not None:
            return piece.formula
        keep = self.at
        f = self.factor()
        self.at = keep
        return f

    def factor(self) -> Formula:
        """One factor, a head with its argument included."""
        piece = self.pieces[self.at]
        self.at += 1
        if piece.kind == "FUNC":
            return self._function(piece)
        if piece.kind == "CALLED":
            return self._called(piece)
        if piece.kind == "SUM":
            return self._sum(piece)
        if piece.kind == "INT":
            return self._integral(piece)
        if piece.formula is None:
            raise FormulaFault("this cannot stand here.", "", piece.start)
        return piece.formula

    def _function(self, head: Piece) -> Formula:
        argument = self.pieces[self.at] if self.at < len(self.pieces) else None
        if argument is None or argument.kind not in PLACED or argument.formula is None:
            mend = f"Write \\{head.name}(x)."
            raise FormulaFault(f"{head.name} has no argument that can be seen.", mend, head.start)
        inner = argument.formula
        if argument.kind == "RAISED_PAREN" or (argument.base is not None and argument.kind == "ATOM"):
            raise self._raised_argument(head, argument)
        self.at += 1
        if argument.kind != "PAREN" and self.peek() in (*BESIDE, "SLASH"):
            raise self._open_argument(head, inner)
        return _applied(head, inner)

    def _raised_argument(self, head: Piece, argument: Piece) -> FormulaFault:
        """\\sin x^2 and \\sin(x)^2."""
        inner, bare = argument.formula, argument.base
        if inner is None or bare is None or inner.head != "power":
            mend = f"Write \\{head.name}(...) with everything that belongs to it."
            return FormulaFault(f"what belongs to {head.name} cannot be seen.", mend, argument.start)
        one, other = _applied(head, inner), power(_applied(head, bare), inner.args[1])
        mend = f"Write \\{head.name}(...) with the power inside, or \\{head.name}^{{{text(inner.args[1])}}}(...)."
        return _two("this function", text(one), text(other), mend, argument)

    def _open_argument(self, head: Piece, inner: Formula) -> FormulaFault:
        """\\sin x y, \\sin 2x and \\sin x/y."""
        start = self.pieces[self.at].start
        divided = self.peek() == "SLASH"
        following = self.pieces[self.at + 1] if divided and self.at + 1 < len(self.pieces) else self.pieces[self.at]
        more = following.formula or number(1)
        if following.kind in HEADS:
            mend = f"Write \\{head.name}(...)."
            return FormulaFault(f"where the argument of {head.name} ends cannot be seen.", mend, start)
        more = inverse(more) if divided and more != number(0) else more
        one, other = times(_applied(head, inner), more), _applied(head, times(inner, more))
        return _two("this function", text(one), text(other), f"Write \\{head.name}(...) around its argument.", head)

    def _called(self, head: Piece) -> Formula:
        """J_n(x), \\Gamma(x), K(m), O(x): the parenthesis belongs to the name."""
        argument = self.pieces[self.at] if self.at < len(self.pieces) else None
        if argument is None or argument.kind not in ("PAREN", "RAISED_PAREN") or argument.formula is None:
            raise FormulaFault(f"{_shown(head)} stands without its argument.", "Write it in parentheses.", head.start)
        self.at += 1
        inside, suffix = argument.formula, None
        if argument.kind == "RAISED_PAREN":
            if argument.base is None or inside.head != "power" or head.formula is not None:
                raise FormulaFault("which power is meant cannot be seen.", "Write J_0^2(x).", argument.start)
            inside, suffix = argument.base, inside.args[1]
        if head.name == "O":
            return order(inside)
        args = (head.base, inside) if head.base is not None else (inside,)
        f = call(head.name, *args)
        raised = suffix if suffix is not None else head.formula
        if raised is not None and suffix is None and raised == number(-1):
            raise _minus_one(head, f)
        return f if raised is None else power(f, raised)

    def _sum(self, head: Piece) -> Formula:
        """The sum's body goes to the end of the row."""
        if self.at == len(self.pieces) or head.formula is None or head.base is None:
            raise FormulaFault("nothing stands behind this sum.", "", head.start)
        if head.name == "i":
            raise FormulaFault("i is the imaginary unit.", "Sum over another letter.", head.start)
        body = self.product(len(self.pieces))
        return Formula("sum", (head.name, head.formula, head.base, body))

    def _integral(self, head: Piece) -> Formula:
        """The integrand goes to its own differential; integrals inside it have theirs first."""
        open_, end = 1, self.at
        while end < len(self.pieces):
            open_ += {"INT": 1, "DIFF": -1}.get(self.pieces[end].kind, 0)
            if not open_:
                break
            end += 1
        else:
            mend = "Write \\int_a^b (...) \\, dx, a sum in parentheses."
            raise FormulaFault("this integral has no differential.", mend, head.start)
        variable = self.pieces[end].name
        body = self.product(end) if end > self.at else number(1)
        self.at = end + 1
        if head.formula is None or head.base is None:
            raise FormulaFault("this integral has no limits.", "Write \\int_a^b.", head.start)
        return Formula("integral", (variable, head.formula, head.base, body))


def _applied(head: Piece, inner: Formula) -> Formula:
    f = call(head.name, inner)
    if head.base is not None:
        return times(f, inverse(call("log", head.base)))
    if head.formula is None:
        return f
    if head.formula == number(-1):
        raise _minus_one(head, f)
    return power(f, head.formula)


def _minus_one(head: Piece, f: Formula) -> FormulaFault:
    inner = {"sin": "asin", "cos": "acos", "tan": "atan"}.get(head.name)
    inside = f.args[-1]
    other = text(call(inner, inside)) if inner else f"the inverse function of {head.name}"
    return _two("the power -1 of a function", f"1/{text(f)}", other, "Write \\frac{1}{...}, or \\arcsin.", head)


def _inverse(f: Formula, piece: Piece) -> Formula:
    if f.head == "number" and f.args[0] == 0:
        raise FormulaFault("this divides by zero.", "Write a denominator that is not 0.", piece.start)
    return inverse(f)


def _shown(head: Piece) -> str:
    return {"bessel_J": "J", "bessel_I": "I", "elliptic_K": "K"}.get(head.name, head.name)


def _two(what: str, one: str, other: str, mend: str, where: Piece) -> FormulaFault:
    return FormulaFault(f"{what} can be read as {_cut(one)} or as {_cut(other)}.", mend, where.start)


def _cut(shown: str) -> str:
    return shown if len(shown) <= 80 else shown[:77] + "..."
