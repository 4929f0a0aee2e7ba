"""Survival on unequal arms with letters for their sizes: measured, also where arms share levels; faults refuted."""

from dataclasses import replace as changed

import networkx
import numpy
import pytest

from derive.checks.survival.road import check_survival
from derive.derivations.survival.topic import derive_survival
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import number, replace, times
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Check, Relation, Wish
from tests.settings_of_graphs import family

INSIDE = family("chain", {"sites": "N"}, "p", {"N": 4, "p": 1, "j": 1}, distance="j",
                assume=[("p", "<", "N - 1"), ("j", "<=", "p")])
HUB = family("star", {"lengths[0]": "L", "lengths[1]": "2*L + 1", "lengths[2]": "L"}, 0, {"L": 1, "j": 1},
             distance="j", assume=[("j", "<=", "L")])


def claims_of(setting):
    return {c.id: c for c in derive_survival(setting, Wish("survival", ())).claims}


def at(setting, **sizes):
    """The setting with sizes assumed."""
    fixed = tuple(Relation(parse(name), "=", number(n)) for name, n in sizes.items())
    return changed(setting, assume=(*setting.assume, *fixed))


@pytest.mark.parametrize("setting", [INSIDE, HUB, at(INSIDE, N=9, p=3, j=1), at(INSIDE, N=9, p=5, j=2)])
def test_laws_agree_with_the_experiment(setting):
    """N = 9 watched at 3: the level in the middle is shared by parts of 3 and 5 sites."""
    claims = tuple(claims_of(setting).values())
    found = check_survival(setting, claims, Check(samples=2)).findings
    assert {f.verdict for f in found.values()} == {"agrees"}
    assert set(found) == {"survival.small_tau", "survival.density"}


def test_forgetting_the_shared_level_is_refuted():
    claim = claims_of(INSIDE)["survival.small_tau"]
    alone = parse("sum(k from 1 to p: 2*sin(pi*j*k/(p+1))^2/(p+1)*exp(-2*g^2*tau*sin(pi*k/(p+1))^2/(p+1)*t))")
    seen = at(INSIDE, N=9, p=3, j=1)
    found = check_survival(seen, (changed(claim, value=alone),), Check(samples=1)).findings
    assert found["survival.small_tau"].verdict == "refuted"
    twice = changed(claim, value=times(number(2), claim.value))
    assert check_survival(seen, (twice,), Check(samples=1)).findings["survival.small_tau"].verdict == "refuted"


@pytest.mark.parametrize("N, p, j", [(9, 3, 1), (9, 3, 2), (8, 2, 1), (10, 4, 3)])
def test_late_value_is_the_dark_part_of_a_numerical_spectrum(N, p, j):
    """1 - sum of bright weights by numpy's eigenvectors of the cut chain (networkx path graph), shared ones as one."""
    H = networkx.to_numpy_array(networkx.path_graph(N))
    kept = [x for x in range(N) if x != p]
    energies, vectors = numpy.linalg.eigh(H[numpy.ix_(kept, kept)])
    push, start = H[p][kept] @ vectors, vectors[kept.index(p - j)]
    bright = 0.0
    for e in sorted(set(numpy.round(energies, 8))):
        same = abs(energies - e) < 1e-7
        if push[same] @ push[same] > 1e-9:
            bright += (push[same] @ start[same]) ** 2 / (push[same] @ push[same])
    law = claims_of(INSIDE)["survival.small_tau"].value
    assert parse(text(law)) == law
    dark = next(a for a in law.args if "exp" not in text(a))
    values = Values.at({"N": number(N), "p": number(p), "j": number(j)})
    assert abs(float(enclose(dark, values).real.mid()) - (1 - bright)) < 1e-9


def test_floor_of_a_whole_number_that_balls_straddle():
    """18 times the ball of 1/6 holds 3 inside; rationals decide."""
    values = Values.at({"k": number(18), "M": number(6)})
    assert float(enclose(parse("floor(k/M) + floor(-k/M)"), values).real.mid()) == 0
    assert float(enclose(replace(parse("floor(k/M)"), {"k": number(17)}), values).real.mid()) == 2
