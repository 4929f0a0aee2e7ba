"""Generating functions and first terms against mpmath's matrices and closed forms."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import networkx as nx
import pytest
from flint import acb, ctx

from derive.checks.renewal.road import check_renewal, check_renewal_exact
from derive.derivations.renewal.topic import derive_renewal
from derive.derivations.sight import Sight
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import Formula
from derive.numerics.evaluate import Values, enclose
from derive.pipeline import answer
from derive.problem.quantities import Quantity
from derive.problem.setting import Check, Question, Setting, Watcher, Wish
from derive.record.said import Claim, PerRoot
from tests.graphs import UNIT, karate_club, on_graph
from tests.settings_of_graphs import watched
from tests.strategies import POSITIVE, site

QUICK = Check(samples=1)


def claims(setting: Setting, terms: int = 4) -> dict[str, Claim]:
    return {c.id: c for c in derive_renewal(setting, Wish("renewal", (("terms", terms),))).claims}


def test_two_levels_are_a_geometric_law() -> None:
    """F_n = sin^2 cos^(2 n - 2) for the transition; by hand."""
    found = claims(on_graph(nx.path_graph(2), 0, 1))
    for n in range(1, 5):
        value = found[f"renewal.F.{n}"].value
        assert isinstance(value, Formula)
        wanted = parse(f"sin(g*tau)^2*cos(g*tau)^{2 * n - 2}" if n > 1 else "sin(g*tau)^2")
        assert vanishes(value - wanted, {"g": POSITIVE, "tau": POSITIVE}) is True


@pytest.mark.parametrize("start", [0, 2])
@pytest.mark.parametrize("efficiency", ["1", "1/3"])
def test_generating_function_and_terms_against_mpmath(start: int, efficiency: str) -> None:
    """phi(z) = sqrt(eta) <d| z U (1 - z K)^-1 |psi> on a path of four, with mpmath's expm and linear solver."""
    graph = nx.path_graph(4)
    setting = replace(on_graph(graph, 0, start), detectors=(Watcher((site(0),), parse(efficiency)),))
    found = claims(setting)
    with mpmath.workdps(40), ctx.workprec(200):
        h = mpmath.matrix((-nx.to_numpy_array(graph)).tolist())
        u = mpmath.expm(mpmath.mpc(0, -1) * h * mpmath.mpf("0.75"))
        eta = mpmath.mpf(1) / 3 if efficiency != "1" else mpmath.mpf(1)
        no = mpmath.diag([mpmath.sqrt(1 - eta), 1, 1, 1])
        z, psi = mpmath.mpc("0.25", "0.5"), mpmath.matrix(4, 1)
        psi[start] = 1
        wanted = (u * mpmath.lu_solve(mpmath.eye(4) - z * no * u, psi))[0] * z * mpmath.sqrt(eta)
        values = Values.at({"g": parse("1"), "tau": parse("3/4")})
        phi = found["renewal.amplitude"].value
        assert isinstance(phi, Formula)
        ball = enclose(phi, values.with_letter("z", acb("0.25", "0.5")))
        assert abs(complex(float(ball.real.mid()), float(ball.imag.mid())) - complex(wanted)) < 1e-13
        for n in range(1, 5):
            value = found[f"renewal.F.{n}"].value
            assert isinstance(value, Formula)
            f = eta * abs((u * psi)[0]) ** 2
            assert abs(float(enclose(value, values).real.mid()) - float(f)) < 1e-14
            psi = no * u * psi


def test_poles_are_inverse_eigenvalues() -> None:
    """Zeros of the printed denominator on the hexagon at g tau = 0.7 against numpy's eigenvalues of Q U."""
    import numpy as np
    from scipy.linalg import expm

    setting = on_graph(nx.cycle_graph(6), 0, 3)
    value = claims(setting)["renewal.pole.1"].value
    assert isinstance(value, PerRoot)
    with ctx.workprec(100):
        at = Values.at({"g": parse("1"), "tau": parse("7/10")})
        coefficients = [enclose(value.polynomial, at.with_letter("z", acb(x))) for x in range(4)]
    samples = np.array([complex(float(c.real.mid()), float(c.imag.mid())) for c in coefficients])
    poles = np.roots(np.polyfit(range(4), samples, 3))
    k = expm(0.7j * nx.to_numpy_array(nx.cycle_graph(6)))
    k[0, :] = 0
    inside = sorted((x for x in np.linalg.eigvals(k) if 1e-9 < abs(x) < 1 - 1e-9), key=lambda x: x.real)
    assert np.allclose(sorted(1 / poles, key=lambda x: x.real), inside, atol=1e-6)


@pytest.mark.parametrize("name", ["square", "merged hexagon", "path of four", "weak"])
def test_entries_are_proved(name: str) -> None:
    """Both roads agree on every entry."""
    settings = {
        "square": on_graph(nx.cycle_graph(4), 0, 2),
        "merged hexagon": on_graph(nx.cycle_graph(6), 0, 1, length=parse("pi/(2*g)")),
        "path of four": on_graph(nx.path_graph(4), 0, 3),
        "weak": replace(on_graph(nx.cycle_graph(6), 0, 3), detectors=(Watcher((site(0),), parse("3/4")),)),
    }
    report = answer(Question(settings[name], (Wish("renewal"),), check=QUICK))
    assert {j.verdict for j in report.judged} == {"proved"}
    assert report.plots and report.plots[0].id == "renewal.F"


def test_sums_over_roots_are_measured() -> None:
    """34 vertices: energies without closed form stand as sums over roots, and agree with the experiment."""
    setting = on_graph(karate_club(), 33, 3, UNIT)
    found = claims(setting, 2)
    seen = check_renewal(setting, tuple(found.values()), QUICK)
    assert {f.verdict for f in seen.findings.values()} == {"agrees"} and len(found) == 3


@pytest.mark.parametrize(
    ("about", "which", "value"),
    [
        ("detection probability", 2, "sin(g*tau)^4"),
        ("detection amplitude", 1, "-sin(g*tau)^2*2"),
        ("generating function", None, "z*sin(g*tau)^2"),
    ],
)
def test_wrong_claims_are_refuted_by_each_road(about: str, which: int | None, value: str) -> None:
    keys = () if which is None else (("ask", which),)
    claim = Claim("claim.mine", "renewal", Quantity(about, keys), parse(value), origin="user")
    setting = on_graph(nx.cycle_graph(4), 0, 2)
    assert check_renewal(setting, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"
    assert check_renewal_exact(setting, (claim,), QUICK).findings["claim.mine"].verdict == "refuted"


def test_a_law_in_n_is_measured_at_the_first_asks() -> None:
    law = parse("sin(g*tau)^2*cos(g*tau)^(2*n - 2)")
    right = Claim("claim.mine", "renewal", Quantity("detection probability"), law)
    wrong = replace(right, value=parse("sin(g*tau)^2*cos(g*tau)^(2*n)"))
    setting = on_graph(nx.path_graph(2), 0, 1)
    assert check_renewal(setting, (right,), QUICK).findings["claim.mine"].verdict == "agrees"
    assert check_renewal(setting, (wrong,), QUICK).findings["claim.mine"].verdict == "refuted"


def test_a_plaquette_with_a_flux_among_nine_sites() -> None:
    """Seen energies and phi(z) with phases that cancel in part, against numpy: g = 1, phi = 1/3, tau = 3/4."""
    import numpy as np
    from scipy.linalg import expm

    loops = [((0, 1, 4, 3), "phi")]
    setting = watched("grid", {"rows": 3, "columns": 3}, 0, ("g", "phi"), loops=loops, start=8)
    with ctx.workprec(200):
        at = Values.at({"g": parse("1"), "phi": parse("1/3"), "tau": parse("3/4")})
        h = np.zeros((9, 9), complex)
        for x, row in enumerate(setting.space.rows):  # type: ignore[union-attr]
            for y, f in row:
                h[x, y] = complex(enclose(f, at))
        seen = [v for v in np.linalg.eigvalsh(h) if abs(v) > 1e-9]
        (polynomial, _), = Sight(setting).factors
        found = [complex(enclose(polynomial[0].field.formula(c), at)) for c in polynomial]
        assert np.allclose(found[::-1], np.poly(seen), atol=1e-9)
        u, no = expm(-0.75j * h), np.diag([0.0] + [1.0] * 8)
        z = 0.3 + 0.4j
        wanted = (u @ np.linalg.solve(np.eye(9) - z * no @ u, np.eye(9)[8]))[0] * z
        value = claims(setting, 1)["renewal.amplitude"].value
        assert isinstance(value, Formula)
        assert abs(complex(enclose(value, at.with_letter("z", acb("0.3", "0.4")))) - wanted) < 1e-12
