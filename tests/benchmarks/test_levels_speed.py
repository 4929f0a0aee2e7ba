"""Levels and survival against plain scripts, as ratios in the same run.

Levels: the plain script solves the same secular equation order by order for all roots at once, in sympy expressions:
products expanded, remainders modulo q.  It is run at 14 sites, where it ends; ours is timed there and at 40 sites.
Survival: the plain script is a loop in mpmath at 50 digits, psi -> Q U psi with a dense U; it is timed for a few asks
and extrapolated by its own law, t = c n.
"""

from __future__ import annotations

import random
import time
from collections.abc import Callable
from math import factorial

import pytest
from flint import acb, arb, ctx, fmpq

from derive.checks.krylov import reach_pattern
from derive.derivations.levels.topic import bernoulli, by_secular
from derive.derivations.spectrum import Spectrum
from derive.numerics.evaluate import Values
from derive.numerics.spectrum import enclose_reached
from derive.numerics.survival import bits_for_survival, enclose_survival
from derive.numerics.system import system
from derive.problem.setting import Setting
from tests.settings_of_graphs import cluster, watched


def seconds(run: Callable[[], object]) -> float:
    begin = time.perf_counter()
    run()
    return time.perf_counter() - begin


def integer_graph(sites: int) -> Setting:
    """A path with chords, integer couplings, no symmetry."""
    source = random.Random(3)
    edges = {(x, x + 1): -source.randint(1, 3) for x in range(sites - 1)}
    for _ in range(sites // 2):
        a, b = sorted(source.sample(range(sites), 2))
        edges.setdefault((a, b), -source.randint(1, 2))
    return cluster([(x, y, str(v)) for (x, y), v in edges.items()], 0, ())


def plain_levels(setting: Setting, order: int) -> list[object]:
    """a_1 ... a_order as sympy expressions in E, numerators and powers of q' kept apart as in the derivation."""
    import sympy

    n = setting.space.size
    H = sympy.zeros(n, n)
    for x, row in enumerate(setting.space.rows):
        for y, f in row:
            H[x, y] = sympy.Rational(str(f.args[0]))
    E = sympy.Symbol("E")
    q = H[1:, 1:].charpoly(E).as_expr()
    h = H.charpoly(E).as_expr()

    def reduced(f: object) -> object:
        return sympy.rem(sympy.expand(f), q, E)

    further = []
    for m in range(1, order + 1):
        y = sympy.Rational(1, 2) if m == 1 else 0
        if m % 2 == 0:
            b = bernoulli(m) / factorial(m)
            around = ((H - E * sympy.eye(n)) ** (m - 1))[0, 0]
            y = -sympy.Rational(b.numerator, b.denominator) * sympy.expand(around)
        further.append(sympy.expand(h * y))
    s = reduced(sympy.diff(q, E))
    powers = [sympy.Integer(1)]
    for _ in range(3 * order + 2):
        powers.append(reduced(powers[-1] * s))
    taylor = {j: reduced(sympy.diff(q, E, j) / factorial(j)) for j in range(2, order + 1)}
    pushed = {(m, j): reduced(sympy.diff(f, E, j) / factorial(j)) if j else reduced(f)
              for m, f in enumerate(further, start=1) for j in range(order - m + 1)}
    raised: list[list[object]] = [[0] * (order + 1) for _ in range(order + 1)]
    raised[0][0] = sympy.Integer(1)
    for k in range(1, order + 1):
        for j in range(2, k + 1):
            raised[j][k] = reduced(sum(raised[1][i] * raised[j - 1][k - i] for i in range(1, k)))
        total = -sum(taylor[j] * powers[j - 2] * raised[j][k] for j in range(2, k + 1))
        total -= sum(pushed[m, j] * powers[j + 2 * m - 2] * raised[j][k - m]
                     for m in range(1, k + 1) for j in range(k - m + 1))
        raised[1][k] = reduced(total)
    return raised[1][1:]


@pytest.mark.benchmark
def test_levels_to_order_six() -> None:
    order = 4
    small = integer_graph(14)
    ours = seconds(lambda: by_secular(Spectrum(small), order, "E"))
    plain = seconds(lambda: plain_levels(small, order))
    large = seconds(lambda: by_secular(Spectrum(integer_graph(40)), 6, "E"))
    print(f"\nlevels, 14 sites, order {order}: plain {plain:.2f} s, ours {ours:.4f} s, ratio {plain / ours:.0f}; "
          f"40 sites, order 6: {large:.2f} s")
    assert plain > 20 * ours


@pytest.mark.benchmark
def test_a_million_asks() -> None:
    import mpmath as mp

    setting = watched("chain", {"sites": 201}, 100, (), hopping="-1")

    def ours() -> arb:
        with ctx.workprec(2000):
            reached = enclose_reached(system(setting, Values({})), reach_pattern(setting))
        with ctx.workprec(bits_for_survival(50, 10**6, 100)):
            psi = [acb(1) if x == 90 else acb(0) for x in range(201)]
            (s,) = enclose_survival(reached, arb(fmpq(1, 10)), [(arb(1), psi)], [10**6])
        return s

    with mp.workdps(50):
        U = mp.matrix(201, 201)
        for x in range(201):
            for y in range(201):
                U[x, y] = mp.mpc(1, 1) / (1 + abs(x - y))  # any dense matrix costs the same
        psi = mp.matrix(201, 1)
        psi[90] = 1
        asks = 3

        def loop() -> None:
            state = psi
            for _ in range(asks):
                state = U * state
                state[100] = 0

        plain = seconds(loop) / asks * 10**6
    found: list[arb] = []
    mine = seconds(lambda: found.append(ours()))
    print(f"\nsurvival, n = 10^6, 201 sites, 50 digits: plain {plain:.0f} s (extrapolated), ours {mine:.1f} s, "
          f"ratio {plain / mine:.0f}")
    assert found[0].rad() < arb(10) ** -50 and plain > 1000 * mine
