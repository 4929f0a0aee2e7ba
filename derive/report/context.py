"""What every part of the report needs to print a claim: the letters' boxes, domains, site names."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

from derive.errors import FormulaFault
from derive.formula.grammar import parse_relations
from derive.formula.tree import ZERO, Formula, free_letters, letter, number, operator, order, plus, power
from derive.problem.setting import Domain, Finite, Setting, Unitary
from derive.record.said import Cases, Claim, Expansion, Line, Matrix, Number, PerRoot, Table
from derive.report.boxes import Box, Chain, Fence, Link, Pieces, Script, Sign, Space, Words, row, width
from derive.report.breaking import broken
from derive.report.layout import Layout
from derive.report.letters import names_of, snippet
from derive.report.matrices import View, is_by_value, matrix_box, raised, remark, view
from derive.report.parts import spread
from derive.report.symbols import symbol

WIDEST = 28.0  # em behind the relation sign, on the page and on paper
LONGEST_LINE = 30.0  # em: a line that is broken as well as can be and longer than this has parts named

RELATIONS = {
    "=": "=", "<=": "≤", ">=": "≥", "<": "<", ">": ">", "!=": "≠", "~": "∼", ":=": "≔", "->": "→", "~=": "≈",
}


@dataclass(frozen=True)
class Context:
    """The setting, as far as printing needs it."""

    setting: Setting
    kept: dict[int, tuple[object, View]] = field(default_factory=dict, compare=False, repr=False)
    laid_out: dict[Formula, tuple[Box, tuple[Link, ...]]] = field(default_factory=dict, compare=False, repr=False)
    """Formulas that stand in several places of a report: each is laid out once."""

    @cached_property
    def layout(self) -> Layout:
        return Layout(names_of(self.setting.letters))

    @cached_property
    def domains(self) -> dict[str, Domain]:
        return self.setting.domains()

    @property
    def size(self) -> int:
        space = self.setting.space
        return space.size if isinstance(space, (Finite, Unitary)) else 0

    def site(self, number: int) -> str:
        """A site's name, or its number where sites have none."""
        space = self.setting.space
        if isinstance(space, (Finite, Unitary)) and 0 <= number < space.size:
            return space.name(number)
        return str(number)

    def given(self) -> tuple[Formula, Matrix] | None:
        """H, or the step U, as a matrix; none where the size is a letter or infinite."""
        space = self.setting.space
        if not isinstance(space, (Finite, Unitary)):
            return None
        return operator("H" if isinstance(space, Finite) else "U"), Matrix(space.size, space.rows)

    def formula(self, f: Formula) -> Box:
        return self.layout.box(f)

    def matrix(self, value: Matrix | Expansion, name: Box) -> Chain:
        return matrix_box(self.view(value), name, self.layout, self.site if self._is_on_sites(value) else str)

    def _is_on_sites(self, value: Matrix | Expansion) -> bool:
        """Small matrices, between a detector's vectors or the sites of a network beside it, go by number."""
        parts = value.terms if isinstance(value, Expansion) else (value,)
        return all(part.size == self.size for part in parts if isinstance(part, Matrix))

    def view(self, value: Matrix | Expansion) -> View:
        """The matrix looked at: once, however often it is printed.  `kept` holds the matrix, so its id is its own."""
        if id(value) not in self.kept:
            self.kept[id(value)] = (value, view(value, self.domains))
        return self.kept[id(value)][1]

    def remark(self, value: Matrix, chain: Chain, cut: bool = False) -> str:
        """"Hermitian; every entry not named is 0", where the matrix is printed by its entries, `cut` or all."""
        return remark(self.view(value).found, is_by_value(chain), cut)

    def line(self, line: Line) -> Chain:
        """One line of a derivation; a matrix on its right is printed by entries."""
        left = self.layout.as_written(line.left)
        relation = RELATIONS.get(line.relation, line.relation)
        if isinstance(line.right, Matrix):
            return self.matrix(line.right, left)
        if line.right is None:
            return Chain((Link(None, "", left),))
        return self.equation(left, relation, line.right)

    def equation(self, left: Box | None, relation: str, f: Formula) -> Chain:
        """left = f; parts of an f that no line break can make fit are named and follow below."""
        if f not in self.laid_out:
            found = spread(f, self._fits, set(self.domains) | free_letters(f))
            parts = tuple(Link(self.formula(found.left(n)), "=", self.formula(p)) for n, p in found.parts)
            self.laid_out[f] = (self.formula(found.formula), parts)
        whole, parts = self.laid_out[f]
        return Chain((Link(left, relation, whole), *parts))

    def _fits(self, f: Formula) -> bool:
        whole = Chain((Link(None, "=", self.formula(f)),))
        return all(width(link.right) <= LONGEST_LINE for link in broken(whole, WIDEST, False).links)

    def claim(self, claim: Claim) -> Chain:
        """symbol = value, with what is left out written at the end."""
        name = symbol(claim.quantity) if claim.quantity else self.universal_name(claim)
        value = claim.value
        if isinstance(value, Matrix):
            return self.matrix(value, name)
        if isinstance(value, Expansion) and any(isinstance(t, Matrix) for t in value.terms):
            return Chain((Link(name, "=", self._truncated(value)),))
        if isinstance(value, Formula):
            return self.equation(name, self._relation(claim), value)
        if isinstance(value, Expansion):
            return self.equation(name, self._relation(claim), expansion_formula(value, with_order=True))
        if isinstance(value, PerRoot):
            return self._per_root(name, self._relation(claim), value)
        return Chain((Link(name, self._relation(claim), self.value(claim)),))

    def universal_name(self, claim: Claim) -> Box:
        """generator.universal.3 -> G_3."""
        stem, _, last = claim.id.rpartition(".")
        if claim.topic == "generator" and last.isdigit():
            return snippet(f"G_{{{last}}}") or Words(claim.id)
        return Words(claim.id)

    def _relation(self, claim: Claim) -> str:
        return {"upper": "≤", "lower": "≥", "limit": "∼"}.get(claim.kind.name, "=")

    def value(self, claim: Claim) -> Box:
        """A scalar value as a box."""
        value = claim.value
        if isinstance(value, Formula):
            return self.formula(value)
        if isinstance(value, Expansion):
            return self.formula(expansion_formula(value, with_order=True))
        if isinstance(value, Cases):
            return Pieces(tuple((self.formula(f), self.condition(when)) for when, f in value.pieces))
        if isinstance(value, Table):
            return Pieces(tuple((Sign(q, "number"), self.condition(f"n = {n}")) for n, q in value.rows))
        if isinstance(value, Number):
            return decimal(value.value)
        if isinstance(value, PerRoot):
            return row(self.formula(value.formula), Sign(",", "punctuation"), Space("quad"), self._root(value))
        return Words("a matrix")

    def condition(self, phrase: str) -> Box:
        """A condition: comparisons as mathematics, anything else as words."""
        try:
            chain = parse_relations(phrase)
        except FormulaFault:
            return Words(phrase)
        out: list[Box] = [self.formula(chain[0][0])]
        for _, op, right in chain:
            out += [Sign(RELATIONS.get(op, op), "relation"), self.formula(right)]
        return row(*out)

    def _per_root(self, left: Box, relation: str, value: PerRoot) -> Chain:
        """left = formula, E: polynomial = 0; a long formula in named parts, with the polynomial on its own line."""
        if value.formula == letter(value.letter):  # the roots themselves
            return Chain((Link(self.formula(value.polynomial), "=", Sign("0", "number")),))
        first, *parts = self.equation(left, relation, value.formula).links
        root = self._root(value)
        together = row(first.right, Sign(",", "punctuation"), Space("quad"), root)
        if not parts and width(together) <= LONGEST_LINE:
            return Chain((Link(left, relation, together),))
        return Chain((first, *parts, Link(None, "", root)))

    def _root(self, value: PerRoot) -> Box:
        """E: polynomial = 0."""
        return row(self.formula(letter(value.letter)), Sign(":", "relation"), self.formula(value.polynomial),
                   Sign("=", "relation"), Sign("0", "number"))

    def _truncated(self, value: Expansion) -> Box:
        """G_0 + tau G_1 + ... + O(tau^(K+1)): the coefficients stand above in full."""
        out: list[Box] = []
        for n, exponent in enumerate(value.powers):
            coefficient = snippet(f"G_{{{exponent}}}") or Words("G")
            step = self._power(value.letter, exponent)
            out.extend(([Sign("+", "binary")] if n else []) + ([step] if step else []) + [coefficient])
        tail = self._power(value.letter, value.remainder) or Sign("1", "number")
        return row(*out, Sign("+", "binary"), Sign("O", "letter"), Fence("(", tail, ")"))

    def _power(self, name: str, exponent: int) -> Box | None:
        return self.formula(power(letter(name), number(exponent))) if exponent > 1 else self._first(name, exponent)

    def _first(self, name: str, exponent: int) -> Box | None:
        return self.formula(letter(name)) if exponent else None


def decimal(value: str) -> Box:
    """1.5e-7 as 1.5 times a power of ten."""
    mantissa, mark, exponent = value.partition("e")
    if not mark:
        return _signed(mantissa)
    return row(_signed(mantissa), Sign("×", "binary"), Script(Sign("10", "number"), sup=_signed(exponent)))


def _signed(digits: str) -> Box:
    plain = Sign(digits.lstrip("-"), "number")
    return row(Sign("−", "prefix"), plain) if digits.startswith("-") else plain


def expansion_formula(value: Expansion, with_order: bool = False) -> Formula:
    """The truncated series as one formula, ascending; with O(...) at the end if asked."""
    terms = [
        raised(t, value.letter, k)
        for k, t in zip(value.powers, value.terms, strict=True)
        if isinstance(t, Formula) and t != ZERO
    ]
    if with_order:
        terms.append(order(power(letter(value.letter), number(value.remainder))))
    return plus(*terms)
