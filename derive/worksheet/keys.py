"""Every word a worksheet may use, in one table: reading, `watchpot words` and "did you mean" all go by it.

Plain tables rather than a schema library: most rules tie one key to another (sizes to a family, letters to
[symbols], sites to the graph), each fault needs a place in the file and words of its own, and refusing a bad
worksheet must stay quick.
"""

from __future__ import annotations

from dataclasses import dataclass

from derive.problem.families import FAMILIES, INFINITE

GENERATOR_LIMIT = 24  # order; derive.generator.limit raises it
HIGHEST_LIMIT = 100


@dataclass(frozen=True, slots=True)
class Key:
    """A key: its name, what it takes, what it says, and what holds where it is left out."""

    name: str
    takes: str
    says: str
    default: str = ""
    required: bool = False


TOP = (
    Key("title", "text", "the question, in a line", required=True),
    Key("assume", "comparisons", "relations kept at every tested point"),
    Key("symbols", "letter = domain", "every letter used"),
    Key("graph", "table", "the measured system", required=True),
    Key("detector", "table", "what is asked at every interval", required=True),
    Key("start", "table", "the state at time 0"),
    Key("interval", "table", "the time between two asks", "fixed, length tau"),
    Key("derive", "one table a topic", "what is wanted"),
    Key("claim", "one table a formula", "formulas of your own, to be judged"),
    Key("check", "table", "how hard to check", "30 digits, 4 samples, seed 1"),
)

LETTER = (
    Key("domain", "a domain", "where the letter lives", required=True),
    Key("latex", "text", "how it is printed", "the letter itself"),
)
DOMAINS = {
    "real": "any real number",
    "positive": "above 0",
    "nonnegative": "0 or above",
    "complex": "any complex number",
    "integer": 'a whole number; "integer >= 2" from 2 on',
    "in (0, 1]": "an interval; a round bracket leaves its end out",
}

ONE_OF_GRAPH = ("family", "edges", "edge_file", "hamiltonian", "step")
GRAPH = (
    Key("family", "a family's name", "a named graph, with its sizes"),
    Key("edges", "list of [x, y] or [x, y, H_xy]", "the graph, edge by edge"),
    Key("edge_file", "a CSV file's name", "the same columns, in the worksheet's folder"),
    Key("hamiltonian", "list of rows", "the matrix H, complete"),
    Key("step", "list of rows", "a unitary in place of exp(-i H tau)"),
    Key("hopping", "formula", "the matrix element H_xy on every edge"),
    Key("energies", "{ site = formula }", "H_xx", "0"),
    Key("bonds", "list of [x, y, H_xy]", "where H_xy differs from hopping; H_yx is its conjugate"),
    Key("flux", "list of { loop, phase }, or on a ring a formula", "phase of the product of H around a loop", "0"),
    Key("singular", "list of tables", "a density's singular points"),
    Key("band", "list of tables", "a density's bands, from low to high; without them only its singular points count"),
)
SIZES = {
    "sites": "number of sites",
    "arms": "number of arms of a star",
    "length": "sites in each arm",
    "lengths": "list, one length an arm",
    "branching": "branches of each site of a tree",
    "depth": "levels below the root",
    "rungs": "rungs of a ladder",
    "rows": "rows of a grid",
    "columns": "columns of a grid",
    "left": "sites on the left",
    "right": "sites on the right",
    "dimension": "dimension of a hypercube",
}
FLUX = (
    Key("loop", "list of sites", "the sites around, in order", required=True),
    Key("phase", "formula", "the loop's phase", required=True),
)
SINGULAR = (
    Key("energy", "formula", "where the density is singular", required=True),
    Key("power", "formula", "its power of |E - energy|", required=True),
    Key("logs", "formula", "its power of the logarithm", "0"),
    Key("side", "below, above or both", "on which side", "both"),
    Key("amplitude", "formula", "its prefactor; beside bands it follows from them", "1"),
)
BAND = (
    Key("from", "formula", "its lower end, a singular point", required=True),
    Key("to", "formula", "its upper end, a singular point", required=True),
    Key("factor", "formula in E", "what |E - from|^power |E - to|^power are multiplied by", required=True),
)
SIDES = ("below", "above", "both")

DETECTOR = (
    Key("at", "a site, or a list of sites", "where the detector stands"),
    Key("states", "list of { site = amplitude }", "orthonormal vectors instead of sites"),
    Key("efficiency", "formula", "probability of a click on the detector", "1"),
)
ONE_OF_START = ("at", "state", "mixture", "distance")
START = (
    Key("at", 'a site, or "detector"', "the site the system starts on"),
    Key("state", "{ site = amplitude }", "a superposition, normalised for you"),
    Key("mixture", "list of { weight, at } or { weight, state }", "a statistical mixture"),
    Key("distance", "formula", "steps from the detector, where the size is a letter"),
)
MIXED = (
    Key("weight", "formula", "its probability", required=True),
    Key("at", "a site", "the site"),
    Key("state", "{ site = amplitude }", "or a superposition"),
)
INTERVAL = (
    Key("length", "formula", "time between asks; the mean if the law is random", "tau"),
    Key("law", "fixed, exponential or gamma", "how intervals are drawn", "fixed"),
    Key("shape", "formula", "shape of the gamma law"),
)
LAWS = ("fixed", "exponential", "gamma")
CHECK = (
    Key("digits", "10 to 1000", "digits that both roads must share", "30"),
    Key("samples", "whole number", "points drawn", "4"),
    Key("seed", "whole number", "which points are drawn", "1"),
    Key("points", "list of { letter = number }", "points of your own, besides"),
)
CLAIM = (
    Key("about", "a quantity", "what the formula is about", required=True),
    Key("which", "number, name or k", "which one, where the quantity has several; the roots say it in per_root"),
    Key("entry", "[x, y]", "one entry of a matrix"),
    Key("side", "left or right", "of a state map"),
    Key("arm", "whole number", "whose levels which counts, where arms have different lengths"),
    Key("formula", "formula", "your formula"),
    Key("latex", "text", "your formula, in LaTeX"),
    Key("matrix", "list of [x, y, formula]", "your matrix; an absent entry is zero"),
    Key("values", "list of [n, decimal]", "published numbers instead of a formula"),
    Key("cases", "list of { if, formula }", "formulas by condition"),
    Key("per_root", "{ polynomial, letter, formula }", "one formula for every root of a polynomial"),
    Key("holds", "a phrase", "in what sense it holds", "exactly"),
    Key("source", "text", "where it comes from; printed beside the verdict"),
    Key("assume", "comparisons", "for this claim, besides the worksheet's own"),
)
ONE_OF_CLAIM = ("formula", "latex", "matrix", "values", "cases", "per_root")
CASE = (
    Key("if", "a comparison, or otherwise", 'where it holds: "phi = 0", "0 < phi < pi"', required=True),
    Key("formula", "formula", "what it is there"),
    Key("latex", "text", "the same, in LaTeX"),
)
PER_ROOT = (
    Key("polynomial", "formula", "its roots are meant", required=True),
    Key("letter", "a letter", "stands for a root; not declared", required=True),
    Key("formula", "formula", "what holds at each root", required=True),
)
HOLDS = {
    "exactly": "equal for all values of the letters",
    "up to O(tau^3)": "the coefficients of tau^0 to tau^2 agree",
    "up to O(tau^2) at fixed t*tau": "the same, with t*tau held",
    "as n -> infinity": 'a limit; also ", then t -> infinity", ", error O(n^-5)", ", within 1/100", '
    '", up to a phase", ", smooth part"',
    "as an upper bound": "never exceeded",
    "as a lower bound": "never undercut",
    "for every L": "with a proof in L; after a comma behind any of these",
}


@dataclass(frozen=True, slots=True)
class Option:
    """A topic's key: the kind of value and its limits, for the reader; the words are in `key`."""

    key: Key
    kind: str
    low: int = 1
    high: int = 1_000_000
    default: object = None


def _whole(name: str, says: str, default: int, low: int = 1, high: int = 1_000) -> Option:
    return Option(Key(name, "whole number", says, str(default)), "integer", low, high, default)


@dataclass(frozen=True, slots=True)
class Topic:
    """What a topic derives, its own options, the letters it brings along, and whether it needs a start."""

    says: str
    options: tuple[Option, ...] = ()
    brings: tuple[str, ...] = ()
    needs_start: bool = False


TOPICS: dict[str, Topic] = {
    "generator": Topic(
        "the effective generator G(tau) of the watched system, order by order",
        (
            _whole("order", "highest power of tau", 3, 0, HIGHEST_LIMIT),
            _whole("limit", "raises the limit of order", GENERATOR_LIMIT, GENERATOR_LIMIT, HIGHEST_LIMIT),
        ),
    ),
    "absorber": Topic("absorbers that stand in for the detector", (_whole("cascade", "auxiliary sites", 2, 1, 10),)),
    "levels": Topic(
        "energies and decay rates of the watched system",
        (_whole("order", "highest power of tau in the rate", 3),),
        ("k",),
    ),
    "survival": Topic(
        "the probability that no ask has clicked",
        (_whole("order", "terms kept are O(tau^order) at fixed t*tau", 1),),
        ("t",),
        True,
    ),
    "asymptotics": Topic(
        "first detection at late asks",
        (_whole("order", "number of terms; on a finite graph, of moduli of poles", 1),),
        ("n",),
        True,
    ),
    "classical": Topic(
        "the classical walk beside it",
        (
            Option(
                Key("walk", "continuous or discrete", "the walk's clock", "continuous"), "walk", default="continuous"
            ),
        ),
        ("t",),
        True,
    ),
    "validity": Topic(
        "how small tau must be",
        (
            _whole("order", "highest power of tau kept in the generator", 3, 0, GENERATOR_LIMIT),
            Option(Key("tolerance", "formula", "error allowed", "1/100"), "formula"),
            Option(Key("time", "formula", "until when", "10/h, h half the band width"), "formula"),
        ),
    ),
    "renewal": Topic(
        "generating functions of the first detection",
        (_whole("terms", "first terms printed", 4),),
        ("z", "n"),
        True,
    ),
    "detection": Topic(
        "the total probability of detection",
        (Option(Key("dark_basis", "true or false", "print the dark states", "false"), "boolean", default=False),),
        (),
        True,
    ),
    "moments": Topic("moments of the first detection", (_whole("highest", "highest moment", 2, 1, 20),), (), True),
    "exceptional": Topic(
        "intervals at which phases merge",
        (Option(Key("window", "[from, to]", "intervals looked at", "up to 2*pi over the widest gap"), "window"),),
        (),
        False,
    ),
}
ANY_TOPIC = (
    Key("set", "{ letter = value }", "at these values"),
    Key("asks", "list of whole numbers", "where numbers are wanted, in asks"),
    Key("times", "list of formulas", "where numbers are wanted, in time"),
)

ABSORBERS = ("plain", "dressed", "ancilla", "cascade")
SIDES_OF_MAPS = ("left", "right", "from detector", "to detector")
START_QUANTITIES = ("level weight",)

WORDS_FOR_SITES = ("centre", "end", "root", "detector")
FAMILY_NAMES = (*FAMILIES, *INFINITE)
