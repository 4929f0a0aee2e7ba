"""LaTeX: what is read, what can be read in two ways and is refused, where, and that nothing else ever happens."""

from __future__ import annotations

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.formula.latex_grammar import parse_latex
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters
from derive.report.emit_latex import latex
from derive.report.layout import Layout
from derive.worksheet.letters import approx_value
from tests.report.test_read_back import TABLE

LETTERS: dict[str, str | None] = {
    "g": None, "tau": None, "n": None, "L": None, "x": None, "y": None, "t": None, "j": None, "m": None,
    "omega_c": None, "Delta": r"\Delta", "phi": r"\varphi", "k0": r"k_0", "d1": r"\tilde{\Delta}",
}

READ = [
    (r"\tfrac45 g^2 \tau \sin^2\tfrac{\pi}{5}", "4/5*g^2*tau*sin(pi/5)^2"),
    (r"\frac{4 g \tau}{\pi n^3} \cos^2\left(2 g \tau n + \frac{\pi}{4}\right)",
     "4*g*tau/(pi*n^3)*cos(2*g*tau*n + pi/4)^2"),
    (r"\frac{2}{L+1}\sum_{k=1}^{L} \sin^2\!\left(\frac{jk\pi}{L+1}\right) e^{-4g^2\tau t\sin^2(k\pi/(L+1))/(L+1)}",
     "2/(L+1)*sum(k from 1 to L: sin(j*k*pi/(L+1))^2*exp(-4*g^2*tau*t*sin(k*pi/(L+1))^2/(L+1)))"),
    (r"e^{-x}\bigl[I_0(x)-I_{j}(x)\bigr]", "exp(-x)*(bessel_I(0, x) - bessel_I(j, x))"),
    (r"J_{n}^2(2 g \tau) + J_0(x)^2", "bessel_J(n, 2*g*tau)^2 + bessel_J(0, x)^2"),
    (r"\frac{1}{\pi}\int_0^{\pi} \cos(n y)\, \mathrm{d}y", "1/pi*integral(y from 0 to pi: cos(n*y))"),
    (r"\int_0^1\int_0^{x} y^2 \,dy\,dx", "integral(x from 0 to 1: integral(y from 0 to x: y^2))"),
    (r"\sum_{k=1}^{L} k\, x - y", "sum(k from 1 to L: k*x) - y"),
    (r"-\frac{i}{2}g^2 e^{i\varphi}", "-i/2*g^2*exp(i*phi)"),
    (r"-\dfrac{\mathrm{i}}{2} g^{2} \mathrm{e}^{-\mathrm{i}\varphi}", "-i/2*g^2*exp(-i*phi)"),
    (r"\sqrt2 g+\sqrt[3]{x}", "sqrt(2)*g + x^(1/3)"),
    (r"|x+y|^2 + \left| x \right| + \lvert y\rvert", "abs(x+y)^2 + abs(x) + abs(y)"),
    (r"x^* y + \overline{x} + \operatorname{Re}(x) + \operatorname{Im}(x)",
     "conj(x)*y + conj(x) + Re(x) + Im(x)"),
    (r"\binom{n}{2} n! + \lfloor L/2\rfloor + \Gamma(x) + K(m)",
     "binomial(n, 2)*n! + floor(L/2) + Gamma(x) + elliptic_K(m)"),
    (r"\gamma_{\mathrm{E}} + \log x + \ln(2)", "euler_gamma + log(x) + log(2)"),
    (r"\omega_c + \omega_{\mathrm{c}} + k_{0} + \tilde{\Delta}",
     "omega_c + omega_c + k0 + d1"),
    (r"\sin^2\frac{x}{2} e^{-y}", "sin(x/2)^2*exp(-y)"),
    (r"\sin x \cos y - \arctan(x)", "sin(x)*cos(y) - atan(x)"),
    (r"x^2y + 2^{34} + 0.5x", "x^2*y + 2^34 + 0.5*x"),
    (r"x/y \cdot t + 1/(2g)", "x/y*t + 1/(2*g)"),
    (r"O(\tau^3)", "O(tau^3)"),
]

REFUSED = [
    (r"\sin x y", 0, "sin(x)*y or as sin(x*y)"),
    (r"g \sin 2x", 2, "sin(2)*x or as sin(2*x)"),
    (r"\sin x/y", 0, "sin(x)/y or as sin(x/y)"),
    (r"\sin\tfrac{\pi}{5} g", 0, "sin(pi/5)*g or as sin(pi*g/5)"),
    (r"\sin^{-1} x", 0, "1/sin(x) or as asin(x)"),
    (r"\sin x^2", 5, "sin(x^2) or as sin(x)^2"),
    (r"\cos(x)^2", 4, "cos(x^2) or as cos(x)^2"),
    (r"1/2g", 2, "g/2 or as 1/(2*g)"),
    (r"x/y(t+1)", 2, "can be read as"),
    (r"2^34", 2, "^{3} 4 or as ^{34}"),
    (r"3\tfrac12", 1, "3 + 1/2 or as 3*1/2"),
    (r"2 3", 2, "23 or as 2*3"),
    (r"10\,000", 4, "10000 or as"),
    (r"x2", 1, "x*2 or as the letter x_2"),
    (r"n^2!", 3, "belongs to cannot be seen"),
    (r"\frac123", 6, "cannot be seen"),
    (r"n!!", 2, "!! is not read"),
    (r"x^2^3", 3, "two exponents"),
    (r"x^-1", 2, "takes the sign alone"),
    (r"x^(2)", 2, "takes the bracket alone"),
    (r"\foo x", 0, r"the command \foo is not read"),
    (r"\input{x}", 0, r"the command \input is not read"),
    (r"\left(x", 5, "opened and not closed"),
    (r"x)", 1, "closes nothing"),
    (r"[x)", 2, "closes nothing"),
    (r"\frac{1}{0}", 9, "divides by zero"),
    (r"\frac{1}", 7, "missing"),
    (r"x +", 2, "missing"),
    (r"e", 0, "with its exponent"),
    (r"2 \cdot -x", 2, "ends with its sign"),
    (r"x = y", 2, "= cannot stand here"),
    (r"x \pm y", 2, "two things at once"),
    (r"x'", 0, "no letter is written x'"),
    (r"\int_0^1 x", 0, "no differential"),
    (r"\sum_{i=1}^{3} x", 7, "imaginary unit"),
    (r"0,5", 1, "without digits"),
    (r"\sin", 0, "no argument"),
    (r"J_0 x", 0, "without its argument"),
    ("", 0, "no formula"),
    ("{" * 300 + "x" + "}" * 300, 200, "more than 200"),
    (r"\sqrt{" * 150 + "x" + "}" * 150 + "^{" * 60 + "x" + "}" * 60, 0, ""),
    ("9" * 2000, 0, "2000 digits"),
    (r"9^{9^{9^{9}}}", 0, "too large"),
]


@pytest.mark.parametrize(("source", "meaning"), READ)
def test_what_is_read(source: str, meaning: str) -> None:
    """Road: the worksheet's own grammar, which shares no code with this one but the tree."""
    assert parse_latex(source, LETTERS) == parse(meaning)


@pytest.mark.parametrize(("source", "position", "said"), REFUSED)
def test_what_is_refused_and_where(source: str, position: int, said: str) -> None:
    with pytest.raises(FormulaFault) as fault:
        parse_latex(source, LETTERS)
    assert said in fault.value.message
    assert not said or abs(fault.value.position - position) <= 1


def test_letters_by_their_owners_latex() -> None:
    letters = {"phi": r"\varphi", "varphi": r"\phi", "ab": None, "w": r"\omega_{\mathrm{r}}", "a": r"g'"}
    assert free_letters(parse_latex(r"\varphi", letters)) == {"phi"}
    assert free_letters(parse_latex(r"\phi", letters)) == {"varphi"}
    assert free_letters(parse_latex(r"\omega_{\mathrm{r}} \mathit{ab} g'", letters)) == {"w", "ab", "a"}


@pytest.mark.parametrize(
    ("source", "letters", "said"),
    [
        (r"\varphi", {"phi": r"\varphi", "varphi": None}, "can be read as phi or as varphi"),
        ("gt", {"g": None, "t": None, "gt": None}, "can be read as gt or as g*t"),
        (r"K(x)", {"K": None, "x": None}, "the letter K or as the function elliptic_K"),
        (r"\Gamma(x)", {"G": r"\Gamma", "x": None}, "the letter G or as the function Gamma"),
        (r"J_0(x)", {"J_0": None, "x": None}, "the letter J_0 or as the function bessel_J"),
        (r"\int_0^1 d dx", {"d": None}, "the letter d or as a differential"),
        (r"2i", {"q": "i"}, "the letter q or as the constant i"),
    ],
)
def test_letters_that_may_mean_two_things(source: str, letters: dict[str, str | None], said: str) -> None:
    with pytest.raises(FormulaFault) as fault:
        parse_latex(source, letters)
    assert said in fault.value.message


def test_an_undeclared_letter_carries_its_place() -> None:
    f = parse_latex(r"2 \beta_{1} g", {"g": None})
    node = next(a for a in f.args if isinstance(a, Formula) and a.head == "letter" and a.args[0] == "beta_1")
    assert node.span == (2, 10)


@pytest.mark.parametrize("source", TABLE)
def test_what_the_report_prints_is_read_back(source: str) -> None:
    """Road: the report's LaTeX, made from the worksheet's syntax; compared as complex doubles."""
    f = parse(source)
    again = parse_latex(latex(Layout({}).box(f)), dict.fromkeys(free_letters(f)))
    at = {name: 0.3 + 0.17 * k for k, name in enumerate(sorted(free_letters(f)))}
    one, other = approx_value(f, at), approx_value(again, at)
    assert one is not None and other is not None and abs(one - other) < 1e-12 * (1 + abs(one)), text(again)


_PIECES = st.sampled_from([
    "x", "g", "2", "3", "+", "-", "/", "!", "^", "_", "{", "}", "(", ")", "[", "]", "|", "*", "'", " ", ",", ".", "=",
    r"\frac", r"\sqrt", r"\sin", r"\log", r"\sum", r"\int", r"\left", r"\right", r"\,", r"\tau", r"\pi", r"\mathrm",
    "e", "i", "d", "J", "K", "O", r"\Gamma", r"\binom", r"\overline", r"\cdot", r"\lvert", r"\rvert", "\\", "&", "é",
])


@given(st.lists(_PIECES, max_size=25).map("".join))
@example(r"\sum_{k=1}^3")
@example("^")
@example(r"\mathrm{")
@example("|" * 9)
def test_anything_is_read_or_refused(source: str) -> None:
    """Common practice, no source: random pieces never raise anything else, and positions lie in the text."""
    try:
        f = parse_latex(source, LETTERS)
    except FormulaFault as fault:
        assert 0 <= fault.position <= len(source) and fault.message.endswith((".", "?"))
    else:
        assert parse(text(f)) == f or "0^" in text(f)
