"""Demanding formulas in both outputs, line by line.

The LaTeX was read by eye against common practice in printed papers (no single source); the MathML is checked by the
elements that MathML Core names for each construction.  Their values are checked in `test_read_back.py`.
"""

from __future__ import annotations

from xml.etree import ElementTree

import pytest

from derive.formula.grammar import parse
from derive.formula.tree import letter, operator, times
from derive.problem.quantities import Quantity
from derive.record.said import Line
from derive.report import latex
from derive.report.boxes import Accent, Big, Chain, Link, Pieces, Sign, Words, row
from derive.report.breaking import broken
from derive.report.context import Context
from derive.report.emit_latex import latex as emit
from derive.report.emit_mathml import mathml
from derive.report.layout import Layout
from derive.report.symbols import symbol

from . import gallery
from .sample import setting

CONTEXT = Context(setting(letters=gallery.LETTERS))
PLAIN = Layout({})

LATEX = {
    "-Delta*g^2/6": r"-\frac{\Delta g^2}{6}",
    "g^2*Delta/6 + g^3/12": r"\frac{g^2}{12}(2\Delta + g)",
    "-x + y": r"y - x",
    "tau^2*a + b": r"b + a\tau^2",
    "O(tau^3) + tau": r"\tau + O(\tau^3)",
    "a*exp(i*phi)": r"a\mathrm{e}^{\mathrm{i}\phi}",
    "sin(pi/5)^2*4/5*g": r"\frac{4g}{5}\sin^2\frac{\pi}{5}",
    "log(2)/h": r"\frac{\log 2}{h}",
    "2*3^n": r"2 \cdot 3^n",
    "x^(-1/2)": r"\frac{1}{\sqrt{x}}",
    "conj(w)*x": r"\overline{w}x",
    "abs(x + y)": r"\lvert x + y\rvert",
    "bessel_J(0, x)": r"J_0(x)",
    "binomial(n, k)": r"\binom{n}{k}",
    "(n + 1)!": r"(n + 1)!",
    "omega_c*gamma2": r"\omega_c\gamma_2",
    "sum(k from 1 to L: k)": r"\sum_{k = 1}^L k",
    "2*sum(k from 1 to L: k) + 1": r"1 + 2\sum_{k = 1}^L k",
    "sum(k from 1 to L: k) + integral(x from 0 to L: x)": (
        r"\left( \sum_{k = 1}^L k \right) + \int_0^L x\,\mathrm{d}x"
    ),
    "x*(2*sum(k from 1 to L: k) + 1 + sum(j from 1 to 2: j))": (
        r"x\left( 1 + \left( 2\sum_{k = 1}^L k \right) + \sum_{j = 1}^2 j \right)"
    ),
    "asin(x)": r"\arcsin (x)",
    "euler_gamma": r"\gamma_{\mathrm{E}}",
}


@pytest.mark.parametrize("source", LATEX)
def test_latex_as_a_person_writes_it(source: str) -> None:
    assert emit(PLAIN.box(parse(source))) == LATEX[source]


def test_words_of_operators_keep_their_order() -> None:
    A, B = operator("A"), operator("B", 0)
    f = times(parse("1/12"), A, B, A)
    assert emit(PLAIN.box(f)) == r"\frac{1}{12}AB_0A"
    assert emit(PLAIN.box(times(B, letter("g"), operator("V", None, True)))) == r"B_0gV^{\dagger}"
    assert emit(PLAIN.box(parse("exp(x)"))) == r"\mathrm{e}^x"
    assert emit(PLAIN.box(times(letter("tau"), letter("g"), A, parse("1/3")))) == r"\frac{g\tau}{3}A"


def test_kets_and_daggers() -> None:
    assert emit(PLAIN.box(gallery.KETS)) == (
        r"\lvert \psi_n\rangle \langle \psi_n\rvert + VA^mV^{\dagger} + (V^{\dagger})^2"
        r" + \mathrm{e}^{-\mathrm{i}\tau A}"
    )
    assert emit(PLAIN.box(operator("|0>")), macros=True) == r"\ket{0}"


def test_the_command_line_prints_the_same() -> None:
    assert latex(parse("phi*w"), gallery.LETTERS) == r"\varphi w"


def elements(source: str) -> list[str]:
    return [e.tag for e in ElementTree.fromstring(source).iter()]


def test_sum_with_limits_in_mathml() -> None:
    root = ElementTree.fromstring(mathml(CONTEXT.formula(gallery.SUM)))
    under_over = root.find(".//munderover")
    assert under_over is not None and under_over[0].text == "∑" and under_over[0].get("largeop") == "true"
    assert ["".join(part.itertext()) for part in under_over[1:]] == ["k=1", "L"]


def test_nested_roots_and_matrix_in_mathml() -> None:
    assert elements(mathml(CONTEXT.formula(gallery.NESTED))).count("msqrt") == 3
    shown = mathml(CONTEXT.line(Line(operator("H"), gallery.FOUR)))
    grid = ElementTree.fromstring(shown).findall(".//mtable//mtable/mtr")
    assert len(grid) == 4 and all(len(line) == 4 for line in grid)


def test_integral_scripts_do_not_stand_above_and_below() -> None:
    assert "msubsup" in elements(mathml(CONTEXT.formula(gallery.INTEGRAL)))


def test_hats_bars_and_letters_of_ones_own() -> None:
    shown = mathml(CONTEXT.formula(gallery.HATS))
    assert "ˆ" in shown and 'class="bar"' in shown and "𝒥" in shown
    assert emit(CONTEXT.formula(gallery.HATS)) == (
        r"\mathcal{J}_{\mathrm{eff}}\hat{H}\bar{n} + \overline{w}\omega_c"
    )


def test_cases_and_chain() -> None:
    cases = Pieces(((Sign("1", "number"), Words("if so")), (Sign("0", "number"), Words("else"))))
    chain = Chain((Link(Sign("f"), "=", cases), Link(None, "≤", Sign("2", "number"))))
    assert emit(chain) == (
        r"\begin{aligned} f &= \begin{cases} 1 & \text{if so} \\ 0 & \text{else} \end{cases} \\ &\le 2 \end{aligned}"
    )
    assert elements(mathml(chain)).count("mtable") == 2


def test_fences_that_stay_on_a_line_do_not_stretch() -> None:
    root = ElementTree.fromstring(mathml(PLAIN.box(parse("(x + y)*z"))))
    fences = [e for e in root.iter("mo") if e.text in "()"]
    assert fences and all(e.get("stretchy") == "false" for e in fences)
    tall = ElementTree.fromstring(mathml(PLAIN.box(parse("(x/y + 1)^2"))))
    assert all(e.get("stretchy") == "true" for e in tall.iter("mo") if e.text in "()")


def test_product_sign_and_accent_boxes() -> None:
    box = Big("∏", row(Sign("k"), Sign("=", "relation"), Sign("1", "number")), Sign("n"), Accent("hat", Sign("a")))
    assert emit(box) == r"\prod_{k = 1}^n \hat{a}"


@pytest.mark.parametrize("f", gallery.ALL, ids=range(len(gallery.ALL)))
def test_long_lines_break_before_a_sign(f) -> None:
    whole = CONTEXT.line(Line(letter("f"), f))
    parts = broken(whole, 30.0)
    assert all(link.relation in ("", "=") for link in parts.links)
    joined = "".join(emit(link.right) for link in parts.links).replace(" ", "")
    plain = emit(whole.links[0].right).replace(" ", "")
    for fence in ("\\bigl", "\\bigr", "\\left", "\\right"):
        joined, plain = joined.replace(fence, ""), plain.replace(fence, "")
    assert joined == plain  # nothing is lost and nothing is added


def test_macros_only_where_asked() -> None:
    box = PLAIN.box(parse("exp(i*x)"))
    assert emit(box) == r"\mathrm{e}^{\mathrm{i}x}"
    assert emit(box, macros=True) == r"\eu^{\iu x}"


SYMBOLS = {
    ("generator", (("order", 2),)): "G_2",
    ("generator", (("order", 2), ("entry", (3, 5)))): "(G_2)_{3,5}",
    ("generator", ()): r"G(\tau)",
    ("decay rate", (("level", "k"),)): r"\gamma_k",
    ("detection probability", ()): "F_n",
    ("detection probability", (("ask", 3),)): "F_3",
    ("remainder bound", (("order", 2),)): r"R_2(\tau)",
    ("largest interval", (("order", 2),)): r"\tau_{\text{max},2}",
    ("moment", (("power", 3),)): r"\langle n^3\rangle",
    ("dark level energy", (("level", 1),)): r"E_1^{\text{dark}}",
    ("splitting probability", (("detector", "left & right"),)): r"p_{\text{left \& right}}",
    ("something new", ()): r"\text{something new}",
}


@pytest.mark.parametrize("name, keys", SYMBOLS)
def test_letters_of_quantities(name: str, keys: tuple) -> None:
    assert emit(symbol(Quantity(name, keys))).strip() == SYMBOLS[name, keys]
