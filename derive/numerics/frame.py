"""The part of a finite system that an experiment has to be run on: all sites, or what H reaches from the detectors.

States outside the reach of the detectors never click, and what is inside never leaves it, so a start may be cut to
its part inside.  The inside is spanned by an orthonormal basis that grows from the detectors' vectors, in balls; its
dimension is told by an exact count, since balls alone never know that nothing is left.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from flint import acb, acb_mat

from derive.errors import NeedsPrecision
from derive.formula.tree import ONE
from derive.numerics.evaluate import Values, enclose
from derive.numerics.evolution import apply_rows, norm
from derive.numerics.system import State, System, assemble, dagger, dense, system
from derive.problem.setting import Setting, Vector


@dataclass(frozen=True)
class Frame:
    """H on the basis (E0 and a bound with it), and the basis; None means the sites themselves."""

    system: System
    sites: int
    basis: tuple[State, ...] | None = None

    @property
    def size(self) -> int:
        return self.system.size

    def state(self, vector: Vector, values: Values) -> State:
        """The vector's part inside, as coordinates."""
        full = [acb(0)] * self.sites
        for x, f in vector:
            full[x] = enclose(f, values)
        return full if self.basis is None else [_inner(b, full) for b in self.basis]


def whole_frame(setting: Setting, values: Values) -> Frame:
    """All sites."""
    s = system(perfect(setting), values)
    return Frame(s, s.size)


def reached_frame(setting: Setting, values: Values, dimension: int) -> Frame:
    """What H reaches from the detectors' vectors; `dimension` is known exactly."""
    whole = system(perfect(setting), values)
    basis: list[State] = []
    for watcher in setting.detectors:
        for vector in watcher.vectors:
            full = [acb(0)] * whole.size
            for x, f in vector:
                full[x] = enclose(f, values)
            basis.append(full)
    images: list[State] = []
    n = 0
    while n < len(basis):
        images.append(apply_rows(whole.rows, basis[n]))
        new = None if len(basis) == dimension else _independent(basis, images[n])
        if new is not None:
            basis.append(new)
        n += 1
    if len(basis) != dimension:
        raise NeedsPrecision("fewer independent states than there are")
    entries = acb_mat(dimension, dimension, [_inner(a, b) for a in basis for b in images])
    hermitian = (entries + dagger(entries)) / 2
    rows = [tuple((y, hermitian[x, y]) for y in range(dimension)) for x in range(dimension)]
    return Frame(assemble(rows, (), range(dimension)), whole.size, tuple(basis))


def _independent(basis: Sequence[State], v: State) -> State | None:
    """v made orthonormal to the basis, if it surely has a part outside."""
    for _ in range(2):  # the second pass removes what rounding left
        for b in basis:
            overlap = _inner(b, v)
            v = [x - overlap * y for x, y in zip(v, b, strict=True)]
    length = norm(v)
    return [x / length for x in v] if length > 0 else None


def _inner(a: State, b: State) -> acb:
    total = acb(0)
    for x, y in zip(a, b, strict=True):
        total += x.conjugate() * y
    return total


def perfect(setting: Setting) -> Setting:
    """The same setting with detectors of efficiency 1, for what does not depend on it."""
    return replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))


def hamiltonian(frame: Frame) -> acb_mat:
    """H on the basis, dense."""
    return dense(frame.system)
