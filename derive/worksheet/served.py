"""What is served so far, a line a topic.  Everything else that a worksheet may say is read, checked, and refused by
one message.

A topic that lands adds its line to `TOPICS` and its quantities to `QUANTITIES`, and nothing else in the reading.
"""

from __future__ import annotations

from collections.abc import Iterable

FEATURES = {
    "set": "values at which a topic is taken",
    "asks": "asks at which numbers are wanted",
    "times": "times at which numbers are wanted",
    "family": "sizes that are letters",
    "lattice": "infinite graphs",
    "step": "a unitary step in place of exp(-i H tau)",
    "efficiency": "an efficiency other than 1",
    "several": "several detectors told apart",
    "exponential": "intervals of exponential law",
    "gamma": "intervals of gamma law",
    "mixture": "a mixture as start",
    "limit": "claims that hold in a limit",
    "bound": "claims that hold as a bound",
    "every": "claims for every size",
    "values": "published numbers as a claim",
}
"""What a worksheet may use and a topic may lack.  A finite graph, one perfect detector, fixed intervals always go.
So do claims that hold exactly or up to O(...), by formula, LaTeX or matrix."""

TOPICS: dict[str, tuple[str, ...]] = {
    "generator": ("set", "mixture", "efficiency"),
    "absorber": ("set", "asks", "times", "mixture", "efficiency", "lattice", "exponential", "gamma", "limit"),
    "levels": ("set", "mixture", "efficiency", "family", "every"),
    "validity": ("set", "mixture", "bound"),
    "survival": ("set", "asks", "times", "mixture", "efficiency", "family", "lattice", "every", "limit", "values"),
    "classical": ("set", "asks", "times", "mixture", "family", "every", "limit"),
    "detection": (
        "set", "asks", "times", "mixture", "efficiency", "lattice", "step", "several", "exponential", "gamma", "bound",
    ),
    "moments": ("set", "mixture", "efficiency", "step", "several", "exponential", "gamma", "bound"),
    "exceptional": ("set", "mixture"),
    "renewal": ("set", "asks", "times", "mixture", "efficiency", "lattice", "step", "several", "limit", "values"),
    "asymptotics": ("set", "asks", "times", "mixture", "efficiency", "lattice", "limit"),
}

QUANTITIES = (
    "generator",
    "absorber strength",
    "absorber coupling",
    "absorber loss",
    "energy error",
    "rate error",
    "state map",
    "return factor",
    "averaged loss",
    "averaged dephasing",
    "absorber amplitude",
    "absorbed fraction",
    "level energy",
    "decay rate",
    "level multiplicity",
    "level weight",
    "dark level energy",
    "dark level multiplicity",
    "secular function",
    "survival probability",
    "survival density",
    "survival regime",
    "crossover time",
    "classical survival",
    "classical density",
    "classical mean",
    "classical mean of steps",
    "radius of convergence",
    "remainder bound",
    "state error bound",
    "relative state error bound",
    "largest interval",
    "total detection probability",
    "bright dimension",
    "dark dimension",
    "number of phases",
    "dark state",
    "splitting probability",
    "mean",
    "conditional mean",
    "variance",
    "moment",
    "generating function",
    "pole",
    "exceptional interval",
    "merging levels",
    "drop of phases",
    "divergence coefficient",
    "exceptional value",
    "phases at exceptional value",
    "total probability at exceptional value",
    "detection amplitude",
    "detection probability",
    "tail start",
    "bound state energy",
    "bound state weight",
    "tail rate",
    "pole modulus",
    "pole angle",
)


def serving(feature: str) -> list[str]:
    """The topics that serve a feature."""
    return [topic for topic, features in TOPICS.items() if feature in features]


def now(names: Iterable[str]) -> str:
    """What is served, in words."""
    *most, last = names
    return f"{', '.join(most)} and {last}" if most else last
