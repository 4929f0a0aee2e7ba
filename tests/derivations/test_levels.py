"""Levels against eigenvalues of the null-outcome step (mpmath), the other route, and textbook spectra."""

from fractions import Fraction as F

import mpmath as mp
import pytest
from flint import ctx

from derive.derivations.levels.topic import bernoulli, by_reduction, by_secular, derive_levels
from derive.derivations.spectrum import Spectrum
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import number
from derive.numerics.evaluate import Values, enclose
from derive.numerics.roots import enclose_roots
from derive.problem.setting import Wish
from derive.record.said import Expansion, PerRoot
from tests.settings_of_graphs import cluster, watched

UNEVEN = [(0, 1, "-g"), (1, 2, "-1"), (2, 3, "-2"), (3, 4, "-1"), (4, 5, "-1"), (5, 6, "-3"), (1, 4, "-1"),
          (2, 6, "-1")]


def derived(setting, order=3):
    return derive_levels(setting, Wish("levels", (("order", order),)))


def in_numbers(derivation, values, tau):
    """All bright (energy, rate) that the claims say at a value of tau, sorted."""
    point = {**{k: number(v) for k, v in values.items()}, "tau": number(tau)}
    claims = {c.id: c.value for c in derivation.claims}
    found = []
    for name, value in claims.items():
        if name.endswith(".energy") and ".dark." not in name:
            rate = claims[name.replace("energy", "rate")]
            count = int(text(claims[name.replace("energy", "multiplicity")]))
            with ctx.workprec(256):
                found += _pairs(value, rate, point) * count
    return sorted(found)


def _pairs(energy, rate, point):
    values = Values.at(point)
    if isinstance(energy, PerRoot):
        roots = enclose_roots(energy.polynomial, energy.letter, values)
        inner = [values.with_letter(energy.letter, x) for x in roots]
        return [(_mp(enclose(energy.formula, v)), _mp(enclose(rate.formula, v))) for v in inner]
    return [(_at(energy, values, point["tau"]), _at(rate, values, point["tau"]))]


def _at(value, values, tau):
    assert isinstance(value, Expansion)
    t = mp.mpf(tau.args[0].numerator) / tau.args[0].denominator
    return mp.fsum(_mp(enclose(f, values)) * t**k for k, f in zip(value.powers, value.terms, strict=True))


def _mp(ball):
    return mp.mpf(ball.real.str(40, radius=False))


def measured(setting, values, tau):
    """(energy, rate) of all eigenvalues of Q U Q on range(Q), by mpmath; the dark ones with rate 0 included."""
    n = setting.space.size
    point = Values.at({k: number(v) for k, v in values.items()})
    H = mp.zeros(n, n)
    for x, row in enumerate(setting.space.rows):
        for y, f in row:
            ball = enclose(f, point)
            H[x, y] = mp.mpc(_mp(ball), mp.mpf(ball.imag.str(40, radius=False)))
    t = mp.mpf(tau.numerator) / tau.denominator
    U = mp.expm(-1j * H * t, method="taylor")
    watched_sites = [v[0][0] for v in setting.detectors[0].vectors]
    rest = [x for x in range(n) if x not in watched_sites]
    K = mp.matrix([[U[x, y] for y in rest] for x in rest])
    eps = [1j * mp.log(e) / t for e in mp.eig(K, left=False, right=False)]
    return sorted((mp.re(e), -2 * mp.im(e)) for e in eps)


def worst(said, seen):
    """Largest distance of a claimed (energy, rate) from the nearest measured one."""
    nearest = [min(seen, key=lambda m: abs(m[0] - e) + abs(m[1] - r)) for e, r in said]
    return (max(abs(e - m[0]) for (e, _), m in zip(said, nearest, strict=True)),
            max(abs(r - m[1]) for (_, r), m in zip(said, nearest, strict=True)))


@pytest.mark.parametrize("setting, values", [
    (cluster(UNEVEN, 0), {"g": F(1)}),
    (cluster(UNEVEN, 3), {"g": F(4, 3)}),
    (watched("ring", {"sites": 6}, 0, ("g", "phi"), loops=[(range(6), "phi")]), {"g": F(1), "phi": F(1, 2)}),
    (watched("chain", {"sites": 7}, [2, 5]), {"g": F(1)}),
    (watched("complete", {"sites": 6}, [0, 1]), {"g": F(1, 2)}),
    (watched("star", {"arms": 5, "length": 2}, [1, 3], bonds=[(0, 1, "-2*g")]), {"g": F(1)}),
])
def test_errors_fall_at_the_stated_order(setting, values):
    """Energies to O(tau^4), rates to O(tau^5): 16 and 32 per halving, within a tenth of a power."""
    derivation = derived(setting)
    with mp.workdps(40):
        tau = F(1, 16)
        errors = [worst(in_numbers(derivation, values, tau / 2**k), measured(setting, values, tau / 2**k))
                  for k in range(4)]
        for (e0, r0), (e1, r1) in zip(errors[1:], errors[2:], strict=False):
            assert e1 < mp.mpf(10) ** -25 or mp.log(e0 / e1, 2) > 3.9
            assert r1 < mp.mpf(10) ** -25 or mp.log(r0 / r1, 2) > 4.9


@pytest.mark.parametrize("setting", [
    watched("chain", {"sites": 4}, 0, ("g", "Delta"), energies={1: "Delta"}),
    watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")]),
    watched("chain", {"sites": 5}, {2: "1/sqrt(2)", 3: "i/sqrt(2)"}),
    cluster(UNEVEN, 1),
])
def test_secular_route_and_reduction_agree(setting):
    """Two derivations of a rank-one detector's levels, compared exactly, order by order."""
    spectrum = Spectrum(setting)
    secular, reduced = by_secular(spectrum, 3, "E"), by_reduction(spectrum, 3, "E")
    assert len(secular) == len(reduced)
    domains = {**setting.domains(), "E": setting.domains()["tau"]}
    for a, b in zip(secular, reduced, strict=True):
        for ours, theirs in ((a.energy, b.energy), (a.rate, b.rate)):
            for k in set(ours) | set(theirs):
                gap = ours.get(k, number(0)) - theirs.get(k, number(0))
                assert _vanishes_at_the_root(a.place, gap, domains)


def _vanishes_at_the_root(place, gap, domains):
    """Zero in the field, or, where all roots share a formula, zero modulo their polynomial."""
    if place.polynomial is None:
        return vanishes(gap, domains) is True
    return not place.field.element(gap)


@pytest.mark.parametrize("arms", [3, 5, 8])
def test_star_of_equal_arms(arms):
    """Arms of L = 3 sites: rates (2 m g^2 tau/(L+1)) sin^2(pi k/(L+1)); (m - 1) L dark (path states, textbook)."""
    derivation = derived(watched("star", {"arms": arms, "length": 3}, 0), 1)
    claims = {c.id: c.value for c in derivation.claims}
    domains = {"g": watched("chain", {"sites": 2}, 0).domains()["g"]}
    for k in (1, 2, 3):
        (leading,) = claims[f"levels.{k}.rate"].terms
        assert vanishes(leading - parse(f"{2 * arms}*g^2/4*sin({k}*pi/4)^2"), domains)
    dark = [v for name, v in claims.items() if ".dark." in name and name.endswith("multiplicity")]
    assert [text(v) for v in dark] == [str(arms - 1)] * 3


def test_fifty_sites_watched_at_the_end():
    """Rates (2 tau/N) sin^2(pi s/N), s = 1 ... N-1, N = 50, by numbers."""
    derivation = derived(watched("chain", {"sites": 50}, 49, (), hopping="-1"), 1)
    tau = F(1, 1000)
    with mp.workdps(40):
        said = sorted(r / (mp.mpf(1) / 1000) for _, r in in_numbers(derivation, {}, tau))
        law = sorted(mp.mpf(2) / 50 * mp.sin(mp.pi * s / 50) ** 2 for s in range(1, 50))
        assert max(abs(a - b) for a, b in zip(said, law, strict=True)) < 1e-25


@pytest.mark.parametrize("dimension", [2, 3])
def test_hypercube_has_one_bright_level_a_layer(dimension):
    """Seen from a corner a cube is a chain of d + 1 layers: d bright levels, the other 2^d - 1 - d dark."""
    derivation = derived(watched("hypercube", {"dimension": dimension}, 0), 1)
    count = sum(int(text(c.value)) for c in derivation.claims if c.id.endswith("multiplicity") and ".dark." in c.id)
    bright = [c for c in derivation.claims if c.id.endswith(".energy") and ".dark." not in c.id]
    assert count == 2**dimension - 1 - dimension and len(bright) == dimension


def test_weights_add_up_to_the_bright_part():
    """Star, start in one arm: the bright weights sum to 1/m (symmetry)."""
    derivation = derived(watched("star", {"arms": 3, "length": 3}, 0, start=2), 1)
    weights = [c.value for c in derivation.claims if c.id.endswith(".weight")]
    total = weights[0]
    for w in weights[1:]:
        total = total + w
    assert vanishes(total - F(1, 3), {}) is True


def test_another_piece_of_the_graph_is_dark():
    """Two bonds apart, one of them watched: the other one's levels +-g are never seen."""
    claims = {c.id: c.value for c in derived(cluster([(0, 1, "-g"), (2, 3, "-g")], 3)).claims}
    assert sorted(text(v) for name, v in claims.items() if ".dark." in name and name.endswith("energy")) == ["-g", "g"]
    assert text(claims["levels.1.rate"].terms[0]) == "g^2"


def test_isolated_detector_sees_nothing():
    """All levels are those of the rest, +-g, and dark."""
    setting = cluster([(0, 1, "-g"), (1, 2, "0")], 2)
    claims = {c.id: c.value for c in derived(setting).claims}
    assert [text(claims[f"levels.dark.{n}.energy"]) for n in (1, 2)] == ["-g", "g"]
    assert not [name for name in claims if name.startswith("levels.1")]


def test_bernoulli_numbers():
    """B_0 ... B_8 (textbook)."""
    assert [bernoulli(n) for n in range(9)] == [1, F(-1, 2), F(1, 6), 0, F(-1, 30), 0, F(1, 42), 0, F(-1, 30)]


def test_a_declared_letter_is_not_taken_for_a_root():
    setting = watched("chain", {"sites": 5}, 0, ("g", "E"), energies={2: "E"})
    names = {c.value.letter for c in derived(setting, 1).claims if isinstance(c.value, PerRoot)}
    assert names == {"x"}
