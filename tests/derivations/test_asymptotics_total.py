"""Total detection probability on the line: published digits, the experiment, and expansions for small tau."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.integrate
import scipy.special

from derive.checks.asymptotics.total import check_total
from derive.derivations.asymptotics.total import derive_total
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, letter, number
from derive.numerics.evaluate import Values, enclose
from derive.problem.quantities import Quantity
from derive.problem.setting import POSITIVE, Check, Domain, Letter, Setting, Start, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim, Finding
from tests.lattices import lattice

EFFORT = Check(samples=0, points=((("g", number(1)), ("tau", parse("1/2"))),))


def total(setting: Setting, gt: str) -> float:
    value = derive_total(setting, Wish("detection")).claims[0].value
    assert isinstance(value, Formula) and parse(text(value)) == value
    return float(enclose(value, Values.at({"g": number(1), "tau": parse(gt)})).real.mid())


@pytest.mark.parametrize(("gt", "wanted"), [("1/4", 0.914590621169571), ("1/2", 0.750582761069775)])
def test_return_probability_to_fifteen_digits(gt: str, wanted: float) -> None:
    """Digits computed independently beforehand."""
    assert abs(total(lattice(), gt) - wanted) < 2e-15


@pytest.mark.parametrize("start", [0, 1, 2, -3])
def test_added_up_in_double_precision(start: int) -> None:
    """sum F_n by the renewal recursion with scipy's Bessel function; the rest beyond N is below a^2/N^2."""
    asks, a, k = 1500, 0.8, abs(start)
    u, v = (scipy.special.jv(order, a * np.arange(asks + 1)) for order in (0, k))
    phi = np.zeros(asks + 1)
    for n in range(1, asks + 1):
        phi[n] = v[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    assert abs(total(lattice(start=start), "2/5") - (phi**2).sum()) < 1e-6


def test_small_intervals_from_afar() -> None:
    """(2 g tau/pi) k^2/(k^2 - 1/4): the integral of J_k(x)^2 over time by DLMF 10.22.57 (from memory), here by scipy:
    int_0^inf (k J_k(x)/x)^2 dx is its closed form's outside check."""
    for k in (1, 2, 5):
        small = derive_total(lattice(start=k), Wish("detection")).claims[1]
        assert isinstance(small.value, Formula) and small.kind.order == 2
        slope = float(enclose(small.value, Values.at({"g": number(1), "tau": number(1)})).real.mid())
        assert abs(slope - 2 / np.pi * k * k / (k * k - 0.25)) < 1e-15
        found, _ = scipy.integrate.quad(lambda x, k=k: (k * scipy.special.jv(k, x) / x) ** 2, 0, 400, limit=2000)
        assert abs(slope - 2 * found) < 1e-4  # a tail of 2 k^2/(pi x^3) beyond 400


def letter_start() -> Setting:
    """A start j sites away."""
    whole = Domain("integer", "integer >= 1", number(1))
    base = lattice()
    return replace(base, letters=(*base.letters, Letter("j", whole)), start=Start(distance=letter("j")))


@pytest.mark.parametrize(("gt", "wanted"), [("1/4", 0.111983191091874), ("1/2", 0.167718967603791)])
def test_far_start_to_fifteen_digits(gt: str, wanted: float) -> None:
    """Digits computed independently beforehand."""
    far = derive_total(letter_start(), Wish("detection")).claims[2]
    assert far.id == "detection.far" and isinstance(far.value, Formula)
    assert abs(float(enclose(far.value, Values.at({"g": number(1), "tau": parse(gt)})).real.mid()) - wanted) < 2e-15


def test_a_letter_for_the_distance() -> None:
    """The formula in j is the numbered one at every j."""
    general = derive_total(letter_start(), Wish("detection")).claims[0].value
    assert isinstance(general, Formula) and parse(text(general)) == general
    at = Values.at({"g": number(1), "tau": parse("2/5"), "j": number(2)})
    assert abs(float(enclose(general, at).real.mid()) - total(lattice(start=2), "2/5")) < 1e-15


def test_the_limit_from_far_away_is_followed() -> None:
    claim = derive_total(letter_start(), Wish("detection")).claims[2]
    point = (("g", number(1)), ("j", number(1)), ("tau", parse("1/2")))
    effort = Check(samples=0, points=(point,))
    assert check_total(letter_start(), (claim,), effort).findings[claim.id].verdict == "agrees"
    wrong = replace(claim, value=parse("6/5") * claim.value)  # type: ignore[operator]
    assert check_total(letter_start(), (wrong,), effort).findings[claim.id].verdict == "refuted"


def found(value: str, holds: str = "exactly", start: int = 0) -> Finding:
    claim = Claim("claim.mine", "detection", Quantity("total detection probability"), parse(value), kind_of(holds))
    return check_total(lattice(start=start), (claim,), EFFORT).findings["claim.mine"]


def test_the_road_agrees_and_refutes() -> None:
    right = text(derive_total(lattice(), Wish("detection")).claims[0].value)  # type: ignore[arg-type]
    finding = found(right)
    assert finding.verdict == "agrees" and (finding.digits or 0) >= 15
    assert found(f"{right} - 1/10^7").verdict == "refuted"
    assert found(f"{right} - 1/10^5").verdict == "refuted"  # below what is seen in finitely many asks
    assert found(f"{right} + 1/10^7").verdict == "refuted"
    no_images = right.replace("sum(m from 1", "sum(m from 2")
    assert no_images != right and found(no_images).verdict == "refuted"
    assert found("1 - 2*g^2*tau^2", "up to O(tau^3)").verdict == "agrees"
    assert found("1 - 2*g^2*tau^2", "up to O(tau^4)").verdict == "refuted"
    assert found("1 - g^2*tau^2", "up to O(tau^3)").verdict == "refuted"


def test_a_declared_letter_is_not_bound_again() -> None:
    setting = replace(lattice(), letters=(Letter("g", POSITIVE), Letter("q", POSITIVE), Letter("m", POSITIVE)))
    shown = text(derive_total(setting, Wish("detection")).claims[0].value)  # type: ignore[arg-type]
    assert "integral(q1 from" in shown and "sum(m1 from" in shown


def test_what_is_not_covered_says_so() -> None:
    for setting in (lattice(below=False), lattice("half line", 1, 1), lattice(start=1, impurity=(0, "g"))):
        with pytest.raises(NotCovered):
            derive_total(setting, Wish("detection"))


def trapped(source: str, strength: str) -> float:
    return float(enclose(parse(source), Values.at({"G": parse(strength)})).real.mid())


WAVES = "G/pi*integral(q from 0 to pi: 2*sin(q)/(2*sin(q) + G)^2)"


@pytest.mark.parametrize(("n", "wanted"), [(0, 0.5311994413), (1, 0.2954924958), (2, 0.2461247589)])
def test_an_absorbing_trap_on_the_line(n: int, wanted: float) -> None:
    """Absorbed fraction from n sites away under -i G on one site, hopping 1 and G = 1/2 (digits by mpmath.quad; the
    problem: J. Stat. Phys. 154, 1430 (2014)): in balls, waves and evanescent part."""
    near = f"2*G/pi*integral(k from 0 to infinity: exp(-{2 * n}*k)*2*sinh(k)/(4*sinh(k)^2 + G^2))"
    assert abs(trapped(f"{WAVES} + {near}", "1/2") - wanted) < 1e-10


@pytest.mark.parametrize(("gt", "digits"), [("1/4", 0.111988020766), ("1/2", None)])
def test_the_plain_absorber_is_the_measured_law_without_images(gt: str, digits: float | None) -> None:
    """From far away a trap G = 2/tau takes what the integral over the band gives once the images are left out."""
    far = derive_total(letter_start(), Wish("detection")).claims[2].value
    assert isinstance(far, Formula)
    bare = parse(_without_sums(text(far)))
    found = float(enclose(bare, Values.at({"g": number(1), "tau": parse(gt)})).real.mid())
    assert abs(found - trapped(WAVES, f"2/({gt})")) < 1e-15
    assert digits is None or abs(found - digits) < 1e-12


def _without_sums(source: str) -> str:
    """sum(...) replaced by 0, parentheses counted."""
    while "sum(" in source:
        begin = source.index("sum(")
        depth, end = 0, begin + 3
        while True:
            depth += {"(": 1, ")": -1}.get(source[end], 0)
            end += 1
            if depth == 0:
                break
        source = source[:begin] + "0" + source[end:]
    return source
