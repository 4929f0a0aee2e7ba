"""Numbers at asks and times: against scipy's matrix exponential, mpmath's Bessel functions, closed forms by hand."""

from __future__ import annotations

import json
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest
from scipy.linalg import expm

from derive.checks.numbers.asked import numbers_asked
from derive.checks.numbers.clocks import Wants, asks_by
from derive.errors import OutsideValidity
from derive.formula.grammar import parse
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Question
from derive.record.said import Claim, Report
from derive.report import write
from derive.worksheet.reader import survey_bytes

HEAD = 'title = "asked"\nsymbols.g = "positive"\ncheck = { samples = 1, points = [{ g = 1, tau = "1/2" }] }\n'
RING = HEAD + 'graph = { family = "ring", sites = 5, hopping = "-g" }\ndetector.at = 0\nstart.at = 2\n'
PAIR = HEAD + 'graph = { family = "chain", sites = 2, hopping = "-g" }\ndetector.at = 0\nstart.at = 1\n'
ENDS = HEAD + 'graph = { family = "chain", sites = 3, hopping = "-g" }\n'
ENDS += "[detector.left]\nat = 0\n[detector.right]\nat = 2\n"
LINE = HEAD + 'graph = { family = "line", hopping = "-g" }\ndetector.at = 0\nstart.at = "detector"\n'


def question(sheet: str) -> Question:
    return survey_bytes(sheet.encode(), "asked.toml", Path.cwd()).taken()


def report(sheet: str) -> Report:
    return answer(question(sheet))


def rows(made: Report, entry: str) -> dict[str, tuple[str | None, str | None]]:
    """n -> (law, measured), as decimals."""
    found = {}
    for row in made.asked:
        if row.entry == entry:
            at = dict((row.measured or row.law).at)
            found[at["n"]] = tuple(None if n is None else n.value for n in (row.law, row.measured))
    return found


def ring_clicks(count: int) -> tuple[np.ndarray, np.ndarray]:
    """(phi_n, F_n), n from 1, for the ring above; scipy."""
    h = -np.roll(np.eye(5), 1, 0) - np.roll(np.eye(5), -1, 0)
    u, psi, out = expm(-0.5j * h), np.eye(5, dtype=complex)[2], []
    for _ in range(count):
        psi = u @ psi
        out.append(psi[0])
        psi[0] = 0
    return np.array(out), np.abs(out) ** 2


@pytest.fixture(scope="module")
def ring() -> Report:
    wishes = "[derive.renewal]\nasks = [2, 40, 300]\n[derive.detection]\nasks = [40]\ntimes = [20]\n"
    return report(RING + wishes + "[derive.survival]\nasks = [300]\n")


def test_first_clicks(ring: Report) -> None:
    amplitude, clicks = ring_clicks(300)
    for n, entry in ((2, "renewal.F.2"), (40, "renewal.F.40"), (300, "renewal.F.300")):
        law, measured = rows(ring, entry)[str(n)]
        assert float(measured) == pytest.approx(clicks[n - 1], rel=1e-9) == float(law)
    phi = [r for r in ring.asked if r.entry == "renewal.amplitude" and dict(r.measured.at)["n"] == "40"]
    parts = {dict(r.measured.at)["part"]: float(r.measured.value) for r in phi}
    assert complex(parts["real"], parts["imaginary"]) == pytest.approx(amplitude[39], rel=1e-9)
    assert {r.apart for r in phi} == {"0"}


def test_numbers_without_a_formula_are_entries(ring: Report) -> None:
    judged = {j.claim.id: j for j in ring.judged}
    assert judged["renewal.F.300"].verdict == "agrees" and "renewal.F.2" in judged
    ledger = {e["id"]: e for e in json.loads(write(ring)["ledger.json"])["entries"]}
    entry = ledger["renewal.F.300"]
    assert entry["formula"] is None and entry["number"]["at"] == {"g": "1", "tau": "1/2", "n": "300"}
    assert {n["road"] for n in entry["numbers"]} == {"derived", "enclosure"}


def test_probability_within_asks_and_by_a_time(ring: Report) -> None:
    _, clicks = ring_clicks(300)
    assert float(rows(ring, "detection.total")["40"][1]) == pytest.approx(clicks[:40].sum(), rel=1e-9)
    by_time = [r for r in ring.asked if r.entry == "detection.total" and "t" in dict(r.measured.at)]
    assert [dict(r.measured.at)["n"] for r in by_time] == ["40"]  # t = 20 is the fortieth ask's time
    law, left = rows(ring, "survival.small_tau")["300"]
    assert float(left) == pytest.approx(1 - clicks.sum(), rel=1e-9)
    assert float(law) == pytest.approx(float(left), rel=0.1)  # tau = 1/2 is not small


def test_many_asks_of_two_resonators() -> None:
    """S_n = cos(g tau)^(2 n), by hand; a million asks with all their digits."""
    made = report(PAIR + "[derive.survival]\nasks = [1000000]\n")
    law, left = rows(made, "survival.exact")["1000000"]
    with mpmath.workdps(40):
        true = mpmath.cos(mpmath.mpf(1) / 2) ** 2_000_000
        assert abs(mpmath.mpf(left) / true - 1) < mpmath.mpf(10) ** -28 > abs(mpmath.mpf(law) / true - 1)


def test_random_intervals() -> None:
    """Exponential intervals of mean tau: each ask finds site 0 with 2 g^2 tau^2/(1 + 4 g^2 tau^2) from site 1, by hand;
    no coherence is left after a "no", so F_n is geometric."""
    sheet = PAIR.replace("start", 'interval.law = "exponential"\nstart') + "[derive.detection]\nasks = [7]\n"
    p = Fraction(2, 4) / (1 + Fraction(4, 4))
    assert float(rows(report(sheet), "detection.total")["7"][1]) == pytest.approx(float(1 - (1 - p) ** 7), rel=1e-12)


def test_detectors_told_apart() -> None:
    """Two ends of three cavities, started in the middle: each takes half of what is taken, by symmetry."""
    sheet = ENDS
    made = report(sheet + "[start]\nat = 1\n[derive.detection]\nasks = [5]\n")
    left, right = (rows(made, f"detection.splitting.{side}")["5"][1] for side in ("left", "right"))
    taken = 1 - np.cos(np.sqrt(2) / 2) ** 10  # cos(sqrt(2) g tau)^2 stays in the middle at each ask
    assert float(left) == pytest.approx(taken / 2, rel=1e-12) == float(right)


def test_first_clicks_of_two_detectors() -> None:
    """The same three cavities: a click at ask n has 1 - cos(sqrt(2) g tau)^2 of what was left, by hand."""
    sheet = ENDS
    made = report(sheet + "[start]\nat = 1\n[derive.renewal]\nasks = [9]\n")
    law, measured = rows(made, "renewal.F.9")["9"]
    kept = np.cos(np.sqrt(2) / 2) ** 2
    assert float(measured) == pytest.approx(kept**8 * (1 - kept), rel=1e-12) == float(law)


def test_line_beside_its_law() -> None:
    """The renewal recursion of Bessel functions written out in mpmath."""
    made = report(LINE.replace('"1/2"', '"7/10"') + "[derive.asymptotics]\nasks = [200]\n")
    law, measured = rows(made, "asymptotics.F")["200"]
    with mpmath.workdps(30):
        u = [mpmath.besselj(0, mpmath.mpf(14) / 10 * n) for n in range(201)]
        phi = [mpmath.mpf(0)]
        for n in range(1, 201):
            phi.append(u[n] - sum(u[n - m] * phi[m] for m in range(1, n)))
        assert abs(mpmath.mpf(measured) / phi[200] ** 2 - 1) < mpmath.mpf(10) ** -20
    assert float(law) == pytest.approx(float(measured), rel=0.05)


def test_absorber_beside_the_experiment() -> None:
    """Two levels with a loss Gamma = 2/tau on one: scipy's exponential; the experiment cos(g tau)^(2 n), by hand."""
    made = report(PAIR.replace('"1/2"', '"1/10"') + "[derive.absorber]\nasks = [200]\n")
    law, measured = rows(made, "absorber.plain.strength")["200"]
    evolved = expm(-20j * np.array([[-20j, -1], [-1, 0]])) @ np.array([0, 1])
    assert float(law) == pytest.approx(np.sum(np.abs(evolved) ** 2), rel=1e-9)
    assert float(measured) == pytest.approx(np.cos(0.1) ** 400, rel=1e-12)
    assert {r.entry for r in made.asked} == {"absorber.plain.strength"}
    verdicts = {j.claim.id: j.verdict for j in made.judged}
    assert verdicts["absorber.plain.strength"] in ("proved", "agrees")


def test_classical_walk_at_a_time() -> None:
    """Two sites: hopping at rate g, S = exp(-g t), by hand."""
    made = report(PAIR + '[derive.classical]\ntimes = ["3/g"]\nasks = [4]\n')
    found = rows(made, "classical.survival")
    assert float(found["6"][1]) == pytest.approx(np.exp(-3)) and float(found["4"][1]) == pytest.approx(np.exp(-2))


def wrong(about: str, formula: str) -> Claim:
    return Claim("claim.mine", "survival", Quantity(about), parse(formula), origin="user")


@pytest.mark.parametrize(("formula", "verdicts"), [
    ("cos(g*tau)^(2*n)", set()), ("cos(g*tau)^(2*n + 2)", {"refuted"}), ("1 - sin(g*tau)^2*n", {"refuted"}),
])
def test_exact_law_that_misses_a_number_is_refuted(formula: str, verdicts: set[str]) -> None:
    setting = question(PAIR + "derive.survival = {}\n").setting
    seen = numbers_asked("survival", setting, (wrong("survival probability", formula),), Wants((5, 60)), Check())
    assert {f.verdict for f in seen.findings.values()} == verdicts
    assert len(seen.rows) == 2 and all(r.law and r.measured for r in seen.rows)


def test_wrong_generating_function_is_seen_beside_the_experiment(monkeypatch: pytest.MonkeyPatch) -> None:
    """phi of the ring with twice its amplitude: every coefficient is off by 1."""
    asked = question(RING + "derive.renewal = {}\n")
    made = answer(asked)
    phi = next(j.claim for j in made.judged if j.claim.id == "renewal.amplitude")
    doubled = replace(phi, value=parse("2") * phi.value, origin="user", id="claim.mine")
    seen = numbers_asked("renewal", asked.setting, (doubled,), Wants((9,)), asked.check)
    assert seen.findings["claim.mine"].verdict == "refuted"
    assert {r.apart for r in seen.rows if r.entry == "claim.mine"} == {"1"}


@pytest.mark.parametrize(("t", "tau", "n"), [
    ("20", "1/2", 40), ("20", "3/7", 46), ("2*pi", "pi/3", 6), ("2*pi", "pi/3 + 1/1000", 5), ("1/3", "1/2", 0),
    ("sqrt(8)", "sqrt(2)", 2),
])
def test_asks_by_a_time(t: str, tau: str, n: int) -> None:
    """floor(t/tau), by hand; whole quotients of irrational numbers among them."""
    assert asks_by(parse(t), parse(tau)) == n


def test_undecided_order_of_ask_and_time() -> None:
    with pytest.raises(OutsideValidity, match="before or after"):
        asks_by(parse("Gamma(1/3)*Gamma(2/3)"), parse("pi/sqrt(3)"))  # 2: Euler's reflection, DLMF 5.5.3


def test_a_start_that_is_never_seen() -> None:
    """The odd state of two leaves: no click ever, whatever the ask; all of it is left."""
    star = HEAD + 'graph = { family = "star", arms = 2, length = 1, hopping = "-g" }\ndetector.at = 0\n'
    wishes = "[derive.renewal]\nasks = [7]\n[derive.survival]\nasks = [7]\n"
    made = report(f"{star}start.state = {{ 1 = 1, 2 = -1 }}\n{wishes}")
    assert rows(made, "renewal.F.7")["7"] == ("0", "0") and rows(made, "survival.exact")["7"] == ("1", "1")
    digits = next(j.findings[0].digits for j in made.judged if j.claim.id == "renewal.F.7")
    assert digits is not None and digits > 30


def test_what_numbers_cannot_be_had_is_a_note() -> None:
    made = report(PAIR.replace("start", 'interval.law = "exponential"\nstart') + "[derive.detection]\ntimes = [9]\n")
    assert not made.asked and any("itself random" in str(note) for note in made.notes)


def test_times_that_are_too_early_or_too_late_leave_the_others() -> None:
    made = report(PAIR + '[derive.renewal]\ntimes = ["1/100", 5, "10^12*pi"]\n')
    assert set(rows(made, "renewal.F.10")) == {"10"}
    said = " ".join(str(note) for note in made.notes)
    assert "t = 1/100 comes before the first ask" in said and "at most 1,000,000,000 asks" in said


def test_the_tables_carry_every_row(ring: Report) -> None:
    files = write(ring)
    lines = files["data/numbers.csv"].decode().splitlines()
    assert len(lines) == 1 + len(ring.asked)
    page, tex = files["report.html"].decode(), files["derivation.tex"].decode()
    assert 'id="numbers"' in page and "Numbers asked for" in tex
    data: Any = json.loads(files["ledger.json"])
    assert sum(len(e["numbers"]) for e in data["entries"] if e["id"] == "renewal.F.300") == 2
