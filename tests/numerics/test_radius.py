"""The radius of convergence: values, kinds, completeness, and another road."""

import mpmath
import numpy as np
import pytest
from flint import acb, acb_mat, arb, ctx

from derive.errors import NeedsPrecision
from derive.numerics import radius as radius_module
from derive.numerics.bright import return_determinant, scaled_sector
from derive.numerics.meetings import bound_discriminant, discriminant, is_harmful
from derive.numerics.radius import bits_for_radius, enclose_radius
from derive.numerics.radius_trend import enclose_growth
from derive.numerics.zeros import clusters, enclose_taylor

DIGITS = 22
BITS = bits_for_radius(DIGITS)

FOUR = [[-2, -1, -1, 1], [-1, -1, -2, 1], [-1, -2, -2, -1], [1, 1, -1, 2]]
ANOTHER = [[2, -1, -1, -1], [-1, 1, -1, 2], [-1, -1, -2, -1], [-1, 2, -1, 2]]


def chain(sites, at):
    """Hopping -1, the watched site first."""
    order = [at] + [x for x in range(sites) if x != at]
    return [[-1 if abs(x - y) == 1 else 0 for y in order] for x in order]


def folded(sites):
    """A chain of 2 L + 1 sites at its centre, on the bright half: the first bond is stretched by sqrt 2 (textbook)."""
    half = [[-1 if abs(x - y) == 1 else 0 for y in range(sites // 2 + 1)] for x in range(sites // 2 + 1)]
    half[0][1] = half[1][0] = -np.inf  # replaced by -sqrt 2 in balls
    return half


def sector(rows, rank=1):
    entries = [-arb(2).sqrt() if np.isinf(x) else x for row in rows for x in row]
    return scaled_sector(acb_mat(len(rows), len(rows), [acb(x) for x in entries]), rank)


def found(rows, rank=1):
    with ctx.workprec(2 * BITS + 300):
        return enclose_radius([sector(rows, rank)], DIGITS, BITS)


def shares(ball, text, digits=20):
    """The certified ball is narrow and holds the outside value to `digits` digits."""
    with mpmath.workdps(40), ctx.workprec(200):
        value = arb(mpmath.nstr(text, 35) if not isinstance(text, str) else text)
        narrow = ball.rad() < ball.mid() * arb(10) ** -digits
        return bool(narrow) and bool(abs(ball - value) < arb(10) ** -digits)


CLOSED = {
    "three at the centre": (folded(3), lambda: mpmath.pi / (2 * mpmath.sqrt(2)), ("zero",)),
    "three at the end": (chain(3, 0), lambda: mpmath.sqrt(2) * mpmath.atan(2 * mpmath.sqrt(2)), ("meeting",)),
    "five at the centre": (folded(5), lambda: 2 * mpmath.pi / (3 * mpmath.sqrt(3)), ("zero", "meeting")),
}


@pytest.mark.parametrize("name", CLOSED)
def test_closed_forms(name):
    """Two- and three-level formulas evaluated by mpmath: cos(sqrt 2 tau) = 0; 2 arctan(2 sqrt 2) = sqrt 2 tau; the
    common zero of (2 cos(sqrt 3 tau) + 1)/3."""
    rows, value, kinds = CLOSED[name]
    r = found(rows)
    with mpmath.workdps(40):
        assert shares(r.value, value())
    assert r.kinds == kinds


def test_weak_bond_between_detector_and_pair():
    """Chain d-b-c, bonds e and 1, w = sqrt(1 + e^2): the eigenvalues meet at (2/w) arctan(2 w/e^2)."""
    e = 0.5
    rows = [[0, e, 0], [e, 0, 1], [0, 1, 0]]
    r = found(rows)
    with mpmath.workdps(40):
        w = mpmath.sqrt(1 + mpmath.mpf(e) ** 2)
        assert shares(r.value, 2 / w * mpmath.atan(2 * w / mpmath.mpf(e) ** 2))
    assert r.kinds == ("meeting",)


@pytest.mark.parametrize("sites, at, near, kind", [
    (4, 1, 1.1521, "zero"), (4, 0, 1.725524, "meeting"), (5, 0, 1.698133, "meeting"),
])
def test_chains_against_a_root_of_mpmath(sites, at, near, kind):
    """mpmath.findroot on the return amplitude (mpmath.expm) for a zero, on the discriminant of numpy-free charpoly
    values for a meeting; no code of the project's."""
    r = found(chain(sites, at))
    with mpmath.workdps(40):
        assert shares(r.value, abs(_refined(chain(sites, at), near, kind)))
    assert r.kinds == (kind,)


def _refined(rows, near, kind):
    H = mpmath.matrix(rows)

    def amplitude(tau):
        return mpmath.expm(1j * H * tau, method="taylor")[0, 0]

    def gap(tau):
        U = mpmath.expm(-1j * H * tau, method="taylor")
        K = U[1:, 1:]
        values = mpmath.eig(K, left=False, right=False)
        product = mpmath.mpf(1)
        for i, a in enumerate(values):
            for b in values[:i]:
                product *= (a - b) ** 2
        return product

    if kind == "zero":
        return mpmath.findroot(amplitude, near)
    with mpmath.workdps(70):
        return mpmath.findroot(gap, (near, near * (1 + mpmath.mpf(10) ** -7)), tol=mpmath.mpf(10) ** -100)


@pytest.mark.parametrize("rows, text", [(FOUR, "0.8146"), (ANOTHER, None)])
def test_random_graphs_ruled_by_a_meeting(rows, text):
    """Logarithms continued along rays in doubles (numpy): their mean over a circle is log K(0) = 0 where log K is
    analytic inside (mean value property), and is not just beyond the radius."""
    r = found(rows)
    value = float(r.value.mid())
    assert r.kinds == ("meeting",)
    with ctx.workprec(200):
        assert r.value.rad() < arb("1e-20")
    if text:
        assert abs(value - float(text)) < 1e-4
    assert _mean_log(rows, 0.97 * value) < 1e-6
    assert _mean_log(rows, 1.06 * value) > 1e-3


def _mean_log(rows, size, rays=720, steps=400):
    """All rays at once; eigenvalues are matched with the nearest ones of the step before."""
    levels, states = np.linalg.eigh(np.array(rows, dtype=complex))
    directions = np.exp(2j * np.pi * (np.arange(rays) + 0.37) / rays)
    logs = before = None
    for step in range(20, steps + 1):
        phases = np.exp(-1j * (size * step / steps * directions)[:, None] * levels)
        K = ((states * phases[:, None, :]) @ states.conj().T)[:, 1:, 1:]
        values, vectors = np.linalg.eig(K)
        if logs is None:
            logs = np.log(values)
        else:
            order = np.argmin(abs(values[:, None, :] - before[:, :, None]), axis=2)
            values = np.take_along_axis(values, order, axis=1)
            vectors = np.take_along_axis(vectors, order[:, None, :], axis=2)
            logs = logs + np.log(values / before)
        before = values
    return float(np.abs(((vectors * logs[:, None, :]) @ np.linalg.inv(vectors)).mean(axis=0)).max())


def test_the_nearer_meeting_of_four_sites_is_harmless():
    """Four sites at the second: |tau| = 1.0494 lies inside the zero at 1.1521."""
    with ctx.workprec(400):
        s = sector(chain(4, 1))
        g = enclose_taylor(lambda z: discriminant(s, z), lambda x: bound_discriminant(s, x), arb(2), 300)
        met = [c for c in clusters(g, 25) if c.modulus / s.h < arb("1.06")]
        assert len(met) == 4  # two mirrored pairs
        assert all(abs(float((c.modulus / s.h).mid()) - 1.04937) < 1e-5 for c in met)
        assert [is_harmful(s, c) for c in met if c.centre.real > 0] == [False, False]


def test_the_end_of_three_sites_has_a_double_zero_beyond():
    """cos^2 (tau/sqrt 2) = (1 + cos sqrt 2 tau)/2, the amplitude at the end of a three-site chain (textbook levels)."""
    with ctx.workprec(400):
        s = sector(chain(3, 0))
        f = enclose_taylor(lambda z: return_determinant(s, z), lambda x: x.exp(), arb(4), 300)
        first = clusters(f, 25)[0]
        assert first.count == 2
        with mpmath.workdps(40):
            assert shares((first.modulus / s.h), mpmath.pi / mpmath.sqrt(2))


EVERY = [folded(3), folded(5), chain(3, 0), chain(4, 1), chain(4, 0), chain(5, 0), FOUR, ANOTHER]


@pytest.mark.parametrize("rows", EVERY)
def test_growth_of_the_coefficients(rows):
    """The largest |G_k|^(1/k) of orders 79-81 is within 6 % of 1/radius and closer than that of 39-41."""
    with ctx.workprec(400):
        growth = enclose_growth([sector(rows)])
    value = found(rows).value
    early, late = abs(growth.early * value - 1), abs(growth.late * value - 1)
    assert late < arb("0.06") and late < early


def test_growth_is_that_of_the_matrix_logarithm():
    """G_40 of the three-site chain at its end, from mpmath's logm on 128 points of a small circle."""
    with ctx.workprec(400):
        growth = enclose_growth([sector(chain(3, 0))])
    with mpmath.workdps(60):
        H = mpmath.matrix(chain(3, 0))
        total, M, size = mpmath.matrix(2, 2), 128, mpmath.mpf("0.3")
        norms = {}
        samples = []
        for j in range(M):
            w = mpmath.expjpi(mpmath.mpf(2 * j) / M)
            K = mpmath.expm(-1j * H * size * w, method="taylor")[1:, 1:]
            samples.append((w, mpmath.logm(K)))
        for k in (39, 40, 41):
            total = mpmath.matrix(2, 2)
            for w, log in samples:
                total += log * w ** -(k + 1)
            total = total / M / size ** (k + 1)
            norms[k] = mpmath.mnorm(total, "f") ** (mpmath.mpf(1) / k)
        assert abs(max(norms.values()) - mpmath.mpf(growth.early.str(40, radius=False))) < 1e-12


def test_a_zero_left_out_is_noticed(monkeypatch):
    """The count inside the circle gives a lost zero away."""
    whole = radius_module.clusters
    monkeypatch.setattr(radius_module, "clusters", lambda g, digits: whole(g, digits)[2:])
    with pytest.raises(NeedsPrecision):
        found(chain(4, 1))


def test_branches_told_wrongly_give_another_radius(monkeypatch):
    """With every meeting taken for harmless the nearest zero comes out, 2.22 for three sites at the end: the trend of
    the coefficients stays away from it."""
    monkeypatch.setattr(radius_module, "is_harmful", lambda s, meeting: False)
    wrong = found(chain(3, 0))
    assert wrong.kinds == ("zero",)
    monkeypatch.undo()
    with ctx.workprec(400):
        growth = enclose_growth([sector(chain(3, 0))])
    assert growth.late * wrong.value - 1 > arb("0.2")


@pytest.mark.slow
@pytest.mark.parametrize("sites", [7, 8, 9])
def test_up_to_eight_bright_dimensions(sites):
    """End-watched chains; the growth of the coefficients is the other road."""
    with ctx.workprec(4 * BITS):
        r = enclose_radius([sector(chain(sites, 0))], DIGITS, BITS)
        growth = enclose_growth([sector(chain(sites, 0))])
    assert r.kinds == ("meeting",)
    assert abs(growth.late * r.value - 1) < arb("0.06")
