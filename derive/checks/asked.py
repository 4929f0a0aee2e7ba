"""What a claim about the generator says, order by order: read from the record, whoever made it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import Formula, free_letters, letter, number
from derive.problem.setting import Domain, Row
from derive.record.said import Claim, Expansion, Matrix

Entries = tuple[tuple[int, int, Formula], ...]
Orders = Iterator[tuple[int, Entries, tuple[int, int] | None]]


def formula_of(claim: Claim) -> Formula:
    """The claimed value where it is one formula."""
    if not isinstance(claim.value, Formula):
        raise NotCovered("this quantity is claimed as one formula")
    return claim.value


def entries_of(claim: Claim) -> Entries:
    """The claimed entries where the value is a matrix."""
    if not isinstance(claim.value, Matrix):
        raise NotCovered("this quantity is claimed as a matrix")
    return tuple(claim.value.entries())


def name_of(claim: Claim) -> str:
    """The quantity's name; of the graph-free words, none."""
    return claim.quantity.name if claim.quantity is not None else ""


def is_generator(claim: Claim) -> bool:
    return claim.quantity is not None and claim.quantity.name == "generator"


def claimed_orders(claim: Claim, domains: Mapping[str, Domain]) -> Orders:
    """(order, entries, place): the claimed entries of G_order; `place` if the claim is about one entry only."""
    if claim.quantity is None:
        return
    place = claim.quantity.key("entry")
    single = place if isinstance(place, tuple) else None
    order = claim.quantity.key("order")
    if isinstance(order, int):
        yield order, _entries(claim, single), single
    elif isinstance(claim.value, Expansion):
        for k, term in zip(claim.value.powers, claim.value.terms, strict=True):
            yield k, tuple(term.entries()) if isinstance(term, Matrix) else (), None
    else:
        yield from _in_tau(claim, single, domains)


def highest_order(claim: Claim) -> int:
    """The highest k of the G_k that the claim speaks of."""
    order = claim.quantity.key("order") if claim.quantity is not None else None
    if isinstance(order, int):
        return order
    if isinstance(claim.value, Expansion):
        return max(claim.value.powers, default=0)
    return max((claim.kind.order or 1) - 1, 0)


def _entries(claim: Claim, single: tuple[int, int] | None) -> Entries:
    if isinstance(claim.value, Matrix):
        return tuple(claim.value.entries())
    if isinstance(claim.value, Formula) and single is not None:
        return ((*single, claim.value),)
    raise NotCovered("a generator is claimed as a matrix or by one entry")


def _in_tau(claim: Claim, single: tuple[int, int] | None, domains: Mapping[str, Domain]) -> Orders:
    """Coefficients of tau^0 ... tau^(order-1) of a matrix, or an entry, that is a polynomial in tau."""
    if claim.kind.order is None:
        raise NotCovered("all orders at once are beyond a finite number of coefficients")
    entries = _entries(claim, single)
    orders = claim.kind.order
    split: dict[int, list[tuple[int, int, Formula]]] = {k: [] for k in range(orders)}
    for x, y, f in entries:
        for k, term in tau_coefficients(f, domains).items():
            if k < orders:
                split[k].append((x, y, term))
    for k in range(orders):
        yield k, tuple(split[k]), single


def tau_coefficients(f: Formula, domains: Mapping[str, Domain]) -> dict[int, Formula]:
    """f = sum_k tau^k f_k, f_k free of tau; `NotCovered` where f is no polynomial in tau.
    """
    field = Field.of([f, letter("tau"), number(1)], domains)
    if _hides_tau(field):
        raise NotCovered("tau stands inside a function or under a root")
    x = field.element(f)
    at = field.index["letter:tau"]
    if x.den is not None and x.den.degrees()[at] > 0:
        raise NotCovered("tau stands in a denominator")
    parts: dict[int, dict[tuple[int, ...], object]] = {}
    for monomial, c in x.num.terms():
        bare = list(map(int, monomial))
        k, bare[at] = bare[at], 0
        parts.setdefault(k, {})[tuple(bare)] = c
    return {k: field.formula(Element(field, field.ring.from_dict(p), x.den)) for k, p in parts.items()}


def _hides_tau(field: Field) -> bool:
    """Does a generator other than the letter itself depend on tau?"""
    needs = field.needs
    inside = (*(f for m in (*needs.units, *needs.growths) for f in m), *needs.nested, *needs.free)
    return "tau" in needs.letter_roots or any("tau" in free_letters(f) for f in inside)


def by_row(entries: Iterable[tuple[int, int, Formula]]) -> dict[int, Row]:
    """Entries as rows, columns ascending."""
    rows: dict[int, list[tuple[int, Formula]]] = {}
    for x, y, f in entries:
        rows.setdefault(x, []).append((y, f))
    return {x: tuple(sorted(row, key=lambda e: e[0])) for x, row in rows.items()}
