"""Settings from networkx graphs: H = t * adjacency, one or several sites watched, a start."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import networkx as nx

from derive.formula.tree import ONE, TAU, Formula, letter, number
from derive.problem.setting import Interval, Setting, Start
from tests.strategies import POSITIVE, setting_of, site

MINUS_G = -letter("g")


def on_graph(
    graph: nx.Graph,
    watched: int | Sequence[int],
    start: int | None = None,
    hopping: Formula = MINUS_G,
    length: Formula = TAU,
) -> Setting:
    """`hopping` on every edge; sites are the nodes 0 ... N-1."""
    rows = [dict.fromkeys(sorted(graph[x]), hopping) for x in range(graph.number_of_nodes())]
    sites = (watched,) if isinstance(watched, int) else tuple(watched)
    setting = setting_of(rows, tuple(site(x) for x in sites), g=POSITIVE)
    begun = None if start is None else Start(((ONE, site(start)),))
    return replace(setting, start=begun, interval=Interval(length))


def karate_club() -> nx.Graph:
    """networkx's 34-vertex karate club, unweighted."""
    graph = nx.Graph()
    graph.add_nodes_from(range(34))
    graph.add_edges_from(nx.karate_club_graph().edges())
    return graph


def cube(dimension: int) -> nx.Graph:
    """The hypercube, vertices by their binary digits."""
    graph = nx.Graph()
    graph.add_nodes_from(range(2**dimension))
    graph.add_edges_from((x, x ^ (1 << k)) for x in range(2**dimension) for k in range(dimension))
    return graph


UNIT = number(1)
