"""Late-time laws against amplitudes computed without them, published laws, and constants in closed form."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import numpy as np
import pytest
import scipy.linalg
import scipy.special

from derive.checks.asymptotics.road import in_n
from derive.derivations.asymptotics.images import edge_rest
from derive.derivations.asymptotics.topic import derive_asymptotics, late_law
from derive.errors import NotCovered
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, letter, number
from derive.formula.tree import replace as put
from derive.numerics.evaluate import Values, enclose
from derive.numerics.lattice import enclose_returns, waves
from derive.problem.setting import Domain, Lattice, Letter, Setting, Start, Watcher, Wish
from tests.lattices import by_evolution, lattice


def values_of(f: Formula, gt: str, asks: range) -> np.ndarray:
    at = in_n(f, Values.at({"g": number(1), "tau": parse(gt)}))
    return np.array([complex(at(n)) for n in asks])


def recursion(gt: float, asks: int) -> np.ndarray:
    """phi_1 ... phi_asks by the renewal recursion in double precision; Bessel values from scipy."""
    u = scipy.special.jv(0, 2 * gt * np.arange(asks + 1))
    phi = np.zeros(asks + 1)
    for n in range(1, asks + 1):
        phi[n] = u[n] - phi[1:n] @ u[n - 1 : 0 : -1]
    return phi


def claims(setting: Setting, order: int) -> dict[str, str]:
    derivation = derive_asymptotics(setting, Wish("asymptotics", (("order", order),)))
    return {c.id: text(c.value) for c in derivation.claims if isinstance(c.value, Formula)}


def test_the_published_law_of_the_return() -> None:
    """F_n ~ (4 g tau/(pi n^3)) cos^2(2 g tau n + pi/4): phys-rev-e-95-032141 (from memory)."""
    found = claims(lattice(), 1)
    assert found["asymptotics.F"] == "4*g*tau*cos(2*g*tau*n + pi/4)^2/(pi*n^3)"
    assert found["asymptotics.amplitude"] == "2*sqrt(g*tau/pi)*cos(2*g*tau*n + pi/4)/n^(3/2)"


def test_the_published_law_where_the_edges_meet() -> None:
    """F_n ~ g tau/(2 pi n^3) = k/(4 n^3) at g tau = k pi/2 (from memory)."""
    assert claims(lattice(below=False, length="pi/(2*g)"), 1)["asymptotics.F"] == "1/(4*n^3)"
    assert claims(lattice(below=False, length="3*pi/(2*g)"), 1)["asymptotics.F"] == "3/(4*n^3)"


@pytest.mark.parametrize(("gt", "number_of", "most"), [("1/4", 0.25, 1e-6), ("7/10", 0.7, 1e-5)])
def test_two_terms_of_the_return(gt: str, number_of: float, most: float) -> None:
    """sum |dF|/sum F over n = 860 ... 899 against the renewal recursion with scipy's Bessel function."""
    wanted = recursion(number_of, 899)[860:900] ** 2
    miss = np.abs(values_of(late_law(lattice(), 2).square, gt, range(860, 900)) - wanted).sum() / wanted.sum()
    assert miss < most
    first = np.abs(values_of(late_law(lattice(), 1).square, gt, range(860, 900)) - wanted).sum() / wanted.sum()
    assert first > 100 * most


@pytest.mark.parametrize(
    ("setting", "gt", "order"),
    [
        (lattice(start=1), "2/5", 1),
        (lattice(start=2), "2/5", 2),
        (lattice(start=-3), "2/5", 2),
        (lattice(start=3, below=False), "9/5", 2),
        (lattice(below=False), "2", 3),
        (lattice("half line", 0, 0), "2/5", 1),
        (lattice("half line", 0, 2), "2/5", 1),
        (lattice(start=1, below=False, length="pi/(2*g)"), "pi/2", 2),
        (lattice(start=2, below=False, length="3*pi/(2*g)"), "3*pi/2", 1),
    ],
    ids=lambda x: x if isinstance(x, str) else "",
)
def test_amplitudes_with_their_phase(setting: Setting, gt: str, order: int) -> None:
    """Outside oracle: evolving and asking on a long piece (scipy.linalg.expm), 40 asks; the error falls with n."""
    law = late_law(setting, order)
    place = setting.detectors[0].place, setting.start.place if setting.start else None
    at, start = (int(p.args[0]) for p in place if isinstance(p, Formula))
    number_of = float(enclose(parse(gt), Values({})).real.mid())
    wanted = by_evolution(law.watch.name, at, start, number_of, 40)
    found = values_of(law.watch.phase * law.real, gt, range(1, 41))
    early, late = (np.abs(found - wanted)[a:b].max() / np.abs(wanted)[a:b].max() for a, b in ((10, 18), (32, 40)))
    assert late < 0.25 and late < early
    assert np.abs(-found - wanted)[32:].max() / np.abs(wanted)[32:].max() > 1.5  # a sign would be seen


def test_a_letter_for_the_distance_is_every_number() -> None:
    """The law in j against the numbered laws, which were compared with the experiment; and its claims read back."""
    whole = Domain("integer", "integer >= 1", number(1))
    base = lattice()
    setting = replace(base, letters=(*base.letters, Letter("j", whole)), start=Start(distance=letter("j")))
    general = derive_asymptotics(setting, Wish("asymptotics"))
    assert [c.id for c in general.claims] == ["asymptotics.amplitude", "asymptotics.F"]
    assert sorted(s.earns for s in general.steps if s.earns) == sorted(c.id for c in general.claims)
    for claim, part in zip(general.claims, ("amplitude", "square"), strict=True):
        assert isinstance(claim.value, Formula) and parse(text(claim.value)) == claim.value
        for k in (1, 2, 3, 4):
            law = late_law(lattice(start=k), 1)
            numbered = law.watch.phase * law.real if part == "amplitude" else law.square
            found = values_of(put(claim.value, {"j": number(k)}), "2/5", range(50, 54))
            assert np.allclose(found, values_of(numbered, "2/5", range(50, 54)), rtol=1e-12, atol=0)
    with pytest.raises(NotCovered):
        derive_asymptotics(setting, Wish("asymptotics", (("order", 2),)))


def test_a_negative_hopping_turns_the_phase() -> None:
    assert text(late_law(lattice(start=1), 1).watch.phase) == "i"
    assert text(late_law(lattice(start=1, hopping="g"), 1).watch.phase) == "-i"
    assert text(late_law(lattice(start=2), 1).watch.phase) == "-1"


def test_a_complex_hopping_knows_its_direction() -> None:
    """First amplitude of arrival from either side, H_xy = h for x < y: scipy.linalg.expm on forty sites."""
    h = 0.6 + 0.8j
    step = scipy.linalg.expm(-0.4j * (h * np.eye(40, k=1) + np.conj(h) * np.eye(40, k=-1)))
    at = Values.at({"g": number(1), "tau": parse("2/5")})
    for start in (2, -1, -2, -3):
        setting = lattice(start=start, hopping="g*(3/5 + 4*i/5)")
        w = waves(setting, at)
        assert abs(complex(w.factor * enclose_returns(w, 1)[1][1]) - step[20, 20 + start]) < 1e-12
        assert abs(complex(enclose(late_law(setting, 1).watch.phase, at)) - complex(w.factor)) < 1e-12


def test_the_image_sum_in_another_form() -> None:
    """eta = (1/pi) integral_0^(pi/2) [cot(a cos^2 p) - 1/(a cos^2 p)] dp, by mpmath.quad; derived from the band's
    density by summing 1/(m + b cos^2 p) over all whole m, which is Euler's series for the cotangent (textbook)."""
    eta = edge_rest(parse("a"), ((1, 0),), 0)
    for a in ("1/2", "7/5", "3"):
        found = enclose(eta, Values.at({"a": parse(a)})).real
        with mpmath.workdps(25):
            x = mpmath.mpf(parse(a).args[0].numerator) / parse(a).args[0].denominator
            wanted = mpmath.quad(lambda p, x=x: mpmath.cot(x * mpmath.cos(p) ** 2) - 1 / (x * mpmath.cos(p) ** 2),
                                 [0, 1, mpmath.pi / 2 - mpmath.mpf(10) ** -9]) / mpmath.pi
            assert abs(mpmath.mpf(found.str(25, radius=False)) - wanted) < 1e-9


def test_below_aliasing_both_forms_agree() -> None:
    """The general law, principal roots and all, is the special one where 2 g tau < pi."""
    for setting in (lattice(start=2), lattice()):
        general = replace(setting, assume=())
        a = values_of(late_law(setting, 2).real, "2/5", range(50, 60))
        b = values_of(late_law(general, 2).real, "2/5", range(50, 60))
        assert text(late_law(setting, 2).real) != text(late_law(general, 2).real)
        assert np.allclose(a, b, rtol=1e-12, atol=0)


def test_what_the_tail_start_means() -> None:
    """At n = `from` the first term is off by about a hundredth of its envelope: renewal recursion, scipy's Bessel."""
    law = late_law(lattice(), 1)
    start = int(values_of(law.start, "7/10", range(1, 2))[0].real)
    assert start == 89
    phi = recursion(0.7, 140)
    asks = range(start, start + 40)
    gap = np.abs(values_of(law.real, "7/10", asks) - phi[asks[0] : asks[-1] + 1])
    envelope = (2.8 / np.pi) ** 0.5 * np.array(asks, dtype=float) ** -1.5
    assert 0.006 < (gap / envelope).max() < 0.011


def test_every_claim_is_earned_and_reads_back() -> None:
    for setting in (lattice(), lattice(start=1, below=False), lattice(below=False, length="pi/(2*g)")):
        derivation = derive_asymptotics(setting, Wish("asymptotics", (("order", 2),)))
        assert sorted(s.earns for s in derivation.steps if s.earns) == sorted(c.id for c in derivation.claims)
        for claim in derivation.claims:
            assert isinstance(claim.value, Formula) and parse(text(claim.value)) == claim.value


def test_what_is_not_covered_says_so() -> None:
    base = lattice()
    for setting in (
        replace(base, start=None),
        replace(base, space=Lattice("line", parse("-g"), (("0", parse("g")), ("1", parse("g"))))),
        replace(base, detectors=(Watcher((), parse("1/2"), place=number(0)),)),
        replace(base, start=Start(place=parse("j"))),
        replace(base, start=Start(distance=parse("2*j"))),
        replace(base, detectors=(*base.detectors, *base.detectors)),
    ):
        with pytest.raises(NotCovered):
            derive_asymptotics(setting, Wish("asymptotics"))
    with pytest.raises(NotCovered):
        derive_asymptotics(base, Wish("asymptotics", (("order", 9),)))
