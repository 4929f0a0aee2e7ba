"""LaTeX -> tokens for the grammar: letters found by their spelling, delimiters paired, what cannot be read refused.

Nothing is expanded and no command is run: a command that does not stand in the tables below is refused by name.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from lark import Token

from derive.errors import FormulaFault
from derive.formula.grammar import DEEPEST, DIGITS, LONGEST, RESERVED
from derive.formula.latex_letters import FACES, GREEK, Letters, Raw, raw_tokens, unknown_name

FUNCTIONS = {
    **{f"\\{f}": f for f in ("exp", "log", "sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "Re", "Im")},
    "\\ln": "log", "\\arcsin": "asin", "\\arccos": "acos", "\\arctan": "atan",
}
SPELLED_OUT = {  # behind \operatorname, \mathrm and \text
    **{f: f for f in ("exp", "log", "sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "Re", "Im")},
    "ln": "log", "arcsin": "asin", "arccos": "acos", "arctan": "atan",
}
_HEADS = {
    "\\frac": ("FRAC", 2), "\\tfrac": ("FRAC", 2), "\\dfrac": ("FRAC", 2), "\\binom": ("BINOM", 2),
    "\\tbinom": ("BINOM", 2), "\\dbinom": ("BINOM", 2), "\\sqrt": ("SQRT", 1), "\\overline": ("CONJ", 1),
    "\\bar": ("CONJ", 1),
}
_SIGNS = {
    "+": "SIGN", "-": "SIGN", "*": "TIMES", "\\cdot": "TIMES", "\\times": "TIMES", "/": "SLASH", "!": "BANG",
    "=": "EQ", "\\sum": "SUM", "\\int": "INT",
}
_OPEN = {"(": ")", "[": "]", "\\{": "\\}", "\\lbrace": "\\rbrace", "\\lbrack": "\\rbrack"}
_SPECIAL = {"\\lvert": ("BAR_L", "\\rvert"), "\\lfloor": ("FLOOR_L", "\\rfloor")}
_SIZES = frozenset(f"\\{size}{side}" for size in ("big", "Big", "bigg", "Bigg") for side in ("", "l", "r", "m"))
_CONSTANTS = {
    "\\pi": "pi", "i": "i", "\\mathrm{i}": "i", "\\infty": "infinity", "\\gamma_E": "euler_gamma",
    "\\gamma_{\\mathrm{E}}": "euler_gamma", "\\gamma_{\\text{E}}": "euler_gamma", "\\iu": "i",
}
_ONLY_ONE = "Inside \\left ... \\right and braces, brackets come in pairs."


@dataclass
class _Scan:
    """The reading head: what was found, which delimiters are open, which arguments are still due."""

    raw: list[Raw]
    letters: Letters
    length: int
    out: list[Token] = field(default_factory=list)
    open: list[tuple[str, str, Raw]] = field(default_factory=list)  # (closing raw, closing kind, opening raw)
    due: list[int] = field(default_factory=lambda: [0])
    integrals: int = 0
    k: int = 0

    def put(self, kind: str, value: str, count: int = 1) -> None:
        first, last = self.raw[self.k], self.raw[self.k + count - 1]
        self.out.append(Token(kind, value, start_pos=first.at, end_pos=last.end))
        self.k += count

    def text(self, ahead: int = 0) -> str:
        return self.raw[self.k + ahead].text if self.k + ahead < len(self.raw) else ""

    def joined(self, count: int) -> str:
        return "".join(r.text for r in self.raw[self.k : self.k + count])


def scan(source: str, letters: Letters) -> list[Token]:
    """The tokens of a formula in LaTeX, or a `FormulaFault` that says what cannot be read and where."""
    if len(source) > LONGEST:
        raise FormulaFault(f"this formula has {len(source)} characters.", f"The longest read is {LONGEST}.")
    s = _Scan(raw_tokens(source), letters, len(source))
    if not s.raw:
        raise FormulaFault("there is no formula here.", "Write a number or a formula.")
    while s.k < len(s.raw):
        _next(s)
    if s.open:
        closing, _, at = s.open[-1]
        raise FormulaFault(f"{at.text} is opened and not closed.", f"Add {closing}.", at.at)
    return s.out


def _next(s: _Scan) -> None:
    """One token more."""
    readers: tuple[Callable[[_Scan], bool], ...] = (
        _sized, _opening, _closing, _script, _digits, _letter_or_constant, _function, _head, _sign,
    )
    if not any(reader(s) for reader in readers):
        raise _stray(s.raw[s.k])


def _stray(raw: Raw) -> FormulaFault:
    c = raw.text
    if c in ("&", "\\\\"):
        return FormulaFault(f"{c} lines up equations, and one formula stands here.", "Take it out.", raw.at)
    if c in ("<", ">", "\\le", "\\ge", "\\leq", "\\geq", "\\approx", "\\sim", "\\ne", "\\neq"):
        return FormulaFault(f"a formula has no {c}.", "Give the right-hand side alone.", raw.at)
    if c in ("\\pm", "\\mp"):
        return FormulaFault(f"{c} says two things at once.", "Write two claims, one with + and one with -.", raw.at)
    if c in (".", ","):
        return FormulaFault(f"{c} stands here without digits around it.", "Write 0.5 for a decimal.", raw.at)
    if c in ("\\over", "\\choose"):
        return FormulaFault(f"{c} is not read here.", "Write \\frac{...}{...} or \\binom{n}{k}.", raw.at)
    if c == "$":
        return FormulaFault("dollar signs are not needed here.", "Take them out.", raw.at)
    what = "the command" if c.startswith("\\") else "the character"
    return FormulaFault(f"{what} {c} is not read in a formula.", _served(c), raw.at)


def _served(c: str) -> str:
    from difflib import get_close_matches

    known = (*FUNCTIONS, *_HEADS, *_SIGNS, *(f"\\{g}" for g in sorted(GREEK)), *_SPECIAL, "\\left", "\\right")
    close = get_close_matches(c, [w for w in known if w.startswith("\\")], n=1, cutoff=0.75)
    return f"Did you mean {close[0]}?" if close else "Write it with the functions that  watchpot words  lists."


# delimiters


def _sized(s: _Scan) -> bool:
    """\\left, \\right and \\big say how tall a delimiter is, and nothing else."""
    word = s.text()
    if word not in ("\\left", "\\right") and word not in _SIZES:
        return False
    follows = s.text(1)
    known = (*_OPEN, *_OPEN.values(), *_SPECIAL, "\\rvert", "\\rfloor", "|", "\\vert", "/")
    if follows not in known:
        raise FormulaFault(f"{word} stands before no delimiter.", "Write \\left( ... \\right).", s.raw[s.k].at)
    if follows in ("|", "\\vert") and word[-1] in "tlr" and word not in ("\\big", "\\Big", "\\bigg", "\\Bigg"):
        opening = word == "\\left" or word.endswith("l")
        s.raw[s.k + 1] = Raw("\\lvert" if opening else "\\rvert", s.raw[s.k + 1].at, False)
    s.k += 1
    return True


def _opening(s: _Scan) -> bool:
    word, raw = s.text(), s.raw[s.k]
    if word == "[" and s.out and s.out[-1].type == "SQRT":
        return _open(s, "OPT_L", "]", "OPT_R", counts=False)
    if word == "{":
        return _open(s, "LBRACE", "}", "RBRACE")
    if word in _OPEN:
        return _open(s, "LPAR", _OPEN[word], "RPAR")
    if word in _SPECIAL:
        kind, closing = _SPECIAL[word]
        return _open(s, kind, closing, kind[:-1] + "R")
    if word in ("|", "\\vert") and not (s.open and s.open[-1][1] == "BAR" and _ends_factor(s.out[-1])):
        if s.open and any(kind == "BAR" for _, kind, _ in s.open):
            raise FormulaFault("which | closes which cannot be seen.", "Write \\lvert ... \\rvert.", raw.at)
        s.open.append((word, "BAR", raw))
        s.due.append(0)
        s.put("BAR_L", word)
        return True
    return False


def _ends_factor(token: Token) -> bool:
    return token.type in ("NUMBER", "LETTER", "CONST", "E", "RPAR", "RBRACE", "BANG", "STAR", "BAR_R", "FLOOR_R")


def _open(s: _Scan, kind: str, closing: str, closing_kind: str, counts: bool = True) -> bool:
    if len(s.open) >= DEEPEST:
        raise FormulaFault(f"more than {DEEPEST} brackets are open here.", "", s.raw[s.k].at)
    if counts and s.due[-1]:
        s.due[-1] -= 1
    s.open.append((closing, closing_kind, s.raw[s.k]))
    s.due.append(0)
    s.put(kind, s.text())
    return True


def _closing(s: _Scan) -> bool:
    word, raw = s.text(), s.raw[s.k]
    if s.open and s.open[-1][1] == "BAR" and word in ("|", "\\vert"):
        s.open.pop()
        s.due.pop()
        s.put("BAR_R", word)
        return True
    if word not in ("}", "\\rvert", "\\rfloor", *_OPEN.values()):
        return False
    if not s.open or s.open[-1][0] != word:
        wanted = f"{s.open[-1][0]} is due here." if s.open else "Nothing is open here."
        raise FormulaFault(f"{word} closes nothing.", f"{wanted} {_ONLY_ONE}", raw.at)
    if s.due[-1]:
        raise FormulaFault("something is missing before this bracket.", "", raw.at)
    _, kind, _ = s.open.pop()
    s.due.pop()
    s.put(kind, word)
    return True


# scripts and numbers


def _script(s: _Scan) -> bool:
    word = s.text()
    if word == "'":
        mend = "Name it under [symbols] with  latex = ..."
        raise FormulaFault("a prime is read only where it belongs to a letter.", mend, s.raw[s.k].at)
    if word not in ("^", "_"):
        return False
    if word == "^" and s.text(1) in ("*", "\\ast"):
        s.put("STAR", "*", 2)
        return True
    if s.text(1) in ("-", "+"):
        at = s.raw[s.k + 1]
        raise FormulaFault(f"{word}{at.text} takes the sign alone.", f"Write {word}{{{at.text}...}}.", at.at)
    if s.text(1) in ("(", "[", "\\left"):
        at = s.raw[s.k + 1]
        raise FormulaFault(f"{word}{at.text} takes the bracket alone.", f"Write {word}{{...}} with braces.", at.at)
    s.due[-1] = 1
    s.put("HAT" if word == "^" else "SUB", word)
    return True


def _digits(s: _Scan) -> bool:
    if not (s.text().isascii() and s.text().isdigit()):
        return False
    if s.due[-1]:
        _one_digit(s)
        return True
    count, point = 1, False
    while s.k + count < len(s.raw) and s.raw[s.k + count].tight:
        c = s.text(count)
        more = c == "." and not point and s.text(count + 1).isdigit() and s.raw[s.k + count + 1].tight
        if not more and not (c.isascii() and c.isdigit()):
            break
        point, count = point or more, count + 1
    if count > DIGITS:
        raise FormulaFault(f"this number has {count} digits.", f"At most {DIGITS} are read.", s.raw[s.k].at)
    s.put("NUMBER", s.joined(count), count)
    return True


def _one_digit(s: _Scan) -> None:
    """An argument without braces is a single digit; a second one glued to it may have been meant to belong."""
    s.due[-1] -= 1
    ends = not s.due[-1]
    following = s.raw[s.k + 1] if s.k + 1 < len(s.raw) else None
    if ends and following is not None and following.tight and following.text.isdigit():
        both = s.text() + following.text
        after = s.out[-1].value if s.out[-1].type in ("HAT", "SUB") else ""
        if after:
            message = f"{after}{both} can be read as {after}{{{s.text()}}} {following.text} or as {after}{{{both}}}."
            raise FormulaFault(message, f"Write {after}{{{both}}}.", s.raw[s.k].at)
        raise FormulaFault(f"which digits of this fraction belong below, {s.text()} or {both}, cannot be seen.",
                           "Write it with braces: \\frac{1}{23}.", s.raw[s.k].at)
    s.put("NUMBER", s.text())


# letters, constants, functions


def _letter_or_constant(s: _Scan) -> bool:
    if _differential(s):
        return True
    found = s.letters.at(s.raw, s.k)
    constant = _constant(s)
    called = found is not None and _looks_called(s, found[1])
    if found is not None and (constant or called):
        written = s.joined(found[1])
        what = f"the constant {constant[0]}" if constant else f"the function {_CALLED[s.text()]}"
        mend = f"Give the letter {found[0]} other LaTeX, or write a product with \\cdot."
        raise FormulaFault(f"{written} can be read as the letter {found[0]} or as {what}.", mend, s.raw[s.k].at)
    if found is not None:
        return _put_letter(s, *found)
    if constant:
        _one_argument(s, constant[1])
        kind = "E" if constant[0] == "e" else "CONST"
        s.put(kind, constant[0], constant[1])
        return True
    if s.text() in _CALLED and (s.text(1) == "_" or s.text(1) == "^" or _looks_called(s, 1)):
        return _called(s)
    word = s.text()
    if (len(word) == 1 and word.isascii() and word.isalpha()) or word.lstrip("\\") in GREEK:
        return _put_letter(s, *unknown_name(s.raw, s.k))
    return False


def _put_letter(s: _Scan, name: str, count: int) -> bool:
    if name in RESERVED:
        raise FormulaFault(f"{name} has a meaning of its own in formulas and is no letter.", "", s.raw[s.k].at)
    _one_argument(s, count)
    s.put("LETTER", name, count)
    return True


def _one_argument(s: _Scan, count: int) -> None:
    """An argument without braces is one token; a longer letter needs them."""
    if s.due[-1] and count > 1 and s.text() not in FACES:
        written = s.joined(count)
        raise FormulaFault(f"{written} needs braces here.", f"Write {{{written}}}.", s.raw[s.k].at)
    if s.due[-1]:
        s.due[-1] -= 1


def _constant(s: _Scan) -> tuple[str, int] | None:
    for count in (8, 4, 3, 1):
        if s.k + count <= len(s.raw) and s.joined(count) in _CONSTANTS:
            ends = s.k + count == len(s.raw) or s.raw[s.k + count].text != "_"
            return (_CONSTANTS[s.joined(count)], count) if ends else None
    count = 1 if s.text() in ("e", "\\eu") else 4 if s.joined(4) == "\\mathrm{e}" else 0
    return ("e", count) if count else None


_CALLED = {"J": "bessel_J", "I": "bessel_I", "K": "elliptic_K", "\\Gamma": "Gamma", "O": "O"}


def _looks_called(s: _Scan, count: int) -> bool:
    """Whether a letter that is also a function's name stands before a parenthesis."""
    if s.text() not in _CALLED or (s.text() in ("I", "J") and count == 1):
        return False
    at = count + (1 if s.text(count) in ("\\left", *_SIZES) else 0)
    return s.text(at) == "("


def _called(s: _Scan) -> bool:
    """J_n(x), I_n(x), K(m), \\Gamma(x), O(x)."""
    word = s.text()
    kind = {"J": "BESSEL", "I": "BESSEL", "O": "ORDER"}.get(word, "CALLED")
    if kind != "BESSEL" and s.text(1) in ("_", "^"):
        return _put_letter(s, *unknown_name(s.raw, s.k))
    if kind == "BESSEL" and s.text(1) != "_":
        return _put_letter(s, word, 1)
    s.put(kind, _CALLED[word])
    return True


def _differential(s: _Scan) -> bool:
    """The dx of an integral that is open."""
    upright = s.joined(4) == "\\mathrm{d}"
    if not s.integrals or not (upright or s.text() == "d"):
        return False
    count = 4 if upright else 1
    if not upright and s.letters.at(s.raw, s.k) is not None:
        mend = "Write \\mathrm{d}x for the differential."
        raise FormulaFault("d can be read as the letter d or as a differential.", mend, s.raw[s.k].at)
    s.integrals -= 1
    s.put("DIFF", "d", count)
    return True


def _function(s: _Scan) -> bool:
    word = s.text()
    if word in FUNCTIONS:
        s.put("FUNC", FUNCTIONS[word])
        return True
    if word in ("\\operatorname", "\\mathrm", "\\text", "\\mathit", "\\mathcal") and s.text(1) == "{":
        end = next((n for n in range(2, len(s.raw) - s.k) if s.text(n) == "}"), 0)
        name = "".join(s.text(n) for n in range(2, end))
        if name in SPELLED_OUT and word != "\\mathcal":
            s.put("FUNC", SPELLED_OUT[name], end + 1)
            return True
        if name == "O" and s.text(end + 1) in ("(", "\\left"):
            s.put("ORDER", "O", end + 1)
            return True
        if name.isalnum() and word != "\\mathcal":
            return _put_letter(s, name, end + 1)
    return False


def _head(s: _Scan) -> bool:
    word = s.text()
    if word not in _HEADS:
        return False
    kind, count = _HEADS[word]
    s.due[-1] = count
    s.put(kind, word)
    return True


def _sign(s: _Scan) -> bool:
    word = s.text()
    if word == "\\ast":
        word = "*"
    if word not in _SIGNS:
        return False
    if word == "\\int":
        s.integrals += 1
    s.put(_SIGNS[word], s.text())
    return True
