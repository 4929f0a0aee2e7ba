"""What a detector observes, by elimination: the rows d† H^m (or d† U^m), m = 0, 1, ..., until nothing new comes.

A state that all these rows annihilate is never seen, and every state orthogonal to all such is seen in the end: the
row space is the bright space.  Plain Gaussian elimination over the exact field of the setting; nothing of the
derivation's recursion is used.

Where phases of different energies coincide (`turns.py`), only polynomials in H that take one value on the energies of
one phase are observed, and the rows are those.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from fractions import Fraction

from flint import fmpq

from derive.checks.turns import Turns, combinations, combinations_over, rational_turns
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import ONE, Formula, number
from derive.problem.setting import Finite, Setting, Unitary, Vector

Sparse = dict[int, Element]


class Rows:
    """A growing set of independent rows, each with a 1 at its pivot; later rows are cleared of earlier pivots."""

    def __init__(self, field: Field):
        self.field = field
        self.held: dict[int, Sparse] = {}
        self.last: Sparse = {}

    def add(self, row: Sparse) -> bool:
        """Whether the row is independent of those held; if so it is kept."""
        rest = dict(row)
        for pivot, held in self.held.items():
            c = rest.get(pivot)
            if c is not None:
                subtract(rest, held, c)
        if not rest:
            return False
        pivot = min(rest)
        top = rest[pivot]
        self.held[pivot] = self.last = {y: v / top for y, v in rest.items()}
        return True

    def grow(self, seeds: Iterable[Sparse], act: Callable[[Sparse], Sparse]) -> None:
        """The closure of the seeds under `act`."""
        waiting = list(seeds)
        while waiting:
            following = []
            for row in waiting:
                if self.add(row):
                    following.append(act(row))
            waiting = following


def subtract(rest: Sparse, held: Sparse, c: Element) -> None:
    for y, v in held.items():
        have = rest.get(y)
        value = -(c * v) if have is None else have - c * v
        if value:
            rest[y] = value
        else:
            rest.pop(y, None)


class Observed:
    """The bright space of a finite setting as rows, and what of a state lies in it."""

    def __init__(self, setting: Setting):
        self.space = _finite(setting)
        self.vectors = [v for w in setting.detectors for v in w.vectors]
        self.mixture = setting.start.mixture if setting.start is not None else ()
        special = rational_turns(setting)
        self.formulas = [*self._formulas(), *([special.unit] if special is not None else [])]
        self.field = Field.of(self.formulas, setting.domains())
        self.across = [{y: self.field.element(f) for y, f in row} for row in self.space.rows]
        self.rows = Rows(self.field)
        if special is None:
            seeds = [self._bra(v) for v in self.vectors]
            self.rows.grow(seeds, self.moved)
            self.phases = self._energies()
        else:
            self.phases = self._at_turns(special)

    def _formulas(self) -> list[Formula]:
        vectors = [*self.vectors, *(v for _, v in self.mixture)]
        return [number(1), *(f for row in (*self.space.rows, *vectors) for _, f in row), *(w for w, _ in self.mixture)]

    def _bra(self, v: Vector) -> Sparse:
        return {x: self.field.conjugate(self.field.element(f)) for x, f in v}

    def moved(self, row: Sparse) -> Sparse:
        """row H."""
        return _moved(row, self.across)

    @property
    def bright(self) -> int:
        return len(self.rows.held)

    @property
    def dark(self) -> int:
        return self.space.size - self.bright

    def _energies(self) -> int:
        """Different energies seen: the dimension that all detector vectors reach when they move together."""
        if len(self.vectors) == 1:
            return self.bright
        n = self.space.size
        together = {x + k * n: c for k, v in enumerate(self.vectors) for x, c in self._bra(v).items()}
        rows = Rows(self.field)
        rows.grow([together], lambda row: self._each(row, n))
        return len(rows.held)

    def _each(self, row: Sparse, n: int) -> Sparse:
        out: Sparse = {}
        for k in range(len(self.vectors)):
            part = self.moved({x - k * n: c for x, c in row.items() if x // n == k})
            out.update({x + k * n: c for x, c in part.items()})
        return out

    def _at_turns(self, turns: Turns) -> int:
        """Rows h(H') for every h that is constant on phases; how many h there are."""
        if len(self.vectors) != 1:
            raise NotCovered("one detector state is served at an interval that is a fraction of pi")
        across = [{y: self.field.rational(q) for y, q in row.items()} for row in turns.rows]
        powers, mu = annihilated(self._bra(self.vectors[0]), across, self.field)
        if turns.unit == ONE:
            chosen = [[self.field.rational(c) for c in h] for h in combinations(mu, turns.width)]
        else:
            chosen = combinations_over(self.field, mu, turns)
        for coefficients in chosen:
            row: Sparse = {}
            for c, moved in zip(coefficients, powers, strict=True):
                subtract(row, moved, -c)
            self.rows.add(row)
        return len(chosen)

    def seen_share(self) -> Element:
        """sum over the start's parts of weight times |bright part|^2."""
        total = self.field.zero
        for w, v in self.mixture:
            psi = {x: self.field.element(f) for x, f in v}
            total = total + self.field.element(w) * self._length(psi)
        return total

    def _length(self, psi: Sparse) -> Element:
        """|projection of psi on the row space|^2 = b† (B B†)^-1 b, b = B psi; through the dark space where smaller."""
        if self.dark < self.bright:
            whole = self._square([{x: self.field.conjugate(c) for x, c in psi.items()}], psi)
            return whole - self._square(self._null(), psi)
        return self._square(list(self.rows.held.values()), psi)

    def seen_part(self, psi: Sparse) -> Sparse:
        """The projection of psi on the bright space, B† (B B†)^-1 B psi."""
        field, rows = self.field, list(self.rows.held.values())
        kets = [{x: field.conjugate(c) for x, c in row.items()} for row in rows]
        system = [[*(_dot(field, row, ket) for ket in kets), _dot(field, row, psi)] for row in rows]
        out: Sparse = {}
        for ket, c in zip(kets, _solved(system), strict=True):
            subtract(out, ket, -c)
        return out

    def _null(self) -> list[Sparse]:
        """Rows that span the orthogonal complement of the row space."""
        reduced = _back_substituted(self.rows)
        conjugate, out = self.field.conjugate, []
        for free in (x for x in range(self.space.size) if x not in reduced):
            column = {free: self.field.one}
            column.update({p: -row[free] for p, row in reduced.items() if free in row})
            out.append({x: conjugate(c) for x, c in column.items()})
        return out

    def _square(self, rows: list[Sparse], psi: Sparse) -> Element:
        """b† (B B†)^-1 b with b = B psi."""
        field, n = self.field, len(rows)
        b = [_dot(field, row, psi) for row in rows]
        kets = [{x: field.conjugate(c) for x, c in row.items()} for row in rows]
        system = [[*(_dot(field, row, ket) for ket in kets), b[k]] for k, row in enumerate(rows)]
        solution = _solved(system)
        total = field.zero
        for k in range(n):
            total = total + field.conjugate(b[k]) * solution[k]
        return total


def _finite(setting: Setting) -> Finite | Unitary:
    if not isinstance(setting.space, (Finite, Unitary)):
        raise NotCovered("only a finite graph with numbers for its sizes is observed exactly")
    return setting.space


def _dot(field: Field, row: Sparse, column: Sparse) -> Element:
    total = field.zero
    for x, c in row.items():
        if x in column:
            total = total + c * column[x]
    return total


def _back_substituted(rows: Rows) -> dict[int, Sparse]:
    """Reduced row echelon form, by pivot."""
    out = {p: dict(row) for p, row in rows.held.items()}
    for p in reversed(list(out)):
        for other, row in out.items():
            if other != p and p in row:
                subtract(row, out[p], row[p])
    return out


def _solved(system: list[list[Element]]) -> list[Element]:
    """x with M x = b for rows (M | b), M regular."""
    n = len(system)
    for k in range(n):
        pivot = next(i for i in range(k, n) if system[i][k])
        system[k], system[pivot] = system[pivot], system[k]
        top = system[k][k]
        system[k] = [v / top if v else v for v in system[k]]
        for i in range(n):
            c = system[i][k]
            if i != k and c:
                system[i] = [v - c * w if w else v for v, w in zip(system[i], system[k], strict=True)]
    return [row[n] for row in system]


def _moved(row: Sparse, across: list[Sparse]) -> Sparse:
    """row times a matrix given by its rows."""
    out: Sparse = {}
    for x, c in row.items():
        subtract(out, across[x], -c)
    return out


def annihilated(seed: Sparse, across: list[Sparse], field: Field) -> tuple[list[Sparse], list[Fraction]]:
    """seed, seed H', ... as far as independent, and the polynomial (constant first) in H' that sends the seed to 0.

    Every row carries a mark behind the sites that says which power it is; the marks of what vanishes are the answer.
    """
    size = len(across)
    powers: list[Sparse] = []
    marked, row = Rows(field), dict(seed)
    while marked.add({**row, size + len(powers): field.one}) and min(marked.last) < size:
        powers.append(row)
        row = _moved(row, across)
    rest = marked.last
    top = rest[size + len(powers)]
    marks = [rest.get(size + k, field.zero) for k in range(len(powers) + 1)]
    return powers, [_rational(x / top) for x in marks]


def _rational(x: Element) -> Fraction:
    if x.den is not None or not x.num.is_constant():
        raise NotCovered("the seen energies satisfy no equation with rational coefficients")
    q = x.num.leading_coefficient() if x else fmpq(0)
    return Fraction(int(q.p), int(q.q))
