"""Figures and their tables: same bytes whatever surrounds the run, text as text, edges as networkx knows them."""

from __future__ import annotations

import csv
import io
import os
import subprocess
import sys
from dataclasses import replace
from math import dist, hypot
from xml.etree import ElementTree

import networkx
import pytest

from derive.formula.grammar import parse
from derive.formula.tree import ONE
from derive.problem.graphs import assemble, family_edges, family_shape
from derive.problem.setting import Setting, Start, Watcher
from derive.record.said import Curve
from derive.report import write
from derive.report.context import Context
from derive.report.figures import draw_graph, draw_plot
from derive.report.picture import MOST, REGION, picture
from derive.report.tables import plot_table

from .sample import REAL, chain, demo, setting, slope_plot

FAMILIES = {
    "chain": ({"sites": 7}, networkx.path_graph(7)),
    "ring": ({"sites": 8}, networkx.cycle_graph(8)),
    "complete": ({"sites": 5}, networkx.complete_graph(5)),
    "star": ({"arms": 4, "length": 1}, networkx.star_graph(4)),
    "tree": ({"branching": 2, "depth": 3}, networkx.balanced_tree(2, 3)),
    "grid": ({"rows": 3, "columns": 4}, networkx.convert_node_labels_to_integers(networkx.grid_2d_graph(3, 4))),
    "ladder": ({"rungs": 4}, networkx.convert_node_labels_to_integers(networkx.grid_2d_graph(4, 2))),
    "complete bipartite": ({"left": 2, "right": 3}, networkx.complete_bipartite_graph(2, 3)),
    "hypercube": ({"dimension": 3}, networkx.relabel_nodes(
        networkx.hypercube_graph(3), lambda b: b[0] * 4 + b[1] * 2 + b[2])),
}


def family(name: str, sizes: dict) -> Setting:
    sites, edges = family_edges(name, sizes, parse("-g"))
    space = assemble(sites, edges, {}, family_shape(name, sizes), {"g": REAL})
    detector = Watcher((((0, ONE),),))
    return setting(space=space, detectors=(detector,), start=Start(((ONE, ((sites - 1, ONE),)),)))


@pytest.mark.parametrize("name", FAMILIES)
def test_edges_drawn_are_the_familys(name: str) -> None:
    sizes, known = FAMILIES[name]
    drawn = picture(family(name, sizes))
    assert drawn is not None
    assert {frozenset(e) for e in drawn.edges} == {frozenset(e) for e in known.edges}
    assert drawn.detector == {0} and drawn.start == {len(drawn.places) - 1} and drawn.stubs == ()


@pytest.mark.parametrize("name", FAMILIES)
def test_sites_keep_their_distance(name: str) -> None:
    drawn = picture(family(name, FAMILIES[name][0]))
    assert drawn is not None
    spots = list(drawn.places.values())
    assert min(dist(a, b) for n, a in enumerate(spots) for b in spots[:n]) > 0.3


def test_a_ring_is_a_circle_and_a_chain_a_line() -> None:
    ring = picture(family("ring", {"sites": 8}))
    line = picture(family("chain", {"sites": 7}))
    assert ring is not None and line is not None
    assert len({round(hypot(*p), 9) for p in ring.places.values()}) == 1
    assert [line.places[x] for x in range(7)] == [(float(x), 0.0) for x in range(7)]


def test_a_large_graph_shows_the_region_around_the_detector() -> None:
    space = chain(MOST + 800)
    drawn = picture(setting(space=space, detectors=(Watcher((((500, ONE),),)),)))
    assert drawn is not None
    assert len(drawn.places) <= REGION and 500 in drawn.places and drawn.start == frozenset()
    assert drawn.stubs == (min(drawn.places), max(drawn.places))


def test_svg_says_its_text_and_no_date() -> None:
    drawn = draw_plot(slope_plot())
    root = ElementTree.fromstring(drawn.svg)
    tags = [e.tag.rpartition("}")[2] for e in root.iter()]
    assert tags.count("title") == tags.count("desc") == 1 and "text" in tags and "metadata" not in tags
    said = " ".join("".join(root.itertext()).split())
    assert "order 2" in said and "8x per halving" in said
    assert b"#000000" not in drawn.svg and b"currentColor" in drawn.svg and b"#4a3aa0" in drawn.svg
    assert b"CreationDate" not in drawn.pdf and b"Matplotlib" not in drawn.pdf and drawn.pdf.startswith(b"%PDF")


def test_rings_for_measurements_and_lines_for_laws() -> None:
    """Four open violet rings, one for each measured point, and nothing filled."""
    plot = slope_plot()
    root = ElementTree.fromstring(draw_plot(plot).svg)
    rings = [e for e in root.iter("{http://www.w3.org/2000/svg}use") if "#4a3aa0" in e.get("style", "")]
    assert len(rings) == len(plot.curves[0].x)
    assert all("fill-opacity: 0" in e.get("style", "") for e in rings)


def test_a_line_names_its_rings_and_is_named_once() -> None:
    tau, error = slope_plot().curves[0].x, slope_plot().curves[0].y
    named = (Curve("order 2: 8x per halving", "derived", tau, error), Curve("order 2", "measured", tau, error))
    drawn = ElementTree.fromstring(draw_plot(replace(slope_plot(), curves=named)).svg)
    texts = ["".join(e.itertext()).strip() for e in drawn.iter("{http://www.w3.org/2000/svg}text")]
    assert texts.count("order 2: 8x per halving") == 1 and "order 2" not in texts
    alone = ElementTree.fromstring(draw_plot(replace(slope_plot(), curves=named[1:])).svg)
    assert "order 2" in ["".join(e.itertext()).strip() for e in alone.iter("{http://www.w3.org/2000/svg}text")]


def test_regimes_are_named_along_the_top() -> None:
    """A bracket is there for a window on the axis, none for one beyond it; the axis stays as it was."""
    plot = slope_plot()
    bare, near = draw_plot(plot).svg, draw_plot(replace(plot, regimes=(("early", "0.02", "0.05"),))).svg
    far = draw_plot(replace(plot, regimes=(("late", "5", "9"),))).svg
    assert b"early</text>" in near and b"early" not in bare and b"late</text>" not in far
    table = plot_table(replace(plot, regimes=(("early $t^2$", "0.02", "0.05"),))).decode("utf-8")
    assert table.endswith("early t^2,regime,0.02,\r\nearly t^2,regime,0.05,\r\n")


def test_bounds_are_hatched() -> None:
    bound = replace(slope_plot(), curves=(Curve("bound", "bound", ("1", "2", "4"), ("1", "3", "9")),))
    plain = replace(bound, curves=(replace(bound.curves[0], role="derived"),))
    assert draw_plot(bound).svg.count(b"\nL ") > draw_plot(plain).svg.count(b"\nL ") + 5


def test_points_a_log_axis_cannot_show_are_left_out() -> None:
    plot = replace(slope_plot(), curves=(Curve("zero", "measured", ("1", "2"), ("0", "1e-400")),))
    assert draw_plot(plot).svg


def test_the_table_has_the_numbers_as_given() -> None:
    plot = slope_plot()
    rows = list(csv.reader(io.StringIO(plot_table(plot).decode("utf-8"), newline="")))
    assert rows[0] == ["curve", "role", "tau / 1/g", "state error"]
    given = [[c.label, c.role, x, y] for c in plot.curves for x, y in zip(c.x, c.y, strict=True)]
    assert rows[1:] == given


def test_same_figure_whatever_was_drawn_before() -> None:
    import matplotlib

    first = draw_plot(slope_plot())
    with matplotlib.rc_context({"font.size": 30, "axes.grid": True, "svg.fonttype": "path"}):
        here = setting()
        drawn = picture(here)
        assert drawn is not None
        draw_graph(drawn, Context(here), "x")
        assert draw_plot(slope_plot()) == first


def test_same_bytes_in_another_process_and_time_zone() -> None:
    code = (
        "import hashlib; from tests.report.sample import demo; from derive.report import write; f = write(demo());"
        "print(hashlib.sha256(b''.join(k.encode() + f[k] for k in sorted(f))).hexdigest())"
    )
    here = write(demo())
    import hashlib

    mine = hashlib.sha256(b"".join(k.encode() + here[k] for k in sorted(here))).hexdigest()
    surroundings = {**os.environ, "TZ": "Pacific/Auckland", "PYTHONHASHSEED": "7", "SOURCE_DATE_EPOCH": "1"}
    done = subprocess.run([sys.executable, "-c", code], env=surroundings, capture_output=True, text=True, timeout=120)
    assert done.stdout.strip() == mine, done.stderr[-500:]
