"""report.html: one file, what stands in it and in which order, contrast by the formula of WCAG 2.2."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from derive.formula.grammar import parse
from derive.record.said import Derivation
from derive.report import write
from derive.report.blocks import digits
from derive.report.page import LONGEST_ANSWER, SCRIPT
from derive.report.seams import words
from derive.report.style import css

from . import gallery
from .sample import demo, every_verdict, proved
from .test_hostile import read

VERDICTS = ("proved", "agrees", "undecided", "untested", "refuted")
PAGE = write(every_verdict())["report.html"].decode("utf-8")


def test_one_language_one_heading_unique_ids() -> None:
    assert '<html lang="en">' in PAGE
    reader = read(PAGE.encode())
    assert reader.tags.count("h1") == 1 and reader.tags.count("main") == 1
    assert len(set(reader.ids)) == len(reader.ids)


def test_question_in_words() -> None:
    text = re.sub(r"<math.*?</math>", "τ", PAGE[PAGE.index('<p class="question">') :])
    assert text.startswith('<p class="question">Every τ, site 4 is asked. It starts on site 2.</p>')


def test_the_matrix_of_the_system_is_printed_and_the_detectors_sign_stands_beside_p() -> None:
    given = PAGE[PAGE.index('id="given"') : PAGE.index('id="answers"')]
    assert 'alttext="' in given and "H_{0,1} &amp;= H_{1,2}" in given and "every entry not named is 0" in given
    assert PAGE.count('class="ring"') == 2 and re.search(r'P <span class="ring"[^>]*></span> projects', PAGE)


def test_an_answer_of_many_lines_is_cut_and_says_so() -> None:
    """A formula of 41 terms takes a few lines in the answers, all of them in the derivation."""
    claim = replace(demo().judged[0].claim, id="generator.long", value=gallery.LONG)
    report = replace(demo(), judged=(proved(claim),), derivations=(Derivation("generator", (claim,), ()),))
    text = write(report)["report.html"].decode("utf-8")
    answers, derived = text[text.index('id="answers"') :].split('id="derived-generator"', 1)
    lines = [part.count("<mtr>") for part in (answers, derived)]
    assert lines[0] == LONGEST_ANSWER < lines[1] and f"{lines[1] - lines[0]} more line" in answers


def test_a_line_wider_than_its_column_takes_both() -> None:
    below = "*".join(f"(k + {n}*g)" for n in range(2, 14))  # bound in the sum: no part of it can have a name
    wide = replace(demo().judged[0].claim, value=parse(f"sum(k from 1 to 9: 1/({below}))"))
    assert 'class="entry wide"' in write(replace(demo(), judged=(proved(wide),), derivations=(
        Derivation("generator", (wide,), ()),)))["report.html"].decode("utf-8")
    assert 'class="entry wide"' not in PAGE


def test_order_of_the_page() -> None:
    places = ["<h1>", 'class="conventions"', 'id="graph-', 'id="answers"', 'id="claims"', 'id="derived-generator"',
              'id="figures"', 'id="not-shown"', "<footer>"]
    at = [PAGE.index(f"{p}") for p in places]
    assert at == sorted(at)


@pytest.mark.parametrize("verdict", VERDICTS)
def test_every_seam_has_its_word_and_its_shape(verdict: str) -> None:
    seams = re.findall(rf'<p class="seam {verdict}">(.*?)</p>', PAGE)
    assert seams and all(verdict in re.sub(r"<math.*?</math>", "", s) for s in seams)
    assert f".seam.{verdict}" in css()


def test_seams_differ_in_shape_without_colour() -> None:
    """With the colours taken out, no two verdicts have the same rules."""
    plain = re.sub(r"color: [^;]+;", "", css())
    shapes = {v: tuple(sorted(re.findall(rf"\.seam\.{v} (\.[^{{]*\{{[^}}]*\}})", plain))) for v in VERDICTS}
    assert len(set(shapes.values())) == len(VERDICTS) and all(shapes.values())


def test_undecided_and_untested_have_their_room() -> None:
    last = PAGE[PAGE.index('id="not-shown"') :]
    assert "claim.undecided-one" in last and "claim.untested-one" in last and "claim.refuted-one" not in last


def test_yours_and_ours_with_the_difference_underlined() -> None:
    claim = PAGE[PAGE.index('id="claim.refuted-one"') :]
    claim = claim[: claim.index('class="seam')]
    assert claim.count('class="mark"') == 2 and ">yours<" in claim and ">ours<" in claim


def test_nothing_comes_from_outside() -> None:
    for page in (PAGE, write(gallery.report())["report.html"].decode("utf-8")):
        bare = re.sub(r'xmlns(:\w+)?="[^"]*"', "", page)
        assert not re.search(r'(src|href|action|poster)="(?!#)(?!data:)', bare)
        assert "http" not in re.sub(r"http-equiv", "", bare) and "@import" not in page
        assert "default-src 'none'" in page


def test_works_without_a_script() -> None:
    """The one script only adds copy buttons and opens folds for print."""
    assert PAGE.count("<script>") == 1 and SCRIPT in PAGE
    assert "button" not in PAGE.replace(SCRIPT, "").replace(css(), "")


class Plain(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.text = ""

    def handle_data(self, data: str) -> None:
        self.text += data


@pytest.mark.parametrize("value", ["-0.50000000123", "12345.678901", "3.1e-7", "7", "0.00012345"])
def test_copied_digits_are_plain(value: str) -> None:
    reader = Plain()
    reader.feed(digits(value, 4))
    assert reader.text.replace("−", "-") == value


def test_shared_digits_are_told_from_the_rest() -> None:
    assert digits("0.00123456", 3) == (
        '0.<span class="three">001</span><span class="three">23<u>4</u></span>'
        '<span class="three"><span class="rest">5</span><span class="rest">6</span></span>'
    )
    assert "<u>" not in digits("1.5", 9) and "<u>" not in digits("1.5", None)


def luminance(colour: str) -> float:
    """Relative luminance, WCAG 2.2, definition "relative luminance"."""
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    r, g, b = (c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts)
    return 0.2126 * r + 0.7152 * g + 0.0722 * b


def contrast(a: str, b: str) -> float:
    high, low = sorted((luminance(a), luminance(b)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def palettes() -> list[dict[str, str]]:
    blocks = re.findall(r":root \{([^}]*--paper[^}]*)\}", css())
    return [dict(re.findall(r"--(\w+): (#[0-9a-f]{6})\b", block)) for block in blocks]


def test_contrast_in_light_and_dark() -> None:
    light, dark = palettes()[:2]
    assert light["paper"] != dark["paper"]
    for palette in (light, dark):
        for name in ("ink", "violet"):
            assert contrast(palette[name], palette["paper"]) >= 7
        assert contrast(palette["grey"], palette["paper"]) >= 4.5
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)  # a published pair: WebAIM, from memory


def test_words_in_a_seam() -> None:
    said = {j.claim.id: words(j) for j in every_verdict().judged}
    assert said["claim.agrees-one"] == "agrees, 41 digits"
    assert said["claim.refuted-one"] == "refuted: the claim is 4 times the derived entry"
    assert said["generator.2"] == "proved"


def test_same_bytes() -> None:
    assert write(demo()) == write(demo())
