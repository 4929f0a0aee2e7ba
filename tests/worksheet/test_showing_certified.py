"""`watchpot show` of an entry whose derivation states an equation: the number is certified on the spot."""

import re
import subprocess
import sys
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.linalg import expm

from derive.errors import BadInput
from derive.worksheet import read
from derive.worksheet.showing import entry_numbers, find_entry

SHEET = str(Path(__file__).parents[2] / "worksheets" / "validity-two-ends.toml")


def shown(*options):
    program = str(Path(sys.executable).parent / "watchpot")
    return subprocess.run([program, "show", SHEET, *options], capture_output=True, text=True)


def test_the_radius_at_a_point():
    """pi/2 at g = 1 (mpmath): the odd half of the mirror pair is a two-level system."""
    found = shown("validity.radius", "--at", "g=1", "--digits", "25")
    value, _, radius = found.stdout.strip().partition(" +- ")
    with mpmath.workdps(30):
        assert abs(mpmath.mpf(value) - mpmath.pi / 2) < mpmath.mpf(10) ** -24
    assert mpmath.mpf(radius) < mpmath.mpf(10) ** -24
    assert found.returncode == 0


def test_the_kind_at_a_point():
    assert shown("validity.radius_kind", "--at", "g=2").stdout.strip() == "zero"


@pytest.mark.parametrize("point, says", [("tau=1/50", "no value for g"), ("h=1", "h is no letter")])
def test_points_that_do_not_say_enough(point, says):
    found = shown("validity.radius", "--at", point)
    assert says in found.stdout + found.stderr and found.returncode == 2


SHEET_OF_ROOTS = """title = "t"
symbols.g = "positive"
graph = { family = "chain", sites = 4, hopping = "-g" }
detector.at = 0
start.at = 1
derive = { renewal = {}, survival = {} }
"""


def test_a_number_for_every_root_and_letters_that_come_along(tmp_path):
    """Poles at g = 1, tau = 1/2 are inverse eigenvalues of Q U Q (numpy); S at t = 0 is 1."""
    (tmp_path / "w.toml").write_text(SHEET_OF_ROOTS, encoding="utf-8")
    question = read(tmp_path / "w.toml")
    lines = entry_numbers(question, find_entry(question, "renewal.pole.1"), "g=1,tau=1/2", 12)
    h = -np.diag(np.ones(3), 1) - np.diag(np.ones(3), -1)
    step = expm(-0.5j * h)[1:, 1:]
    assert np.allclose(np.poly([as_complex(line) for line in lines]), np.poly(1 / np.linalg.eigvals(step)))
    survival = find_entry(question, "survival.small_tau")
    assert entry_numbers(question, survival, "g=1,tau=1/2,t=0", 12)[0].startswith("1")
    with pytest.raises(BadInput, match="no value for t"):
        entry_numbers(question, survival, "g=1,tau=1/2", 12)


def as_complex(line):
    parts = dict(re.findall(r"(real|imaginary) part (\S+)", line))
    real = 0 if parts else line.split()[0]
    return complex(float(parts.get("real", real)), float(parts.get("imaginary", 0)))
