"""Planted errors in the derivation: each is refuted with the exact road off, and again with the ball road off.

The plants sit in the derivation's own algebra; the checks run untouched.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import pytest

from derive.algebra import words as word_algebra
from derive.algebra.local import Moments
from derive.algebra.words import Words, truncated_word_log
from derive.derivations import watched
from derive.derivations.generator import topic as generator
from derive.exact.field import Field
from derive.pipeline import answer
from derive.problem.setting import Check, Question, Setting, Wish
from tests.strategies import chain, random_hermitian, random_pair, setting_of

ORDER = 4
CASES = {
    "detuned chain": chain(7, 3, detuning=True),
    "rank two, complex": setting_of(random_hermitian(7, 5), random_pair(7, 5)),
}
WITHOUT_EXACT, WITHOUT_BALLS = ("exact", "trend"), ("coefficient", "trend")
Plant = Callable[[pytest.MonkeyPatch], None]


def verdicts(setting: Setting, without: tuple[str, ...], order: int = ORDER) -> dict[str, str]:
    question = Question(setting, (Wish("generator", (("order", order),)),), check=Check(samples=1))
    return {j.claim.id: j.verdict for j in answer(question, without=without).judged}


def transposed(monkeypatch: pytest.MonkeyPatch) -> None:
    """V† -> V^T: nothing is conjugated while deriving."""
    derive = generator.generator_terms

    def unconjugated(setting: Setting, order: int) -> generator.Terms:
        with pytest.MonkeyPatch.context() as inner:
            inner.setattr(Field, "conjugate", lambda self, x: x)
            return derive(setting, order)

    monkeypatch.setattr(generator, "generator_terms", unconjugated)


def other_unit(monkeypatch: pytest.MonkeyPatch) -> None:
    """i -> -i in G_k = (-i)^k L_(k+1)."""
    rotated = watched.rotated
    monkeypatch.setattr(watched, "rotated", lambda x, k: rotated(x, 3 * k))


def shifted_moment(monkeypatch: pytest.MonkeyPatch) -> None:
    """mu_m -> mu_(m+1)."""
    moments = watched.Watched.moments

    def shifted(self: watched.Watched, krylov: list, highest: int) -> Moments:
        found = moments(self, krylov, highest + 1)
        return Moments(found.field, found.c, found.mu[1:])

    monkeypatch.setattr(watched.Watched, "moments", shifted)


def dropped_detuning(monkeypatch: pytest.MonkeyPatch) -> None:
    """C = 0."""
    moments = watched.Watched.moments

    def dropped(self: watched.Watched, krylov: list, highest: int) -> Moments:
        found = moments(self, krylov, highest)
        return Moments(found.field, [[x - x for x in row] for row in found.c], found.mu)

    monkeypatch.setattr(watched.Watched, "moments", dropped)


PLANTS: dict[str, tuple[str, Plant]] = {
    "V transposed": ("rank two, complex", transposed),
    "i to -i": ("detuned chain", other_unit),
    "shifted moment": ("rank two, complex", shifted_moment),
    "C dropped": ("detuned chain", dropped_detuning),
}


@pytest.mark.parametrize("without", [(), WITHOUT_EXACT, WITHOUT_BALLS], ids=["all roads", "balls alone", "exact alone"])
@pytest.mark.parametrize("case", CASES)
def test_unplanted_passes(case: str, without: tuple[str, ...]) -> None:
    found = verdicts(CASES[case], without)
    wanted = {(): {"proved", "agrees"}, WITHOUT_EXACT: {"agrees"}, WITHOUT_BALLS: {"untested"}}[without]
    assert set(found.values()) <= wanted and len(found) == 2 * ORDER + 3
    if not without:
        assert all(found[f"generator.{k}"] == "proved" for k in range(ORDER + 1))


@pytest.mark.parametrize("without", [WITHOUT_EXACT, WITHOUT_BALLS], ids=["balls alone", "exact alone"])
@pytest.mark.parametrize("name", PLANTS)
def test_a_plant_in_the_local_algebra_is_refuted(
    name: str, without: tuple[str, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    case, plant = PLANTS[name]
    plant(monkeypatch)
    found = verdicts(CASES[case], without)
    assert "refuted" in {found[f"generator.{k}"] for k in range(1, ORDER + 1)}
    assert found["generator.truncated"] == "refuted"


def _every_word() -> list[tuple[int, tuple[int, ...]]]:
    return [(d, word) for d, log in enumerate(truncated_word_log(5), start=1) for word in sorted(log.terms)]


@pytest.mark.parametrize("without", [WITHOUT_EXACT, WITHOUT_BALLS], ids=["balls alone", "exact alone"])
@pytest.mark.parametrize(("degree", "word"), _every_word(), ids=str)
def test_every_word_coefficient_counts(
    degree: int, word: tuple[int, ...], without: tuple[str, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    """One coefficient of one word, off by a hundredth of itself."""

    def spoilt(n: int) -> list[Words]:
        logs = word_algebra.truncated_word_log(n)
        terms = dict(logs[degree - 1].terms)
        terms[word] *= Fraction(101, 100)
        logs[degree - 1] = Words(terms)
        return logs

    monkeypatch.setattr(generator, "truncated_word_log", spoilt)
    found = verdicts(chain(3, 1), without)
    refuted = [name for name, v in found.items() if v == "refuted"]
    assert refuted == [f"generator.universal.{degree - 1}"]
