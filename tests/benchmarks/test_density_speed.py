"""Amplitudes between asks from a band: equal steps and one product of matrices, against one quadrature an ask."""

from __future__ import annotations

import time
from collections.abc import Callable

from flint import acb, arb, ctx

from derive.numerics.density import band_returns
from derive.numerics.evaluate import Values
from tests.densities import SEMICIRCLE, two_edges
from tests.numerics.test_density import AT

ASKS, SOME = 2000, 20


def test_faster_than_one_quadrature_an_ask(benchmark: Callable) -> None:
    """Semicircle, 30 digits: u_0 ... u_2000 at least 20 times faster than acb.integral of the same, taken at every
    hundredth ask and multiplied."""
    returns = band_returns(two_edges(*SEMICIRCLE), lambda: Values.at(AT), lambda: arb(2) / 5)

    def plain(n: int) -> acb:
        return acb.integral(lambda q, _: 2 / acb.pi() * q.sin() ** 2 * (acb(0, 2 * n) * 2 / 5 * q.cos()).exp(),
                            0, acb.pi())

    with ctx.workprec(128):
        begin = time.perf_counter()
        found = benchmark.pedantic(returns, (ASKS,), rounds=1, iterations=1)
        ours = time.perf_counter() - begin
        begin = time.perf_counter()
        asked = {n: plain(n) for n in range(0, ASKS, ASKS // SOME)}
        theirs = (time.perf_counter() - begin) * ASKS / SOME
    assert all(found[n].overlaps(x) and found[n].rad() < 1e-25 for n, x in asked.items())
    print(f"\nu_0 ... u_{ASKS}: ours {ours:.2f} s, one quadrature an ask {theirs:.1f} s, ratio {theirs / ours:.0f}")
    assert theirs > 20 * ours
