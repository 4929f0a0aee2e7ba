"""What is asked: plain frozen records, made by the worksheet, read by both roads, holding no mathematics.

Sites are numbered from 0.  A `Vector` is a tuple of (site, amplitude), sites ascending, zero amplitudes absent.
A `Row` is a tuple of (column, H_xy), columns ascending, zeros absent; `Finite.rows` holds both triangles.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from derive.formula.tree import ONE, TAU, Formula

Vector = tuple[tuple[int, Formula], ...]
Row = tuple[tuple[int, Formula], ...]


@dataclass(frozen=True, slots=True)
class Domain:
    """Where a letter lives.  `kind` is real, positive, nonnegative, complex, integer or interval.

    `low` and `high` bound an integer (low only) or an interval; `low_open`, `high_open` say which ends are out.
    `text` is the worksheet's own phrase.
    """

    kind: str
    text: str
    low: Formula | None = None
    high: Formula | None = None
    low_open: bool = False
    high_open: bool = False

    @property
    def is_real(self) -> bool:
        return self.kind != "complex"

    @property
    def is_positive(self) -> bool:
        """Surely above 0 (what the domain alone says)."""
        if self.kind == "positive":
            return True
        if self.low is None or self.low.head != "number":
            return False
        return self.low.args[0] > 0 or (self.low.args[0] == 0 and self.low_open)


POSITIVE = Domain("positive", "positive")


@dataclass(frozen=True, slots=True)
class Letter:
    """A declared letter, its domain, and the LaTeX its owner wants (None: the letter itself)."""

    name: str
    domain: Domain
    latex: str | None = None


@dataclass(frozen=True, slots=True)
class Shape:
    """What a graph is called and how large it is: for pictures and for sentences, never for mathematics.

    `family` is a family's name, or edges, edge_file, hamiltonian, step; `sizes` pairs of (key, text).
    """

    family: str
    sizes: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True, slots=True)
class Finite:
    """N sites and the Hermitian matrix H, sparse.  `names` is None where sites go by number.

    `gauge` lists the bonds that carry a flux's phase: (x, y, phase), as chosen by the builder.
    """

    rows: tuple[Row, ...]
    shape: Shape
    names: tuple[str, ...] | None = None
    gauge: tuple[tuple[int, int, Formula], ...] = ()

    @property
    def size(self) -> int:
        return len(self.rows)

    def name(self, site: int) -> str:
        return self.names[site] if self.names else str(site)


@dataclass(frozen=True, slots=True)
class Family:
    """A family whose size is a letter: recorded as written, turned into a `Finite` at a sample point."""

    name: str
    sizes: tuple[tuple[str, Formula], ...]
    hopping: Formula
    energies: tuple[tuple[Formula, Formula], ...] = ()
    bonds: tuple[tuple[Formula, Formula, Formula], ...] = ()
    flux: Formula | None = None


@dataclass(frozen=True, slots=True)
class Singular:
    """A singular point of a local density of states: amplitude |E - energy|^power (log)^logs on one or both sides.

    Beside it the density is a power series on either side: the singular part is multiplied by one, another is added.
    """

    energy: Formula
    power: Formula
    logs: Formula
    side: str
    amplitude: Formula


@dataclass(frozen=True, slots=True)
class Band:
    """A piece of a local density of states: (E - low)^low_power (high - E)^high_power factor(E), low < E < high.

    The powers are those of the singular points at its ends; the factor is analytic from end to end, ends included.
    """

    low: Formula
    high: Formula
    low_power: Formula
    high_power: Formula
    factor: Formula


@dataclass(frozen=True, slots=True)
class Lattice:
    """An infinite lattice (line, half line, square lattice) or a density given by its singular points.

    With `bands`, from low to high, the density is known everywhere, and every singular point is the end of one.
    """

    name: str
    hopping: Formula | None
    energies: tuple[tuple[str, Formula], ...] = ()
    singular: tuple[Singular, ...] = ()
    bands: tuple[Band, ...] = ()


@dataclass(frozen=True, slots=True)
class Unitary:
    """A unitary step in place of exp(-i H tau), sparse rows."""

    rows: tuple[Row, ...]
    shape: Shape
    names: tuple[str, ...] | None = None

    @property
    def size(self) -> int:
        return len(self.rows)

    def name(self, site: int) -> str:
        return self.names[site] if self.names else str(site)


Space = Finite | Family | Lattice | Unitary


@dataclass(frozen=True, slots=True)
class Watcher:
    """One detector: orthonormal vectors that span range(P), and the probability of a click on them.

    Sites are unit vectors: there is one code path.  `place` is kept where it cannot be a vector yet
    ("centre" of a family of symbolic size, "origin" of a lattice): then `vectors` is empty.
    """

    vectors: tuple[Vector, ...]
    efficiency: Formula = ONE
    name: str | None = None
    place: Formula | str | None = None

    @property
    def rank(self) -> int:
        return len(self.vectors)


@dataclass(frozen=True, slots=True)
class Start:
    """A mixture of (weight, vector); or `distance` steps from the detector, or `place`, where sizes are letters."""

    mixture: tuple[tuple[Formula, Vector], ...] = ()
    distance: Formula | None = None
    place: Formula | str | None = None


@dataclass(frozen=True, slots=True)
class Interval:
    """Time between asks: a length (mean, if random), and its law: fixed, exponential or gamma (shape s)."""

    length: Formula = TAU
    law: str = "fixed"
    shape: Formula | None = None


@dataclass(frozen=True, slots=True)
class Relation:
    """A comparison that every tested point keeps: left op right, op one of < <= > >= != =."""

    left: Formula
    op: str
    right: Formula


@dataclass(frozen=True, slots=True)
class Setting:
    """The measured system and everything known about its letters."""

    title: str
    letters: tuple[Letter, ...]
    space: Space
    detectors: tuple[Watcher, ...]
    start: Start | None = None
    interval: Interval = field(default_factory=Interval)
    assume: tuple[Relation, ...] = ()

    def domains(self) -> dict[str, Domain]:
        """Domain by letter; the interval's tau is always there and positive."""
        known = {"tau": POSITIVE}
        known.update((x.name, x.domain) for x in self.letters)
        return known


@dataclass(frozen=True, slots=True)
class Wish:
    """One [derive.*] table: a topic, its options as checked values, and the values it is to be taken at."""

    topic: str
    options: tuple[tuple[str, object], ...] = ()
    set: tuple[tuple[str, Formula], ...] = ()

    def option(self, name: str, default: object = None) -> object:
        return dict(self.options).get(name, default)


@dataclass(frozen=True, slots=True)
class Own:
    """One [claim.*] table as understood: a formula of the user's about a quantity.

    Exactly one of `formula`, `matrix`, `values`, `latex`, `cases` (condition, formula) and `per_root` (polynomial,
    its letter, formula) is given.  `which`, `entry`, `side` as in the worksheet.
    """

    name: str
    about: str
    holds: str = "exactly"
    which: int | str | None = None
    entry: tuple[int, int] | None = None
    side: str | None = None
    formula: Formula | None = None
    matrix: tuple[tuple[int, int, Formula], ...] | None = None
    values: tuple[tuple[str, str], ...] = ()
    latex: str | None = None
    assume: tuple[Relation, ...] = ()
    source: str | None = None
    cases: tuple[tuple[str, Formula], ...] = ()
    per_root: tuple[Formula, str, Formula] | None = None
    arm: int | None = None


@dataclass(frozen=True, slots=True)
class Check:
    """How hard to check: digits both roads must share, points drawn, the seed, and points of the user's own."""

    digits: int = 30
    samples: int = 4
    seed: int = 1
    points: tuple[tuple[tuple[str, Formula], ...], ...] = ()


@dataclass(frozen=True, slots=True)
class Question:
    """A whole worksheet, understood."""

    setting: Setting
    wishes: tuple[Wish, ...] = ()
    claims: tuple[Own, ...] = ()
    check: Check = field(default_factory=Check)
    name: str = "worksheet"
