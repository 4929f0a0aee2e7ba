"""A claim whose value has the wrong shape is not covered: no road crashes on it and none passes it."""

from __future__ import annotations

import networkx as nx
import pytest

from derive.checks.asked import entries_of, formula_of, name_of
from derive.checks.detection.road import check_detection
from derive.checks.exceptional.road import check_divergence, check_exceptional, check_exceptional_exact
from derive.errors import NotCovered
from derive.formula.tree import number
from derive.problem.quantities import Quantity
from derive.problem.setting import Check
from derive.record.said import Claim, Matrix
from tests.graphs import on_graph

MATRIX = Matrix(6, (), ((0, ((0, number(1)),)),))
QUICK = Check(samples=1)


def own(name: str, value: object, **keys: object) -> Claim:
    return Claim("claim.x", "t", Quantity(name, tuple(keys.items())), value, origin="user")  # type: ignore[arg-type]


def test_shapes_are_asked_for() -> None:
    assert entries_of(own("dark state", MATRIX)) == ((0, 0, number(1)),)
    assert formula_of(own("mean", number(2))) == number(2) and name_of(own("mean", number(2))) == "mean"
    with pytest.raises(NotCovered, match="matrix"):
        entries_of(own("dark state", number(1)))
    with pytest.raises(NotCovered, match="one formula"):
        formula_of(own("mean", MATRIX))


def test_no_road_passes_the_wrong_shape() -> None:
    setting = on_graph(nx.cycle_graph(6), 0, 3)
    merging = own("merging levels", MATRIX, interval=1)
    divergence = own("divergence coefficient", MATRIX, interval=1)
    found = [
        *check_exceptional_exact(setting, (merging,), QUICK).findings.values(),
        *check_exceptional(setting, (merging,), QUICK).findings.values(),
        *check_divergence(setting, (divergence,), QUICK).findings.values(),
        *check_detection(setting, (own("dark state", number(1), state=1),), QUICK).values(),
    ]
    assert found == []
    right = own("merging levels", number(2), interval=1)  # hexagon, pi/(2 g): the same road does judge the right shape
    wrong = own("merging levels", number(3), interval=1)
    assert check_exceptional(setting, (right,), QUICK).findings["claim.x"].verdict == "agrees"
    assert check_exceptional(setting, (wrong,), QUICK).findings["claim.x"].verdict == "refuted"
