"""Changed formulas are refuted, unchanged ones are not, and what is said about them cures them: a seeded sample.

The whole table:  .venv/bin/python -m tests.trust   (or this file with --slow).  The outside road is mpmath.
"""

from __future__ import annotations

from random import Random

import pytest

from derive import pipeline
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.record.holds import kind_of
from derive.record.said import EXACTLY, Judged
from tests.trust.measure import ROOT, Trust, measure
from tests.trust.mutants import WAYS, Given, mutants
from tests.trust.outside import Meant, differs, points

SAMPLE = ["nine-cavities", "ring-with-flux", "levels-nine-cavities", "levels-odd-chain", "detection-hexagon"]


def holds(trust: Trust) -> None:
    said = "\n".join(trust.table())
    assert not trust.false_passes, said
    assert not trust.false_refutations, said
    assert not trust.broken, said
    assert len(trust.open) <= 0.02 * len(trust.cases), said
    right, asked = trust.diagnosed()
    assert right >= 0.8 * asked, said


def test_a_seeded_sample() -> None:
    trust = measure(SAMPLE, each=12, seed=3, most=2)
    assert len(trust.cases) >= 80
    holds(trust)


@pytest.mark.slow
def test_every_worksheet() -> None:
    trust = measure(sorted(p.stem for p in (ROOT / "worksheets").glob("*.toml")), each=35, seed=1, most=4)
    assert len(trust.cases) >= 1000
    holds(trust)


def test_a_judge_that_lets_everything_pass_is_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    """Planted: the measurement itself is shown to fail."""
    judge = pipeline._judge

    def kind(claim, seen) -> Judged:  # type: ignore[no-untyped-def]
        found = judge(claim, seen)
        return Judged(found.claim, "agrees", found.findings)

    monkeypatch.setattr(pipeline, "_judge", kind)
    trust = measure(["nine-cavities"], each=12, seed=3, most=1)
    assert len(trust.false_passes) > 5


def test_a_judge_that_refutes_everything_is_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    judge = pipeline._judge

    def hard(claim, seen) -> Judged:  # type: ignore[no-untyped-def]
        found = judge(claim, seen)
        return Judged(found.claim, "refuted", found.findings)

    monkeypatch.setattr(pipeline, "_judge", hard)
    trust = measure(["nine-cavities"], each=45, seed=3, most=1)
    assert trust.false_refutations


def test_there_are_more_than_thirty_ways() -> None:
    f = parse("4/5*g^2*tau*sin(pi*k/(L + 1))^2 - i*g*exp(i*x)/3 + sqrt(2)*cos(x)*tau^2")
    given = Given(f, ("g", "x", "k"), ("k", "L"), 3, Random(1))
    found = list(mutants(given, 100))
    assert len({m.way for m in found}) >= 30 and len(WAYS) >= 30
    assert len({text(m.formula) for m in found}) == len(found)


@pytest.mark.parametrize(
    ("mutant", "order", "answer"),
    [
        ("g^2*tau/2", None, True), ("tau*g*g", None, False), ("g^2*tau + 5*tau^3", 3, False),
        ("g^2*tau + 5*tau^3", 4, True), ("g^2*tau + tau^3/10^9", 4, True), ("g^2*sin(tau)", 3, False),
        ("g^2*sin(tau)", 4, True), ("g^2*tau + 10^6*tau^3", 3, False), ("g^2*tau*1001/1000", 3, True),
    ],
)
def test_the_outside_road_knows_orders(mutant: str, order: int | None, answer: bool) -> None:
    from derive.problem.setting import POSITIVE

    where = points({"g": POSITIVE, "tau": POSITIVE}, {}, (), 5)
    kind = EXACTLY if order is None else kind_of(f"up to O(tau^{order})")
    assert differs(parse("g^2*tau"), parse(mutant), Meant(kind), where) is answer
