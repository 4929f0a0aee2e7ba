"""The exact road: right generators are proved, and every way of being wrong is refuted with a place."""

from __future__ import annotations

from dataclasses import replace

import pytest

from derive.checks.generator.coefficient import check_coefficient
from derive.checks.generator.exact import check_exact
from derive.checks.generator.words_exact import check_words_exact
from derive.derivations.generator.topic import derive_generator
from derive.formula.grammar import parse
from derive.formula.tree import I_UNIT, Formula, number, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Relation, Setting, Wish
from derive.record.said import EXACTLY, Claim, Expansion, Finding, Kind, Matrix
from tests.strategies import chain, random_hermitian, random_pair, setting_of, site

QUICK = Check(samples=2)


def derived(setting: Setting, order: int) -> dict[str, Claim]:
    wish = Wish("generator", (("order", order),))
    return {c.id: c for c in derive_generator(setting, wish).claims}


def own(order: int, value: Matrix | Formula, entry: tuple[int, int] | None = None) -> Claim:
    keys = (("order", order),) if entry is None else (("order", order), ("entry", entry))
    return Claim("claim.mine", "generator", Quantity("generator", keys), value, origin="user")


def found(setting: Setting, claim: Claim) -> Finding:
    return check_exact(setting, (claim,), QUICK)[claim.id]


@pytest.mark.parametrize(
    "setting",
    [
        chain(7, 3, detuning=True),
        setting_of(random_hermitian(7, 5), random_pair(7, 5)),
        setting_of(random_hermitian(6, 2), (site(0), site(4))),
    ],
    ids=["chain", "rank two, complex", "two sites"],
)
def test_derived_generators_are_proved(setting: Setting) -> None:
    """Road: re-exponentiation, which has no logarithm and no detector-local algebra."""
    findings = check_exact(setting, tuple(derived(setting, 4).values()), QUICK)
    assert {name: f.verdict for name, f in findings.items()} == {
        **{f"generator.{k}": "proved" for k in range(5)}, "generator.truncated": "proved"
    }


def _changed(matrix: Matrix, factor: Formula) -> Matrix:
    """One entry multiplied."""
    rows: dict[int, list[tuple[int, Formula]]] = {}
    entries = list(matrix.entries())
    x0, y0, f0 = entries[len(entries) // 2]
    for x, y, f in entries:
        rows.setdefault(x, []).append((y, times(factor, f0) if (x, y) == (x0, y0) else f))
    return Matrix(matrix.size, (), tuple((x, tuple(r)) for x, r in sorted(rows.items())))


@pytest.mark.parametrize("order", range(5))
@pytest.mark.parametrize("factor", [number(2), number(-1), I_UNIT], ids=["doubled", "sign", "times i"])
def test_one_wrong_entry_is_refuted(order: int, factor: Formula) -> None:
    setting = chain(9, 4, detuning=True)
    claim = derived(setting, 4)[f"generator.{order}"]
    assert isinstance(claim.value, Matrix)
    finding = found(setting, replace(claim, value=_changed(claim.value, factor)))
    assert finding.verdict == "refuted" and f"G_{order}" in finding.evidence and finding.point


def test_an_entry_too_many_and_one_too_few() -> None:
    setting = chain(9, 4)
    claim = derived(setting, 2)["generator.2"]
    assert isinstance(claim.value, Matrix)
    far = Matrix(9, (), (*claim.value.patch, (8, ((8, parse("g/1000000")),))))
    fewer = Matrix(9, (), claim.value.patch[1:])
    assert found(setting, replace(claim, value=far)).verdict == "refuted"
    assert found(setting, replace(claim, value=fewer)).verdict == "refuted"


def test_a_far_entry_of_the_cut_hamiltonian() -> None:
    setting = chain(40, 3)
    claim = derived(setting, 1)["generator.0"]
    assert isinstance(claim.value, Matrix)
    assert found(setting, claim).verdict == "proved"
    entries = {(x, y): f for x, y, f in claim.value.entries()}
    entries[30, 31] = parse("g")
    rows = tuple((x, tuple((y, f) for (a, y), f in sorted(entries.items()) if a == x)) for x in range(40))
    assert found(setting, replace(claim, value=Matrix(40, (), rows))).verdict == "refuted"


def test_one_entry_written_another_way() -> None:
    setting = chain(9, 4, detuning=True)
    assert found(setting, own(2, parse("-(1/12)*(2*Delta*g^2)"), (3, 5))).verdict == "proved"
    assert found(setting, own(2, parse("g^2*Delta/6"), (3, 5))).verdict == "refuted"
    assert found(setting, own(2, number(0), (4, 4))).verdict == "proved"


def test_a_residual_that_assumptions_kill_is_undecided() -> None:
    """With Delta = 0 assumed, a claim that lacks Delta is not refuted at any point it speaks of."""
    setting = chain(9, 4, detuning=True)
    claim = own(2, number(0), (3, 5))
    assumed = replace(claim, assume=(Relation(parse("Delta"), "=", number(0)),))
    assert found(setting, claim).verdict == "refuted"
    assert found(setting, assumed).verdict == "undecided"


def test_a_whole_generator_in_tau() -> None:
    """The truncated generator written as one entry in tau, right and wrong in its last order."""
    setting = chain(3, 1, detuning=True)
    quantity = Quantity("generator", (("entry", (0, 2)),))
    right = Claim("claim.mine", "generator", quantity, parse("-i*tau*g^2/2 - tau^2*g^2*Delta/6"),
                  Kind("order", "up to O(tau^3)", 3), origin="user")
    assert found(setting, right).verdict == "proved"
    wrong = replace(right, value=parse("-i*tau*g^2/2 - tau^2*g^2*Delta/5"))
    assert found(setting, wrong).verdict == "refuted"
    assert found(setting, replace(wrong, kind=Kind("order", "up to O(tau^2)", 2))).verdict == "proved"


def test_a_formula_without_a_place_gets_no_finding() -> None:
    setting = chain(3, 1)
    assert check_exact(setting, (own(1, parse("abs(Delta)"), (0, 0)),), QUICK) == {}


def test_words_are_proved_and_planted_words_refuted() -> None:
    setting = chain(3, 1)
    claims = tuple(c for c in derived(setting, 4).values() if "universal" in c.id)
    assert {f.verdict for f in check_words_exact(setting, claims, QUICK).values()} == {"proved"}
    for claim in claims:
        assert isinstance(claim.value, Formula)
        wrong = replace(claim, value=times(number(-1), claim.value), kind=EXACTLY)
        finding = check_words_exact(setting, (wrong,), QUICK)[claim.id]
        assert finding.verdict == "refuted" and "word" in finding.evidence


def test_expansions_are_compared_term_by_term() -> None:
    setting = chain(5, 2, detuning=True)
    claim = derived(setting, 3)["generator.truncated"]
    assert isinstance(claim.value, Expansion)
    terms = claim.value.terms
    swapped = replace(claim.value, terms=(terms[0], terms[1], terms[3], terms[2]))
    assert found(setting, replace(claim, value=swapped)).verdict == "refuted"


def test_all_orders_at_once_get_no_finding() -> None:
    """Finitely many coefficients neither prove nor refute a claim about all of G(tau)."""
    quantity = Quantity("generator", (("entry", (0, 2)),))
    claim = Claim("claim.mine", "generator", quantity, parse("-i*tau*g^2/2"), origin="user")
    assert check_exact(chain(3, 1), (claim,), QUICK) == {}


@pytest.mark.parametrize(
    ("source", "measured"),
    [
        ("-i*sin(tau*g^2)/2", "agrees"),
        ("-i*g^2*tau*exp(tau)/2", "agrees"),
        ("-i*g^2*tau/(2 - tau)", "agrees"),
        ("-i*g^2*sqrt(tau)*sqrt(tau)/2", "untested"),  # a branch point at tau = 0 has no power series
    ],
)
def test_tau_inside_a_function_is_left_to_the_other_road(source: str, measured: str) -> None:
    """All are -i g^2 tau/2 up to O(tau^2); no polynomial in tau, no exact finding."""
    quantity = Quantity("generator", (("entry", (0, 0)),))
    claim = Claim("claim.mine", "generator", quantity, parse(source), Kind("order", "up to O(tau^2)", 2), origin="user")
    assert check_exact(chain(3, 1), (claim,), QUICK) == {}
    assert check_coefficient(chain(3, 1), (claim,), QUICK)["claim.mine"].verdict == measured


@pytest.mark.parametrize("entry", [(0, 1), (1, 2), (3, 2), (4, 4), (2, 2), (0, 6)])
def test_one_entry_of_the_start_wherever_it_stands(entry: tuple[int, int]) -> None:
    """G_0 = QHQ is no local matter: an entry far from the detector is H's own.  Oracle: the chain's matrix by hand."""
    setting = chain(7, 3, detuning=True)
    x, y = entry
    bond = abs(x - y) == 1 and 3 not in entry
    truth = parse("-g") if bond else number(0)
    assert found(setting, own(0, truth, entry)).verdict == "proved"
    assert found(setting, own(0, truth + parse("g"), entry)).verdict == "refuted"
    in_tau = replace(own(0, truth, entry), quantity=Quantity("generator", (("entry", entry),)))
    assert found(setting, replace(in_tau, kind=Kind("order", "up to O(tau)", 1))).verdict == "proved"
