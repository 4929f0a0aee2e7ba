"""Plain facts about values: how they are shown, which are numbers, which are refused as decimals."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from fractions import Fraction
from typing import Any

from derive.exact.zero import vanishes
from derive.formula.grammar import RESERVED
from derive.formula.text import text
from derive.formula.tree import Formula, number, walk
from derive.problem.setting import Domain
from derive.worksheet.keys import Key


class Decimal(str):
    """A decimal as written without quotes; kept as text so that nothing is rounded before it is refused."""


def start_of(node: Formula, shift: int = 0) -> int | None:
    """Where in its text a node begins: its own span, or that of its first part that has one."""
    spans = [n.span[0] for n in walk(node) if n.span is not None]
    return min(spans) + shift if spans else None


def one_line(written: str) -> str:
    """A formula over several lines, with blanks for its line ends; every position stays."""
    return written.replace("\n", " ").replace("\r", " ")


_NUMBER = re.compile(r"-?[0-9]{1,15}(/0*[1-9][0-9]{0,14}|\.[0-9]{1,15})?")


def plain_number(written: str) -> Formula | None:
    """A plain number, read without the grammar: edge files are full of them."""
    return number(Fraction(written)) if _NUMBER.fullmatch(written) else None


def plainly_exact(f: Formula) -> bool:
    """Polynomials in letters and i have a place in every exact field."""
    return f.head in ("number", "letter", "plus", "times") or (f.head == "constant" and f.args[0] == "i")


def is_control(c: str) -> bool:
    return (ord(c) < 32 and c not in "\n\t\r") or ord(c) == 127 or 0xD800 <= ord(c) < 0xE000


def key_names(keys: Iterable[Key]) -> str:
    return ", ".join(k.name for k in keys)


def long_or_short(value: int) -> str:
    """An integer, or how long it is."""
    return str(value) if abs(value) < 10**30 else "a number of more than 30 digits"


def shown(value: Any) -> str:
    """What stands there, in a few characters."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Decimal):
        return str(value)
    if isinstance(value, str):
        cut = value if len(value) <= 40 else value[:37] + "..."
        return cut if cut.isprintable() and cut.strip() == cut and cut else ascii(cut)
    if isinstance(value, int):
        return long_or_short(value)
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, (list, tuple)):
        return "a list"
    if isinstance(value, Formula):
        return text(value)[:40]
    if isinstance(value, (float, Fraction)):
        return str(value)
    if type(value).__module__ == "datetime":
        return f"the date or time {value}"
    return f"a value of type {type(value).__name__}"


def decimal_text(value: Any) -> str | None:
    """The digits of a decimal given without quotes, in a worksheet or in Python; else None."""
    if isinstance(value, Decimal):
        return str(value)
    if isinstance(value, float) or type(value).__name__ in ("float64", "float32", "float16", "longdouble"):
        return repr(float(value))
    return None


def refuse_decimal(written: str) -> tuple[str, str]:
    """Message and mend for a decimal without quotes."""
    plain = written.replace("_", "").lstrip("+")
    if not re.fullmatch(r"-?[0-9]+(\.[0-9]+)?([eE][-+]?[0-9]+)?", plain):
        return f"{written} is no number that can be computed with.", 'Write a number such as 9 or "1/3".'
    exponent = re.search(r"[eE]([-+]?[0-9]+)", plain)
    message = f"{written} is a decimal without quotes, and decimals are rounded."
    if exponent and (len(exponent[1]) > 4 or abs(int(exponent[1])) > 60 or len(plain) > 100):
        return message, 'Write an exact number in quotes, such as "1/50" or "10^80".'
    exact = Fraction(plain)
    if exponent or "." not in plain or exact.denominator == 1:
        return message, f"Write {exact.numerator}." if exact.denominator == 1 else f'Write "{exact}".'
    return message, f'Write "{exact}", or "{plain}" in quotes, which is exactly {exact}.'


def divides_by_zero(node: Formula, domains: Mapping[str, Domain]) -> bool:
    """node = base^-n with a base that is zero whatever its letters are."""
    base, exponent = node.args
    if exponent.head != "number" or exponent.args[0] >= 0 or base.head == "letter":
        return False
    return vanishes(base, domains) is True


def rational(f: Formula) -> Fraction | None:
    """The value of a formula made of rational numbers alone by + * ^, else None."""
    if f.head == "number":
        return Fraction(f.args[0])
    if f.head in ("plus", "times"):
        out = Fraction(0 if f.head == "plus" else 1)
        for a in f.args:
            q = rational(a)
            if q is None:
                return None
            out = out + q if f.head == "plus" else out * q
        return out
    if f.head == "power":
        return _rational_power(rational(f.args[0]), rational(f.args[1]))
    return None


def _rational_power(base: Fraction | None, exponent: Fraction | None) -> Fraction | None:
    if base is None or exponent is None or exponent.denominator != 1 or abs(exponent) > 10_000:
        return None
    bits = max(abs(base.numerator), base.denominator).bit_length()
    if (base == 0 and exponent < 0) or bits * abs(exponent) > 200_000:
        return None
    return Fraction(base**exponent.numerator)


def name_fault(name: str) -> tuple[str, str] | None:
    """Why `name` cannot be a letter, or None."""
    if not re.fullmatch(r"[A-Za-z][A-Za-z0-9_]*", name):
        return f"{shown(name)} cannot be a letter.", "A letter is a Latin letter, then letters, digits or _."
    if len(name) > 40:
        return f"{shown(name)} is too long for a letter.", "At most 40 characters."
    if name in RESERVED:
        return f"{name} already has a meaning in formulas.", f"Name it otherwise, for instance {name}_0."
    return None
