"""An imperfect detector in a derivation: eta, q = sqrt(1 - eta), coth(kappa/2), and the graph's field with it.

Where eta has letters, coth(kappa/2) stays a letter while words are added up and is written out in the end; where eta
is a number it is a number of the field.
"""

from __future__ import annotations

from dataclasses import dataclass

from derive.derivations.watched import Watched
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import ZERO, Formula, free_letters, letter, replace
from derive.problem.efficiency import half_coth, half_tanh, is_free_of_interval, missed, vanishes_with_interval
from derive.problem.setting import POSITIVE, Domain, Setting
from derive.record.said import Matrix

COTH = "coth_half_kappa"


@dataclass(frozen=True)
class Imperfect:
    """The detector's efficiency as formulas: eta, q = sqrt(1 - eta), c = coth(kappa/2), th = tanh(kappa/2)."""

    eta: Formula
    q: Formula
    domains: dict[str, Domain]

    @property
    def is_perfect(self) -> bool:
        return self.q == ZERO

    @property
    def is_weak(self) -> bool:
        """Does the efficiency vanish with the interval?"""
        return not is_free_of_interval(self.eta)

    @property
    def c(self) -> Formula:
        return self.tidy(half_coth(self.q))

    @property
    def th(self) -> Formula:
        return self.tidy(half_tanh(self.q))

    def tidy(self, f: Formula) -> Formula:
        """f with its numbers gathered, where the efficiency is a number."""
        if self.eta.head != "number":
            return f
        field = Field.of([f], {"tau": POSITIVE, **self.domains})
        return field.formula(field.element(f))


def efficiency_of(setting: Setting) -> Imperfect:
    """The one detector's efficiency; one that depends on tau must vanish with it."""
    eta, domains = setting.detectors[0].efficiency, setting.domains()
    if not is_free_of_interval(eta) and not vanishes_with_interval(eta, domains):
        raise NotCovered("an efficiency that depends on tau is taken where it vanishes with tau: a weak detector")
    return Imperfect(eta, missed(eta, domains), domains)


def watched_with_coth(setting: Setting, detector: Imperfect, reach: int) -> tuple[Watched, Element]:
    """The graph near the detector in a field that holds coth(kappa/2)."""
    c = letter(COTH) if free_letters(detector.eta) else detector.c
    watched = Watched(setting, reach, (c,), {COTH: POSITIVE})
    return watched, watched.field.element(c)


def written_out(matrix: Matrix, detector: Imperfect) -> Matrix:
    """The matrix with coth(kappa/2) written out."""
    put = {COTH: detector.c}
    patch = tuple((x, tuple((y, replace(f, put)) for y, f in row)) for x, row in matrix.patch)
    return Matrix(matrix.size, matrix.base, patch)
