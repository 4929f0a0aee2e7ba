"""Late asks on finite graphs against plain linear algebra in double precision, and forms known in closed form."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import scipy.linalg

from derive import Problem
from derive.derivations.asymptotics.finite import derive_finite
from derive.errors import NotCovered
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Setting

HEXAGON = {"family": "ring", "sites": 6, "hopping": "-g"}
THREE = {"family": "chain", "sites": 3, "hopping": "-g"}


def setting_of(graph: dict[str, Any], at: int, start: Any, **more: Any) -> Setting:
    begun = start if isinstance(start, dict) else {"at": start}
    detector = {"at": at, **more}
    return Problem(graph=graph, detector=detector, start=begun, symbols={"g": "positive"}).setting


def laws(setting: Setting, terms: int = 1) -> dict[str, Formula]:
    return {c.id.removeprefix("asymptotics."): c.value for c in derive_finite(setting, terms).claims}  # type: ignore[misc]


def steps(adjacency: np.ndarray, at: int, gt: float, eta: float = 1.0) -> tuple[np.ndarray, np.ndarray]:
    """U and K for H = -adjacency, g = 1."""
    u = scipy.linalg.expm(1j * gt * adjacency)
    no = np.eye(len(adjacency), dtype=complex)
    no[at, at] = np.sqrt(1 - eta)
    return u, no @ u


def amplitudes(adjacency: np.ndarray, at: int, start: int, gt: float, count: int, eta: float = 1.0) -> np.ndarray:
    u, k = steps(adjacency, at, gt, eta)
    psi = np.eye(len(adjacency), dtype=complex)[start]
    found = []
    for _ in range(count):
        found.append(np.sqrt(eta) * (u @ psi)[at])
        psi = k @ psi
    return np.array(found)


def path(n: int) -> np.ndarray:
    return np.eye(n, k=1) + np.eye(n, k=-1)


def ring(n: int) -> np.ndarray:
    out = path(n)
    out[0, -1] = out[-1, 0] = 1
    return out


def value(f: Formula, gt: str, n: int) -> complex:
    at = Values.at({"g": number(1), "tau": Problem(graph=THREE, detector={"at": 0}, start={"at": 2}, symbols={
        "g": "positive"}, interval={"length": gt}).setting.interval.length, "n": number(n)})
    return complex(enclose(f, at))


CASES = [
    (HEXAGON, ring(6), 0, 3, 1.0), (HEXAGON, ring(6), 0, 1, 1.0), (HEXAGON, ring(6), 0, 0, 1.0),
    (THREE, path(3), 0, 2, 1.0), (THREE, path(3), 0, 2, 0.75), (THREE, path(3), 0, 0, 0.75),
    (THREE, path(3), 1, 0, 1.0),
    ({"family": "hypercube", "dimension": 3, "hopping": "-g"}, np.kron(np.kron(path(2), np.eye(2)), np.eye(2))
     + np.kron(np.kron(np.eye(2), path(2)), np.eye(2)) + np.kron(np.eye(4), path(2)), 0, 7, 1.0),
]


@pytest.mark.parametrize(("graph", "adjacency", "at", "start", "eta"), CASES)
def test_laws_are_the_amplitudes_of_repeated_steps(
    graph: dict[str, Any], adjacency: np.ndarray, at: int, start: int, eta: float
) -> None:
    """scipy.linalg.expm and matrix products; a start on a perfect detector counts from the second ask."""
    found = laws(setting_of(graph, at, start, efficiency="3/4" if eta < 1 else 1))
    seen = amplitudes(adjacency, at, start, 0.7, 9, eta)
    for n in range(2 if start == at else 1, 9):
        assert value(found["amplitude"], "7/10", n) == pytest.approx(seen[n - 1], abs=1e-12)
        assert value(found["F"], "7/10", n).real == pytest.approx(abs(seen[n - 1]) ** 2, abs=1e-12)
        if eta == 1:
            left = 1 - np.sum(np.abs(seen[:n]) ** 2)
            assert value(found["survival"], "7/10", n).real == pytest.approx(left, abs=1e-12)


def test_two_levels() -> None:
    """Transition F_n = s c^(n-1), return F_n = s^2 c^(n-2), s = sin^2, c = cos^2: one step written out by hand."""
    pair = {"family": "chain", "sites": 2, "hopping": "-g"}
    there, back = laws(setting_of(pair, 0, 1)), laws(setting_of(pair, 0, 0))
    assert text(there["F"]) == "sin(g*tau)^2*cos(g*tau)^(2*n - 2)"
    assert text(there["survival"]) == "cos(g*tau)^(2*n)"
    assert text(there["pole.1.modulus"]) == "1/abs(cos(g*tau))"
    assert text(back["F"]) == "sin(g*tau)^4*cos(g*tau)^(2*n - 4)"
    assert text(back["survival"]) == "sin(g*tau)^2*cos(g*tau)^(2*n - 2)"


@pytest.mark.parametrize("gt", ["7/10", "2", "1/5"])
def test_the_modulus_of_two_poles_in_closed_form(gt: str) -> None:
    """numpy's eigenvalues of the step; at 2 the poles are real, else a conjugate pair."""
    found = laws(setting_of(THREE, 0, 2))
    number_of = {"7/10": 0.7, "2": 2.0, "1/5": 0.2}[gt]
    largest = max(abs(np.linalg.eigvals(steps(path(3), 0, number_of)[1])))
    assert value(found["pole.1.modulus"], gt, 1).real == pytest.approx(1 / largest, rel=1e-12)
    assert value(found["rate"], gt, 1).real == pytest.approx(-2 * np.log(largest), rel=1e-12)


def test_a_mixture_has_a_probability_and_no_amplitude() -> None:
    mixed = {"mixture": [{"weight": "1/3", "at": 1}, {"weight": "2/3", "at": 2}]}
    found = laws(setting_of(THREE, 0, mixed))
    assert "amplitude" not in found and "from" not in found
    seen = [np.abs(amplitudes(path(3), 0, x, 0.7, 5)) ** 2 for x in (1, 2)]
    for n in range(1, 6):
        both = seen[0][n - 1] / 3 + 2 * seen[1][n - 1] / 3
        assert value(found["F"], "7/10", n).real == pytest.approx(both, abs=1e-12)


def test_where_levels_have_no_closed_form_numbers_are_left() -> None:
    graph = {"edges": [[0, 1, "-1"], [1, 2, "-2"], [2, 3, "-1"], [0, 3, "-3"], [1, 3, "-1/2"]]}
    found = derive_finite(setting_of(graph, 0, 2), 2)
    assert [c.id.removeprefix("asymptotics.") for c in found.claims] == [
        "pole.1.modulus", "pole.1.angle", "pole.2.modulus", "pole.2.angle", "rate", "from"]
    assert "no closed form" in str(found.notes[0][0])


def test_what_is_not_covered_says_why() -> None:
    both = {"states": [{0: 1}, {1: 1}]}
    two = Problem(graph=THREE, detector=both, start={"at": 2}, symbols={"g": "positive"}).setting
    with pytest.raises(NotCovered, match="one detector with one state"):
        derive_finite(two, 1)
    dark = {"state": {1: 1, 5: -1}}
    with pytest.raises(NotCovered, match="never detected"):
        derive_finite(setting_of(HEXAGON, 0, dark), 1)
    alone = {"hamiltonian": [["g", 0], [0, 0]]}
    with pytest.raises(NotCovered, match="One level"):
        derive_finite(setting_of(alone, 0, 0), 1)
