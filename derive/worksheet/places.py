"""Which site is meant: numbers from 0, names given by the edges, and the words centre, end, root.

"`at` says where" and "`{ site = value }` fills in sites" go through here and nowhere else.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from derive.errors import FormulaFault
from derive.formula.grammar import parse
from derive.formula.tree import ONE, Formula, free_letters, number
from derive.problem.balls import centre, end
from derive.problem.families import FAMILIES
from derive.problem.setting import Family, Finite, Lattice, Space, Vector
from derive.worksheet.faults import near
from derive.worksheet.positions import Path
from derive.worksheet.values import Decimal, Reader, rational, shown

Place = int | str | Formula
QUICK = 2_000
"""Sites up to which a message looks for the centre: a refusal does not keep anyone waiting."""

_PAIR = re.compile(r"\s*(-?[0-9]{1,9})\s*,\s*(-?[0-9]{1,9})\s*")


@dataclass
class Sites:
    """The sites of the graph that was read.  `size` None: not known, because the graph has faults, or symbolic.

    On a space that is no finite matrix a site is a `Formula` ("L", "2*j+1", an integer), a pair "x,y" on the
    square lattice, or a word; `seen` numbers those that vectors refer to.
    """

    size: int | None = None
    names: tuple[str, ...] | None = None
    space: Space | None = None
    family: str = ""
    seen: list[Place] = field(default_factory=list)
    _middle: list[int | None] = field(default_factory=list)

    def __post_init__(self) -> None:
        self._by_name = {n: k for k, n in enumerate(self.names or ())}

    @property
    def symbolic(self) -> bool:
        return isinstance(self.space, (Family, Lattice))

    def name(self, site: int) -> str:
        if self.symbolic:
            return str(self.seen[site])
        return self.names[site] if self.names else str(site)

    def find(self, r: Reader, path: Path, value: Any, key: bool = False) -> int | None:
        """The number of the site that `value` names; with `key` the value is a table's key."""
        report = r.faults.add_key if key else r.faults.add
        if not _may_name_a_site(report, path, value):
            return None
        if self.symbolic:
            place = self.place(r, path, value, key)
            return None if place is None else self.number(place)
        if isinstance(value, str) and self.names is not None:
            return self._named(report, path, value)
        if isinstance(value, str):
            return self._worded(r, report, path, value, key)
        return self._numbered(report, path, value)

    def number(self, place: Place) -> int:
        """The number under which vectors refer to a place of a symbolic space."""
        if place not in self.seen:
            self.seen.append(place)
        return self.seen.index(place)

    def _numbered(self, report: Any, path: Path, value: int) -> int | None:
        if self.size is None or 0 <= value < self.size:
            return value
        last = self.size - 1
        mend = f"The last site is {last}." if value > last else "Sites are counted from 0."
        middle = self._centre() if value > last and self.size <= QUICK else None
        if middle is not None:
            mend += f'  "centre" means {middle}.'
        if self.names:
            mend = "Sites go by name here, or by number in the order of their first appearance."
        report(path, f"site {shown(value)} is not on this graph; its sites are 0 to {last}.", mend)
        return None

    def _named(self, report: Any, path: Path, value: str) -> int | None:
        if value in self._by_name:
            return self._by_name[value]
        if value in ("centre", "end"):
            return self._word(report, path, value)
        if value.isdigit() and self.size is not None and int(value[:9]) < self.size:
            return int(value)
        mend = near(value, self._by_name)
        some = ", ".join(list(self._by_name)[:8]) + (", ..." if len(self._by_name) > 8 else "")
        report(path, f"no site is called {shown(value)}.", (mend + " " if mend else "") + f"The sites are {some}.")
        return None

    def _worded(self, r: Reader, report: Any, path: Path, value: str, key: bool) -> int | None:
        if value in ("centre", "end", "root"):
            return self._word(report, path, value)
        try:
            f = parse(value)
        except FormulaFault:
            report(path, f"{shown(value)} is no site.", self._how())
            return None
        q = rational(f)
        if q is not None and q.denominator == 1:
            return self._numbered(report, path, int(q))
        if value == "detector":
            report(path, '"detector" is no site here.', "Only start.at may say it.")
        elif q is None and self.size is not None:
            report(path, f"{shown(value)} is no site; the sites here are 0 to {self.size - 1}.", self._how(value))
        elif q is not None:
            report(path, f"{shown(value)} is no site.", self._how())
        return None

    def _how(self, value: str = "") -> str:
        close = near(value, ("centre", "end", "root")) if value else ""
        known = '"centre", "end" or "root"' if self.family == "tree" else '"centre" or "end"'
        return (close + " " if close else "") + f"Write its number, counted from 0, or {known}."

    def _word(self, report: Any, path: Path, word: str) -> int | None:
        if not isinstance(self.space, Finite) and self.space is not None:
            report(path, f"a graph given by a step has no {word}.", "Write the site's number.")
            return None
        if self.space is None:
            return None
        if word == "root":
            if self.family in ("tree", ""):
                return 0
            report(path, "only a tree has a root.", "Write the site's number, counted from 0.")
            return None
        found = self._centre() if word == "centre" else end(self.space.rows)
        if found is None:
            why = (
                "no single site of least eccentricity was found on this graph."
                if word == "centre"
                else "no site of this graph has a single neighbour."
            )
            report(path, why, "Write the site's number" + (" or name." if self.names else ", counted from 0."))
        return found

    def _centre(self) -> int | None:
        if not isinstance(self.space, Finite):
            return None
        if not self._middle:
            self._middle.append(centre(self.space.rows))
        return self._middle[0]

    def place(self, r: Reader, path: Path, value: Any, key: bool = False) -> Place | None:
        """A site of a family of symbolic size or of an infinite lattice."""
        report = r.faults.add_key if key else r.faults.add
        if not _may_name_a_site(report, path, value):
            return None
        if isinstance(self.space, Lattice) and self.space.name == "square lattice":
            pair = _PAIR.fullmatch(value) if isinstance(value, str) else None
            if pair:
                return f"{int(pair[1])},{int(pair[2])}"
            report(path, f"{shown(value)} is no site of a square lattice.", 'Write "x,y", for instance "0,0".')
            return None
        if isinstance(value, str) and value in ("centre", "end", "root"):
            return self._symbolic_word(report, path, value)
        f = number(value) if isinstance(value, int) else self._integer_formula(r, report, path, value)
        return f if f is None or self._may_be(report, path, f) else None

    def _symbolic_word(self, report: Any, path: Path, word: str) -> Place | None:
        if isinstance(self.space, Lattice):
            if word == "end" and self.space.name == "half line":
                return number(0)
            report(path, f"a {self.space.name} has no {word}.", "Write the site's number; 0 is its origin.")
            return None
        if word == "root" and self.family != "tree":
            report(path, "only a tree has a root.", "Write the site's number, counted from 0.")
            return None
        return word

    def _integer_formula(self, r: Reader, report: Any, path: Path, value: str) -> Formula | None:
        try:
            f = parse(value)
        except FormulaFault as fault:
            report(path, f"{shown(value)} is no site: {fault.message}", fault.mend)
            return None
        for name in sorted(free_letters(f)):
            if r.letters is not None and name not in r.letters:
                report(path, *r.undeclared(name))
                return None
            if r.letters is not None and r.letters[name].domain.kind != "integer":
                report(path, f"{name} is no integer letter, and a site is a whole number.", "Use integer letters.")
                return None
        return f

    def _may_be(self, report: Any, path: Path, f: Formula) -> bool:
        q = rational(f)
        if q is None:
            return True
        lowest = None if isinstance(self.space, Lattice) and self.space.name in ("line", "density") else 0
        if q.denominator != 1 or (lowest is not None and q < lowest):
            report(path, f"site {q} is not on this graph.", "Sites are counted from 0.")
            return False
        return True


def _may_name_a_site(report: Any, path: Path, value: Any) -> bool:
    if isinstance(value, (bool, Decimal)) or not isinstance(value, (int, str)):
        report(path, f"{shown(value)} is no site.", "A site is a number counted from 0, or a name in quotes.")
        return False
    return True


def sites_of(space: Space) -> Sites:
    """The sites of a space that has been read already."""
    if isinstance(space, (Family, Lattice)):
        return Sites(None, None, space, space.name)
    family = space.shape.family if space.shape.family in FAMILIES else ""
    return Sites(space.size, space.names, space, family)


def refuse_dotted(r: Reader, path: Path, inner: Any) -> bool:
    """A name with a dot that was not quoted reads as a table in a table."""
    if not isinstance(inner, Mapping) or not inner:
        return False
    name = f"{path[-1]}.{next(iter(inner))}"
    r.faults.add_key(path, f"{name} reads as two keys.", f'Write a name with a dot in quotes: "{name}".')
    return True


def read_vector(r: Reader, sites: Sites, path: Path, value: Any, what: str) -> Vector | None:
    """{ site = amplitude } as a vector, sites ascending, amplitudes written as 0 left out."""
    if not isinstance(value, Mapping):
        r.faults.add(path, f"{shown(value)} stands here, where {what} is a table.", "Write { site = amplitude }.")
        return None
    cells: dict[int, Formula] = {}
    whole = True
    for key, inner in value.items():
        if refuse_dotted(r, (*path, str(key)), inner):
            whole = False
            continue
        at = sites.find(r, (*path, str(key)), key if isinstance(key, int) else str(key), key=True)
        amplitude = r.formula((*path, str(key)), inner)
        if at is None or amplitude is None:
            whole = False
        elif at in cells:
            r.faults.add_key((*path, str(key)), f"site {sites.name(at)} stands here twice.", "Keep one of the two.")
            whole = False
        else:
            cells[at] = amplitude
    if not whole:
        return None
    return tuple((x, cells[x]) for x in sorted(cells) if cells[x] != number(0))


def unit(site: int) -> Vector:
    return ((site, ONE),)
