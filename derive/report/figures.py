"""Figures, as SVG whose text is text and as PDF for the paper.  Same report, same bytes: no dates, a fixed salt.

No frame, no grid, no legend.  Derived laws are thin lines labelled at their end, measurements open rings, bounds a
hatched edge.  Ink is written as currentColor, so that a page can turn it; violet means measured.
"""

from __future__ import annotations

import io
import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from derive.record.said import Curve, Plot
from derive.report.context import Context
from derive.report.escape import file_name, html_text, visible
from derive.report.picture import Picture, closest, extent

INK, VIOLET = "#000000", "#4a3aa0"
WIDTH = 6.4  # inches
FEW = 6  # points that get a tick each
LINE = 0.075  # least distance of two labels, as a part of the axis
DIGITS = 6  # to which data are rounded before they are drawn
LONGEST_NAME = 14  # characters of a site's name
LABELS = 40  # sites beyond which only the telling ones are named
_STYLE: dict[str, Any] = {
    "font.family": ["STIXGeneral"], "font.size": 10.0, "mathtext.fontset": "stix", "svg.fonttype": "none",
    "pdf.fonttype": 42, "axes.linewidth": 0.5, "lines.linewidth": 0.8, "hatch.linewidth": 0.5, "text.color": INK,
    "axes.edgecolor": INK, "xtick.color": INK, "ytick.color": INK, "xtick.major.width": 0.5,
    "ytick.major.width": 0.5, "xtick.minor.size": 0, "ytick.minor.size": 0, "text.usetex": False,
    "path.simplify": False, "figure.facecolor": "none", "axes.facecolor": "none",
}


@dataclass(frozen=True, slots=True)
class Drawn:
    """One figure in both forms."""

    svg: bytes
    pdf: bytes


@contextmanager
def _figure(name: str, height: float) -> Iterator[Any]:
    """A figure in the house style, whatever the user's own settings are."""
    import matplotlib
    from matplotlib.figure import Figure

    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update({**_STYLE, "svg.hashsalt": f"watchpot-{name}"})
        yield Figure(figsize=(WIDTH, height))


def _saved(figure: Any, name: str, title: str, says: str) -> Drawn:
    from matplotlib.backends.backend_pdf import FigureCanvasPdf
    from matplotlib.backends.backend_svg import FigureCanvasSVG

    svg, pdf = io.StringIO(), io.BytesIO()
    FigureCanvasSVG(figure).print_svg(svg, metadata={"Date": None, "Creator": None, "Format": None, "Type": None})
    no_metadata = {"CreationDate": None, "Creator": None, "Producer": None, "ModDate": None}
    FigureCanvasPdf(figure).print_pdf(pdf, metadata=no_metadata)
    return Drawn(_dressed(svg.getvalue(), name, title, says).encode("utf-8"), pdf.getvalue())


def _dressed(svg: str, name: str, title: str, says: str) -> str:
    """Title and description in, metadata and document type out, ink as currentColor, ids its own."""
    svg = re.sub(r"<metadata>.*?</metadata>\s*", "", svg, flags=re.S)
    svg = re.sub(r"<!--.*?-->\s*", "", svg, flags=re.S)
    svg = svg[svg.index("<svg") :].replace(INK, "currentColor")
    svg = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', svg)
    svg = re.sub(r'(url\(#|href="#)([^)"]+)', rf"\g<1>{name}-\2", svg)
    head = f'<title id="{name}-title">{html_text(title)}</title>\n<desc>{html_text(says)}</desc>\n'
    svg = svg.replace("<svg ", f'<svg fill="currentColor" role="img" aria-labelledby="{name}-title" ', 1)
    at = svg.index(">", svg.index("<svg")) + 1
    return svg[:at] + "\n" + head + svg[at:].lstrip()


# curves


def draw_plot(plot: Plot) -> Drawn:
    """A plot in both forms."""
    with _figure(plot.id, 3.7) as figure:
        labels = max((len(c.label) for c in plot.curves if not _is_named_by_its_line(c, plot)), default=0)
        high = 0.66 if plot.regimes else 0.74
        axes = figure.add_axes((0.1, 0.14, min(0.86, 0.87 - 0.0115 * min(labels, 34)), high))
        _bare(axes, plot)
        _ticks(axes, plot)
        ends = [end for curve in plot.curves if (end := _draw_curve(axes, curve, plot)) is not None]
        _label_ends(axes, ends)
        _name_regimes(axes, plot)
        return _saved(figure, file_name(plot.id), plot.says, _spoken(plot))


def _spoken(plot: Plot) -> str:
    said = f"{plain(plot.y_label)} against {plain(plot.x_label)}: {', '.join(c.label for c in plot.curves)}"
    named = "; ".join(f"{plain(label)} from {low} to {high}" for label, low, high in plot.regimes)
    return f"{said}. Along the top: {named}" if named else said


def plain(label: str) -> str:
    return re.sub(r"[$\\{}]", "", label)


def _bare(axes: Any, plot: Plot) -> None:
    """Axes without a frame: two hairlines, the symbol with its unit at the end of each."""
    axes.set_xscale(plot.x_scale)
    axes.set_yscale(plot.y_scale)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_position(("outward", 6))
    axes.text(1.0, -0.14, _label(plot.x_label), transform=axes.transAxes, ha="right", va="top")
    above = 1.2 if plot.regimes else 1.06
    axes.text(-0.02, above, _label(plot.y_label), transform=axes.transAxes, ha="left", va="bottom")
    axes.minorticks_off()


def _label(text: str) -> str:
    """Text with mathematics between dollar signs; an odd number of them is no mathematics."""
    text = visible(text)
    return text if text.count("$") % 2 == 0 and _parses(text) else text.replace("$", r"\$")


def _parses(text: str) -> bool:
    """Can the mathematics between the dollar signs be drawn?"""
    from matplotlib.mathtext import MathTextParser

    if "$" not in text:
        return True
    try:
        MathTextParser("path").parse(text)
    except ValueError:
        return False
    return True


def _points(curve: Curve, plot: Plot) -> tuple[list[float], list[float]]:
    """Rounded points that the scales can show."""
    kept = [
        (x, y)
        for x, y in ((_rounded(a), _rounded(b)) for a, b in zip(curve.x, curve.y, strict=True))
        if (plot.x_scale != "log" or x > 0) and (plot.y_scale != "log" or y > 0)
    ]
    return [x for x, _ in kept], [y for _, y in kept]


def _rounded(text: str) -> float:
    return float(f"{float(text):.{DIGITS}g}")


def _ticks(axes: Any, plot: Plot) -> None:
    """Ticks where something is read: at the points themselves where they are few and the scale is logarithmic."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, LogLocator, MaxNLocator, NullLocator

    for axis, scale, at in ((axes.xaxis, plot.x_scale, 0), (axes.yaxis, plot.y_scale, 1)):
        values = sorted({v for curve in plot.curves for v in _points(curve, plot)[at]})
        if scale != "log":
            axis.set_major_locator(MaxNLocator(5))
        elif len(values) <= FEW and at == 0:
            axis.set_major_locator(FixedLocator(values))
            axis.set_major_formatter(FuncFormatter(_short))
        elif values and max(values) < 100 * min(v for v in values if v > 0):  # less than two decades
            axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0), numticks=9))
            axis.set_major_formatter(FuncFormatter(_short))
        else:
            axis.set_major_locator(LogLocator(numticks=7))
        axis.set_minor_locator(NullLocator())


def _short(value: float, position: int) -> str:
    """A tick's number: 0.0125, or 3.05e-5 where it is small."""
    return f"{value:.3g}"


def _draw_curve(axes: Any, curve: Curve, plot: Plot) -> tuple[float, float, str, str] | None:
    """Draws the curve; returns where its label goes: (x, y, text, colour)."""
    xs, ys = _points(curve, plot)
    if not xs:
        return None
    colour = VIOLET if curve.role == "measured" else INK
    if curve.role == "measured":
        axes.plot(xs, ys, linestyle="none", marker="o", markersize=4.5, markerfacecolor="none",
                  markeredgecolor=colour, markeredgewidth=0.9, clip_on=False)
    elif curve.role == "bound":
        from matplotlib.patheffects import withTickedStroke

        axes.plot(xs, ys, color=colour, path_effects=[withTickedStroke(spacing=5, angle=60, length=0.7)])
    else:
        axes.plot(xs, ys, color=colour)
    if _is_named_by_its_line(curve, plot):
        return None
    last = max(range(len(xs)), key=lambda n: xs[n])
    return xs[last], ys[last], _label(curve.label), colour


def _is_named_by_its_line(curve: Curve, plot: Plot) -> bool:
    """Rings called "order 2" on a line called "order 2: 8x per halving" need no name of their own."""
    return curve.role == "measured" and any(
        c.role == "derived" and c.label.startswith(f"{curve.label}: ") for c in plot.curves
    )


def _name_regimes(axes: Any, plot: Plot) -> None:
    """Hairline brackets along the top, each with its name; cut where the axis ends."""
    low, high = axes.get_xlim()
    across = axes.get_xaxis_transform()
    for label, start, end in plot.regimes:
        a, b = max(float(start), low), min(float(end), high)
        if a < b:
            axes.plot((a, a, b, b), (1.03, 1.06, 1.06, 1.03), transform=across, color=INK, linewidth=0.5, clip_on=False)
            middle = (a * b) ** 0.5 if plot.x_scale == "log" else (a + b) / 2
            axes.text(middle, 1.08, _label(label), transform=across, ha="center", va="bottom", fontsize=9)
    axes.set_xlim(low, high)


def _label_ends(axes: Any, ends: list[tuple[float, float, str, str]]) -> None:
    """Labels to the right of the curves' ends, moved apart where they would touch."""
    if not ends:
        return
    axes.get_xlim(), axes.get_ylim()  # settles the limits, so that the transforms below are the final ones
    to_axes = axes.transAxes.inverted()
    spots: list[tuple[float, float, str, str]] = []
    for x, y, text, colour in ends:
        across, up = to_axes.transform(axes.transData.transform((x, y)))
        spots.append((float(up), float(across), text, colour))
    lowest = -1.0
    for up, across, text, colour in sorted(spots):
        up = lowest = max(up, lowest + LINE)
        axes.annotate(text, (across, up), xycoords="axes fraction", xytext=(8, 0), textcoords="offset points",
                      va="center", color=colour, annotation_clip=False)


# the graph


def draw_graph(picture: Picture, context: Context, says: str) -> Drawn:
    """The graph: detector a double ring, start a filled dot."""
    left, right, bottom, top = extent(picture.places)
    unit = closest(picture.places)
    margin = 0.8 * unit
    wide, high = right - left + 2 * margin, top - bottom + 2 * margin
    scale = min(WIDTH / wide, 3.6 / high, 0.7 / unit)
    with _figure("graph", max(high * scale, 0.7)) as figure:
        axes = figure.add_axes((0, 0, 1, 1))
        axes.set_axis_off()
        height = figure.get_figheight() / scale
        middle = ((left + right) / 2, (bottom + top) / 2)
        axes.set_xlim(middle[0] - WIDTH / scale / 2, middle[0] + WIDTH / scale / 2)
        axes.set_ylim(middle[1] - height / 2, middle[1] + height / 2)
        radius = min(0.3 * unit, 0.09 / scale)
        _edges(axes, picture, radius)
        _sites(axes, picture, radius)
        _names(axes, picture, context, radius, middle)
        return _saved(figure, "graph", "The graph", says)


def _edges(axes: Any, picture: Picture, radius: float) -> None:
    for x, y in picture.edges:
        start, end = picture.places[x], picture.places[y]
        a = _shortened(start, end, radius * (1.7 if x in picture.detector else 1))
        b = _shortened(end, start, radius * (1.7 if y in picture.detector else 1))
        axes.plot((a[0], b[0]), (a[1], b[1]), color=INK, linewidth=0.8, solid_capstyle="butt")
    centre = _centre(picture)
    for x in picture.stubs:
        here = picture.places[x]
        away = _shortened(here, (2 * here[0] - centre[0], 2 * here[1] - centre[1]), 4 * radius)
        near = _shortened(here, away, radius)
        axes.plot((near[0], away[0]), (near[1], away[1]), color=INK, linewidth=0.8, linestyle=(0, (1.5, 2)))


def _centre(picture: Picture) -> tuple[float, float]:
    spots = [picture.places[x] for x in sorted(picture.detector)] or list(picture.places.values())
    return sum(p[0] for p in spots) / len(spots), sum(p[1] for p in spots) / len(spots)


def _shortened(a: tuple[float, float], b: tuple[float, float], by: float) -> tuple[float, float]:
    """The point on the way from a to b that is `by` away from a."""
    length = ((b[0] - a[0]) ** 2 + (b[1] - a[1]) ** 2) ** 0.5 or 1.0
    return a[0] + (b[0] - a[0]) * by / length, a[1] + (b[1] - a[1]) * by / length


def _sites(axes: Any, picture: Picture, radius: float) -> None:
    from matplotlib.patches import Circle

    for x, place in sorted(picture.places.items()):
        axes.add_patch(Circle(place, radius, facecolor="none", edgecolor=INK, linewidth=0.8))
        if x in picture.detector:
            axes.add_patch(Circle(place, 1.7 * radius, facecolor="none", edgecolor=INK, linewidth=0.8))
        if x in picture.start:
            axes.add_patch(Circle(place, 0.62 * radius, facecolor=INK, edgecolor="none"))


def _names(axes: Any, picture: Picture, context: Context, radius: float, middle: tuple[float, float]) -> None:
    telling = picture.detector | picture.start | {min(picture.places), max(picture.places)}
    shown = sorted(picture.places) if len(picture.places) <= LABELS else sorted(telling)
    for x in shown:
        dx, dy = _direction(picture, x, middle)
        gap = radius * (3.1 if x in picture.detector else 2.3)
        place = picture.places[x]
        name = visible(context.site(x))
        short = (name if len(name) <= LONGEST_NAME else name[: LONGEST_NAME - 1] + "…").replace("$", r"\$")
        upright = "center" if abs(dy) < 0.9 else "top" if dy < 0 else "bottom"
        axes.text(place[0] + dx * gap, place[1] + dy * gap, short, ha=_anchor(dx), va=upright, fontsize=8.5)


def _direction(picture: Picture, x: int, middle: tuple[float, float]) -> tuple[float, float]:
    """Where a site's name stands, seen from the site."""
    place = picture.places[x]
    if picture.labels == "sides":
        return (-1.0, 0.0) if place[0] < middle[0] else (1.0, 0.0)
    if picture.labels == "outward":
        away = _shortened((0.0, 0.0), (place[0] - middle[0], place[1] - middle[1]), 1.0)
        return away if away != (0.0, 0.0) else (0.75, -0.75)
    return (0.0, -1.0) if picture.labels == "below" else _free(picture, x)


def _free(picture: Picture, x: int) -> tuple[float, float]:
    """The direction that is farthest from every edge of the site; of equal ones the first in `_AROUND`."""
    here = picture.places[x]
    ends = [picture.places[b if a == x else a] for a, b in picture.edges if x in (a, b)]
    edges = [_shortened((0.0, 0.0), (p[0] - here[0], p[1] - here[1]), 1.0) for p in ends]

    def nearness(d: tuple[float, float]) -> float:
        return round(max((d[0] * e[0] + d[1] * e[1] for e in edges), default=-1.0), 6)

    return min(_AROUND, key=nearness)


_AROUND = ((0.0, 1.0), (0.0, -1.0), (1.0, 0.0), (-1.0, 0.0), (0.71, 0.71), (0.71, -0.71), (-0.71, 0.71), (-0.71, -0.71))


def _anchor(dx: float) -> str:
    return "left" if dx > 0.3 else "right" if dx < -0.3 else "center"
