"""A family at sizes is the family built at those sizes (networkx for the graphs themselves)."""

import networkx as nx
import pytest

from derive.errors import OutsideValidity
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import number
from derive.problem.setting import Finite
from derive.problem.sized import sized, whole_value
from derive.problem.specialise import at_values
from tests.settings_of_graphs import family


def put(**sizes):
    return {name: number(n) for name, n in sizes.items()}


def graph(space):
    assert isinstance(space, Finite)
    g = nx.Graph()
    g.add_nodes_from(range(space.size))
    g.add_edges_from((x, y) for x, row in enumerate(space.rows) for y, _ in row if x < y)
    return g


@pytest.mark.parametrize("setting, sizes, known", [
    (family("chain", {"sites": "2*L + 1"}, "centre", {"L": 1}), {"L": 3}, nx.path_graph(7)),
    (family("ring", {"sites": "N"}, 0, {"N": 3}), {"N": 5}, nx.cycle_graph(5)),
    (family("complete", {"sites": "N"}, 0, {"N": 2}), {"N": 4}, nx.complete_graph(4)),
    (family("star", {"lengths[0]": 1, "lengths[1]": "L"}, 0, {"L": 1}), {"L": 3}, nx.path_graph(5)),
    (family("hypercube", {"dimension": "d"}, 0, {"d": 1}), {"d": 3}, nx.hypercube_graph(3)),
])
def test_graphs(setting, sizes, known):
    assert nx.is_isomorphic(graph(sized(setting, put(**sizes)).space), known)


def test_detector_and_start_find_their_sites():
    setting = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 1, "j": 0}, distance="j", energies=[("L", "g")])
    at = sized(setting, put(L=4, j=3))
    assert at.detectors[0].vectors == (((4, number(1)),),)
    assert at.start.mixture[0][1][0][0] == 1 and dict(at.space.rows[4])[4] == parse("g")


@pytest.mark.parametrize("sizes", [{"L": 2, "j": 3}, {"L": 0, "j": 0}])
def test_what_does_not_exist_is_outside(sizes):
    setting = family("chain", {"sites": "2*L"}, 0, {"L": 1, "j": 0}, distance="j + 2")
    with pytest.raises(OutsideValidity):
        sized(setting, put(**sizes))


def test_whole_values():
    assert whole_value(parse("(2*L + 1)^2 - floor(7/2)"), put(L=2)) == 22
    with pytest.raises(OutsideValidity):
        whole_value(parse("L/2"), put(L=3))


def test_letters_of_a_family_can_be_set():
    """`set` reaches sizes, hopping, flux and the start's distance."""
    setting = family("ring", {"sites": "N"}, 0, {"N": 3, "j": 1}, known=("g", "phi"), flux="phi", distance="j")
    at = at_values(setting, {"N": number(5), "phi": parse("pi"), "j": number(2), "g": parse("2")})
    assert text(at.space.flux) == "pi" and text(dict(at.space.sizes)["sites"]) == "5"
    assert not at.letters and graph(sized(at, {}).space).number_of_edges() == 5
