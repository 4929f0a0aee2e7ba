"""Ten seeded graphs of 6 to 9 sites with forced degeneracies: derived totals and dimensions against the experiment.

Degenerate by construction: two or three equal arms hang on one site, which joins a random weighted rest; every arm's
difference to another is an eigenvector that the rest never sees.  The experiment is summed over all asks by doubling,
with a rigorous tail.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from random import Random

import pytest

from derive.checks.summed import check_summed
from derive.derivations.detection.topic import derive_detection
from derive.exact.zero import vanishes
from derive.formula.tree import ONE, Formula, number
from derive.pipeline import answer
from derive.problem.setting import Check, Question, Setting, Start, Wish
from derive.record.said import Claim
from tests.strategies import setting_of, site

QUICK = Check(samples=1, digits=30)


def degenerate_graph(seed: int) -> tuple[Setting, int]:
    """(setting, number of equal arms); sites 0 ... arms-1 are the arms' tips, site `arms` their joint."""
    rng = Random(seed)
    arms = rng.choice((2, 3))
    size = rng.randint(6, 9)
    rows: list[dict[int, Formula]] = [{} for _ in range(size)]
    bond, energy = Fraction(rng.randint(1, 3), rng.randint(1, 2)), Fraction(rng.randint(-2, 2), 2)
    for x in range(arms):
        rows[x][arms] = rows[arms][x] = number(bond)
        if energy:
            rows[x][x] = number(energy)
    for x in range(arms + 1, size):
        for y in range(arms, x):
            if y == x - 1 or rng.random() < 0.4:
                value = number(rng.choice((-2, -1, 1, 2)))
                rows[x][y] = rows[y][x] = value
    watched = rng.randint(arms + 1, size - 1)
    return replace(setting_of(rows, (site(watched),)), start=Start(((ONE, site(0)),))), arms


@pytest.mark.parametrize("seed", range(10))
def test_forced_degeneracies(seed: int) -> None:
    setting, arms = degenerate_graph(seed)
    derived = {c.id: c for c in derive_detection(setting, Wish("detection")).claims}
    total, dark = derived["detection.total"].value, derived["detection.dark_dimension"].value
    assert isinstance(total, Formula) and isinstance(dark, Formula)
    assert total.args[0] <= Fraction(1, arms)  # the symmetry bound of Phys. Rev. Research 2, 023392 (2020)
    assert dark.args[0] >= arms - 1
    report = answer(Question(setting, (Wish("detection", (("dark_basis", True),)),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"}


@pytest.mark.parametrize("seed", [0, 3])
def test_a_slightly_wrong_total_is_refuted(seed: int) -> None:
    setting, _ = degenerate_graph(seed)
    claim: Claim = derive_detection(setting, Wish("detection")).claims[0]
    assert isinstance(claim.value, Formula)
    wrong = replace(claim, value=claim.value + number(Fraction(1, 10**20)))
    assert vanishes(wrong.value - claim.value, {}) is False  # type: ignore[operator]
    assert check_summed(setting, (wrong,), QUICK).findings[claim.id].verdict == "refuted"
