"""First detection on the line: one division of series in balls, against its bare parts and the plain recursion."""

from __future__ import annotations

import time
from collections.abc import Callable

import mpmath
from flint import ctx

from derive.numerics.inversion import divided, enclose_first_detection
from tests.lattices import lattice
from tests.numerics.test_inversion import sequences


def test_a_hundred_thousand_asks_at_sixty_digits(benchmark: Callable) -> None:
    """One pass: at most twice the bare division of series and its Bessel values, timed side by side."""
    ask = sequences(lattice(), "1/4")
    begin = time.perf_counter()
    found = benchmark.pedantic(enclose_first_detection, (ask, 100_000, 60), rounds=1, iterations=1)
    ours = time.perf_counter() - begin
    assert min(c.rel_accuracy_bits() for c in found[90_000:]) > 60 * 3.32
    with ctx.workprec(330):
        begin = time.perf_counter()
        divided(*ask(100_000))
        bare = time.perf_counter() - begin
    print(f"\nn = 10^5, 60 digits: ours {ours:.1f} s, bare parts {bare:.1f} s, ratio {ours / bare:.2f}")
    assert ours < 2 * bare


def test_faster_than_the_recursion_written_out(benchmark: Callable) -> None:
    """At n = 2000 and 60 digits at least 20 times faster than the recursion in mpmath, which grows like n^2."""
    def recursion(count: int) -> float:
        with mpmath.workdps(60):
            u = [mpmath.besselj(0, mpmath.mpf(n) / 2) for n in range(count + 1)]
            begin = time.perf_counter()
            phi = [mpmath.mpf(0)]
            for n in range(1, count + 1):
                rest = u[n]
                for k in range(1, n):
                    rest -= phi[k] * u[n - k]
                phi.append(rest)
            return time.perf_counter() - begin

    def division(count: int) -> float:
        begin = time.perf_counter()
        enclose_first_detection(sequences(lattice(), "1/4"), count, 60)
        return time.perf_counter() - begin

    slow, slower = recursion(1000), recursion(2000)
    fast = benchmark.pedantic(division, (2000,), rounds=1, iterations=1)
    print(f"\nrecursion {slow:.2f} s at 1000, {slower:.2f} s at 2000; ours {fast:.3f} s, ratio {slower / fast:.0f}")
    assert slower > 20 * fast and slower > 3 * slow
