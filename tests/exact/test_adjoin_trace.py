"""Sums over all roots without a root, against mpmath's roots."""

import mpmath as mp
import pytest

from derive.exact.adjoin import WithRoot
from derive.exact.field import Field
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.setting import Domain


@pytest.mark.parametrize("f, plain", [
    ("E", lambda x: x), ("E^5 - 2*E^3 + 7", lambda x: x**5 - 2 * x**3 + 7), ("1/(1 + E^2)", lambda x: 1 / (1 + x**2)),
    ("(E - 1)/(3*E^2 - 4)", lambda x: (x - 1) / (3 * x**2 - 4)),
])
def test_traces(f, plain):
    base = Field.of([parse("1")], {})
    field = WithRoot(base, "E", [base.rational(c) for c in (1, -4, 0)])  # E^3 - 4 E + 1
    found = base.formula(field.trace(field.element(parse(f))))
    theirs = mp.fsum(plain(x) for x in mp.polyroots([1, 0, -4, 1], maxsteps=200, extraprec=200))
    assert found.head == "number" and abs(mp.mpf(found.args[0].numerator) / found.args[0].denominator - theirs) < 1e-12


def test_with_a_letter():
    """Over the roots of E^2 - g E - g^2: sum E^2 = 3 g^2 (by hand)."""
    base = Field.of([parse("g")], {"g": Domain("positive", "positive")})
    g = base.element(parse("g"))
    field = WithRoot(base, "E", [-(g * g), -g])
    assert text(base.formula(field.trace(field.root * field.root))) == "3*g^2"
