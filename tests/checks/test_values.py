"""Published numbers: rounded outside, accepted; one unit of the last digit off, refuted.

Oracles: scipy's matrix exponential for a ring, mpmath's Bessel functions and the renewal recursion written out for the
line, and F_n = s c^(n-1) of two levels (check value, derived and computed there).
"""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.linalg import expm

from derive.checks.values import rounding, significant
from derive.pipeline import answer
from derive.record.said import Judged
from derive.report import write
from derive.worksheet.reader import survey_bytes

HEAD = 'title = "printed"\nsymbols.g = "positive"\ninterval.length = "7/(10*g)"\n'
RING = HEAD + 'graph = { family = "ring", sites = 6, hopping = "-g" }\ndetector.at = 0\nstart.at = 1\n'
LINE = HEAD + 'graph = { family = "line", hopping = "-g" }\ndetector.at = 0\nstart.at = "detector"\n'
CHECK = "check = { samples = 2 }\n"


def ring_clicks(count: int) -> list[float]:
    h = -np.roll(np.eye(6), 1, 0) - np.roll(np.eye(6), -1, 0)
    u, psi, out = expm(-0.7j * h), np.eye(6, dtype=complex)[1], []
    for _ in range(count):
        psi = u @ psi
        out.append(abs(psi[0]) ** 2)
        psi[0] = 0
    return out


def line_clicks(count: int) -> list[float]:
    u = [mpmath.besselj(0, mpmath.mpf(14) / 10 * n) for n in range(count + 1)]
    phi: list[mpmath.mpf] = [mpmath.mpf(0)]
    for n in range(1, count + 1):
        phi.append(u[n] - sum(phi[k] * u[n - k] for k in range(1, n)))
    return [float(p * p) for p in phi[1:]]


def judged(head: str, about: str, rows: list[tuple[int, str]]) -> Judged:
    said = ", ".join(f'["{n}", "{q}"]' for n, q in rows)
    found = survey_bytes(f"{head}{CHECK}claim.a = {{ about = '{about}', values = [{said}] }}".encode(), "w", Path("."))
    assert not found.faults and not found.unserved
    return answer(found.taken()).judged[-1]


CASES = [
    (RING, "detection probability", ring_clicks(8)),
    (RING, "survival probability", list(1 - np.cumsum(ring_clicks(8)))),
    (LINE, "detection probability", line_clicks(8)),
]


@pytest.mark.parametrize(("head", "about", "true"), CASES)
@pytest.mark.parametrize("digits", [3, 6, 9])
def test_rounded_numbers_agree_and_the_next_ones_do_not(head: str, about: str, true: list[float], digits: int) -> None:
    rows = [(n + 1, f"{x:.{digits}f}") for n, x in enumerate(true)]
    right = judged(head, about, rows)
    assert right.verdict == "agrees"
    for k, by in ((0, 1), (4, -1)):
        n, q = rows[k]
        off = Fraction(q) + by * Fraction(1, 10**digits)
        wrong = judged(head, about, [*rows[:k], (n, f"{float(off):.{digits}f}"), *rows[k + 1 :]])
        assert wrong.verdict == "refuted" and f"n = {n}: printed" in wrong.diagnosis


def test_a_fraction_is_meant_exactly() -> None:
    """Two levels at g tau = pi/4: F_1 = 1/2, F_2 = 1/4."""
    head = RING.replace("7/(10*g)", "pi/(4*g)").replace('"ring", sites = 6', '"chain", sites = 2')
    assert judged(head, "detection probability", [(1, "1/2"), (2, "1/4")]).verdict == "agrees"
    assert judged(head, "detection probability", [(1, "1/2"), (2, "1/5")]).verdict == "refuted"


def test_numbers_printed_for_one_interval_only_are_refuted_elsewhere() -> None:
    head = RING.replace('interval.length = "7/(10*g)"\n', "")
    assert judged(head, "detection probability", [(1, "0.3")]).verdict == "refuted"


@pytest.mark.parametrize(
    ("printed", "unit", "digits"),
    [
        ("0.0796", Fraction(1, 10_000), 3),
        ("12", Fraction(1), 2),
        ("0.10", Fraction(1, 100), 2),
        ("1/3", Fraction(0), 2),
    ],
)
def test_what_was_printed_says_its_rounding(printed: str, unit: Fraction, digits: int) -> None:
    assert rounding(printed) == unit and significant(printed) == digits


def test_the_report_shows_what_was_printed() -> None:
    claim = "claim.a = { about = 'detection probability', values = [['1', '0.3105']] }"
    found = survey_bytes(f"{RING}{CHECK}{claim}".encode(), "w", Path("."))
    files = write(answer(found.taken()))
    assert b"0.3105" in files["report.html"] and b'"values": [' in files["ledger.json"]
