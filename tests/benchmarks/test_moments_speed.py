"""The hexagon's mean transition time in closed form, against the plain script in the same run: Stein's equation as a
Kronecker system of 16 equations, solved over sympy's field of fractions in u = exp(i g tau).  Same output."""

from __future__ import annotations

import time
from collections.abc import Callable

import networkx as nx

from derive.derivations.moments.topic import closed
from derive.derivations.sight import Sight
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import Formula
from tests.benchmarks.test_generator_speed import seconds
from tests.graphs import on_graph
from tests.strategies import POSITIVE


def closed_mean() -> Formula:
    return closed(Sight(on_graph(nx.cycle_graph(6), 0, 3)), 1).values["mean"]


def kronecker_mean() -> str:
    """sum_jk s_j Y_jk s_k with Y - K† Y K = diag(p), in coordinates s of states sum_l s_l E_l d."""
    from sympy import QQ, symbols
    from sympy.polys.matrices import DomainMatrix

    u = symbols("u")
    field = QQ.frac_field(u)
    energies, p, s = (2, 1, -2, -1), (QQ(1, 6), QQ(1, 3), QQ(1, 6), QQ(1, 3)), (-1, 1, 1, -1)
    z = [field(u) ** -e if e < 0 else 1 / field(u) ** e for e in energies]
    bar = [1 / x for x in z]

    def step(phases: list) -> list[list]:
        return [[(phases[k] if j == k else field(0)) - field(p[k]) * phases[k] for k in range(4)] for j in range(4)]

    k, k_bar = step(z), step(bar)
    rows, right = [], []
    for i in range(4):
        for j in range(4):
            row = [field(0)] * 16
            row[4 * i + j] += field(1)
            for a in range(4):
                for b in range(4):
                    row[4 * a + b] -= k_bar[a][i] * k[b][j]
            rows.append(row)
            right.append([field(p[i]) if i == j else field(0)])
    y = DomainMatrix(rows, (16, 16), field).lu_solve(DomainMatrix(right, (16, 1), field))
    total = sum((y[4 * i + j, 0].element * field(s[i] * s[j]) for i in range(4) for j in range(4)), field(0))
    return str(field.to_sympy(total))


def test_closed_mean_against_the_kronecker_system(benchmark: Callable) -> None:
    benchmark.pedantic(closed_mean, rounds=3, iterations=1)
    ours = seconds(closed_mean)
    begin = time.perf_counter()
    other = kronecker_mean()
    theirs = time.perf_counter() - begin
    again = parse(other.replace("**", "^").replace("u", "exp(i*g*tau)"))
    assert vanishes(closed_mean() - again, {"g": POSITIVE, "tau": POSITIVE}) is True
    ratio = theirs / ours
    print(f"\nKronecker system {theirs:.2f} s, closed {ours:.4f} s, ratio {ratio:.0f}")
    benchmark.extra_info["ratio"] = ratio
    assert ratio >= 20
