"""The detector's neighbourhood, cut out of a graph that is too large to be measured as a whole.

What is claimed about an absorber, by formulas in the detector's own couplings, is claimed for every graph that looks
the same near the detector; one that is cut off a few steps away is such a graph, and small enough for a measurement.
Formulas that speak of sites further out are not covered.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from derive.checks.seen import Seen
from derive.errors import NotCovered
from derive.formula.tree import ONE, Formula
from derive.problem.balls import ball
from derive.problem.setting import Check, Finite, Setting, Watcher
from derive.record.said import Claim, Expansion, Finding, Matrix

Road = Callable[[Setting, tuple[Claim, ...], Check], Seen]


@dataclass(frozen=True)
class Cut:
    """The sites that are kept, ascending, all within `steps` of the detector, and the setting on them alone."""

    setting: Setting
    sites: tuple[int, ...]
    steps: int

    def claim(self, claim: Claim) -> Claim:
        """The claim in the numbers of the sites that are kept."""
        value, quantity = claim.value, claim.quantity
        if isinstance(value, Matrix):
            value = self._matrix(value)
        elif isinstance(value, Expansion):
            value = replace(value, terms=tuple(self._matrix(t) if isinstance(t, Matrix) else t for t in value.terms))
        place = None if quantity is None else quantity.key("entry")
        if quantity is not None and isinstance(place, tuple):
            entry = tuple(self._number(x) for x in place)
            keys = tuple(("entry", entry) if name == "entry" else (name, key) for name, key in quantity.keys)
            quantity = replace(quantity, keys=keys)
        return replace(claim, value=value, quantity=quantity)

    def _matrix(self, value: Matrix) -> Matrix:
        if value.size <= len(self.sites):
            return value  # a network beside the graph, not an operator on it
        known = {x: n for n, x in enumerate(self.sites)}
        rows: dict[int, list[tuple[int, Formula]]] = {}
        for x, y, f in value.entries():
            if x in known and y in known:
                rows.setdefault(known[x], []).append((known[y], f))
            elif x != y or f != ONE:
                self._number(x if x not in known else y)
        return Matrix(len(self.sites), (), tuple((x, tuple(row)) for x, row in sorted(rows.items())))

    def _number(self, x: object) -> int:
        if not isinstance(x, int) or x not in self.sites:
            raise NotCovered(f"measured within {self.steps} steps of the detector, and the claim speaks of site {x}")
        return self.sites.index(x)


def cut_near(setting: Setting, most: int, least_steps: int) -> Cut | None:
    """At most `most` sites around the detector, as many steps as that allows; None where it allows too few."""
    space = setting.space
    if not isinstance(space, Finite):
        return None
    seeds = [x for w in setting.detectors for v in w.vectors for x, _ in v]
    steps = least_steps
    kept = ball(space.rows, seeds, steps)
    if len(kept) > most:
        return None
    while len(kept) < len(wider := ball(space.rows, seeds, steps + 1)) <= most:
        kept, steps = wider, steps + 1
    known = {x: n for n, x in enumerate(kept)}
    rows = tuple(tuple((known[y], f) for y, f in space.rows[x] if y in known) for x in kept)
    names = tuple(space.names[x] for x in kept) if space.names else None
    watchers = tuple(_renumbered(w, known) for w in setting.detectors)
    near = replace(setting, space=replace(space, rows=rows, names=names, gauge=()), detectors=watchers, start=None)
    return Cut(near, kept, steps)


def _renumbered(watcher: Watcher, known: dict[int, int]) -> Watcher:
    vectors = tuple(tuple(sorted((known[x], f) for x, f in v)) for v in watcher.vectors)
    return replace(watcher, vectors=vectors)


def measured_near(road: Road, cut: Cut, claims: Sequence[Claim], effort: Check) -> Seen:
    """A road walked on the neighbourhood alone; every finding says so."""
    mine: list[Claim] = []
    left_out: dict[str, Finding] = {}
    for claim in claims:
        try:
            mine.append(cut.claim(claim))
        except NotCovered as reason:
            left_out[claim.id] = Finding("untested", "trend", evidence=f"{reason}.")
    seen = road(cut.setting, tuple(mine), effort)
    where = f"on the {len(cut.sites)} sites within {cut.steps} steps of the detector, cut out of the graph"
    found = {name: replace(f, evidence=f"{f.evidence.rstrip('.')}; {where}") for name, f in seen.findings.items()}
    plots = tuple(replace(p, says=f"{p.says.rstrip('.')}, {where}.") for p in seen.plots)
    return replace(seen, findings={**found, **left_out}, plots=plots)
