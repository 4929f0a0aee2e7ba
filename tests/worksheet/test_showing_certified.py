"""`watchpot show` of an entry whose derivation states an equation: the number is certified on the spot."""

import subprocess
import sys
from pathlib import Path

import mpmath
import pytest

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
