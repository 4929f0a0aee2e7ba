"""How a declared letter is written in LaTeX, and which letter a piece of LaTeX means.

A spelling is a tuple of raw tokens, `\\omega_{0}` being (`\\omega`, `_`, `0`).  A letter is read by its owner's
LaTeX; one without by its name as the report prints it (`omega_c` is `\\omega_c`, `ab` is `\\mathit{ab}`,
`\\mathrm{ab}` or plain `ab`).  A letter that has LaTeX of its own may be written by its name too, where that means
no other letter.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from itertools import product

from derive.errors import FormulaFault

GREEK = frozenset((
    "alpha", "beta", "gamma", "delta", "epsilon", "varepsilon", "zeta", "eta", "theta", "vartheta", "iota", "kappa",
    "lambda", "mu", "nu", "xi", "pi", "rho", "sigma", "tau", "upsilon", "phi", "varphi", "chi", "psi", "omega",
    "Gamma", "Delta", "Theta", "Lambda", "Xi", "Pi", "Sigma", "Upsilon", "Phi", "Psi", "Omega",
))
FACES = ("\\mathit", "\\mathrm", "\\text", "\\operatorname")
SPACES = frozenset((
    "\\,", "\\;", "\\:", "\\!", "\\ ", "~", "\\quad", "\\qquad", "\\thinspace", "\\displaystyle", "\\textstyle",
    "\\limits", "\\nolimits", "\\medspace", "\\thickspace",
))
_RAW = re.compile(r"\\[A-Za-z]+|\\.|\s+|.", re.DOTALL)
_NAME = re.compile(r"([A-Za-z]+?)(\d*)((?:_[A-Za-z0-9]+)*)_?")

Spelling = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Raw:
    """One raw token and where it begins; `tight`: nothing stands between it and the one before."""

    text: str
    at: int
    tight: bool

    @property
    def end(self) -> int:
        return self.at + len(self.text)


def raw_tokens(source: str) -> list[Raw]:
    """The raw tokens without spaces; braces around a single token of a script are left out."""
    found: list[Raw] = []
    tight = True
    for match in _RAW.finditer(source):
        word = match.group()
        if word.isspace() or word in SPACES:
            tight = False
            continue
        found.append(Raw(word, match.start(), tight))
        tight = True
    return list(_without_single_braces(found))


def _without_single_braces(found: list[Raw]) -> Iterator[Raw]:
    at = 0
    while at < len(found):
        yield found[at]
        scripted = found[at].text in ("_", "^") and at + 3 < len(found)
        if scripted and [found[at + 1].text, found[at + 3].text] == ["{", "}"] and found[at + 2].text not in "{}":
            inner, after = found[at + 2], found[at + 3]
            yield Raw(inner.text, inner.at, False)
            at += 4
            if at < len(found) and found[at].at == after.end:
                found[at] = Raw(found[at].text, found[at].at, False)  # {2}3 is not 23
        else:
            at += 1


@dataclass(frozen=True)
class Letters:
    """Spelling -> the letters it may mean (their printed form), and what else may be written."""

    printed: dict[Spelling, tuple[str, ...]] = field(default_factory=dict)
    other: dict[Spelling, tuple[str, ...]] = field(default_factory=dict)
    longest: int = 1

    def at(self, raw: list[Raw], k: int) -> tuple[str, int] | None:
        """(name, how many raw tokens) of the letter that begins at k; `FormulaFault` where two might be meant."""
        for count in range(min(self.longest, len(raw) - k), 0, -1):
            spelling = tuple(r.text for r in raw[k : k + count])
            names = self.printed.get(spelling) or self.other.get(spelling)
            if names and not (k + count < len(raw) and raw[k + count].text in ("_", "'")):
                self._one_meaning(raw, k, count, names)
                return names[0], count
        return None

    def _one_meaning(self, raw: list[Raw], k: int, count: int, names: tuple[str, ...]) -> None:
        written = "".join(r.text for r in raw[k : k + count])
        if len(names) > 1:
            raise FormulaFault(
                f"{written} can be read as {' or as '.join(names)}.", "Give each letter LaTeX of its own.", raw[k].at
            )
        parts = [self.printed.get((r.text,)) or (("i",) if r.text == "i" else None) for r in raw[k : k + count]]
        if count > 1 and all(parts):
            apart = "*".join(p[0] for p in parts if p)
            mend = f"Write \\mathrm{{{written}}} for the letter, or {' '.join(written)} with \\cdot for the product."
            raise FormulaFault(f"{written} can be read as {names[0]} or as {apart}.", mend, raw[k].at)


def letters_of(known: Mapping[str, str | None]) -> Letters:
    """Letters by name, each with its owner's LaTeX or None."""
    printed: dict[Spelling, list[str]] = {}
    other: dict[Spelling, list[str]] = {}
    for name, owner in known.items():
        own = tuple(r.text for r in raw_tokens(owner)) if owner else ()
        if own:
            printed.setdefault(own, []).append(name)
        for spelling in spellings(name):
            table = other if own else printed
            if name not in table.setdefault(spelling, []):
                table[spelling].append(name)
    longest = max((len(s) for s in (*printed, *other)), default=1)
    return Letters(_frozen(printed), _frozen(other), longest)


def _frozen(table: dict[Spelling, list[str]]) -> dict[Spelling, tuple[str, ...]]:
    return {spelling: tuple(names) for spelling, names in table.items()}


def spellings(name: str) -> Iterator[Spelling]:
    """How a name may be written: omega_c as \\omega_c, ab_max as \\mathrm{ab}_{\\mathrm{max}}."""
    match = _NAME.fullmatch(name)
    if match is None:
        return
    stem, digits, tail = match.groups()
    parts = ([digits] if digits else []) + [p for p in tail.split("_") if p]
    for base in _words(stem):
        if not parts:
            yield base
            continue
        for chosen in product(*(tuple(_words(p)) for p in parts)):
            for comma in ((), (",",)) if len(parts) > 1 else ((),):
                yield (*base, "_", *_braced(_joined(chosen, comma)))


def _words(part: str) -> Iterator[Spelling]:
    if part in GREEK:
        yield (f"\\{part}",)
        return
    yield tuple(part)
    if part.isalpha():
        for face in FACES:
            yield (face, "{", *part, "}")


def _joined(parts: Iterable[Spelling], comma: Spelling) -> Spelling:
    out: list[str] = []
    for k, part in enumerate(parts):
        out += [*(comma if k else ()), *part]
    return tuple(out)


def _braced(inner: Spelling) -> Spelling:
    return inner if len(inner) == 1 else ("{", *inner, "}")


def unknown_name(raw: list[Raw], k: int) -> tuple[str, int]:
    """(name, raw tokens) of an undeclared letter, with a plain subscript if it has one."""
    base = raw[k].text.lstrip("\\")
    count = 1
    if k + 1 < len(raw) and raw[k + 1].text == "_":
        inner, used = _script(raw, k + 2)
        base, count = f"{base}_{inner}", 2 + used
    if k + count < len(raw) and raw[k + count].text == "'":
        mend = f"Declare one under [symbols] with  latex = \"{raw[k].text}'\"."
        raise FormulaFault(f"no letter is written {raw[k].text}'.", mend, raw[k].at)
    return base, count


def _script(raw: list[Raw], k: int) -> tuple[str, int]:
    """A subscript's letters and digits, and how many tokens it takes."""
    if k >= len(raw):
        raise FormulaFault("nothing stands behind _.", "", raw[-1].at)
    if raw[k].text != "{":
        words, used = [raw[k]], 1
    else:
        end = next((n for n in range(k, len(raw)) if raw[n].text == "}" and _balanced(raw, k, n)), None)
        if end is None:
            raise FormulaFault("a brace is opened and not closed.", "Add }.", raw[k].at)
        words, used = raw[k + 1 : end], end - k + 1
    inner = "".join(w.text.lstrip("\\") for w in words if w.text not in (*FACES, "{", "}", ","))
    if not inner.isalnum():
        raise FormulaFault("this subscript is no name.", "Letters and digits name a letter: \\omega_{0}.", raw[k].at)
    return inner, used


def _balanced(raw: list[Raw], first: int, last: int) -> bool:
    inside = [r.text for r in raw[first : last + 1]]
    return inside.count("{") == inside.count("}")
