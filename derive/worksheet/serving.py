"""What a worksheet wants against what is served: one message each, told after all faults."""

from __future__ import annotations

from collections.abc import Iterable

from derive.problem.quantities import QUANTITIES
from derive.problem.setting import Own, Wish
from derive.record.said import Kind
from derive.worksheet import served
from derive.worksheet.faults import Faults
from derive.worksheet.positions import Path
from derive.worksheet.values import Reader, Use


def refuse_unserved_topics(faults: Faults, wishes: Iterable[Wish]) -> None:
    for wish in wishes:
        if wish.topic not in served.TOPICS:
            message = f"the topic {wish.topic} is not served yet."
            faults.not_served(("derive", wish.topic), message, f"Served: {served.now(served.TOPICS)}.")


def refuse_unserved_uses(faults: Faults, uses: Iterable[Use], wishes: Iterable[Wish], claims: Iterable[Own]) -> None:
    """What is used and a topic asked for lacks.  A topic that is not served at all has its own message."""
    asked = [w.topic for w in wishes] + [QUANTITIES[c.about].topic for c in claims]
    wanted = [t for t in dict.fromkeys(asked) if t in served.TOPICS]
    for use in uses:
        serving = served.serving(use.feature)
        lacking = [t for t in wanted if t not in serving and use.topic in (None, t)]
        what = served.FEATURES[use.feature]
        if lacking and serving:
            message = f"{what}: not served with {served.now(lacking)} yet."
            faults.not_served(use.path, message, f"Served with {served.now(serving)}.")
        elif not serving:
            faults.not_served(use.path, f"{what}: not served yet.", _INSTEAD[use.feature])


_INSTEAD = {
    "set": "Take the line out.",
    "asks": "Take the line out.",
    "times": "Take the line out.",
    "family": "Served: numbers.",
    "lattice": "Served: graphs of a numbered size.",
    "step": "Served: a Hamiltonian.",
    "efficiency": "Served: efficiency = 1.",
    "several": "Served: one detector.",
    "exponential": "Served: fixed.",
    "gamma": "Served: fixed.",
    "mixture": "Served: one state.",
    "limit": "Served: exactly and up to O(...).",
    "bound": "Served: exactly and up to O(...).",
    "every": "Served: sizes that are sampled.",
    "values": "Served: formula, latex and matrix.",
}


def note_claim(r: Reader, path: Path, about: str, kind: Kind, given: str | None) -> None:
    """A quantity that is not served has its message; of one that is, what its topic may lack is noted."""
    if about not in served.QUANTITIES:
        known = "watchpot words  says which quantities are served."
        r.faults.not_served((*path, "about"), f"claims about {about} are not served yet.", known)
        return
    topic = QUANTITIES[about].topic
    if kind.name in ("limit", "upper", "lower"):
        r.use("limit" if kind.name == "limit" else "bound", (*path, "holds"), topic)
    if kind.every is not None:
        r.use("every", (*path, "holds"), topic)
    if given == "values":
        r.use("values", (*path, "values"), topic)
