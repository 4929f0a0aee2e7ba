"""family = "density": what is read, what follows from the bands, and every fault in one sentence with its mend."""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.setting import POSITIVE, Lattice
from derive.worksheet.reader import Sheet, survey_bytes

HEAD = 'title = "t"\nsymbols.g = "positive"\ndetector.at = 0\nstart.at = "detector"\nderive.asymptotics = {}\n'
EDGE = '[[graph.singular]]\nenergy = "{}2*g"\npower = "{}"\nside = "{}"\n'
EDGES = EDGE.format("-", "1/2", "above") + EDGE.format("", "1/2", "below")
BAND = '[[graph.band]]\nfrom = "-2*g"\nto = "2*g"\nfactor = "1/(2*pi*g^2)"\n'


def sheet(body: str, head: str = HEAD) -> Sheet:
    return survey_bytes(f'{head}[graph]\nfamily = "density"\n{body}'.encode(), "w.toml", Path("."))


def space(body: str) -> Lattice:
    found = sheet(body)
    assert not found.faults and not found.unserved and found.question is not None
    assert isinstance(found.question.setting.space, Lattice)
    return found.question.setting.space


def test_points_alone_keep_their_amplitudes() -> None:
    lattice = space(EDGES + 'amplitude = "g^(-2/3)/5"\n')
    assert [(text(s.energy), s.side) for s in lattice.singular] == [("-2*g", "above"), ("2*g", "below")]
    assert [s.amplitude for s in lattice.singular] == [parse("1"), parse("g^(-2/3)/5")]
    assert lattice.bands == ()


def test_amplitudes_follow_from_the_bands() -> None:
    """Semicircle: (2g + E)^(1/2) (2g - E)^(1/2)/(2 pi g^2) ~ (4g)^(1/2)/(2 pi g^2) at both ends (by hand)."""
    lattice = space(EDGES + BAND)
    wanted = parse("sqrt(4*g)/(2*pi*g^2)")
    assert [(text(s.energy), s.side) for s in lattice.singular] == [("-2*g", "above"), ("2*g", "below")]
    assert all(vanishes(s.amplitude - wanted, {"g": POSITIVE}) for s in lattice.singular)


@pytest.mark.parametrize(
    ("body", "says"),
    [
        (EDGES.replace('"1/2"', '"-1"', 1), "holds no finite weight"),
        (EDGES + 'amplitude = -1\n', "the amplitude is -1"),
        (EDGES + 'amplitude = "i"\n', "i is not real"),
        (EDGES + 'amplitude = 1\n' + BAND, "amplitude follows from the bands"),
        (EDGE.format("-", "1/2", "above") + BAND, "the band ends at 2*g"),
        (EDGES.replace("above", "below") + BAND, "the band begins at -2*g"),
        (EDGES + EDGE.format("3/", "1/2", "above").replace("3/2", "3") + BAND, "no band begins or ends at 3*g"),
        (EDGES + 'logs = 1\n' + BAND, "no logarithms"),
        (EDGES + BAND.replace("factor", "weight"), "a band has no key weight"),
        (EDGES + BAND.replace("g^2", "h^2"), "the letter h is not declared"),
        ("", "needs its singular points"),
    ],
)
def test_every_fault_has_a_sentence(body: str, says: str) -> None:
    found = sheet(body)
    assert found.question is None and any(says in f.message for f in found.faults), found.faults


def test_the_energy_is_no_letter_of_the_users() -> None:
    found = sheet(EDGES + BAND, HEAD.replace("symbols.g", 'symbols.E = "real"\nsymbols.g'))
    assert [f.message for f in found.faults] == ["E is the energy in a band's factor."]


def test_bands_belong_to_a_density() -> None:
    line = survey_bytes(f'{HEAD}[graph]\nfamily = "line"\nhopping = "-g"\n{BAND}'.encode(), "w.toml", Path("."))
    assert any("goes with the family density" in f.message for f in line.faults)
