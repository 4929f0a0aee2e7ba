"""A commented worksheet to start from, one a family: `watchpot new`."""

from __future__ import annotations

from derive.problem.families import FAMILIES, INFINITE, noun
from derive.worksheet import served

EXAMPLE_SIZES: dict[str, dict[str, int]] = {
    "chain": {"sites": 7},
    "ring": {"sites": 6},
    "complete": {"sites": 5},
    "star": {"arms": 3, "length": 2},
    "tree": {"branching": 2, "depth": 2},
    "ladder": {"rungs": 4},
    "grid": {"rows": 3, "columns": 3},
    "complete bipartite": {"left": 2, "right": 3},
    "hypercube": {"dimension": 3},
}
_PLACES = {"square lattice": ('"0,0"', '"detector"'), "chain": ('"centre"', "0"), "tree": ('"root"', '"end"')}

_SINGULAR = """
[[graph.singular]]                # one table a singular point of the local density of states
energy = "-2*g"
power  = "-1/2"                   # of |E - energy|
side   = "above"                  # below, above or both
amplitude = "1/(2*pi*sqrt(g))"    # what |E - energy|^power is multiplied by

# [[graph.band]]                  # where the density is known everywhere: one table a band, from low to high;
# from   = "-2*g"                 # begins and ends at singular points, which then have no amplitude
# to     = "2*g"
# factor = "1/pi"                 # density = |E - from|^power * |E - to|^power * factor; E is the energy
"""


def file_name(family: str) -> str:
    return f"{family.replace(' ', '-')}.toml"


def blank(family: str) -> str:
    """The worksheet for a family.  It runs as it stands wherever the family is served."""
    says = FAMILIES[family].says if family in FAMILIES else INFINITE[family]
    detector, start = _PLACES.get(family, ("0", "1" if family in FAMILIES else '"detector"'))
    lines = [
        f'title = "A {noun(family)}, watched at one site"    # the question, in a line',
        *_assumed(family),
        "",
        "[symbols]                         # every letter: real, positive, nonnegative, complex, integer, ...",
        'g = "positive"',
        "",
        f"[graph]                           # {says}",
        f'family = "{family}"',
        *(f"{key} = {size}" for key, size in EXAMPLE_SIZES.get(family, {}).items()),
        *_hopping(family),
        "",
        "[detector]",
        f"at = {detector}".ljust(34) + "# a site, or a list of sites",
        "",
        "[start]",
        f"at = {start}".ljust(34) + "# a site; or state = { site = amplitude }",
        "",
        f"[derive.{_topic(family)}]".ljust(34) + "# one table a topic; watchpot words  lists them",
        *_options(family),
        *_own_claim(family),
        "",
        "# [check]                         # left out: 30 digits at 4 sampled points",
        "# digits = 30",
    ]
    if not is_served(family):  # no topic at all serves it
        lines.insert(0, "# Infinite graphs are read and not served yet.")
    return "\n".join(lines) + "\n"


def is_served(family: str) -> bool:
    return family in FAMILIES or bool(served.serving("lattice"))


def _assumed(family: str) -> list[str]:
    """What the first topic needs to be known there."""
    return ['assume = ["2*g*tau < pi"]         # relations kept at every tested point'] if "lattice" in family else []


def _topic(family: str) -> str:
    """What is asked first: the generator of a finite graph, late asks on an infinite one."""
    return "generator" if family in FAMILIES else "asymptotics"


def _options(family: str) -> list[str]:
    """The topic's own key, and how numbers are asked for."""
    if family not in FAMILIES:
        return ["# asks = [100, 1000]              # numbers wanted: the law beside the experiment"]
    return [
        "order = 3                         # highest power of tau",
        "",
        "# [derive.renewal]                # another topic",
        "# asks = [10, 1000]               # numbers wanted at these asks; or times = [...]",
    ]


def _hopping(family: str) -> list[str]:
    if family == "density":
        return _SINGULAR.rstrip("\n").split("\n")
    return [
        'hopping = "-g"                    # the matrix element H_xy on every edge',
        '# energies = { 0 = "Delta" }      # H_xx; declare Delta above',
    ]


def _own_claim(family: str) -> list[str]:
    if family not in FAMILIES:
        return []
    return [
        "",
        "# [claim.mine]                    # a formula of your own, to be judged",
        '# about   = "generator"',
        "# which   = 1                     # the power of tau",
        "# entry   = [1, 1]",
        '# formula = "-i*g^2/2"',
    ]
