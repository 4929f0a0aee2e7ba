"""Random formulas and small random graphs for property tests."""

from __future__ import annotations

from fractions import Fraction
from random import Random

from hypothesis import strategies as st

from derive.formula.tree import (
    I_UNIT,
    PI,
    Formula,
    call,
    constant,
    letter,
    number,
    plus,
    power,
    times,
)
from derive.problem.setting import Domain, Finite, Letter, Setting, Shape, Watcher

REAL, POSITIVE, COMPLEX = Domain("real", "real"), Domain("positive", "positive"), Domain("complex", "complex")

_fractions = st.builds(Fraction, st.integers(-30, 30), st.integers(1, 12))
_leaves = st.one_of(
    _fractions.map(number),
    st.sampled_from("gxyn").map(letter),
    st.sampled_from([I_UNIT, PI, constant("euler_gamma")]),
)


def _larger(inner: st.SearchStrategy[Formula]) -> st.SearchStrategy[Formula]:
    several = st.lists(inner, min_size=2, max_size=4)
    return st.one_of(
        several.map(lambda xs: plus(*xs)),
        several.map(lambda xs: times(*xs)),
        st.builds(_power, inner, st.one_of(_fractions.map(number), inner)),
        st.builds(call, st.sampled_from(["sin", "sqrt", "exp", "conj", "factorial"]), inner),
        st.builds(lambda a, b, c: Formula("sum", ("k", a, b, c)), inner, inner, inner),
        st.builds(lambda a, b: Formula("rootsum", ("k", a, b)), inner, inner),
        st.builds(lambda a, b: Formula("root", (a, "k", b)), inner, inner),
    )


def _power(base: Formula, exponent: Formula) -> Formula:
    """A power whose text can be read back: 0^-1 has none."""
    if base == number(0) or exponent.depth > 4:
        return base
    return power(base, exponent)


formulas = st.recursive(_leaves, _larger, max_leaves=12)


def site(x: int) -> tuple[tuple[int, Formula], ...]:
    """The unit vector of one site."""
    return ((x, number(1)),)


def setting_of(
    rows: list[dict[int, Formula]], detector: tuple[tuple[tuple[int, Formula], ...], ...], **letters: Domain
) -> Setting:
    """A finite setting from rows of H as dicts, both triangles given."""
    space = Finite(tuple(tuple(sorted(r.items())) for r in rows), Shape("hamiltonian"))
    return Setting(
        "a test", tuple(Letter(name, d) for name, d in letters.items()), space, (Watcher(detector),)
    )


def chain(sites: int, watched: int, detuning: bool = False) -> Setting:
    """A chain with hopping -g, watched at one site, that site detuned by Delta if asked."""
    g = letter("g")
    rows: list[dict[int, Formula]] = [{} for _ in range(sites)]
    for x in range(sites - 1):
        rows[x][x + 1] = rows[x + 1][x] = -g
    if detuning:
        rows[watched][watched] = letter("Delta")
    return setting_of(rows, (site(watched),), g=POSITIVE, Delta=REAL)


def random_hermitian(sites: int, seed: int, density: float = 0.6) -> list[dict[int, Formula]]:
    """Rows of a Hermitian matrix of Gaussian integers, connected along 0 - 1 - 2 - ..."""
    rng = Random(seed)
    rows: list[dict[int, Formula]] = [{} for _ in range(sites)]
    for x in range(sites):
        rows[x][x] = number(rng.randint(-2, 2))
        for y in range(x):
            if y == x - 1 or rng.random() < density:
                re, im = rng.randint(-2, 2), rng.randint(-2, 2)
                re = re or 1
                rows[x][y] = number(re) + number(im) * I_UNIT
                rows[y][x] = number(re) - number(im) * I_UNIT
    return [{y: f for y, f in r.items() if f != number(0)} for r in rows]


def random_pair(sites: int, seed: int) -> tuple[tuple[tuple[int, Formula], ...], ...]:
    """Two orthonormal vectors with rational complex amplitudes: (3, 4i)/5 and (4i, 3)/5 on two sites, mixed."""
    rng = Random(seed)
    a, b = rng.sample(range(sites), 2)
    c, s = Fraction(3, 5), Fraction(4, 5)
    first = {a: number(c), b: number(s) * I_UNIT}
    second = {a: number(s) * I_UNIT, b: number(c)}
    return tuple(tuple(sorted(v.items())) for v in (first, second))
