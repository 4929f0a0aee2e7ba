"""Values put into an infinite lattice reach its hopping, its places and its singular points."""

from __future__ import annotations

from dataclasses import replace

from derive.formula.grammar import parse
from derive.formula.tree import letter, number
from derive.problem.setting import Lattice, Singular, Start, Watcher
from derive.problem.specialise import at_values
from tests.lattices import lattice


def test_values_reach_a_lattice() -> None:
    singular = Singular(parse("g"), number(0), number(1), "left", parse("g"))
    base = replace(
        lattice(),
        space=Lattice("line", parse("-g"), (("0", parse("2*g")),), (singular,)),
        detectors=(Watcher((), place=letter("j")),),
        start=Start(distance=letter("j"), place=letter("j")),
    )
    found = at_values(base, {"g": number(3), "j": number(2)})
    assert isinstance(found.space, Lattice) and found.space.hopping == number(-3)
    assert found.space.energies == (("0", number(6)),)
    assert found.space.singular[0].energy == found.space.singular[0].amplitude == number(3)
    assert found.detectors[0].place == number(2)
    assert found.start is not None and found.start.distance == found.start.place == number(2)
    assert not found.letters
