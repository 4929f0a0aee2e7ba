"""LaTeX -> formula, by a grammar of our own with the limits of the worksheet's.  Nothing is expanded or executed.

`parse_latex(r"\\tfrac45 g^2 \\tau", {"g": None, "tau": None})` gives a `Formula`.  Products need no sign; what can be
read in two ways is refused with both readings.  `latex_scan.py` makes the tokens, this grammar the shape,
`latex_rows.py` says what belongs to what in a product without signs.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Any

from lark import Lark, Token, Transformer
from lark.exceptions import UnexpectedInput, VisitError
from lark.lexer import Lexer

from derive.errors import FormulaFault
from derive.formula.grammar import DEEPEST, LARGEST_POWER, numeric_bits
from derive.formula.latex_letters import letters_of
from derive.formula.latex_rows import Piece, product_of
from derive.formula.latex_scan import scan
from derive.formula.tree import Formula, call, constant, inverse, negate, number, plus, power, times, walk

_GRAMMAR = r"""
?start: expr
expr: SIGN? row (SIGN row)*
row: piece+
?piece: post | function | bessel | called | order | summed | integrated | TIMES -> mark | SLASH -> mark
     | DIFF LETTER -> differential
post: atom suffix*
suffix: HAT arg -> raised | BANG -> factorial | STAR -> conjugated
?atom: NUMBER -> number | LETTER -> letter | CONST -> constant | E HAT arg -> exponential
     | FRAC arg arg -> fraction | SQRT arg -> root | SQRT OPT_L expr OPT_R arg -> nth_root
     | BINOM arg arg -> binomial | CONJ arg -> conjugate | LPAR expr RPAR -> paren
     | BAR_L expr BAR_R -> absolute | FLOOR_L expr FLOOR_R -> floor | LBRACE expr RBRACE -> group
arg: LBRACE expr RBRACE -> group | NUMBER -> number | LETTER -> letter | CONST -> constant
     | FRAC arg arg -> fraction | SQRT arg -> root
function: FUNC | FUNC HAT arg | FUNC SUB arg
bessel: BESSEL SUB arg (HAT arg)? | BESSEL HAT arg SUB arg -> bessel_raised
called: CALLED
order: ORDER
summed: SUM SUB LBRACE LETTER EQ expr RBRACE HAT arg | SUM HAT arg SUB LBRACE LETTER EQ expr RBRACE -> summed_top
integrated: INT SUB arg HAT arg | INT HAT arg SUB arg -> integrated_top
%declare SIGN TIMES SLASH DIFF LETTER NUMBER CONST E HAT SUB BANG STAR FRAC SQRT OPT_L OPT_R BINOM CONJ LPAR RPAR
%declare BAR_L BAR_R FLOOR_L FLOOR_R LBRACE RBRACE FUNC BESSEL CALLED ORDER SUM INT EQ
"""


class _Ready(Lexer):
    """The tokens come ready from `scan`."""

    def __init__(self, lexer_conf: object):
        pass

    def lex(self, data: list[Token]) -> Iterator[Token]:  # type: ignore[override]
        return iter(data)


def _checked(f: Formula) -> Formula:
    """f, unless it nests too deeply; asked at every bracket, so that no walk of ours recurses further."""
    if f.depth > DEEPEST:
        raise FormulaFault(f"this formula nests {f.depth} deep.", f"The deepest read is {DEEPEST}.")
    return f


class _Builder(Transformer[Token, Any]):
    """Formulas and pieces of rows from grammar rules; each method is one alternative of the grammar."""

    def expr(self, c: list[Any]) -> Formula:
        signed = c if isinstance(c[0], Token) else [None, *c]
        pairs = [(signed[k], signed[k + 1]) for k in range(0, len(signed), 2)]
        return _checked(plus(*(negate(f) if s is not None and s == "-" else f for s, f in pairs)))

    def row(self, c: list[Any]) -> Formula:
        return _checked(product_of(c))

    def mark(self, c: list[Any]) -> Piece:
        return Piece(str(c[0].type), c[0].start_pos, c[0].end_pos)

    def differential(self, c: list[Any]) -> Piece:
        return Piece("DIFF", c[0].start_pos, c[1].end_pos, name=str(c[1]))

    # atoms: (formula, kind, start, end), kept as pieces until their row is complete

    def number(self, c: list[Any]) -> Piece:
        return Piece("NUMBER", _start(c[0]), _end(c[0]), number(Fraction(str(c[0]))), str(c[0]))

    def letter(self, c: list[Any]) -> Piece:
        span = (c[0].start_pos, c[0].end_pos)
        return _atom("LETTER", Formula("letter", (str(c[0]),), span), c)

    def constant(self, c: list[Any]) -> Piece:
        return _atom("ATOM", constant(str(c[0])), c)

    def exponential(self, c: list[Any]) -> Piece:
        return _atom("EXP", call("exp", c[2].formula), c)

    def fraction(self, c: list[Any]) -> Piece:
        over, under = c[1].formula, c[2].formula
        plain = over.head == "number" and under.head == "number"
        if under.head == "number" and under.args[0] == 0:
            raise FormulaFault("this divides by zero.", "Write a denominator that is not 0.", c[2].start)
        return _atom("FRACTION" if plain else "ATOM", times(over, inverse(under)), c)

    def root(self, c: list[Any]) -> Piece:
        return _atom("ATOM", call("sqrt", c[1].formula), c)

    def nth_root(self, c: list[Any]) -> Piece:
        degree = c[2]
        if degree.head == "number" and degree.args[0] == 0:
            raise FormulaFault("there is no root of degree 0.", "", c[1].start_pos)
        return _atom("ATOM", power(c[4].formula, inverse(degree)), c)

    def binomial(self, c: list[Any]) -> Piece:
        return _atom("ATOM", call("binomial", c[1].formula, c[2].formula), c)

    def conjugate(self, c: list[Any]) -> Piece:
        return _atom("ATOM", call("conj", c[1].formula), c)

    def paren(self, c: list[Any]) -> Piece:
        return _atom("PAREN", c[1], c)

    def group(self, c: list[Any]) -> Piece:
        return _atom("ATOM", c[1], c)

    def absolute(self, c: list[Any]) -> Piece:
        return _atom("ATOM", call("abs", c[1]), c)

    def floor(self, c: list[Any]) -> Piece:
        return _atom("ATOM", call("floor", c[1]), c)

    def raised(self, c: list[Any]) -> Piece:
        return Piece("raised", c[0].start_pos, c[1].end, c[1].formula)

    def factorial(self, c: list[Any]) -> Piece:
        return Piece("factorial", c[0].start_pos, c[0].end_pos)

    def conjugated(self, c: list[Any]) -> Piece:
        return Piece("conjugated", c[0].start_pos, c[0].end_pos)

    def post(self, c: list[Any]) -> Piece:
        atom, *suffixes = c
        if not suffixes:
            return atom
        return _with_suffixes(atom, suffixes)

    # functions and large signs: heads, whose arguments the row finds

    def function(self, c: list[Any]) -> Piece:
        raised = c[2].formula if len(c) > 1 and c[1].type == "HAT" else None
        base = c[2].formula if len(c) > 1 and c[1].type == "SUB" else None
        if base is not None and c[0] != "log":
            raise FormulaFault(f"{c[0]} has no subscript.", "Take it out.", c[1].start_pos)
        return Piece("FUNC", c[0].start_pos, _end(c[-1]), raised, str(c[0]), base)

    def bessel(self, c: list[Any]) -> Piece:
        raised = c[4].formula if len(c) > 3 else None
        return Piece("CALLED", c[0].start_pos, _end(c[-1]), raised, str(c[0]), c[2].formula)

    def bessel_raised(self, c: list[Any]) -> Piece:
        return Piece("CALLED", c[0].start_pos, _end(c[-1]), c[2].formula, str(c[0]), c[4].formula)

    def called(self, c: list[Any]) -> Piece:
        return Piece("CALLED", c[0].start_pos, c[0].end_pos, None, str(c[0]))

    def order(self, c: list[Any]) -> Piece:
        return Piece("CALLED", c[0].start_pos, c[0].end_pos, None, "O")

    def summed(self, c: list[Any]) -> Piece:
        return Piece("SUM", c[0].start_pos, _end(c[-1]), c[5], str(c[3]), c[8].formula)

    def summed_top(self, c: list[Any]) -> Piece:
        return Piece("SUM", c[0].start_pos, _end(c[-1]), c[7], str(c[5]), c[2].formula)

    def integrated(self, c: list[Any]) -> Piece:
        return Piece("INT", c[0].start_pos, _end(c[-1]), c[2].formula, "", c[4].formula)

    def integrated_top(self, c: list[Any]) -> Piece:
        return Piece("INT", c[0].start_pos, _end(c[-1]), c[4].formula, "", c[2].formula)


def _atom(kind: str, f: Formula, c: list[Any]) -> Piece:
    return Piece(kind, _start(c[0]), _end(c[-1]), _checked(f))


def _start(c: Token | Piece) -> int:
    return c.start if isinstance(c, Piece) else c.start_pos or 0


def _end(c: Token | Piece) -> int:
    return c.end if isinstance(c, Piece) else c.end_pos or 0


def _with_suffixes(atom: Piece, suffixes: list[Piece]) -> Piece:
    f = atom.formula
    if f is None:
        raise TypeError("an atom without a formula")
    for k, suffix in enumerate(suffixes):
        before = suffixes[k - 1].kind if k else ""
        if suffix.kind == "raised" and before == "raised":
            raise FormulaFault("two exponents stand on one another.", "Write x^{2^3} or (x^2)^3.", suffix.start)
        if suffix.kind == "factorial" and before == "raised":
            mend = "Write (n^2)! or n^{2!}."
            raise FormulaFault("which of base and exponent ! belongs to cannot be seen.", mend, suffix.start)
        if suffix.kind == "factorial" and before == "factorial":
            raise FormulaFault("!! is not read.", "Write (n!)! for the factorial of a factorial.", suffix.start)
        f = _suffixed(f, suffix)
    kind = "RAISED_PAREN" if atom.kind == "PAREN" else "ATOM"
    return Piece(kind, atom.start, suffixes[-1].end, _checked(f), base=atom.formula)


def _suffixed(f: Formula, suffix: Piece) -> Formula:
    if suffix.kind == "factorial":
        return call("factorial", f)
    if suffix.kind == "conjugated" or suffix.formula is None:
        return call("conj", f)
    if f.head == "number" and f.args[0] == 0 and suffix.formula.head == "number" and suffix.formula.args[0] < 0:
        raise FormulaFault("this divides by zero.", "Write a denominator that is not 0.", suffix.start)
    return power(f, suffix.formula)


_parser = Lark(_GRAMMAR, parser="lalr", lexer=_Ready, maybe_placeholders=False, transformer=_Builder())


def parse_latex(source: str, letters: Mapping[str, str | None]) -> Formula:
    """The formula that `source` says; `letters` are the declared ones with their owner's LaTeX, if any.

    A letter that is not declared is read by its plain name; whoever asked refuses it.  Spans count in `source`.
    """
    tokens = scan(source, letters_of(letters))
    try:
        f: Formula = _parser.parse(tokens)  # type: ignore[assignment]
    except UnexpectedInput as fault:
        raise _unexpected(fault, tokens, source) from None
    except VisitError as fault:
        raise fault.orig_exc from None
    for node in walk(f):
        if node.head == "power" and numeric_bits(node) > LARGEST_POWER:
            raise FormulaFault("this power is too large to be a number.", "Write a smaller exponent.")
    return f


def _unexpected(fault: UnexpectedInput, tokens: list[Token], source: str) -> FormulaFault:
    token = getattr(fault, "token", None)
    at = getattr(token, "start_pos", None)
    if token is None or token.type == "$END" or at is None:
        last = tokens[-1]
        if last.type == "E":
            return FormulaFault("e is read only with its exponent.", "Write e^{x}, or \\exp(x).", last.start_pos or 0)
        what = source[last.start_pos : last.end_pos]
        return FormulaFault(f"something is missing behind {what}.", "", last.start_pos or 0)
    what = source[token.start_pos : token.end_pos]
    before = next((t for t in reversed(tokens) if t.end_pos is not None and t.end_pos <= at), None)
    if token.type == "CONST" and token == "i" and before is not None and before.type == "LBRACE":
        return FormulaFault("i is the imaginary unit and is not summed over.", "Sum over another letter.", at)
    if token.type == "SUB":
        return FormulaFault("a subscript stands where no letter has one.", "Write \\omega_{0} for a letter.", at)
    if before is not None and before.type in ("E",):
        return FormulaFault("e is read only with its exponent.", "Write e^{x}, or \\exp(x).", before.start_pos or 0)
    if before is not None and before.type in ("SIGN", "TIMES", "SLASH") and token.type in ("SIGN", "TIMES", "SLASH"):
        return FormulaFault(f"{before} is followed by {what}.", "Put what has a sign in parentheses.", at)
    return FormulaFault(f"{what} cannot stand here.", "", at)
