"""The whole finite system in an exact field, with its detectors and its start: what exact statistics are made from.

D (N x r) holds the orthonormal vectors of all detectors, P = D D†, Q = 1 - P; psi is a start vector.
"""

from __future__ import annotations

from collections.abc import Iterable

from derive.algebra.bright import Krylov, reached
from derive.algebra.stepwise import spanned
from derive.derivations.watched import Watched
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.exact.sparse import Vector, accumulate
from derive.formula.tree import Formula, operator, plus, times
from derive.problem.setting import Finite, Setting, Unitary

Mixture = tuple[tuple[Element, Vector], ...]


class Explored(Watched):
    """A finite setting on all its sites, every detector's vectors one after the other, and the start."""

    def __init__(self, setting: Setting, also: Iterable[Formula] = ()):
        if not isinstance(setting.space, (Finite, Unitary)):
            raise NotCovered("Exact statistics are derived on a finite graph with numbers for its sizes.")
        self.setting = setting
        self.space = setting.space  # type: ignore[assignment]
        self.detector = setting.detectors[0]
        self.vectors = [v for w in setting.detectors for v in w.vectors]
        self.support = sorted({x for v in self.vectors for x, _ in v})
        self.sites = tuple(range(self.space.size))
        self.field = Field.of([*self._formulas(), *also], setting.domains())
        self.d = [{x: self.field.element(f) for x, f in v} for v in self.vectors]

    def _formulas(self) -> list[Formula]:
        found: dict[Formula, None] = {}
        for _, vector in (*((None, v) for v in self.vectors), *self.mixture):
            found.update((f, None) for _, f in vector)
        found.update((w, None) for w, _ in self.mixture)
        for row in self.space.rows:
            found.update((f, None) for _, f in row)
        return list(found)

    @property
    def mixture(self) -> tuple[tuple[Formula, tuple[tuple[int, Formula], ...]], ...]:
        return self.setting.start.mixture if self.setting.start is not None else ()

    def start(self) -> Mixture:
        """(weight, psi) of the mixture; `NotCovered` where the start is no explicit state."""
        if not self.mixture:
            raise NotCovered("This topic needs a start: add [start] with a site, a state or a mixture.")
        element = self.field.element
        return tuple((element(w), {x: element(f) for x, f in v}) for w, v in self.mixture)

    def bright(self) -> Krylov:
        """What H, or U†, reaches from the detector's vectors: outside it no ask ever clicks."""
        if isinstance(self.setting.space, Unitary):
            return spanned(self.field, self.hamiltonian, self.inner, self.d)
        return reached(self.field, self.hamiltonian, self.inner, self.d)

    def stepped(self, v: Vector) -> Vector:
        """U v for a step given; `hamiltonian` is U† v then, since it conjugates rows."""
        out: Vector = {}
        for x, row in enumerate(self.space.rows):
            for y, f in row:
                if y in v:
                    accumulate(out, {x: self.field.element(f) * v[y]})
        return out

    def kets(self, v: Vector) -> Formula:
        """sum_x v_x |x>."""
        return plus(*(times(self.field.formula(v[x]), operator(f"|{self.space.name(x)}>")) for x in sorted(v)))
