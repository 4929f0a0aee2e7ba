"""How much the detector-local algebra gains, as ratios to plain scripts in the same run.

The plain scripts take the same logarithm of the same step: (a) dense, N x N, with sympy's DomainMatrix over
QQ[g, Delta]; (b) sparse, N x N, rows as dicts over the same flint ring as ours.  (a) is measured at three small sizes
and extrapolated by its own law: at fixed order the number of products is fixed and each costs N^3, so t = c N^3 with c
taken from the largest size measured (an underestimate: entries grow until the order is reached).
"""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from fractions import Fraction
from math import factorial
from pathlib import Path

from derive.algebra.series import truncated_log
from derive.derivations.generator.topic import generator_terms
from derive.exact.field import Field
from derive.exact.sparse import Sparse, added, multiplied, scaled
from derive.problem.setting import Setting
from tests.strategies import chain

ORDER, SITES = 10, 61
ROOT = Path(__file__).parent.parent.parent


def seconds(run: Callable[[], object], rounds: int = 3) -> float:
    """The best of a few rounds."""
    best = float("inf")
    for _ in range(rounds):
        begin = time.perf_counter()
        run()
        best = min(best, time.perf_counter() - begin)
    return best


class Rows:
    """A sparse N x N matrix under the protocol of `truncated_log`."""

    def __init__(self, rows: Sparse):
        self.rows = rows

    def __add__(self, other: Rows) -> Rows:
        return Rows(added(self.rows, other.rows))

    def __mul__(self, other: Rows) -> Rows:
        return Rows(multiplied(self.rows, other.rows))

    def scaled(self, q: Fraction) -> Rows:
        return Rows(scaled(self.rows, q))


def sparse_logarithm(setting: Setting, order: int) -> list[Rows]:
    """The plain sparse script: powers of H cut by Q, then the series of the logarithm."""
    field = Field.of([f for row in setting.space.rows for _, f in row], setting.domains())
    h: Sparse = {x: {y: field.element(f) for y, f in row} for x, row in enumerate(setting.space.rows)}
    watched = setting.detectors[0].vectors[0][0][0]
    steps, power = [], h
    for m in range(1, order + 2):
        power = h if m == 1 else multiplied(power, h)
        cut = {x: {y: f for y, f in r.items() if y != watched} for x, r in power.items() if x != watched}
        steps.append(Rows(scaled(cut, Fraction(1, factorial(m)))))
    return truncated_log(steps)


def dense_logarithm(sites: int, order: int) -> list[object]:
    """The plain dense script, with sympy's DomainMatrix."""
    from sympy import QQ, symbols
    from sympy.polys.matrices import DomainMatrix

    g, delta = symbols("g Delta")
    ring = QQ[g, delta]
    middle = sites // 2
    rows = [[ring.zero] * sites for _ in range(sites)]
    for x in range(sites - 1):
        rows[x][x + 1] = rows[x + 1][x] = ring.convert(-g)
    rows[middle][middle] = ring.convert(delta)
    h = DomainMatrix(rows, (sites, sites), ring).to_dense()
    keep = [x for x in range(sites) if x != middle]
    steps, power = [], h
    for m in range(1, order + 2):
        power = h if m == 1 else power * h
        steps.append(Dense(power.extract(keep, keep) * ring.convert(QQ(1, factorial(m))), ring))
    return truncated_log(steps)


class Dense:
    def __init__(self, matrix: object, ring: object):
        self.matrix, self.ring = matrix, ring

    def __add__(self, other: Dense) -> Dense:
        return Dense(self.matrix + other.matrix, self.ring)

    def __mul__(self, other: Dense) -> Dense:
        return Dense(self.matrix * other.matrix, self.ring)

    def scaled(self, q: Fraction) -> Dense:
        from sympy import QQ

        return Dense(self.matrix * self.ring.convert(QQ(q.numerator, q.denominator)), self.ring)


def test_dense_logarithm_is_hundreds_of_times_slower(benchmark: Callable) -> None:
    setting = chain(SITES, SITES // 2, detuning=True)
    benchmark.pedantic(generator_terms, (setting, ORDER), rounds=3, iterations=1)
    ours = seconds(lambda: generator_terms(setting, ORDER))
    measured = {n: seconds(lambda n=n: dense_logarithm(n, ORDER), rounds=1) for n in (7, 11, 15)}
    theirs = measured[15] * (SITES / 15) ** 3
    ratio = theirs / ours
    print(f"\ndense at {measured} s, by N^3 {theirs:.0f} s at {SITES}; ours {ours:.3f} s; ratio {ratio:.0f}")
    benchmark.extra_info["ratio"] = ratio
    assert ratio >= 300


def test_sparse_logarithm_on_the_same_ring(benchmark: Callable) -> None:
    setting = chain(SITES, SITES // 2, detuning=True)
    benchmark.pedantic(generator_terms, (setting, ORDER), rounds=3, iterations=1)
    ours = seconds(lambda: generator_terms(setting, ORDER))
    theirs = seconds(lambda: sparse_logarithm(setting, ORDER))
    print(f"\nsparse {theirs:.3f} s, ours {ours:.3f} s, ratio {theirs / ours:.1f}")
    benchmark.extra_info["ratio"] = theirs / ours
    assert theirs / ours >= 3


def test_work_does_not_depend_on_the_number_of_sites(benchmark: Callable) -> None:
    small, large = (_numeric(n) for n in (61, 100_000))
    benchmark.pedantic(generator_terms, (large, ORDER), rounds=3, iterations=1)
    ratio = seconds(lambda: generator_terms(large, ORDER)) / seconds(lambda: generator_terms(small, ORDER))
    print(f"\n100,000 sites against 61: ratio {ratio:.2f}")
    benchmark.extra_info["ratio"] = ratio
    assert ratio <= 3


def _numeric(sites: int) -> Setting:
    """A chain with hopping -1, from stored neighbour lists."""
    from derive.formula.tree import number
    from tests.strategies import setting_of, site

    minus = number(-1)
    rows = [{y: minus for y in (x - 1, x + 1) if 0 <= y < sites} for x in range(sites)]
    return setting_of(rows, (site(sites // 2),))


def test_the_whole_command_against_importing_sympy(benchmark: Callable, tmp_path: Path) -> None:
    sheet = tmp_path / "long-chain.toml"
    sheet.write_text(
        'title = "Sixty-one cavities, the middle one read out"\nsymbols = { g = "positive", Delta = "real" }\n'
        'graph = { family = "chain", sites = 61, hopping = "-g", energies = { 30 = "Delta" } }\n'
        "detector.at = 30\nstart.at = 27\nderive.generator.order = 10\n"
    )
    command = [str(Path(sys.executable).parent / "watchpot"), "run", str(sheet), "--out", str(tmp_path / "out")]
    run = lambda: subprocess.run(command, check=True, cwd=ROOT, capture_output=True)  # noqa: E731
    benchmark.pedantic(run, rounds=1, iterations=1)
    ours = seconds(run, rounds=2)
    sympy = seconds(lambda: subprocess.run([sys.executable, "-c", "import sympy"], check=True))
    print(f"\nwhole command {ours:.2f} s, import sympy {sympy:.2f} s, ratio {ours / sympy:.1f}")
    benchmark.extra_info["ratio"] = ours / sympy
    assert ours / sympy <= 20




def test_a_refusal_takes_under_a_second(benchmark: Callable, tmp_path: Path) -> None:
    demo = (ROOT / "worksheets" / "nine-cavities.toml").read_text(encoding="utf-8")
    bad = tmp_path / "bad.toml"
    bad.write_text(demo.replace('"-g"', '"-J"'), encoding="utf-8")
    command = [str(Path(sys.executable).parent / "watchpot"), "run", str(bad)]
    run = lambda: subprocess.run(command, capture_output=True)  # noqa: E731
    assert benchmark.pedantic(run, rounds=1, iterations=1).returncode == 2
    took = seconds(run)
    print(f"\nrefusal {took:.2f} s")
    assert took < 1
