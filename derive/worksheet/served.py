"""What is served so far.  Everything else that a worksheet may say is read, checked, and refused by one message.

A topic that lands adds its name here and nothing else in the reading.
"""

from __future__ import annotations

TOPICS = ("generator", "levels", "detection")
ANY_TOPIC = ("set",)  # of set, asks, times
SPACES = ("finite",)  # of finite, family, lattice, step
LAWS = ("fixed",)
QUANTITIES = (
    "generator",
    "level energy",
    "decay rate",
    "level multiplicity",
    "level weight",
    "secular function",
    "total detection probability",
    "bright dimension",
    "dark dimension",
    "number of phases",
    "dark state",
)
KINDS = ("exactly", "order")  # of exactly, order, limit, upper, lower
VALUES = ("formula", "matrix")  # of formula, matrix, latex, values
EFFICIENCY_BELOW_ONE = False
SEVERAL_DETECTORS = False
FOR_EVERY_SIZE = False


def now(names: tuple[str, ...]) -> str:
    """What is served, in words."""
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else list(names))
