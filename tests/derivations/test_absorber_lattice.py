"""The absorber's own laws on the line: transforms, published fractions, a line evolved with scipy."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
import scipy.integrate
import scipy.linalg

from derive.derivations.absorber.lattice import derive_absorber_lattice
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.numerics.evaluate import Values, enclose
from derive.problem.setting import Wish
from tests.lattices import lattice


def laws(k: int, below: bool = True) -> dict[str, Formula]:
    claims = derive_absorber_lattice(lattice(start=k, below=below), Wish("absorber")).claims
    return {c.id.removeprefix("absorber."): c.value for c in claims if isinstance(c.value, Formula)}


def value(f: Formula, tau: str, t: float | None = None) -> complex:
    put = {"g": number(1), "tau": parse(tau)} | ({} if t is None else {"t": parse(f"{t:.15f}")})
    return complex(enclose(f, Values.at(put)))


@pytest.mark.parametrize("k", [0, 1, 3])
def test_the_amplitude_is_that_of_a_line_with_a_trap(k: int) -> None:
    """scipy.linalg.expm on 161 sites; H = -g between neighbours, -i Gamma on the middle one, Gamma = 2/tau = 4."""
    h = -np.eye(161, k=1) - np.eye(161, k=-1) + 0j
    h[80, 80] = -4j
    for t in (0.7, 2.0, 9.0):
        wanted = scipy.linalg.expm(-1j * t * h)[80, 80 + k]
        assert value(laws(k)["amplitude"], "1/2", t) == pytest.approx(wanted, abs=1e-12)


@pytest.mark.parametrize("s", [0.5, 2.0])
def test_the_return_has_its_transform(s: float) -> None:
    """int exp(-s t) f(t) dt = 1/(sqrt(s^2 + 4 g^2) + Gamma), by scipy's quadrature."""
    f = laws(0)["amplitude"]

    def seen(t: float) -> float:
        return float(np.exp(-s * t) * value(f, "1", t).real)

    found, _ = scipy.integrate.quad(seen, 0, 30 / s, limit=200, epsabs=1e-9)
    assert found == pytest.approx(1 / (np.sqrt(s * s + 4) + 2), abs=1e-7)


@pytest.mark.parametrize(("k", "wanted"), [(0, 0.5311994413), (1, 0.2954924958), (2, 0.2461247589)])
def test_absorbed_fractions(k: int, wanted: float) -> None:
    """Gamma = 1/2, hopping 1: by mpmath.quad beforehand (the problem: J. Stat. Phys. 154, 1430 (2014))."""
    assert value(laws(k)["fraction"], "4").real == pytest.approx(wanted, abs=1e-10)


def test_the_part_inside_the_band() -> None:
    """Far away that part alone is left: .111988020766 at g tau = 1/4 (computed independently beforehand)."""
    inside = parse(text(laws(40)["fraction"]).replace("infinity", "1/10^30"))
    assert value(inside, "1/4").real == pytest.approx(0.111988020766, abs=1e-11)


@pytest.mark.parametrize("k", [0, 2])
def test_the_tail_of_the_exact_amplitude(k: int) -> None:
    """t^(5/2) times what is left out stays bounded; the exact form by mpmath, convolved with Bessel functions."""
    found = laws(k)

    def exact(t: int) -> complex:
        with mpmath.workdps(15):
            def held(q: mpmath.mpf) -> mpmath.mpf:
                return (mpmath.exp(-4 * t * mpmath.cos(q)) * mpmath.tan(q / 2) ** k
                        * mpmath.besselj(k, 2 * t * mpmath.sin(q)) * mpmath.sin(q))

            ends = [mpmath.pi / 2 * mpmath.mpf(j) / 8 for j in range(9)]
            return complex(1j**k * (mpmath.besselj(k, 2 * t) - 4 * t * mpmath.quad(held, ends)))

    off = [abs(value(found["tail"], "1/2", t) - exact(t)) * t**2.5 for t in (20, 21, 22, 40, 41, 42)]
    assert max(off[3:]) < 1.3 * max(off[:3]) < 1


def test_the_factor_is_told_for_the_return_below_aliasing() -> None:
    assert text(laws(0)["return_factor"]) == "4"
    assert "return_factor" not in laws(1) and "return_factor" not in laws(0, below=False)


def test_other_lattices_are_not_covered() -> None:
    with pytest.raises(NotCovered, match="the line"):
        derive_absorber_lattice(lattice("half line"), Wish("absorber"))
