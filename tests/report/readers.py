"""Readers of printed mathematics, for tests only: LaTeX and MathML back to a value.

Written from the standards alone (LaTeX's \\frac, \\sqrt, scripts; MathML Core elements), they share nothing with
the printing code.  They know arithmetic, roots, powers and the functions in `FUNCTIONS`.
"""

from __future__ import annotations

import re
from xml.etree import ElementTree

import sympy

FUNCTIONS = {name: getattr(sympy, name) for name in ("sin", "cos", "tan", "sinh", "cosh", "tanh", "log", "exp")}
GREEK = {"alpha": "α", "gamma": "γ", "kappa": "κ", "phi": "ϕ", "tau": "τ", "Delta": "Δ", "Omega": "Ω", "pi": "π"}
CHARS = {char: name for name, char in GREEK.items()}


def symbol(name: str) -> sympy.Expr:
    return {"pi": sympy.pi, "i": sympy.I}.get(name) or sympy.Symbol(name, positive=True)


class Stream:
    """Items to be read from left to right; `reading` gives (kind, value) of one item."""

    def __init__(self, items: list):
        self.items, self.at = items, 0

    def peek(self):
        return self.items[self.at] if self.at < len(self.items) else ("end", None)

    def take(self):
        item = self.peek()
        self.at += 1
        return item


def total(stream: Stream) -> sympy.Expr:
    """term (+|-) term ...; stops at a closing fence or the end."""
    value, sign = sympy.Integer(0), 1
    if stream.peek() in (("op", "-"), ("op", "+")):
        sign = -1 if stream.take()[1] == "-" else 1
    while True:
        value += sign * product(stream)
        if stream.peek() not in (("op", "-"), ("op", "+")):
            return value
        sign = -1 if stream.take()[1] == "-" else 1


def product(stream: Stream) -> sympy.Expr:
    value = factor(stream)
    while True:
        kind, what = stream.peek()
        if (kind, what) == ("op", "/"):
            stream.take()
            value /= factor(stream)
        elif (kind, what) == ("op", "."):
            stream.take()
            value *= factor(stream)
        elif kind in ("value", "function", "open"):
            value *= factor(stream)
        else:
            return value


def factor(stream: Stream) -> sympy.Expr:
    kind, what = stream.take()
    if kind == "function":
        name, power = what
        return FUNCTIONS[name](factor(stream)) ** power
    if kind == "value":
        return what
    assert kind == "open", (kind, what)
    value = total(stream)
    assert stream.take()[0] == "close"
    power = stream.peek()
    if power[0] == "power":
        stream.take()
        return value ** power[1]
    return value


# MathML


def read_mathml(source: str) -> sympy.Expr:
    root = ElementTree.fromstring(source)
    return total(Stream(_flat(list(root))))


def _flat(elements: list) -> list:
    items: list = []
    for e in elements:
        if e.tag in ("mrow", "math"):
            items.extend(_flat(list(e)))
        elif e.tag == "mo":
            items.append(_sign(e.text))
        elif e.tag == "mi" and e.text in FUNCTIONS:
            items.append(("function", (e.text, 1)))
        elif e.tag == "msup":
            items.extend(_power(e))
        elif e.tag not in ("mspace",):
            items.append(("value", _value(e)))
    return items


def _sign(text: str) -> tuple:
    if text in "()":
        return ("open" if text == "(" else "close", text)
    return ("op", {"−": "-", "⋅": "."}.get(text, text))


def _power(e) -> list:
    base, exponent = e
    power = total(Stream(_flat([exponent])))
    if base.tag == "mi" and base.text in FUNCTIONS:
        return [("function", (base.text, power))]
    if base.tag == "mi" and base.text == "e":
        return [("value", sympy.exp(power))]
    return [("value", total(Stream(_flat([base]))) ** power)]


def _value(e) -> sympy.Expr:
    if e.tag == "mn":
        return sympy.Integer(e.text)
    if e.tag == "mi":
        return symbol(CHARS.get(e.text, e.text))
    if e.tag == "mfrac":
        return total(Stream(_flat([e[0]]))) / total(Stream(_flat([e[1]])))
    if e.tag == "msqrt":
        return sympy.sqrt(total(Stream(_flat(list(e)))))
    raise AssertionError(e.tag)


# LaTeX

_TOKEN = re.compile(r"\\[A-Za-z]+|[0-9]+|[A-Za-z]|[-+^_{}()/]")


def read_latex(source: str) -> sympy.Expr:
    tokens = _TOKEN.findall(source.replace("\\left(", "(").replace("\\right)", ")"))
    items, at = _items(tokens, 0)
    assert at == len(tokens), tokens[at:]
    return total(Stream(items))


def _items(tokens: list[str], at: int) -> tuple[list, int]:
    items: list = []
    while at < len(tokens) and tokens[at] != "}":
        token = tokens[at]
        if token == "^":
            power, at = _group(tokens, at + 1)
            kind, what = items.pop()
            if kind == "close":
                items.extend([(kind, what), ("power", power)])
            else:
                items.append((kind, (what[0], power) if kind == "function" else _raise(what, power)))
            continue
        item, at = _item(tokens, at)
        items.append(item)
    return items, at


def _raise(base, power):
    return sympy.exp(power) if base == "e" else base**power


def _item(tokens: list[str], at: int) -> tuple[tuple, int]:
    token = tokens[at]
    if token == "\\frac":
        over, at = _group(tokens, at + 1)
        under, at = _group(tokens, at)
        return ("value", over / under), at
    if token == "\\sqrt":
        inside, at = _group(tokens, at + 1)
        return ("value", sympy.sqrt(inside)), at
    if token == "\\mathrm":
        assert tokens[at + 1] == "{" and tokens[at + 3] == "}"
        name = tokens[at + 2]
        return ("value", "e" if name == "e" else symbol(name)), at + 4
    if token == "\\cdot":
        return ("op", "."), at + 1
    if token[1:] in FUNCTIONS:
        return ("function", (token[1:], 1)), at + 1
    if token in "()":
        return ("open" if token == "(" else "close", token), at + 1
    if token in "+-/":
        return ("op", token), at + 1
    return ("value", sympy.Integer(token) if token.isdigit() else symbol(token.lstrip("\\"))), at + 1


def _group(tokens: list[str], at: int) -> tuple[sympy.Expr, int]:
    if tokens[at] == "{":
        items, at = _items(tokens, at + 1)
        return total(Stream(items)), at + 1
    return (sympy.Integer(tokens[at]) if tokens[at].isdigit() else symbol(tokens[at].lstrip("\\"))), at + 1
