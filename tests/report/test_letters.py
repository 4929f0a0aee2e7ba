"""A letter's own LaTeX is read, not passed through: whatever is not plain notation falls back to the name."""

from __future__ import annotations

import pytest

from derive.problem.setting import POSITIVE, Letter
from derive.report.boxes import Script, Sign, Words
from derive.report.emit_latex import latex
from derive.report.letters import GREEK, named, names_of, operator_name, snippet

HARMLESS = {
    r"\varphi": r"\varphi",
    r"\Omega_{\mathrm{R}}": r"\Omega_{\mathrm{R}}",
    r"\tilde g_{12}^{*}": r"\tilde{g}_{12}^{*}",
    r"\mathcal J": None,
    r"\mathcal{J}": r"\mathcal{J}",
    r"\hat{H}_0": r"\hat{H}_0",
    r"g'": r"g^{'}",
    r"\hbar\omega": r"\hbar \omega",
}
HARMFUL = [
    r"\input{/etc/passwd}", r"\write18{ls}", r"\def\x{1}", r"\catcode`\%=12", "$x$", "a}b{", "{a", "a}", "x%y", "a&b",
    "a#b", r"\end{document}", r"\csname x\endcsname", "x" * 200, "", "   ", "x_a_b", "x^a^b", "^", "\\", "é", "a\nb\\x",
    r"\unknown", "~", "<script>", r"\mathrm{a\b}", r"\mathrm{", "{" * 60 + "}" * 60 + "^",
]


@pytest.mark.parametrize("source", HARMLESS)
def test_plain_notation_is_kept(source: str) -> None:
    box = snippet(source)
    assert (latex(box) if box is not None else None) == HARMLESS[source]


@pytest.mark.parametrize("source", HARMFUL)
def test_anything_else_is_refused(source: str) -> None:
    assert snippet(source) is None


@pytest.mark.parametrize("source", HARMFUL)
def test_a_refused_one_falls_back_to_the_name(source: str) -> None:
    assert names_of([Letter("kappa", POSITIVE, source)])["kappa"] == Sign("κ")


def test_names_as_a_person_writes_them() -> None:
    assert named("omega_c") == Script(Sign("ω"), sub=Sign("c"))
    assert named("g2") == Script(Sign("g"), sub=Sign("2", "number"))
    assert latex(named("t_max")) == r"t_{\mathrm{max}}"
    assert named("name with spaces") == Words("name with spaces")
    assert latex(operator_name("g^{(k)}", "ij", False)) == r"g_{ij}^{(k)}"
    assert latex(operator_name("L", "k+1", False)) == r"L_{k+1}"
    assert latex(operator_name("H", "x&y", True)) == r"H_{\text{x\&y}}^{\dagger}"


def test_every_greek_name_has_its_own_letter() -> None:
    assert len(set(GREEK.values())) == len(GREEK) == 37
