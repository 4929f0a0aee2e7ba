"""The key `arm` of a claim: whose levels are counted."""

from derive.errors import BadInput
from derive.worksheet import read

SHEET = """
title = "A row of cavities"
symbols = {{ g = "positive", N = "integer >= 4" }}
graph = {{ family = "chain", sites = "N", hopping = "-g" }}
detector.at = 2
derive.levels.order = 1
[claim.a]
about = "{about}"
{rest}
formula = "g"
"""


def arm_or_faults(tmp_path, about, rest):
    path = tmp_path / "sheet.toml"
    path.write_text(SHEET.format(about=about, rest=rest), encoding="utf-8")
    try:
        return read(path).claims[0].arm
    except BadInput as said:
        return [f.message for f in said.faults]


def test_an_arm_is_read_with_a_number_or_with_k(tmp_path):
    assert arm_or_faults(tmp_path, "decay rate", 'which = "k"\narm = 2') == 2
    assert arm_or_faults(tmp_path, "decay rate", "which = 1\narm = 1") == 1


def test_an_arm_elsewhere_is_a_fault(tmp_path):
    assert "arm says whose levels" in arm_or_faults(tmp_path, "secular function", "arm = 1")[0]
    assert "whole number" in arm_or_faults(tmp_path, "decay rate", 'which = "k"\narm = "left"')[0]
