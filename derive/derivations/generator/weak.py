"""The generator under weak measurement: an efficiency that vanishes with the interval (continuous monitoring).

    K = (1 - (1 - q) P) exp(-i H tau) = exp(-i tau G),   q = sqrt(1 - eta) = 1 - gamma tau + O(tau^2)

on all sites: no state is fast, and G = H - i gamma P + sum_{k>=1} tau^k G_k is a power series in tau, where gamma is
the rate at which an amplitude on the detector is lost.  G_k, k >= 1, is made of commutators of H and P and reaches k
steps from the detector.  Exact; converges for h tau and gamma tau well below 1.  Derived here.
"""

from __future__ import annotations

from fractions import Fraction

from derive.algebra.near import Near
from derive.algebra.series import truncated_log
from derive.derivations.generator.slow_steps import inserted, weak_step
from derive.derivations.generator.steps import put_together
from derive.derivations.generator.topic import term_claim, truncated_claim
from derive.derivations.imperfect import Imperfect
from derive.derivations.watched import Watched
from derive.exact.field import Element
from derive.exact.sparse import Sparse, accumulate, added, multiplied
from derive.exact.taylor import taylor
from derive.formula.tree import I_UNIT, free_letters, letter
from derive.problem.balls import ball
from derive.problem.setting import Row, Setting
from derive.record.said import Derivation, Matrix

VALID = "exact; the series in tau is useful for h*tau and gamma*tau well below 1, gamma the loss rate of an amplitude"


def derive_weak_generator(setting: Setting, detector: Imperfect, order: int) -> Derivation:
    """G_0 ... G_order on all sites, and the truncated generator."""
    letters = [letter(name) for name in sorted(free_letters(detector.eta) - {"tau"})]
    watched = Watched(setting, order + 2, (I_UNIT, *letters))
    kept = taylor(detector.q, "tau", watched.field, order + 2)
    logs = truncated_log(_steps(watched, kept, order + 1))
    matrices = tuple(_generator(watched, log.rows, k) for k, log in enumerate(logs))
    claims = (*(term_claim(k, matrix, VALID) for k, matrix in enumerate(matrices)), truncated_claim(matrices))
    told = (
        *weak_step(watched.field.formula(-kept[1])),
        *(inserted(k, matrix, "H and what is lost on the detector:") for k, matrix in enumerate(matrices)),
        put_together(order),
    )
    return Derivation("generator", claims, told)


def _steps(watched: Watched, kept: list[Element], n: int) -> list[Near]:
    """The coefficients of tau^1 ... tau^n of K near the detector."""
    sites = ball(watched.space.rows, watched.support, n)
    inside, field = set(sites), watched.field
    minus_i = -field.element(I_UNIT)
    h: Sparse = {
        x: {y: minus_i * field.element(f) for y, f in watched.space.rows[x] if y in inside} for x in sites
    }
    p = _projector(watched)
    powers: list[Sparse] = [{x: {x: field.one} for x in sites}]
    for m in range(1, n + 1):
        last = multiplied(powers[-1], h)
        powers.append({x: {y: f.scaled(Fraction(1, m)) for y, f in row.items()} for x, row in last.items()})
    out = []
    for m in range(1, n + 1):
        total = powers[m]
        for a in range(1, m + 1):
            total = added(total, _times(multiplied(p, powers[m - a]), kept[a]))
        out.append(Near(total))
    return out


def _projector(watched: Watched) -> Sparse:
    out: Sparse = {}
    for d in watched.d:
        for x, f in d.items():
            accumulate(out.setdefault(x, {}), {y: f * watched.field.conjugate(g) for y, g in d.items()})
    return out


def _times(a: Sparse, factor: Element) -> Sparse:
    return {x: {y: f * factor for y, f in row.items()} for x, row in a.items()} if factor else {}


def _generator(watched: Watched, log: Sparse, k: int) -> Matrix:
    """G_k = i L_(k+1); far from the detector G_0 is H."""
    i = watched.field.element(I_UNIT)
    near = watched.support if k == 0 else sorted(log)
    patch = tuple((x, _row(watched, log.get(x, {}), i)) for x in near if log.get(x))
    if k == 0:
        return Matrix(watched.space.size, watched.space.rows, patch)
    return Matrix(watched.space.size, (), tuple((x, row) for x, row in patch if row))


def _row(watched: Watched, row: dict[int, Element], i: Element) -> Row:
    return tuple((y, watched.field.formula(i * row[y])) for y in sorted(row))

