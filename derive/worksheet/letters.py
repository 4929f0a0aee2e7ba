"""[symbols]: letters and their domains; and whether a number lies in a domain or keeps a relation."""

from __future__ import annotations

import cmath
import re
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.formula.tree import Formula, free_letters
from derive.problem.setting import Domain, Letter
from derive.worksheet.faults import near
from derive.worksheet.keys import DOMAINS, LETTER
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, name_fault, rational, shown

MOST_LETTERS = 200
_PLAIN = ("real", "positive", "nonnegative", "complex", "integer")
_INTEGER_FROM = re.compile(r"integer\s*>=\s*(-?[0-9]{1,12})")
_INTERVAL = re.compile(r"in\s*([(\[])([^,]*),([^,]*)([)\]])")


def read_letters(r: Reader, value: Any) -> None:
    """Fill r.letters and r.domains from [symbols]."""
    path: Path = ("symbols",)
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where symbols is a table.", 'Write  symbols.g = "positive".')
        r.letters = None
        return
    if len(value) > MOST_LETTERS:
        r.faults.add(path, f"{len(value)} letters are declared.", f"At most {MOST_LETTERS} are read.")
        r.letters = None
        return
    letters: dict[str, Letter] = {}
    for name, inner in value.items():
        read = _letter(r, (*path, str(name)), str(name), inner)
        if read is not None:
            letters[str(name)] = read
    r.letters = letters
    r.domains = {"tau": Domain("positive", "positive"), **{n: x.domain for n, x in letters.items()}}


def _letter(r: Reader, path: Path, name: str, value: Any) -> Letter | None:
    """A letter; where only its domain is faulty it still counts as declared, so that nothing else complains."""
    fault = name_fault(name)
    if fault is not None:
        r.faults.add_key(path, *fault)
        return None
    latex = None
    if isinstance(value, Mapping):
        table = r.table(path, value, LETTER, f"the letter {name}") or {}
        if "latex" in table:
            latex = _latex(r, (*path, "latex"), table["latex"])
        if "domain" not in table:
            r.faults.add(path, f"the letter {name} has no domain.", 'Add  domain = "real".')
            return Letter(name, Domain("real", "real"), latex)
        path, value = (*path, "domain"), table["domain"]
    domain = _domain(r, path, value)
    if domain is not None and name == "tau" and domain.kind != "positive":
        r.faults.add(
            path,
            "tau is the interval's own letter and positive.",
            'Take the line out; a relation such as "g*tau < 1" belongs in assume.',
        )
    return Letter(name, domain or Domain("real", "real"), latex)


def _latex(r: Reader, path: Path, value: Any) -> str | None:
    """How a letter is printed: what the report's small grammar does not know is refused, not left out."""
    from derive.report.letters import LONGEST, snippet

    latex = r.text(path, value, "latex")
    if latex is None or snippet(latex) is not None:
        return latex
    mend = f"Known: letters, digits, Greek, ^, _, braces, \\hat, \\bar, \\mathrm{{...}}; at most {LONGEST} characters."
    r.faults.add(path, f"{shown(latex)} is no letter that can be printed.", mend)
    return None


def _domain(r: Reader, path: Path, value: Any) -> Domain | None:
    if not isinstance(value, str):
        r.faults.add(path, f"{shown(value)} is no domain.", f"Write one in quotes: {_domains()}.")
        return None
    said = " ".join(value.split())
    if said in _PLAIN:
        return Domain(said, value, low=parse_number(0) if said == "nonnegative" else None)
    whole = _INTEGER_FROM.fullmatch(said)
    if whole:
        return Domain("integer", value, low=parse_number(int(whole[1])))
    interval = _INTERVAL.fullmatch(said)
    if interval:
        return _interval(r, path, value, interval)
    mend = near(said, _PLAIN)
    r.faults.add(
        path, f"{shown(value)} is not known as a domain.", (mend + " " if mend else "") + f"Known: {_domains()}."
    )
    return None


def _domains() -> str:
    return ", ".join(f'"{d}"' for d in DOMAINS)


def parse_number(value: int) -> Formula:
    from derive.formula.tree import number

    return number(value)


def _interval(r: Reader, path: Path, value: str, found: re.Match[str]) -> Domain | None:
    ends = []
    for part in (found[2], found[3]):
        try:
            ends.append(parse(part))
        except FormulaFault as fault:
            r.faults.add(path, f"{shown(part.strip())} is no end of an interval: {fault.message}", fault.mend)
            return None
    if any(free_letters(e) for e in ends):
        r.faults.add(path, "an end of an interval is a number.", "Relations between letters belong in assume.")
        return None
    low, high = (approx_value(e, {}) for e in ends)
    if low is None or high is None or low.imag or high.imag or not low.real < high.real:
        r.faults.add(path, "this interval holds no number.", 'Write the lower end first: "in (0, 1]".')
        return None
    return Domain("interval", value, ends[0], ends[1], found[1] == "(", found[4] == ")")


def lies_outside(q: Formula, domain: Domain) -> bool:
    """True where the number q is certainly not in the domain.  Close calls are left to exact reading later on."""
    value = approx_value(q, {})
    if value is None:
        return False
    if domain.kind == "complex":
        return False
    if abs(value.imag) > 1e-9 * (1 + abs(value)):
        return True
    exact = rational(q)
    if domain.kind == "integer" and exact is not None and exact.denominator != 1:
        return True
    return _below(exact, value.real, domain) or _above(exact, value.real, domain)


def _below(exact: Fraction | None, value: float, domain: Domain) -> bool:
    zero_open = domain.kind == "positive"
    low = Fraction(0) if domain.kind in ("positive", "nonnegative") else None
    if domain.low is not None:
        low, zero_open = rational(domain.low), domain.low_open
        if low is None:
            return _clearly(approx_value(domain.low, {}), value)
    if low is None:
        return False
    if exact is not None:
        return exact < low or (zero_open and exact == low)
    return value < float(low) - 1e-9


def _above(exact: Fraction | None, value: float, domain: Domain) -> bool:
    if domain.high is None:
        return False
    high = rational(domain.high)
    if high is None or exact is None:
        end = approx_value(domain.high, {})
        return end is not None and value > end.real + 1e-9
    return exact > high or (domain.high_open and exact == high)


def _clearly(end: complex | None, value: float) -> bool:
    return end is not None and value < end.real - 1e-9


def approx_value(f: Formula, at: Mapping[str, complex]) -> complex | None:
    """A double near f, good enough to refuse a number that is far out of its domain; None where not known."""
    try:
        return _approx(f, at)
    except (ArithmeticError, ValueError, KeyError, TypeError):
        return None


def _approx(f: Formula, at: Mapping[str, complex]) -> complex:
    if f.head == "number":
        return complex(f.args[0].numerator / f.args[0].denominator)
    if f.head == "letter":
        return complex(at[f.args[0]])
    if f.head == "constant":
        known = {"i": 1j, "pi": cmath.pi, "euler_gamma": 0.5772156649015329, "infinity": cmath.inf}
        return complex(known[f.args[0]])
    if f.head in ("plus", "times"):
        out: complex = 0 if f.head == "plus" else 1
        for a in f.args:
            out = out + _approx(a, at) if f.head == "plus" else out * _approx(a, at)
        return out
    if f.head == "power":
        return complex(_approx(f.args[0], at) ** _approx(f.args[1], at))
    if f.head == "call":
        return _approx_call(f, at)
    raise KeyError(f.head)


def _approx_call(f: Formula, at: Mapping[str, complex]) -> complex:
    name, *args = f.args
    values = [_approx(a, at) for a in args]
    simple = {"abs": abs, "Re": lambda z: z.real, "Im": lambda z: z.imag, "conj": lambda z: z.conjugate()}
    if name in simple:
        return complex(simple[name](values[0]))
    if name in ("sqrt", "exp", "log", "sin", "cos", "tan", "sinh", "cosh", "tanh", "asin", "acos", "atan"):
        return complex(getattr(cmath, name)(values[0]))
    raise KeyError(name)
