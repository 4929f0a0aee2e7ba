"""The classical walk on unequal arms with letters for their sizes: only the start's own arm matters."""

from dataclasses import replace as changed

import numpy
import pytest

from derive.checks.classical.road import check_classical, check_classical_late
from derive.derivations.classical.topic import derive_classical
from derive.formula.tree import number, times
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Check, Wish
from tests.settings_of_graphs import family

INSIDE = family("chain", {"sites": "N"}, "p", {"N": 4, "p": 1, "j": 1}, distance="j",
                assume=[("p", "<", "N - 1"), ("j", "<=", "p")])
HUB = family("star", {"lengths[0]": "L", "lengths[1]": 2}, 0, {"L": 1, "j": 1}, distance="j", assume=[("j", "<=", "L")])


def claims_of(setting, walk):
    return derive_classical(setting, Wish("classical", (("walk", walk),))).claims


def found(setting, claims):
    effort = Check(samples=3)
    late = check_classical_late(setting, claims, effort).findings
    return {**check_classical(setting, claims, effort).findings, **late}


@pytest.mark.parametrize("walk", ["continuous", "discrete"])
@pytest.mark.parametrize("setting", [INSIDE, HUB])
def test_every_entry_agrees_and_twice_it_is_refuted(setting, walk):
    claims = claims_of(setting, walk)
    seen = found(setting, claims)
    assert set(seen) == {c.id for c in claims} and {f.verdict for f in seen.values()} == {"agrees"}
    twice = tuple(changed(c, value=times(number(2), c.value)) for c in claims)
    assert {f.verdict for f in found(setting, twice).values()} == {"refuted"}


@pytest.mark.parametrize("N, p, j", [(7, 3, 1), (9, 2, 2), (8, 5, 4)])
def test_mean_by_a_linear_system(N, p, j):
    """numpy's solution of L m = 1 on the chain without the watched site, at the start."""
    L = 2 * numpy.eye(N) - numpy.eye(N, k=1) - numpy.eye(N, k=-1)
    L[0, 0] = L[-1, -1] = 1
    kept = [x for x in range(N) if x != p]
    wanted = numpy.linalg.solve(L[numpy.ix_(kept, kept)], numpy.ones(N - 1))[kept.index(p - j)]
    mean = next(c.value for c in claims_of(INSIDE, "continuous") if c.id == "classical.mean")
    values = Values.at({"g": number(1), "p": number(p), "j": number(j), "N": number(N)})
    assert abs(float(enclose(mean, values).real.mid()) - wanted) < 1e-9
