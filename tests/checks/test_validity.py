"""Topic `validity`: certified radius, bounds that hold, promises that are kept, and wrong ones refuted."""

from dataclasses import replace

import mpmath
import pytest
from flint import arb, ctx

from derive.checks.judge import judged
from derive.checks.validity.majorant import check_majorant
from derive.checks.validity.radius import check_radius, check_radius_trend
from derive.checks.validity.road import check_validity
from derive.checks.validity.sectors import enclose_sectors, parted
from derive.derivations.validity.topic import derive_validity
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.numerics.evaluate import Values, enclose_real
from derive.numerics.radius import bits_for_radius, enclose_radius
from derive.problem.points import Point
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Wish
from derive.record.holds import kind_of
from derive.record.said import Claim, Number
from tests.settings_of_graphs import cluster, watched

EFFORT = Check(digits=20, samples=1)
HERE = Point(())


def three(at=0):
    return watched("chain", {"sites": 3}, at)


def derived(setting, **options):
    return derive_validity(setting, Wish("validity", tuple(options.items()))).claims


def own(about, formula, holds="exactly", keys=()):
    return Claim("claim.own", "validity", Quantity(about, keys), parse(formula), kind_of(holds), origin="user")


def verdict(setting, claim, beside=(), effort=EFFORT):
    claims = (*beside, claim)
    found = [road(setting, claims, effort).findings.get(claim.id)
             for road in (check_validity, check_majorant, check_radius_trend)]
    return judged(claim, tuple(f for f in found if f is not None))


def value_of(setting, effort=EFFORT):
    seen = check_radius(setting, derived(setting), effort)
    return seen.values["validity.radius"], text(seen.values["validity.radius_kind"])


def test_a_right_radius_agrees_by_both_roads():
    """sqrt 2 arctan(2 sqrt 2)/g: the three-site chain's eigenvalues, textbook."""
    found = verdict(three(), own("radius of convergence", "sqrt(2)*atan(2*sqrt(2))/g"))
    assert found.verdict == "agrees"
    assert [f.road for f in found.findings] == ["enclosure", "trend"]


@pytest.mark.parametrize("formula", [
    "pi/(sqrt(2)*g)",  # the nearest zero, where a meeting rules
    "log(2)/(sqrt(2)*g)",  # where the majorant ends
    "sqrt(2)*atan(2*sqrt(2))",  # g forgotten
    "sqrt(2)*atan(2*sqrt(2))/g + 10^-15",
])
def test_wrong_radii_are_refuted(formula):
    found = verdict(three(), own("radius of convergence", formula))
    assert found.verdict == "refuted"
    assert "meeting" in found.diagnosis


def test_the_nearest_zero_is_refuted_without_certified_lists():
    """The trend alone does it too."""
    claim = own("radius of convergence", "pi/(sqrt(2)*g)")
    assert check_radius_trend(three(), (claim,), EFFORT).findings[claim.id].verdict == "refuted"


def test_bounds_on_a_radius():
    assert verdict(three(), own("radius of convergence", "1/g", "as a lower bound")).verdict == "agrees"
    assert verdict(three(), own("radius of convergence", "1/g", "as an upper bound")).verdict == "refuted"
    assert verdict(three(), own("radius of convergence", "2/g", "as a lower bound")).verdict == "refuted"


def test_the_certified_number_fed_back_agrees():
    setting = watched("chain", {"sites": 4}, 1, letters=(), hopping="-1")
    number, kind = value_of(setting)
    assert isinstance(number, Number) and kind == "zero"
    assert verdict(setting, own("radius of convergence", number.value)).verdict == "agrees"
    assert verdict(setting, own("radius of convergence", number.value[:12])).verdict == "refuted"


def test_both_kinds_at_once():
    """Five sites at the centre: (2 cos(sqrt 3 tau) + 1)/3 vanishes where the bright pair meets, at 2 pi/(3 sqrt 3)."""
    number, kind = value_of(watched("chain", {"sites": 5}, 2, letters=(), hopping="-1"))
    with mpmath.workdps(30):
        assert abs(mpmath.mpf(number.value) - 2 * mpmath.pi / (3 * mpmath.sqrt(3))) < mpmath.mpf(10) ** -19
    assert kind == "zero + meeting"


def test_mirror_sectors_do_not_meet():
    """Five sites watched at both ends: even and odd halves are end-watched chains of three sites (bonds 1, sqrt 2)
    and of two; the odd one ends first, at cos tau = 0 (textbook)."""
    setting = watched("chain", {"sites": 5}, [0, 4], letters=(), hopping="-1")
    parts = parted(setting, HERE)
    assert parts.turned == (True,) and parts.bright == 3
    number, kind = value_of(setting)
    with mpmath.workdps(30):
        assert abs(mpmath.mpf(number.value) - mpmath.pi / 2) < mpmath.mpf(10) ** -19
    assert kind == "zero"


def test_separate_detectors_are_sectors_by_pattern():
    """Two chains in one graph, a detector at each: the radius is the lesser of both (three at the end, 1.7408)."""
    edges = [(0, 1, "-1"), (1, 2, "-1"), (3, 4, "-1/2")]
    setting = cluster(edges, [0, 3], ())
    assert parted(setting, HERE).groups == ((0,), (1,))
    number, kind = value_of(setting)
    with mpmath.workdps(30):
        meeting = mpmath.sqrt(2) * mpmath.atan(2 * mpmath.sqrt(2))
        assert abs(mpmath.mpf(number.value) - meeting) < mpmath.mpf(10) ** -19
    assert kind == "meeting"


def test_rank_two_without_symmetry():
    """Moments that do not commute: one sector; the zero is one of mpmath's det (exp(i H tau))_PP."""
    edges = [(0, 1, "1"), (0, 2, "-2"), (1, 2, "1"), (1, 3, "2"), (2, 3, "-1"), (2, 4, "1"), (3, 4, "2")]
    setting = cluster(edges, [0, 1], (), {0: "1", 3: "-1"})
    assert parted(setting, HERE).turned == (False,)
    number, kind = value_of(setting)
    assert kind == "zero"
    with mpmath.workdps(30):
        H = mpmath.zeros(5)
        for x, y, f in edges:
            H[x, y] = H[y, x] = mpmath.mpf(f)
        H[0, 0], H[3, 3] = 1, -1

        def determinant(tau):
            U = mpmath.expm(1j * H * tau, method="taylor")
            return U[0, 0] * U[1, 1] - U[0, 1] * U[1, 0]

        size, best = mpmath.mpf(number.value), None
        for k in range(64):
            z = size * mpmath.expjpi(mpmath.mpf(k) / 64)
            if best is None or abs(determinant(z)) < abs(determinant(best)):
                best = z
        assert abs(abs(mpmath.findroot(determinant, best)) - size) < mpmath.mpf(10) ** -18
    assert check_radius_trend(setting, derived(setting), EFFORT).findings["validity.radius"].verdict == "agrees"


def test_above_eight_dimensions_bounds_and_undecided():
    setting = watched("chain", {"sites": 12}, 0, letters=(), hopping="-1")
    seen = check_radius(setting, derived(setting), EFFORT)
    assert seen.findings["validity.radius"].verdict == "undecided"
    assert "between" in seen.findings["validity.radius"].evidence
    assert verdict(setting, own("radius of convergence", "3")).verdict == "refuted"
    assert verdict(setting, own("radius of convergence", "16/10")).verdict == "undecided"


def test_a_detector_coupled_to_nothing():
    setting = cluster([(0, 1, "-1"), (2, 3, "-1")], [0, 1], ())
    seen = check_radius(setting, derived(setting), EFFORT)
    assert text(seen.values["validity.radius"]) == "infinity"
    assert text(seen.values["validity.radius_kind"]) == "none"


@pytest.mark.parametrize("order", [0, 1, 2, 3])
def test_every_derived_entry_passes(order):
    setting = three(1)
    claims = derived(setting, order=order, time=parse("5/g"))
    seen = [road(setting, claims, EFFORT) for road in (check_validity, check_majorant, check_radius_trend)]
    for claim in claims:
        findings = tuple(s.findings[claim.id] for s in seen if claim.id in s.findings)
        assert judged(claim, findings).verdict == "agrees", (claim.id, findings)


WRONG = [
    ("remainder bound", "(g*tau)^5/100000", "as an upper bound"),
    ("remainder bound", "10*(g*tau)^7", "as an upper bound"),  # an order too high
    ("state error bound", "(g*tau)^6", "as an upper bound"),
    ("relative state error bound", "(g*tau)^6", "as an upper bound"),
    ("largest interval", "1/g", "as a lower bound"),
    ("largest interval", "1/(20*g)", "exactly"),
]


@pytest.mark.parametrize("about, formula, holds", WRONG)
def test_wrong_bounds_are_refuted(about, formula, holds):
    setting = three()
    assert verdict(setting, own(about, formula, holds), derived(setting)).verdict == "refuted"


def test_right_bounds_of_the_users_own():
    setting = three()
    beside = derived(setting)
    for about, formula in (("remainder bound", "20*(g*tau)^5/(1 - 2*g*tau)"), ("state error bound", "300*(g*tau)^4")):
        assert verdict(setting, own(about, formula, "as an upper bound"), beside).verdict == "agrees"
    assert verdict(setting, own("largest interval", "1/(20*g)", "as a lower bound"), beside).verdict == "agrees"


def test_a_planted_majorant_is_noticed():
    """A remainder with one coefficient lowered gets nothing from the coefficient road, and one with the bare tail's
    first term removed is caught there too."""
    setting = three()
    claim = next(c for c in derived(setting) if c.id == "validity.remainder")
    assert check_majorant(setting, (claim,), EFFORT).findings[claim.id].verdict == "agrees"
    less = replace(claim, value=claim.value - parse("(2*g*tau)^5"))
    assert check_majorant(setting, (less,), EFFORT).findings == {}


def test_the_interval_solves_its_equation():
    """mpmath's root of x e^x = tolerance, x = t r/(tau (2 - e^(h tau)))."""
    setting = watched("chain", {"sites": 3}, 0, letters=(), hopping="-1")
    claims = derived(setting, order=2, tolerance=parse("1/50"), time=parse("6"))
    number = check_validity(setting, claims, EFFORT).values["validity.interval"]
    with mpmath.workdps(40):
        h = mpmath.mpf(17) / 12

        def gap(tau):
            y = h * tau
            r = -mpmath.log(2 - mpmath.exp(y)) - y - y**2 - y**3
            x = 6 * r / tau / (2 - mpmath.exp(y))
            return x * mpmath.exp(x) - mpmath.mpf(1) / 50

        assert abs(mpmath.findroot(gap, mpmath.mpf(number.value)) - mpmath.mpf(number.value)) < mpmath.mpf(10) ** -19


def test_a_far_site_of_high_energy_counts():
    """No local bound where it fails: the far site's energy of 100 brings the radius below log 2/h of the sites near the
    detector, and the derived remainder has no value where a local one still would."""
    setting = watched("chain", {"sites": 5}, 0, letters=(), hopping="-1", energies={4: "100"})
    number, _ = value_of(setting)
    with ctx.workprec(100):
        assert arb(number.value) < arb(2).log() / 2  # h = 2 on the first four sites
    remainder = next(c for c in derived(setting, order=1) if c.id == "validity.remainder").value
    local = parse("-log(2 - exp(2*tau)) - 2*tau - 4*tau^2")
    with ctx.workprec(100):
        there = Values.at({"tau": parse("1/10")})
        assert enclose_real(local, there) > 0
        with pytest.raises(OutsideValidity):
            enclose_real(remainder, there)
    assert "(17*tau/12)^3" in text(remainder)  # three sites seen by the first omitted order: their own h


def test_what_is_not_covered_is_said():
    setting = watched("chain", {"sites": 3}, 0)
    weak = replace(setting, detectors=(replace(setting.detectors[0], efficiency=parse("1/2")),))
    with pytest.raises(NotCovered, match="perfect"):
        derive_validity(weak, Wish("validity"))
    still = cluster([(0, 1, "0")], [0], ())
    with pytest.raises(NotCovered, match="nothing moves"):
        derive_validity(still, Wish("validity"))


def apart():
    """Two pairs that know nothing of one another, ten energy units apart: their eigenvalues meet at about 2 pi/10, on
    different branches, before either pair's zero at pi/2."""
    return cluster([(0, 1, "-1"), (2, 3, "-1")], [0, 2], (), {2: "10", 3: "10"})


def test_meetings_between_sectors_are_harmless():
    """cos tau = 0 in both pairs (textbook)."""
    number, kind = value_of(apart())
    with mpmath.workdps(30):
        assert abs(mpmath.mpf(number.value) - mpmath.pi / 2) < mpmath.mpf(10) ** -19
    assert kind == "zero"


def test_a_meeting_that_balls_cannot_judge_is_left_open():
    """The same two pairs, not told apart: the step stays diagonalisable there, which balls never see."""
    whole = parted(apart(), HERE)
    joined = replace(whole, groups=((0, 1),), turned=(False,))
    bits = bits_for_radius(10)
    with ctx.workprec(2 * bits + 300):
        sectors = enclose_sectors(apart(), HERE, joined)
        with pytest.raises(NeedsPrecision):
            enclose_radius(sectors, 10, bits)
