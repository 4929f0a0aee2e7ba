"""What the detectors reach: the same numbers as on all sites, at a fraction of the work."""

from __future__ import annotations

import networkx as nx
import pytest
from flint import arb, ctx

from derive.checks.summed import check_summed
from derive.derivations.detection.topic import derive_detection
from derive.errors import NeedsPrecision
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.numerics.asks import enclose_sums, measured_step
from derive.numerics.evaluate import Values
from derive.numerics.frame import reached_frame
from derive.problem.setting import Check, Wish
from tests.graphs import cube, on_graph


def test_the_same_sums_on_the_reached_part_and_on_all_sites() -> None:
    """Six-ring from site 1: bright dimension 4 (Commun. Math. Phys. 320, 543), two dark states."""
    setting = on_graph(nx.cycle_graph(6), 0, 1)
    with ctx.workprec(200):
        values = Values.at({"g": parse("1"), "tau": parse("7/10")})
        start = setting.start.mixture[0][1]  # type: ignore[union-attr]
        found = []
        for frame, dark in ((None, 2), (reached_frame(setting, values, 4), 0)):
            step = measured_step(setting, values, arb(7) / 10, frame)
            sums = enclose_sums(step.undetected, step.all_clicks, dark, 2, arb(10) ** -30)
            found.append([sums.enclose(p, step.state(start, values)) for p in range(3)])
        for a, b in zip(*found, strict=True):
            assert a.overlaps(b) and a.rad() < 1e-25


def test_a_wrong_dimension_is_noticed() -> None:
    setting = on_graph(nx.cycle_graph(6), 0, 1)
    with ctx.workprec(200), pytest.raises(NeedsPrecision):
        reached_frame(setting, Values.at({"g": parse("1")}), 5)


def test_a_cube_of_256_vertices() -> None:
    """1/binomial(8, 3) from distance 3; source: Phys. Rev. A 74, 042334 (2006), from memory."""
    setting = on_graph(cube(8), 0, 7)
    claims = derive_detection(setting, Wish("detection")).claims
    assert text(claims[0].value) == "1/56"  # type: ignore[arg-type]
    found = check_summed(setting, claims, Check(samples=1, digits=20)).findings
    assert {f.verdict for f in found.values()} == {"agrees"}
