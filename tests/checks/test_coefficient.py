"""The coefficient road: hand-written coefficients agree, planted errors are refuted, what is not known is said."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace

import pytest

from derive.checks.generator import measured as measured_module
from derive.checks.generator.coefficient import check_coefficient
from derive.formula.grammar import parse, parse_relations
from derive.formula.tree import I_UNIT, ZERO, Formula
from derive.problem.setting import Check, Family, Relation, Setting, Watcher
from derive.record.said import Claim, Finding, Kind, Matrix, PerRoot
from tests.checks.blocks import (
    RIGHT,
    Blocks,
    Square,
    claim,
    combination,
    g2,
    matrix,
    product,
    q,
    transposed,
    truncated,
    twisted_graph,
    watched_plane,
)
from tests.strategies import POSITIVE, REAL, chain, setting_of, site

EFFORT = Check()
SETTINGS = {"a site": twisted_graph, "a plane": watched_plane}


def finding(setting: Setting, mine: Claim, effort: Check = EFFORT) -> Finding:
    return check_coefficient(setting, (mine,), effort)[mine.id]


@pytest.mark.parametrize("watched", SETTINGS)
@pytest.mark.parametrize("order", RIGHT)
def test_right_coefficients_agree(watched: str, order: int) -> None:
    """G_0, G_1: Phys. Rev. A 91, 062115 (2015); G_2, G_3 from the words written out in blocks.py."""
    setting = SETTINGS[watched]()
    found = finding(setting, claim(order, matrix(RIGHT[order](Blocks(setting)))))
    assert found.verdict == "agrees", found
    assert found.digits is not None
    assert found.digits >= 30
    assert found.points == 4


def wrong_sign(b: Blocks) -> Square:
    return combination((q(-1), g2(b)))


def wrong_factor(b: Blocks) -> Square:
    return combination((q(1, 6), product(b.A, b.B())), (q(1, 12), product(b.B(), b.A)), (q(-1, 6), b.B(1)))


def wrong_side(b: Blocks) -> Square:
    """V^T for V†."""
    other = product(b.V, transposed(b.V))
    return combination((q(-1, 2) * I_UNIT, other))


def dropped_C(b: Blocks) -> Square:
    return combination((q(1, 12), product(b.A, b.B())), (q(1, 12), product(b.B(), b.A)))


def other_i(b: Blocks) -> Square:
    return combination((q(1, 2) * I_UNIT, b.B()))


def shifted_moment(b: Blocks) -> Square:
    """B_0 B_0 = V mu_0 V† with mu_1 in place of mu_0, in G_3."""
    shifted = product(b.V, b.mu(1), b.adjoint)
    return combination((q(1), RIGHT[3](b)), (q(1, 12) * I_UNIT, product(b.B(), b.B())), (q(-1, 12) * I_UNIT, shifted))


def shifted_power(b: Blocks) -> Square:
    """B_2 in place of B_1."""
    return combination((q(1, 12), product(b.A, b.B())), (q(1, 12), product(b.B(), b.A)), (q(-1, 6), b.B(2)))


PLANTED = {
    "wrong sign": (2, wrong_sign),
    "wrong factor": (2, wrong_factor),
    "V^T for V†": (1, wrong_side),
    "C dropped": (2, dropped_C),
    "i -> -i": (1, other_i),
    "shifted moment": (3, shifted_moment),
    "shifted power of C": (2, shifted_power),
    "H in place of QHQ": (0, lambda b: combination((q(1), b.A), (q(1), b.C))),
    "G_1 in place of G_2": (2, RIGHT[1]),
}


@pytest.mark.parametrize("watched", SETTINGS)
@pytest.mark.parametrize("error", PLANTED)
def test_planted_errors_are_refuted(watched: str, error: str) -> None:
    setting = SETTINGS[watched]()
    order, wrong = PLANTED[error]
    found = finding(setting, claim(order, matrix(wrong(Blocks(setting)))))
    assert found.verdict == "refuted"
    assert found.points == 1
    assert {name for name, _ in found.point} == {"g", "Delta", "phi"}
    assert f"of G_{order}: claimed " in found.evidence
    assert "measured" in found.evidence


def test_a_small_error_in_the_last_digit() -> None:
    """One part in 10^25 is refuted, one part in 10^70 is beyond 30 digits and beyond the balls."""
    setting = twisted_graph()
    right = RIGHT[1](Blocks(setting))
    for exponent, verdict in ((25, "refuted"), (70, "agrees")):
        off = combination((q(10**exponent + 1, 10**exponent), right))
        assert finding(setting, claim(1, matrix(off))).verdict == verdict


def test_a_hundred_digits() -> None:
    setting = twisted_graph()
    found = finding(setting, claim(2, matrix(g2(Blocks(setting)))), Check(digits=100, samples=1))
    assert found.verdict == "agrees"
    assert found.digits is not None
    assert found.digits >= 100


def without(m: Matrix, x: int, y: int) -> Matrix:
    """An absent entry is claimed zero."""
    return replace(m, patch=tuple((a, tuple((b, f) for b, f in row if (a, b) != (x, y))) for a, row in m.patch))


def with_entry(m: Matrix, x: int, y: int, f: Formula) -> Matrix:
    rows = {a: dict(row) for a, row in m.patch}
    rows.setdefault(x, {})[y] = f
    return replace(m, patch=tuple((a, tuple(sorted(row.items()))) for a, row in sorted(rows.items())))


def test_absent_and_superfluous_entries() -> None:
    setting = chain(41, 20, detuning=True)
    right = matrix(g2(Blocks(setting)))
    assert finding(setting, claim(2, right)).verdict == "agrees"
    gone = finding(setting, claim(2, without(right, 19, 21)))
    assert gone.verdict == "refuted"
    assert gone.evidence.startswith("entry (19, 21) of G_2: claimed 0,")
    near = finding(setting, claim(2, with_entry(right, 18, 18, parse("g"))))
    assert near.verdict == "refuted"
    far = finding(setting, claim(2, with_entry(right, 0, 40, parse("g/1000"))))
    assert far.verdict == "refuted"
    assert "(0, 40)" in far.evidence
    assert "measured 0" in far.evidence


def test_far_rows_of_the_start() -> None:
    """G_0 is compared on every site, also where nothing was measured by the contour."""
    setting = chain(41, 20, detuning=True)
    rows = setting.space.rows  # type: ignore[union-attr]
    cut = ((19, ((18, rows[19][0][1]),)), (20, ()), (21, ((22, rows[21][1][1]),)))
    assert finding(setting, claim(0, Matrix(41, rows, cut))).verdict == "agrees"
    for x, row in ((3, ((2, parse("-g")), (4, parse("g")))), (3, ()), (0, ((1, parse("-g")), (7, parse("g"))))):
        found = finding(setting, claim(0, Matrix(41, rows, tuple(sorted((*cut, (x, row)))))))
        assert found.verdict == "refuted"
        assert f"entry ({x}, " in found.evidence
    reordered = (3, ((2, parse("0 - g")), (4, parse("-g"))))
    assert finding(setting, claim(0, Matrix(41, rows, tuple(sorted((*cut, reordered)))))).verdict == "agrees"


def test_single_entries() -> None:
    """The chain's <19|G_2|21> = -Delta g^2/6 and <18|G_2|19> = -g^3/12, by the words above."""
    setting = chain(41, 20, detuning=True)
    for entry, text, verdict in [
        ((19, 21), "-Delta*g^2/6", "agrees"),
        ((18, 19), "-g^3/12", "agrees"),
        ((19, 21), "Delta*g^2/6", "refuted"),
        ((0, 40), "0", "agrees"),
        ((0, 40), "g^3", "refuted"),
        ((20, 20), "0", "agrees"),
    ]:
        assert finding(setting, claim(2, parse(text), entry=entry)).verdict == verdict
    assert finding(setting, claim(0, parse("-g"), entry=(0, 1))).verdict == "agrees"
    assert finding(setting, claim(0, parse("-g"), entry=(20, 21))).verdict == "refuted"


def two_levels() -> Setting:
    """H = -g sigma_x, watched on level 1: Q U Q = cos(g tau)."""
    return setting_of([{1: parse("-g")}, {0: parse("-g")}], (site(1),), g=POSITIVE, Delta=REAL)


def up_to(order: int) -> Kind:
    return Kind("order", f"up to O(tau^{order})", order)


def test_closed_forms_in_tau() -> None:
    """G = (i/tau) log cos(g tau), from Q U Q = cos(g tau) for two levels."""
    setting = two_levels()
    right = Matrix(2, (), ((0, ((0, parse("i*log(cos(g*tau))/tau")),)),))
    assert finding(setting, claim(None, right, kind=up_to(9))).verdict == "agrees"
    single = claim(None, parse("i*log(cos(g*tau))/tau"), kind=up_to(6), entry=(0, 0))
    assert finding(setting, single).verdict == "agrees"
    off = Matrix(2, (), ((0, ((0, parse("-i*(g^2*tau/2 + g^4*tau^3/13)")),)),))
    assert finding(setting, claim(None, off, kind=up_to(3))).verdict == "agrees"
    found = finding(setting, claim(None, off, kind=up_to(4)))
    assert found.verdict == "refuted"
    assert "of G_3" in found.evidence


def test_closed_forms_claimed_exactly() -> None:
    """All of G(tau): i log(cos(g tau))/tau agrees at sampled tau; a change beyond tau^6, unseen so far, is refuted."""
    setting = two_levels()
    right = Matrix(2, (), ((0, ((0, parse("i*log(cos(g*tau))/tau")),)),))
    found = finding(setting, claim(None, right))
    assert (found.verdict, found.road, found.points) == ("agrees", "enclosure", 4)
    assert found.digits is not None
    assert found.digits >= 30
    late = finding(setting, claim(None, parse("i*log(cos(g*tau))/tau + g^12*tau^11/10^9"), entry=(0, 0)))
    assert (late.verdict, late.road) == ("refuted", "enclosure")
    assert "tau" in dict(late.point)
    missing = finding(setting, claim(None, Matrix(2)))
    assert missing.verdict == "refuted"
    wrong = Matrix(2, (), ((0, ((0, parse("i*log(cos(2*g*tau))/tau")),)),))
    assert (finding(setting, claim(None, wrong)).verdict) == "refuted"


def test_closed_forms_keep_to_small_tau() -> None:
    """A relation that holds tau above 1/(4h) leaves no point; on many sites nothing is compared."""
    setting = two_levels()
    right = claim(None, parse("i*log(cos(g*tau))/tau"), entry=(0, 0))
    assert finding(setting, assuming(right, "g*tau > 1/2")).verdict == "untested"
    assert finding(setting, assuming(right, "g*tau < 1/5")).verdict == "agrees"
    assert finding(chain(61, 30), claim(None, parse("-g"), entry=(0, 1))).verdict == "untested"


def test_truncated_expansions() -> None:
    setting = twisted_graph()
    b = Blocks(setting)
    good = truncated(setting, *(RIGHT[k](b) for k in range(4)))
    assert finding(setting, good).verdict == "agrees"
    bad = truncated(setting, RIGHT[0](b), RIGHT[1](b), dropped_C(b), RIGHT[3](b))
    found = finding(setting, bad)
    assert found.verdict == "refuted"
    assert "of G_2" in found.evidence


def test_claims_share_what_is_measured(monkeypatch: pytest.MonkeyPatch) -> None:
    """Four claims, one measurement a point."""
    from derive.checks.generator import coefficient

    calls = []
    real = coefficient.measure
    monkeypatch.setattr(coefficient, "measure", lambda *a: calls.append(1) or real(*a))
    setting = twisted_graph()
    b = Blocks(setting)
    claims = tuple(claim(k, matrix(RIGHT[k](b)), f"generator.{k}") for k in RIGHT)
    found = check_coefficient(setting, claims, EFFORT)
    assert len(calls) == EFFORT.samples
    assert [found[f"generator.{k}"].verdict for k in RIGHT] == ["agrees"] * 4


def assuming(mine: Claim, source: str) -> Claim:
    return replace(mine, assume=tuple(Relation(*r) for r in parse_relations(source)))


def test_assumptions_choose_the_points() -> None:
    """A claim that is right for Delta = 0 only is refuted without and agrees with that assumption."""
    setting = chain(9, 4, detuning=True)
    special = claim(2, matrix(dropped_C(Blocks(setting))))
    assert finding(setting, special).verdict == "refuted"
    assert finding(setting, assuming(special, "Delta = 0")).verdict == "agrees"
    found = finding(setting, assuming(special, "g < 0"))
    assert (found.verdict, found.evidence) == ("untested", "no sampled point met the assumptions")


def test_what_stays_open_is_said() -> None:
    setting = chain(9, 4, detuning=True)
    limit = claim(1, parse("0"), kind=Kind("limit", "as n -> infinity"), entry=(3, 3))
    assert finding(setting, limit).verdict == "untested"
    assert finding(setting, claim(1, parse("g"))).verdict == "untested"  # a formula without its entry
    assert finding(setting, claim(1, PerRoot(parse("E"), "E", parse("E")))).verdict == "untested"
    pole = claim(1, parse("1/sin(0*g)"), entry=(3, 3))
    assert finding(setting, pole).verdict == "untested"
    assert "left out" in finding(setting, pole).evidence
    fog = claim(1, parse("-i*g^2/2 + floor(sqrt(2)^2 - 2)"), entry=(3, 3))
    assert finding(setting, fog).verdict == "undecided"
    dim = replace(setting, detectors=(Watcher((site(4),), q(1, 2)),))
    assert finding(dim, claim(1, parse("0"), entry=(0, 0))).verdict == "untested"
    symbolic = replace(setting, space=Family("chain", (), parse("-g")))
    assert finding(symbolic, claim(1, parse("0"), entry=(0, 0))).verdict == "untested"


def test_claims_about_other_things_are_left_alone() -> None:
    assert check_coefficient(two_levels(), (Claim("generator.universal.0", "generator", None, ZERO),), EFFORT) == {}


def test_large_regions_are_probed(monkeypatch: pytest.MonkeyPatch) -> None:
    """With no work allowed for matrices, vectors are probed: right agrees, each planted error is still refuted."""
    monkeypatch.setattr(measured_module, "DENSE_WORK", 0)
    setting = watched_plane()
    b = Blocks(setting)
    one = Check(samples=1)
    for order, right in RIGHT.items():
        found = finding(setting, claim(order, matrix(right(b))), one)
        assert found.verdict == "agrees"
        assert "probed" in found.evidence
    for order, wrong in PLANTED.values():
        assert finding(setting, claim(order, matrix(wrong(b))), one).verdict == "refuted"
    entry = combination((q(1), g2(b)))[0][4]
    assert finding(setting, claim(2, entry, entry=(0, 4)), one).verdict == "agrees"
    assert finding(setting, claim(2, entry + q(1), entry=(0, 4)), one).verdict == "refuted"
    monkeypatch.setattr(measured_module, "PROBE_WORK", 0)
    found = finding(setting, claim(2, matrix(g2(b))), one)
    assert found.verdict == "untested"
    assert "too many" in found.evidence


def test_an_order_out_of_reach_takes_no_other_with_it() -> None:
    setting = two_levels()
    claims = (claim(1, parse("-i*g^2/2"), "claim.low", entry=(0, 0)), claim(70, parse("0"), "claim.high", entry=(0, 0)))
    found = check_coefficient(setting, claims, EFFORT)
    assert (found["claim.low"].verdict, found["claim.high"].verdict) == ("agrees", "untested")


def test_names_of_sites_are_used() -> None:
    setting = two_levels()
    named = replace(setting, space=replace(setting.space, names=("left", "right")))
    found = finding(named, claim(1, parse("g"), entry=(0, 0)))
    assert found.evidence.startswith("entry (left, left) of G_1")


def test_nothing_that_derives_is_imported() -> None:
    """The road shares the formula tree and the setting with the derivation, nothing else."""
    script = (
        "import sys\n"
        "from derive.checks.generator import coefficient, experiment, words\n"
        "print([m for m in sys.modules if m.startswith(('derive.algebra', 'derive.derivations', 'sympy'))])"
    )
    found = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"


@pytest.mark.slow
def test_order_ten_on_all_sixty_one_sites(monkeypatch: pytest.MonkeyPatch) -> None:
    """The derived G_0 .. G_10 of the 61-site chain against contours over the whole chain, not a ball of it."""
    from derive.checks.generator import coefficient
    from derive.derivations.generator.topic import derive_generator
    from derive.problem.setting import Wish

    monkeypatch.setattr(coefficient, "ball", lambda rows, sites, radius: tuple(range(len(rows))))
    setting = chain(61, 30, detuning=True)
    claims = derive_generator(setting, Wish("generator", (("order", 10),))).claims
    found = check_coefficient(setting, claims, Check(samples=1))
    assert len(found) == 12
    assert {f.verdict for f in found.values()} == {"agrees"}
    assert "61 sites" in found["generator.10"].evidence
