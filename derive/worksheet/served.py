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
}
"""What a worksheet may use and a topic may lack.  A finite graph, one perfect detector and fixed intervals always go."""

TOPICS: dict[str, tuple[str, ...]] = {
    "generator": ("set", "mixture"),
    "detection": ("set", "mixture"),
}

QUANTITIES = (
    "generator",
    "total detection probability",
    "bright dimension",
    "dark dimension",
    "number of phases",
    "dark state",
)
KINDS = ("exactly", "order")  # of exactly, order, limit, upper, lower
VALUES = ("formula", "matrix")  # of formula, matrix, latex, values
FOR_EVERY_SIZE = False


def serving(feature: str) -> list[str]:
    """The topics that serve a feature."""
    return [topic for topic, features in TOPICS.items() if feature in features]


def now(names: Iterable[str]) -> str:
    """What is served, in words."""
    *most, last = names
    return f"{', '.join(most)} and {last}" if most else last
