"""One value at a time: numbers, formulas, words, tables.  Each reader takes (path, value), gives the value as
understood or None after having added a fault, and never raises for what a user wrote."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from derive.errors import FormulaFault, NotCovered
from derive.exact.field import Field
from derive.formula.grammar import parse, parse_relations
from derive.formula.text import text
from derive.formula.tree import Formula, bound_letter, free_letters, number, walk
from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Domain, Letter, Relation
from derive.worksheet.faults import Faults, near
from derive.worksheet.keys import TOP, Key
from derive.worksheet.plain import (
    Decimal,
    decimal_text,
    divides_by_zero,
    is_control,
    key_names,
    long_or_short,
    name_fault,
    one_line,
    plain_number,
    plainly_exact,
    rational,
    refuse_decimal,
    shown,
    start_of,
)
from derive.worksheet.positions import Path
from derive.worksheet.size import too_large

LONGEST_TEXT = 2_000
_COMPARISON = re.compile(r"<=|>=|!=|<|>|=")
LONGEST_INTEGER = 1_000  # digits, as in a formula


_EXACT_SECTIONS = (("graph",), ("detector",), ("start",))
_NO_MATRIX = (("graph", "singular"), ("graph", "band"))
_EXACT_FORMS = "Served: + - * / and whole powers, square roots, exp(i*...), sin, cos, conj, Re, Im."


@dataclass(frozen=True)
class Use:
    """A feature that a worksheet uses, where, and, if it stands in a topic's table, in whose."""

    feature: str
    path: Path
    topic: str | None = None


def _keeps_tau_out(path: Path) -> bool:
    """Places of H, of the detector's vectors and of the start; a step given directly and an efficiency may have tau."""
    head, *rest = path
    if head == "graph":
        return rest[:1] != ["step"]
    return head == "start" or (head == "detector" and "states" in rest)


def bringing_along(name: str) -> list[str]:
    """Quantities whose formulas have that letter of themselves, the plainest first."""
    plain = ("survival probability", "detection probability", "generating function")
    found = [about for about, spec in QUANTITIES.items() if name in spec.brings]
    return sorted(found, key=lambda about: about not in plain)


@dataclass
class Reader:
    """What every part of the reading shares: the faults so far and the letters declared.

    `letters` is None while [symbols] itself could not be read: then no letter is reported as undeclared.
    """

    faults: Faults
    letters: dict[str, Letter] | None = field(default_factory=dict)
    domains: dict[str, Domain] = field(default_factory=dict)
    uses: list[Use] = field(default_factory=list)
    _read: dict[tuple[str, frozenset[str]], Formula] = field(default_factory=dict)

    def use(self, feature: str, path: Path, topic: str | None = None) -> None:
        """Note a feature that not every topic serves."""
        self.uses.append(Use(feature, path, topic))

    def table(self, path: Path, value: Any, keys: Iterable[Key], what: str) -> dict[str, Any] | None:
        """`value` as a table whose keys are all known; unknown ones are faults and left out."""
        if not isinstance(value, Mapping):
            self.faults.add(
                path, f"{shown(value)} stands here, where {what} is a table.", f"Its keys: {key_names(keys)}."
            )
            return None
        known = {k.name for k in keys}
        out = {}
        for key, inner in value.items():
            if key in known:
                out[str(key)] = inner
            else:
                mend = near(str(key), known) or f"The keys here: {key_names(keys)}."
                if len(path) > 0 and str(key) in {k.name for k in TOP}:
                    mend = f"{key} is a section of its own: write it as [{key}], or above the first section."
                self.faults.add_key((*path, str(key)), f"{what} has no key {shown(str(key))}.", mend)
        return out

    def text(self, path: Path, value: Any, what: str) -> str | None:
        """Words: not empty, without control characters other than line ends and tabs."""
        if not isinstance(value, str) or isinstance(value, Decimal):
            self.faults.add(path, f"{shown(value)} stands here, where {what} is text.", "Write it in quotes.")
            return None
        if not value.strip():
            self.faults.add(path, f"{what} is empty.", "Write a few words, or take the line out.")
            return None
        if len(value) > LONGEST_TEXT:
            self.faults.add(path, f"{what} has {len(value)} characters.", f"At most {LONGEST_TEXT} are read.")
            return None
        bad = next((k for k, c in enumerate(value) if is_control(c)), None)
        if bad is not None:
            self.faults.add(path, f"{what} holds the control character {value[bad]!r}.", "Take it out.", bad)
            return None
        return value

    def choice(self, path: Path, value: Any, options: Iterable[str], what: str) -> str | None:
        options = list(options)
        if isinstance(value, str) and value in options:
            return value
        mend = near(value, options) if isinstance(value, str) else ""
        one_of = " or ".join([", ".join(options[:-1]), options[-1]] if len(options) > 1 else options)
        self.faults.add(
            path, f"{shown(value)} is not known as {what}.", (mend + " " if mend else "") + f"It is {one_of}."
        )
        return None

    def boolean(self, path: Path, value: Any, what: str) -> bool | None:
        if isinstance(value, bool):
            return value
        self.faults.add(path, f"{shown(value)} stands here, where {what} is true or false.", "Write true or false.")
        return None

    def integer(self, path: Path, value: Any, what: str, low: int, high: int) -> int | None:
        """A whole number from low to high; a formula that is one will do."""
        got = self._whole(path, value, what)
        if got is None:
            return None
        if not low <= got <= high:
            mend = f"The least is {low}." if got < low else f"The most is {high:,}."
            self.faults.add(path, f"{what} is {long_or_short(got)}.", mend)
            return None
        return got

    def _whole(self, path: Path, value: Any, what: str) -> int | None:
        if isinstance(value, int) and not isinstance(value, bool):
            return value
        if isinstance(value, (str, Formula)) and not isinstance(value, Decimal):
            f = None if self._has_letters(value) else self.formula(path, value)
            q = rational(f) if f is not None else None
            if q is not None and q.denominator == 1:
                return q.numerator
            if f is None and not self._has_letters(value):
                return None  # told already
            self.faults.add(path, f"{what} is a whole number, and {shown(value)} is not.", "Write digits.")
            return None
        self.refuse_value(path, value, f"{what} is a whole number.", "Write digits, without quotes.")
        return None

    def _has_letters(self, value: str | Formula) -> bool:
        """Whether a formula that can be read has letters in it, declared or not."""
        try:
            f = value if isinstance(value, Formula) else parse(one_line(value))
        except FormulaFault:
            return False
        return bool(free_letters(f))

    def refuse_value(self, path: Path, value: Any, otherwise: str, mend: str) -> None:
        """Say why this value cannot be a number: a decimal, nan, a truth value, a date, a table, a list."""
        decimal = decimal_text(value)
        if decimal is not None:
            self.faults.add(path, *refuse_decimal(decimal))
        else:
            self.faults.add(path, f"{shown(value)} stands here; {otherwise}", mend)

    def formula(self, path: Path, value: Any, brings: Iterable[str] = (), finite: bool = True) -> Formula | None:
        """An exact number or a formula in declared letters, tau and the letters in `brings`.

        What is measured does not depend on how often it is asked: no tau in H, in a start, in a detector's vectors.
        """
        f = self._formula(path, value, brings, finite)
        if f is None or f.head == "number" or not _keeps_tau_out(path) or "tau" not in free_letters(f):
            return f
        node = next(n for n in walk(f) if n.head == "letter" and n.args[0] == "tau")
        message = "tau is the time between two asks; what stands here does not depend on it."
        self.faults.add(path, message, "Declare a letter of its own under [symbols].", start_of(node, 0))
        return None

    def _formula(self, path: Path, value: Any, brings: Iterable[str], finite: bool) -> Formula | None:
        if isinstance(value, Formula):
            return self._checked(path, value, frozenset(brings), finite)
        if isinstance(value, int) and not isinstance(value, bool):
            if abs(value) >= 10**LONGEST_INTEGER:
                self.faults.add(path, "this number is too long.", f"At most {LONGEST_INTEGER} digits are read.")
                return None
            return number(value)
        if not isinstance(value, str) or isinstance(value, Decimal):
            self.refuse_value(
                path, value, "a number or a formula is wanted.", 'Write 9, or a formula in quotes: "1/3".'
            )
            return None
        plain = plain_number(value)
        if plain is not None:
            return plain
        key = (value, frozenset(brings))
        if key in self._read and finite:
            return self._read[key]
        try:
            f = parse(one_line(value))
        except FormulaFault as fault:
            self.faults.add(path, fault.message, fault.mend, fault.position)
            return None
        checked = self._checked(path, f, frozenset(brings), finite)
        if checked is not None and finite:
            self._read[key] = checked
            if path[:1] in _EXACT_SECTIONS and path[:2] not in _NO_MATRIX:
                self._check_exact_form(path, checked)
        return checked

    def _check_exact_form(self, path: Path, f: Formula) -> None:
        """A matrix element or an amplitude that no exact field here holds cannot be derived with."""
        if all(plainly_exact(n) for n in walk(f)):
            return
        try:
            Field.of([f], self.domains).element(f)
        except NotCovered as why:
            self.faults.not_served(path, f"no exact algebra here holds it: {why}.", _EXACT_FORMS)
        except ZeroDivisionError:
            self.faults.add(path, "this divides by zero.", "Write a denominator that is not 0.")

    def _checked(self, path: Path, f: Formula, brings: frozenset[str], finite: bool, shift: int = 0) -> Formula | None:
        """f if all is well with its letters; `shift` is where its text begins in the string at `path`."""
        before = len(self.faults.found)
        large = too_large(f)
        if large is not None:
            self.faults.add(path, f"{large}.", "Lower its powers, or give the long part a letter of its own.")
            return None
        self._check_letters(path, f, brings, shift)
        self._check_bound(path, f, frozenset(), brings)
        ends = {id(node.args[2]) for node in walk(f) if node.head in ("sum", "integral")}
        for node in walk(f):
            if node.head == "order":
                self.faults.add(path, "O(...) belongs in holds, not in a formula.", "Take it out.")
            if finite and node.head == "constant" and node.args[0] == "infinity" and id(node) not in ends:
                mend = "It may be the upper end of a sum or an integral."
                self.faults.add(path, "infinity is no value here.", mend, start_of(node, shift))
            if node.head == "power" and divides_by_zero(node, self.domains):
                self.faults.add(
                    path, f"this divides by {text(node.args[0])}, which is zero.", "", start_of(node.args[0], shift)
                )
        return f if len(self.faults.found) == before else None

    def _check_letters(self, path: Path, f: Formula, brings: frozenset[str], shift: int) -> None:
        if self.letters is None:
            return
        for name in sorted(free_letters(f)):
            if name != "tau" and name not in self.letters and name not in brings:
                node = next(n for n in walk(f) if n.head == "letter" and n.args[0] == name)
                self.faults.add(path, *self.undeclared(name), start_of(node, shift))

    def undeclared(self, name: str) -> tuple[str, str]:
        """Message and mend for a letter that nobody declared."""
        declared = ", ".join(self.letters or ())
        known = f"Declared so far: {declared}." if declared else "None is declared so far."
        known_names = [*(self.letters or ()), "tau", "i", "pi"]
        close = near(name, known_names) if len(name) > 1 or name.lower() in known_names else ""
        mend = f'Add  {name} = "positive"  (or "real", "complex") under [symbols]. {known}'
        bringing = bringing_along(name)
        mend += f" It comes by itself with {bringing[0]} and the like, not here." if bringing else ""
        return f"the letter {name} is not declared.", (close + " " if close else "") + mend

    def _check_bound(self, path: Path, f: Formula, outside: frozenset[str], brings: frozenset[str]) -> None:
        stack = [(f, outside)]
        while stack:
            node, around = stack.pop()
            name = bound_letter(node)
            if name is not None:
                if name in (self.letters or ()) or name in around or name in brings or name == "tau":
                    self.faults.add(path, f"{name} is bound here and already has a meaning.", "Bind another letter.")
                around = around | {name}
            stack.extend((a, around) for a in node.args if isinstance(a, Formula))

    def formulas(self, path: Path, value: Any, what: str, most: int = 10_000) -> tuple[Formula, ...] | None:
        """A list of formulas."""
        if not self.is_list(path, value, what, most):
            return None
        read = [self.formula((*path, k), v) for k, v in enumerate(value)]
        return None if None in read else tuple(f for f in read if f is not None)

    def is_list(self, path: Path, value: Any, what: str, most: int) -> bool:
        if not isinstance(value, (list, tuple)):
            self.faults.add(
                path, f"{shown(value)} stands here, where {what} is a list.", "Write it in brackets: [...]."
            )
            return False
        if len(value) > most:
            self.faults.add(path, f"{what} has {len(value):,} entries.", f"At most {most:,} are read.")
            return False
        return True

    def relations(self, path: Path, value: Any, brings: Iterable[str] = ()) -> tuple[Relation, ...]:
        """A list of comparisons; chains are taken apart."""
        if not self.is_list(path, value, "assume", 1_000):
            return ()
        out: list[Relation] = []
        for k, inner in enumerate(value):
            out.extend(self.relation((*path, k), inner, frozenset(brings)))
        return tuple(out)

    def relation(self, path: Path, value: Any, brings: frozenset[str]) -> list[Relation]:
        """A comparison or a chain of them."""
        if not isinstance(value, str) or isinstance(value, Decimal):
            self.faults.add(path, f"{shown(value)} is no comparison.", 'Write one in quotes: "Delta < 2*g".')
            return []
        value = one_line(value)
        try:
            parts = parse_relations(value)
        except FormulaFault as fault:
            self.faults.add(path, fault.message, fault.mend, fault.position)
            return []
        out = []
        starts = [0, *(m.end() for m in _COMPARISON.finditer(value))]
        for k, (left, op, right) in enumerate(parts):
            a = self._checked(path, left, brings, True, starts[k])
            b = self._checked(path, right, brings, True, starts[k + 1])
            if a is not None and b is not None:
                out.append(Relation(a, op, b))
        if not any(free_letters(x) for left, _, right in parts for x in (left, right)):
            self.faults.add(path, "this comparison has no letter in it.", "Take it out.")
        return out


__all__ = [
    "Decimal",
    "Reader",
    "Use",
    "decimal_text",
    "divides_by_zero",
    "name_fault",
    "rational",
    "refuse_decimal",
    "shown",
]
