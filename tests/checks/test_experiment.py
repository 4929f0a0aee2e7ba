"""The order check: right truncations fall as they must, planted errors stay flat, starts of every kind, same bytes."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
import scipy.linalg

from derive.checks.generator.experiment import check_order
from derive.checks.seen import Seen
from derive.formula.grammar import parse
from derive.formula.tree import I_UNIT, Formula, number
from derive.problem.setting import Check, Setting, Start, Watcher
from derive.record.said import Finding, Number
from tests.checks.blocks import (
    RIGHT,
    Blocks,
    Square,
    combination,
    g2,
    q,
    square,
    truncated,
    twisted_graph,
    watched_plane,
)
from tests.checks.test_coefficient import dropped_C, other_i, wrong_factor, wrong_side, wrong_sign
from tests.strategies import POSITIVE, REAL, chain, setting_of, site

NAME = "generator.truncated"


def seen(setting: Setting, orders: int = 4, **planted: Square) -> Seen:
    b = Blocks(setting)
    coefficients = [planted.get(f"g{k}") or RIGHT[k](b) for k in range(orders)]
    return check_order(setting, truncated(setting, *coefficients), Check())


def finding(*args, **more) -> Finding:  # type: ignore[no-untyped-def]
    return seen(*args, **more).findings[NAME]


def starting(setting: Setting, *vectors: dict[int, Formula]) -> Setting:
    weight = q(1, len(vectors))
    return replace(setting, start=Start(tuple((weight, tuple(sorted(v.items()))) for v in vectors)))


def numbers(found: Seen, **at: str) -> list[Number]:
    return [n for n in found.numbers[NAME] if at.items() <= dict(n.at).items()]


@pytest.mark.parametrize("make", [twisted_graph, watched_plane, lambda: chain(9, 4, True), lambda: chain(5, 0, True)])
def test_right_truncations_fall(make) -> None:  # type: ignore[no-untyped-def]
    """Slope k + 1 at every order k = 0..3."""
    found = seen(make())
    assert found.findings[NAME].verdict == "agrees", found.findings
    slopes = [float(n.value) for n in found.numbers[NAME] if "slope" in dict(n.at)]
    assert len(slopes) == 4
    assert all(abs(s - k - 1) < 0.1 for k, s in enumerate(slopes))


PLANTED = {
    "wrong sign of G_2": ("g2", wrong_sign, 2),
    "wrong factor in G_2": ("g2", wrong_factor, 2),
    "C dropped": ("g2", dropped_C, 2),
    "i -> -i in G_1": ("g1", other_i, 1),
    "V^T for V† in G_1": ("g1", wrong_side, 1),
    "G_3 without its last word": ("g3", lambda b: combination((q(9, 10), RIGHT[3](b))), 3),
    "H's detector row kept": ("g0", lambda b: combination((q(2), b.A)), 0),
}


@pytest.mark.parametrize("make", [twisted_graph, watched_plane])
@pytest.mark.parametrize("error", PLANTED)
def test_planted_errors_stay_flat(error: str, make) -> None:  # type: ignore[no-untyped-def]
    setting = make()
    which, wrong, order = PLANTED[error]
    found = finding(setting, **{which: wrong(Blocks(setting))})
    assert found.verdict == "refuted"
    assert int(found.evidence.split("at order ")[1].split()[0]) >= order
    assert found.point


def test_errors_against_scipy() -> None:
    """Order-0 and order-2 state errors and the survival of a five-site graph, by scipy's expm in doubles."""
    setting = starting(twisted_graph(), {0: number(1)})
    found = seen(setting, 3)
    at = dict(found.numbers[NAME][0].at)
    point = {name: Fraction(at[name]) for name in ("g", "Delta", "phi")}
    H = numeric(square(setting), point)
    G = [numeric(RIGHT[k](Blocks(setting)), point) for k in range(3)]
    Q = np.diag([1, 0, 1, 1, 1])
    psi = np.eye(5)[0]
    for order, tolerance in ((0, 1e-9), (2, 1e-5)):
        for n in numbers(found, order=str(order))[:3]:
            tau, t = (float(Fraction(dict(n.at)[name])) for name in ("tau", "t"))
            asks = round(t / tau)
            seen_state = np.linalg.matrix_power(Q @ scipy.linalg.expm(-1j * H * tau), asks) @ psi
            truncation = sum(tau**k * G[k] for k in range(order + 1))
            gap = np.linalg.norm(seen_state - scipy.linalg.expm(-1j * t * truncation) @ psi)
            # the number is printed with a radius of its own; what is beyond that must be the doubles' rounding
            assert abs(float(n.value) - gap) <= float(n.radius) + tolerance * gap
    survival = found.plots[1]
    tau = float(Fraction(survival.says.split("tau = ")[1].split(":")[0]))
    measured = next(c for c in survival.curves if c.role == "measured")
    for n in (1, 7, 60):
        state = np.linalg.matrix_power(Q @ scipy.linalg.expm(-1j * H * tau), n) @ psi
        assert float(measured.y[n]) == pytest.approx(np.linalg.norm(state) ** 2, rel=2e-6)


def numeric(m: Square, point: dict[str, Fraction]) -> np.ndarray:
    from derive.formula.text import text

    names = {name: float(value) for name, value in point.items()}
    names |= {"i": 1j, "exp": np.exp, "conj": np.conj}  # type: ignore[dict-item]
    return np.array([[complex(eval(text(f).replace("^", "**"), names)) for f in row] for row in m])


def test_starts_on_the_detector_and_beside_it() -> None:
    """Overlap with the detector: the first ask is exact, the rest is compared; the return problem falls faster."""
    base = chain(7, 3, True)
    returning = seen(starting(base, {3: number(1)}), 3)
    assert returning.findings[NAME].verdict == "agrees"
    assert "from site" not in returning.findings[NAME].evidence
    both = finding(starting(base, {3: number(1), 2: I_UNIT}), 3)
    assert both.verdict == "agrees"
    wrong = finding(starting(base, {3: number(1), 2: I_UNIT}), 3, g2=wrong_sign(Blocks(base)))
    assert wrong.verdict == "refuted"


def test_mixtures_are_followed() -> None:
    base = chain(7, 3, True)
    assert finding(starting(base, {0: number(1)}, {5: number(1)}), 3).verdict == "agrees"
    many = starting(base, *({x: number(1)} for x in (0, 1, 2, 4, 5)))
    assert finding(many, 3).verdict == "untested"


def test_a_dark_start_is_replaced_and_said() -> None:
    """(|2> - |4>)/sqrt 2 never meets the middle of a chain: its errors are zero, so a neighbour is followed."""
    base = chain(7, 3)
    dark = starting(base, {2: number(1), 4: number(-1)})
    found = finding(dark, 3)
    assert found.verdict == "agrees"
    assert "never meets the detector" in found.evidence
    assert "from site 2" in found.evidence
    wrong = finding(dark, 3, g1=other_i(Blocks(base)))
    assert wrong.verdict == "refuted"


def test_nothing_coupled_has_no_error_left() -> None:
    """The watched site has no bonds: G = QHQ exactly, and every error is below 10^-30."""
    lonely = setting_of([{1: parse("-g")}, {0: parse("-g")}, {2: parse("Delta")}], (site(2),), g=POSITIVE, Delta=REAL)
    found = seen(lonely, 3)
    assert found.findings[NAME].verdict == "agrees"
    assert "nothing left to fall" in found.findings[NAME].evidence
    assert found.plots[0].curves == ()


def test_errors_that_vanish_at_one_order_only() -> None:
    """Two levels: every even G_k vanishes, so order 2 is order 1 and falls by 2^4 where 2^3 is asked for."""
    two = setting_of([{1: parse("-g")}, {0: parse("-g")}], (site(1),), g=POSITIVE)
    found = seen(two, 4)
    assert found.findings[NAME].verdict == "agrees"
    slopes = [float(n.value) for n in found.numbers[NAME] if "slope" in dict(n.at)]
    assert [round(s) for s in slopes] == [1, 3, 3, 5]


def test_far_starts() -> None:
    """Twenty steps away the errors are tiny and their slopes are right all the same."""
    found = finding(starting(chain(25, 22, True), {2: number(1)}), 3)
    assert found.verdict == "agrees"


def test_energy_offsets_make_no_difference() -> None:
    """All energies shifted by 1000: a common phase."""
    rows = [dict(row) for row in twisted_graph().space.rows]  # type: ignore[union-attr]
    for x, row in enumerate(rows):
        row[x] = row.get(x, number(0)) + 1000
    shifted = setting_of(rows, (site(1),), g=POSITIVE, Delta=REAL, phi=REAL)
    assert finding(shifted, 3).verdict == "agrees"
    unshifted = Blocks(twisted_graph())
    assert finding(shifted, 3, g2=g2(unshifted)).verdict == "agrees"
    assert finding(shifted, 3, g2=wrong_sign(unshifted)).verdict == "refuted"


def test_large_graphs_are_left_out_with_a_note() -> None:
    small = chain(3, 1)
    found = check_order(chain(201, 100), truncated(small, *(RIGHT[k](Blocks(small)) for k in range(2))), Check())
    assert found.findings == {}
    assert "201 sites" in str(found.notes[0][0])


def test_what_is_not_served_is_untested() -> None:
    dim = replace(chain(5, 2), detectors=(Watcher((site(2),), q(1, 2)),))
    assert finding(dim, 2).verdict == "untested"
    covered = setting_of([{1: parse("-g")}, {0: parse("-g")}], (site(0), site(1)), g=POSITIVE)
    assert finding(covered, 2).verdict == "untested"


def test_plots() -> None:
    """Six intervals a curve, rings that fall as their line says, six digits, both roads of the survival."""
    found = seen(chain(9, 4, True))
    error, survival = found.plots
    assert (error.x_scale, error.y_scale) == ("log", "log")
    lines, rings = error.curves[::2], error.curves[1::2]
    assert [c.label for c in lines] == [f"order {k}: {2 ** (k + 1)}x per halving" for k in range(4)]
    assert [c.label for c in rings] == [f"order {k}" for k in range(4)]
    assert {c.role for c in lines} == {"derived"} and {c.role for c in rings} == {"measured"}
    assert [c.y[-1] for c in lines] == [c.y[-1] for c in rings]
    for curve in error.curves:
        assert len(curve.x) == len(curve.y) == 6
        falls = [float(a) / float(b) for a, b in zip(curve.y, curve.y[1:], strict=False)]
        assert falls[-1] == pytest.approx(2 ** (1 + int(curve.label[6])), rel=0.05)
        assert all(len(y.split("e")[0].replace(".", "").lstrip("0")) <= 6 for y in curve.y)
    assert {c.role for c in survival.curves} == {"derived", "measured"}
    derived, measured = survival.curves
    assert len(measured.y) == 61
    assert all(abs(float(a) - float(b)) < 1e-3 for a, b in zip(derived.y, measured.y, strict=True))


def test_same_bytes() -> None:
    setting = watched_plane()
    assert seen(setting, 3) == seen(setting, 3)


def test_radii_are_there() -> None:
    """Every number carries a radius below a thousandth of it."""
    for n in seen(twisted_graph(), 3).numbers[NAME]:
        assert 0 < float(n.radius) <= abs(float(n.value)) / 1000
        assert n.road == "trend"
