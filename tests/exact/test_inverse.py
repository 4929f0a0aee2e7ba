"""Small matrices over an exact field: M M^-1 = 1, and no inverse where there is none."""

import pytest

from derive.exact.field import Field
from derive.exact.inverse import inverted
from derive.formula.grammar import parse
from derive.problem.setting import POSITIVE

CELLS = [["0", "2*g", "i"], ["1", "sqrt(3)", "g"], ["g^2", "-i", "1/2"]]


def test_product_is_the_identity():
    formulas = [parse(f) for row in CELLS for f in row]
    field = Field.of(formulas, {"g": POSITIVE})
    matrix = [[field.element(parse(f)) for f in row] for row in CELLS]
    found = inverted(matrix)
    for a in range(3):
        for b in range(3):
            total = field.zero
            for k in range(3):
                total = total + matrix[a][k] * found[k][b]
            assert not total - (field.one if a == b else field.zero)


def test_no_inverse():
    field = Field.of([parse("g")], {"g": POSITIVE})
    g, one = field.element(parse("g")), field.one
    with pytest.raises(ZeroDivisionError):
        inverted([[g, one], [g * g, g]])
