"""Late-time laws beside an impurity: against evolution, exact limits, division of the edge's series, and mpmath."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from functools import lru_cache

import mpmath
import numpy as np
import pytest

from derive.checks.asymptotics.road import in_n
from derive.derivations.asymptotics.impurity import Side
from derive.derivations.asymptotics.impurity_images import edge_images, images
from derive.derivations.asymptotics.scattering import Place, scattering_edge
from derive.derivations.asymptotics.topic import derive_asymptotics, late_law
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Interval, Lattice, Letter, Relation, Setting, Wish
from derive.record.said import Derivation
from tests.lattices import REAL, by_evolution, lattice


@lru_cache(maxsize=8)
def derived(setting: Setting, order: int = 1) -> Derivation:
    return derive_asymptotics(setting, Wish("asymptotics", (("order", order),)))


def formula(setting: Setting, name: str, order: int = 1) -> Formula:
    value = next(c.value for c in derived(setting, order).claims if c.id == f"asymptotics.{name}")
    assert isinstance(value, Formula)
    return value


def number_at(f: Formula, **letters: str) -> complex:
    return complex(enclose(f, Values.at({name: parse(value) for name, value in letters.items()})))


def law_at(f: Formula, energy: str, asks: range) -> np.ndarray:
    at = in_n(f, Values.at({"g": parse("1"), "tau": parse("2/5"), "Delta": parse(energy)}))
    return np.array([complex(at(n)) for n in asks])


@pytest.mark.parametrize(
    ("name", "at", "start", "site", "energy", "order"),
    [
        ("line", 0, 0, 0, "1", 1),
        ("line", 0, 0, 0, "-5/2", 2),
        ("line", 0, 2, 0, "1", 2),
        ("line", 0, -1, 1, "-1/4", 1),
        ("half line", 0, 0, 0, "1/3", 2),
        ("half line", 0, 0, 0, "3", 2),
        ("half line", 1, 1, 1, "1", 1),
        ("half line", 0, 1, 0, "3", 2),
    ],
)
def test_amplitudes_with_their_phase(name: str, at: int, start: int, site: int, energy: str, order: int) -> None:
    """Outside oracle: evolving and asking on a long piece (scipy.linalg.expm), 240 asks; the error falls with n."""
    f = formula(lattice(name, at, start, impurity=(site, "Delta")), "amplitude", order)
    asks = 240
    wanted = by_evolution(name, at, start, 0.4, asks, (site, float(Fraction(energy))))
    early, late = (range(m, m + 16) for m in (asks // 4, asks - 20))
    misses = [np.abs(law_at(f, energy, r) - wanted[r.start - 1 : r.stop - 1]).sum() for r in (early, late)]
    sizes = [np.abs(wanted[r.start - 1 : r.stop - 1]).sum() for r in (early, late)]
    assert misses[1] / sizes[1] < 0.06 / 4 ** (order - 1)
    assert misses[1] / sizes[1] < 1.3 * misses[0] / sizes[0] / 4**order * 1.2
    turned = law_at(f, energy.lstrip("-") if energy.startswith("-") else f"-{energy}", late)
    assert np.abs(turned - wanted[late.start - 1 : late.stop - 1]).sum() / sizes[1] > 0.05  # the sign is seen


def test_without_an_impurity_it_is_the_uniform_law() -> None:
    """Delta -> 0: the uniform lattice's law by its Bessel functions, found without any of this."""
    at = {"g": "1", "tau": "2/5", "n": "60"}
    for name, start in (("line", 0), ("line", 2), ("half line", 0), ("half line", 1)):
        plain, mine = late_law(lattice(name, 0, start), 1).square, lattice(name, 0, start, impurity=(0, "Delta"))
        assert abs(number_at(plain, **at) - number_at(formula(mine, "F"), **at, Delta="1/10^12")) < 1e-15
    plain, mine = late_law(lattice(), 2).real, lattice(impurity=(0, "Delta"))
    gaps = []
    for n in ("200", "400"):  # Bessel functions carry terms beyond the second
        at["n"] = n
        gaps.append(abs(number_at(formula(mine, "amplitude", 2), **at, Delta="1/10^12") / number_at(plain, **at) - 1))
    assert gaps[0] < 1e-4 and gaps[1] < gaps[0] / 2


@pytest.mark.parametrize(("at", "start"), [(0, 0), (0, 2), (1, 1), (2, 0)])
def test_the_uniform_half_line_in_its_short_form(at: int, start: int) -> None:
    """One term equals the law by Bessel functions; two terms follow scipy.linalg.expm and are printed."""
    setting = lattice("half line", at, start)
    short, long = formula(setting, "F"), late_law(setting, 1).square
    for n in ("60", "61"):
        assert abs(number_at(short, g="1", tau="2/5", n=n) - number_at(long, g="1", tau="2/5", n=n)) < 1e-15
    assert 4 * len(text(short)) < len(text(long))
    if at == 0:
        asks = range(180, 200)
        wanted = by_evolution("half line", at, start, 0.4, 200)[asks.start - 1 : asks.stop - 1]
        misses = [np.abs(law_at(formula(setting, "amplitude", k), "1", asks) - wanted).sum() for k in (1, 2)]
        assert misses[1] < misses[0] / 50 < np.abs(wanted).sum() / 1000


def edge_of(place: Place, a: float, e: float, theta: float) -> tuple[complex, complex]:
    """u and v/(w^k i^k) just inside the band by (i/tau) G and 300 000 images, G the textbook's T-matrix."""

    def pole_free(energy: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        w = np.where(np.abs(energy) > a, np.sign(energy), 0) * np.sqrt(np.abs(energy**2 - a**2) + 0j)
        w = np.where(np.abs(energy) > a, w, 1j * np.sqrt(np.abs(a**2 - energy**2)))
        lam = (energy - w) / a

        def g(x: int, y: int) -> np.ndarray:
            return (lam ** abs(x - y) - (lam ** (x + y + 2) if place.ends else 0)) / w

        d, x, p = place.detector, place.start, place.impurity
        over = e / (1 - e * g(p, p))
        return g(d, d) + g(d, p) * over * g(p, d), g(d, x) + g(d, p) * over * g(p, x)

    m = np.arange(-300_000, 300_001)
    u, v = (1j * part.sum() for part in pole_free(theta + 2 * np.pi * m))
    return u + 0.5, v + (0.5 if place.returns else 0)


@pytest.mark.parametrize(
    "place",
    [Place(False, 0, 0, 0), Place(False, 0, 3, 0), Place(False, 0, 1, 2), Place(False, 1, -1, -2),
     Place(True, 0, 0, 0), Place(True, 1, 1, 0), Place(True, 2, 0, 1), Place(True, 1, 3, 4)],
)
@pytest.mark.parametrize("sign", [1, -1])
def test_the_coefficient_of_the_edge(place: Place, sign: int) -> None:
    """h_0 = -C_1/(i^k): phi at s = +-d, its odd part over s, with images added up one by one in numpy."""
    a, e = 0.8, 0.3
    side = Side(sign, scattering_edge(place), place, parse("a"), parse("c"))
    first = number_at(side.first(), a="4/5", c="3/10")
    theta = sign * np.sqrt(a * a - 1e-6)
    u, v = edge_of(place, a, e, theta)
    phi, other = 1 - 1 / u if place.returns else v / u, _other_sheet(place, a, e, theta, u, v)
    odd = (phi - other) / 2 / 1e-3
    turn = 1 if sign > 0 else (-1) ** place.k
    assert abs(-odd * turn - first) < 2e-3 * max(1, abs(first))


def _other_sheet(place: Place, a: float, e: float, theta: float, u: complex, v: complex) -> complex:
    """phi with s turned round in the one image that has it."""

    def both(s: float) -> tuple[complex, complex]:
        w, lam = 1j * s, (theta - 1j * s) / a

        def g(x: int, y: int) -> complex:
            return complex((lam ** abs(x - y) - (lam ** (x + y + 2) if place.ends else 0)) / w)

        d, x, p = place.detector, place.start, place.impurity
        over = e / (1 - e * g(p, p))
        return 1j * (g(d, d) + g(d, p) * over * g(p, d)), 1j * (g(d, x) + g(d, p) * over * g(p, x))

    there, here = both(-1e-3), both(1e-3)
    new_u, new_v = u + there[0] - here[0], v + there[1] - here[1]
    return 1 - 1 / new_u if place.returns else new_v / new_u


def test_image_sums_by_mpmath() -> None:
    """Y and dY/dtheta at the edge, one impurity watched: mpmath.nsum and mpmath.diff."""
    with mpmath.workdps(30):
        a, e = mpmath.mpf(4) / 5, mpmath.mpf(3) / 10

        def y_at(theta: mpmath.mpf) -> mpmath.mpf:
            def term(m: mpmath.mpf) -> mpmath.mpf:
                up, down = (mpmath.sqrt((2 * mpmath.pi * m + x) ** 2 - a**2) for x in (theta, -theta))
                return 1 / (up - e) - 1 / (down + e)

            return mpmath.nsum(term, [1, mpmath.inf])

        place = Place(False, 0, 0, 0)
        value, slope = edge_images(place, parse("a"), parse("c"))
        assert abs(number_at(value, a="4/5", c="3/10").real - y_at(a)) < 1e-14
        assert abs(number_at(slope, a="4/5", c="3/10").real - mpmath.diff(y_at, a)) < 1e-10
        anywhere = images(place, parse("a"), parse("c"), parse("x"))
        assert abs(number_at(anywhere, a="4/5", c="3/10", x="1/5").real - y_at(mpmath.mpf(1) / 5)) < 1e-14


def test_the_bound_state_of_a_long_piece() -> None:
    """Energy and weight against numpy.linalg.eigh on 400 sites: line and end of a half line, either sign."""
    for name, at, site, energy in (("line", 0, 0, 1.5), ("line", 2, 0, -1.5), ("half line", 0, 0, 1.5),
                                   ("half line", 1, 0, -2.5)):
        size, left = 400, 200 if name == "line" else 0
        h = -np.eye(size, k=1) - np.eye(size, k=-1)
        h[left + site, left + site] = energy
        levels, states = np.linalg.eigh(h)
        b = -1 if energy > 0 else 0
        setting = lattice(name, at, at, impurity=(site, "Delta"))
        letters = {"g": "1", "Delta": f"{int(2 * energy)}/2"}
        assert abs(number_at(formula(setting, "bound.energy"), **letters) - levels[b]) < 1e-12
        assert abs(number_at(formula(setting, "bound.weight"), **letters) - states[left + at, b] ** 2) < 1e-12


def test_a_hopping_of_either_sign() -> None:
    """H_xy = J, J real: at J = -1 it is g = 1, at J = 1 the amplitude one site away turns its sign."""
    for impurity in (None, (0, "Delta")):
        known = lattice(start=1, impurity=impurity)
        base = lattice(start=1, hopping="J", impurity=impurity)
        below = (Relation(parse("2*abs(J)*tau"), "<", parse("pi")),)
        free = replace(base, letters=(*base.letters, Letter("J", REAL)), assume=below)
        for part, sign in (("amplitude", -1), ("F", 1)):
            at = {"tau": "2/5", "Delta": "3/4", "n": "60"}
            wanted = number_at(formula(known, part, 2), g="1", **at)
            for j, turn in (("-1", 1), ("1", sign if impurity is None else 0)):
                if turn:
                    assert abs(number_at(formula(free, part, 2), J=j, **at) - turn * wanted) < 1e-15


def test_when_the_end_of_a_half_line_binds() -> None:
    """|Delta| > |h| for a state at the end (textbook): said as the claim's condition, or settled by the worksheet."""
    open_one = derived(lattice("half line", impurity=(0, "Delta"))).claims[-1]
    assert open_one.assume == (Relation(parse("abs(Delta)"), ">", parse("g")),)
    assert derived(lattice("half line", impurity=(0, "2*g"))).claims[-1].assume == ()
    assert derived(lattice("half line", impurity=(0, "g"))).claims[-1].id == "asymptotics.from"
    weak = derived(lattice("half line", impurity=(0, "g/2")))
    assert weak.claims[-1].id == "asymptotics.from" and "too weak" in str(weak.notes)
    setting = lattice("half line", impurity=(0, "Delta"))
    held = replace(setting, assume=(*setting.assume, Relation(parse("abs(Delta)"), "<", parse("g"))))
    assert derived(held).claims[-1].id == "asymptotics.from"
    held = replace(setting, assume=(*setting.assume, Relation(parse("g"), "<", parse("abs(Delta)"))))
    assert derived(held).claims[-1].assume == ()


def test_every_claim_is_earned_and_reads_back() -> None:
    for setting in (lattice(impurity=(0, "Delta")), lattice(start=2, impurity=(0, "Delta")),
                    lattice("half line", 1, 2, impurity=(0, "Delta")), lattice(impurity=(2, "Delta"))):
        found = derived(setting)
        assert sorted(s.earns for s in found.steps if s.earns) == sorted(c.id for c in found.claims)
        for claim in found.claims:
            assert isinstance(claim.value, Formula) and parse(text(claim.value)) == claim.value


def test_what_is_not_covered_says_so() -> None:
    two = Lattice("line", parse("-g"), (("0", parse("g")), ("1", parse("g"))))
    base = lattice(impurity=(0, "Delta"))
    for setting in (
        replace(base, space=two),
        replace(base, assume=()),
        replace(base, space=Lattice("line", parse("-g"), (("j", parse("g")),))),
        replace(base, interval=Interval(parse("pi/(2*g)")), assume=()),
    ):
        with pytest.raises(NotCovered):
            derived(setting)
    with pytest.raises(NotCovered):
        derived(base, 3)
