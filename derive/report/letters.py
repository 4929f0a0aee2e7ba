"""How a letter is printed: its owner's LaTeX where that is harmless, Greek where the name is Greek, else the name.

Owner's LaTeX is never passed through: it is read into boxes by a small grammar (letters, digits, primes, ^, _,
braces and the commands listed here) and printed from there.  What that grammar does not know falls back to the name.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from derive.problem.setting import Letter
from derive.report.boxes import Accent, Box, Fence, Row, Script, Sign, Words, is_tall, listed, row

GREEK: dict[str, str] = {
    "alpha": "α", "beta": "β", "gamma": "γ", "delta": "δ", "epsilon": "ϵ", "varepsilon": "ε", "zeta": "ζ",
    "eta": "η", "theta": "θ", "vartheta": "ϑ", "iota": "ι", "kappa": "κ", "lambda": "λ", "mu": "μ", "nu": "ν",
    "xi": "ξ", "pi": "π", "rho": "ρ", "sigma": "σ", "tau": "τ", "upsilon": "υ", "phi": "ϕ", "varphi": "φ",
    "chi": "χ", "psi": "ψ", "omega": "ω", "Gamma": "Γ", "Delta": "Δ", "Theta": "Θ", "Lambda": "Λ", "Xi": "Ξ",
    "Pi": "Π", "Sigma": "Σ", "Upsilon": "Υ", "Phi": "Φ", "Psi": "Ψ", "Omega": "Ω",
}
SYMBOLS: dict[str, str] = {
    "hbar": "ℏ", "ell": "ℓ", "infty": "∞", "dagger": "†", "prime": "′", "partial": "∂", "perp": "⊥",
    "parallel": "∥", "star": "⋆", "ast": "∗", "circ": "∘", "pm": "±",
}
SCRIPT = dict(zip("ABCDEFGHIJKLMNOPQRSTUVWXYZ", "𝒜ℬ𝒞𝒟ℰℱ𝒢ℋℐ𝒥𝒦ℒℳ𝒩𝒪𝒫𝒬ℛ𝒮𝒯𝒰𝒱𝒲𝒳𝒴𝒵", strict=True))
FACES = {"mathrm": "upright", "mathbf": "bold", "mathcal": "script", "mathit": "letter", "text": "words"}
ACCENTS = {"hat": "hat", "bar": "bar", "tilde": "tilde", "dot": "dot", "vec": "vec", "overline": "line"}
LONG_NAME = 3  # letters from which on a name is set upright
LONGEST = 80  # characters of an owner's LaTeX

_TOKEN = re.compile(r"\\[A-Za-z]+|[A-Za-z0-9]|[\^_{}'*+\-−,=()\[\]!]|\s+|\\[,;!]")
_DECIMAL = re.compile(r"(-?)([0-9]+\.[0-9]+)")
_PLAIN = re.compile(r"([A-Za-z]+?|[Α-ωϑϕϵ])(\d*)((?:_[A-Za-z0-9]+)*)_?")


class _Unknown(Exception):
    """The snippet uses something outside the small grammar."""


def names_of(letters: Iterable[Letter]) -> dict[str, Box]:
    """Letter name -> box, for all declared letters that are not printed by their bare name."""
    boxes: dict[str, Box] = {}
    for letter in letters:
        owner = snippet(letter.latex) if letter.latex else None
        boxes[letter.name] = owner or named(letter.name)
    return boxes


def named(name: str) -> Box:
    """A name as a person writes it: omega_c -> Greek omega with subscript c, g2 -> g with subscript 2."""
    match = _PLAIN.fullmatch(name)
    if match is None:
        return _measured(name) or _index(name)
    stem, digits, tail = match.groups()
    parts = ([digits] if digits else []) + [p for p in tail.split("_") if p]
    return Script(_stem(stem), sub=_subscript(parts)) if parts else _stem(stem)


def _measured(name: str) -> Box | None:
    """A decimal that stands in a sentence's formula, such as an exponent that was measured, to the letter."""
    match = _DECIMAL.fullmatch(name)
    if match is None:
        return None
    digits = Sign(match[2], "number")
    return row(Sign("−", "prefix"), digits) if match[1] else digits


def _stem(stem: str) -> Box:
    if stem in GREEK:
        return Sign(GREEK[stem], "letter")
    return Sign(stem, "letter" if len(stem) < LONG_NAME else "upright")


def _subscript(parts: list[str]) -> Box:
    return listed([_part(part) for part in parts], tight=True)


def _part(part: str) -> Box:
    if part.isdigit():
        return Sign(part, "number")
    if part in GREEK:
        return Sign(GREEK[part], "letter")
    if len(part) == 2 and part.isalpha():  # two indices side by side, such as ij
        return row(*(Sign(c, "letter") for c in part))
    return Sign(part, "letter" if len(part) == 1 else "upright")


def snippet(source: str) -> Box | None:
    """An owner's LaTeX as a box, or None where it holds anything but harmless notation."""
    if len(source) > LONGEST or not source.strip():
        return None
    try:
        reader = _Reader(list(_tokens(source)))
        box = reader.group()
        reader.expect_end()
    except (_Unknown, RecursionError):
        return None
    return None if box == Row(()) else box


def _tokens(source: str) -> Iterator[str]:
    at = 0
    while at < len(source):
        match = _TOKEN.match(source, at)
        if match is None:
            raise _Unknown(source[at])
        at = match.end()
        if not match.group().isspace():
            yield match.group()


@dataclass
class _Reader:
    """Reads tokens left to right; `at` is the next one."""

    tokens: list[str]
    at: int = 0

    def peek(self) -> str:
        return self.tokens[self.at] if self.at < len(self.tokens) else ""

    def take(self) -> str:
        token = self.peek()
        if not token:
            raise _Unknown("end")
        self.at += 1
        return token

    def expect_end(self) -> None:
        if self.peek():
            raise _Unknown(self.peek())

    def group(self) -> Box:
        """Atoms with their scripts, up to a closing brace or the end."""
        items: list[Box] = []
        while self.peek() and self.peek() != "}":
            items.append(self.scripted())
        return row(*items) if items else Row(())

    def scripted(self) -> Box:
        base, sub, sup = self.atom(), None, None
        while self.peek() in ("^", "_", "'"):
            mark = self.take()
            inside = Sign("′", "plain") if mark == "'" else self.atom()
            if mark == "_":
                sub = self.once(sub, inside)
            else:
                sup = self.once(sup, inside)
        return Script(base, sub, sup) if sub or sup else base

    def once(self, held: Box | None, new: Box) -> Box:
        if held is not None:
            raise _Unknown("double script")
        return new

    def atom(self) -> Box:
        token = self.take()
        if token == "{":
            box = self.group()
            if self.take() != "}":
                raise _Unknown("brace")
            return box
        if token.startswith("\\"):
            return self.command(token[1:])
        if token.isalpha():
            return Sign(token, "letter")
        if token.isdigit():
            return Sign(token, "number")
        if token in "+-−*=(),[]!":
            return Sign({"-": "−", "*": "∗"}.get(token, token), "plain")
        raise _Unknown(token)

    def command(self, name: str) -> Box:
        if name in GREEK:
            return Sign(GREEK[name], "letter")
        if name in SYMBOLS:
            return Sign(SYMBOLS[name], "plain")
        if name in ACCENTS:
            return Accent(ACCENTS[name], self.atom())
        if name in FACES:
            return self.face(FACES[name])
        if name in ("rangle", "langle"):
            return Sign({"rangle": "⟩", "langle": "⟨"}[name], "plain")
        if name in (",", ";", "!"):
            return Row(())
        raise _Unknown(name)

    def face(self, face: str) -> Box:
        """Letters in braces, in one face."""
        if self.take() != "{":
            raise _Unknown("brace")
        letters = ""
        while self.peek() != "}":
            token = self.take()
            if not token.isalnum():
                raise _Unknown(token)
            letters += token
        self.take()
        return _in_face(letters, face)


def _in_face(letters: str, face: str) -> Box:
    if not letters:
        raise _Unknown("empty")
    if face == "words":
        return Words(letters)
    if face == "script":
        if not all(c in SCRIPT for c in letters):
            raise _Unknown(letters)
        return row(*(Sign(SCRIPT[c], "script") for c in letters))
    return Sign(letters, face)


def operator_name(name: str, sub: int | str | None, dagger: bool) -> Box:
    """An operator's letter with its subscript and dagger; |psi> is a ket, <psi| a bra."""
    base = _ket(name, sub)
    if base is not None:
        return Script(base, sup=Sign("†", "plain")) if dagger else base
    base = named(name) if name.replace("_", "").isalnum() else _index(name)
    under = None if sub is None else _index(str(sub))
    over = Sign("†", "plain") if dagger else None
    return with_scripts(base, under, over)


def _ket(name: str, sub: int | str | None) -> Box | None:
    if len(name) < 3 or (name[0], name[-1]) not in (("|", ">"), ("<", "|")):
        return None
    inside = operator_name(name[1:-1], sub, False)
    return Fence("|", inside, "⟩") if name[0] == "|" else Fence("⟨", inside, "|")


def _index(text: str) -> Box:
    """Names and numbers with commas between, or a short expression such as k+1, or the text as it stands."""
    parts = text.split(",")
    if all(p.isalnum() and p.isascii() for p in parts):
        return _subscript(parts)
    return (None if " " in text else snippet(text)) or Words(text)


def with_scripts(base: Box, sub: Box | None, sup: Box | None) -> Box:
    """Scripts put on a base that may have scripts already; a clash puts the base in fences."""
    if sub is None and sup is None:
        return base
    if isinstance(base, Script):
        if not (base.sub and sub) and not (base.sup and sup):
            return Script(base.base, base.sub or sub, base.sup or sup)
        return Script(Fence("(", base, ")"), sub, sup)
    if isinstance(base, Row):
        return Script(Fence("(", base, ")", is_tall(base)), sub, sup)
    return Script(base, sub, sup)
