"""Claims by cases, and claims whose assumptions give a letter its value: each is judged where it is meant to hold.

The exact road computes with letters that may be anything, and what is zero at generic phi need not be zero at phi = 0.
So an equation that fixes a letter is put into the setting before that road sees the claim; the others measure at points
that meet it.  Cases are judged piece by piece:

    "phi = 0"      there alone
    "phi > 1"      a relation that every tested point keeps
    "n = 1"        a counter of the quantity's own: that ask, that level
    "otherwise"    none of the other conditions holds, in every way in which they can all fail

What a road says about the claim is the worst of what it says about the pieces.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import product

from derive.checks.seen import Seen
from derive.errors import FormulaFault, NotCovered, OutsideValidity
from derive.formula.grammar import parse, parse_relations
from derive.formula.text import text
from derive.formula.tree import I_UNIT, TAU, Formula, free_letters, letter, number, walk
from derive.formula.tree import replace as put_in
from derive.numerics.points import decide
from derive.problem.points import bounds_of, holds, rational_value, solve_equation
from derive.problem.quantities import QUANTITIES, Quantity
from derive.problem.setting import Check, Domain, Family, Relation, Row, Setting
from derive.problem.sized import sized
from derive.problem.specialise import at_values
from derive.record.said import VERDICTS, Cases, Claim, Expansion, Finding, Kind, Matrix, Number, PerRoot, Value

OTHERWISE, EXACT = "otherwise", "exact"
COUNTERS = {"ask": "n", "level": "k"}
"""Keys of a quantity that a condition may fix by their letter."""
FIRST_COUNTED = 6
"""Values of n at which a formula in n is compared where conditions on n leave it open."""
MOST_WAYS = 64
OPPOSITE = {"=": "!=", "!=": "=", "<": ">=", ">=": "<", ">": "<=", "<=": ">"}
SENSES = ("exactly", "upper", "lower")

Road = Callable[[Setting, tuple[Claim, ...], Check], Seen]
Relations = tuple[Relation, ...]
Put = dict[str, Formula]
Pairs = tuple[tuple[str, Formula], ...]


@dataclass(frozen=True)
class Piece:
    """A plain claim and its setting; `put` are the letters that were given values in both."""

    setting: Setting
    claim: Claim
    put: Pairs = ()
    where: str = ""


def in_pieces(name: str, road: Road, setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """What the road called `name` sees of all claims, those by pieces put together again."""
    exact = name == EXACT
    apart = [c for c in claims if isinstance(c.value, Cases) or (exact and _equations(setting, c))]
    whole = tuple(c for c in claims if c not in apart)
    seen = road(setting, whole, effort) if whole or not apart else Seen()
    if not apart:
        return seen
    findings, numbers = dict(seen.findings), dict(seen.numbers)
    cut = {c.id: _cut(name, setting, c, findings) for c in apart}
    said = _walked(road, [p for found in cut.values() for p in found], effort)
    for claim in apart:
        mine = [(p, said[p]) for p in cut[claim.id]]
        together = _together(name, [(p, s.findings.get(claim.id)) for p, s in mine])
        if together is not None:
            findings[claim.id] = together
        numbers[claim.id] = tuple(_located(n, p) for p, s in mine for n in s.numbers.get(claim.id, ()))
    return replace(seen, findings=findings, numbers=numbers)


def _equations(setting: Setting, claim: Claim) -> Relations:
    """The equations assumed of a user's claim; a derived one was derived under its own."""
    if claim.origin == "derived":
        return ()
    return tuple(r for r in (*setting.assume, *claim.assume) if r.op == "=")


def _cut(name: str, setting: Setting, claim: Claim, findings: dict[str, Finding]) -> list[Piece]:
    """The claim's pieces; none, and an untested finding, where its conditions are not covered."""
    try:
        both = [(p, _put_in(p)) for p in pieces(setting, claim)]
        found = [put if name == EXACT else p for p, put in both if _can_be_met(put)]
        if not found:
            raise NotCovered("no point meets the assumptions")
        return found
    except NotCovered as reason:
        findings[claim.id] = Finding("untested", name, evidence=str(reason))
        return []


def _can_be_met(piece: Piece) -> bool:
    """Whether no assumption has surely become false: such a piece says nothing."""
    relations = (*piece.setting.assume, *piece.claim.assume)
    return not any(not _letters(r) and holds(r, {}, decide) is False for r in relations)


def pieces(setting: Setting, claim: Claim) -> Iterator[Piece]:
    """The claim as plain claims, each with its condition among what it assumes."""
    if not isinstance(claim.value, Cases):
        yield Piece(setting, claim)
        return
    conditions = [condition_of(words) for words, _ in claim.value.pieces if words != OTHERWISE]
    for words, value in claim.value.pieces:
        for way in _failing(conditions) if words == OTHERWISE else [condition_of(words)]:
            for counted, rest in _counted(replace(claim, value=value), way):
                yield Piece(setting, replace(counted, assume=(*claim.assume, *rest)), (), words)


def condition_of(words: str) -> Relations:
    """A condition as relations that all hold."""
    try:
        return tuple(Relation(a, op, b) for a, op, b in parse_relations(words))
    except FormulaFault as fault:
        raise NotCovered(f'the condition "{words}" is not understood') from fault


def _failing(conditions: Sequence[Relations]) -> Iterator[Relations]:
    """Every way in which no condition holds: one relation of each turned round."""
    ways = 1
    for c in conditions:
        ways *= len(c)
    if ways > MOST_WAYS:
        raise NotCovered('"otherwise" beside so many chains of comparisons')
    for way in product(*conditions):
        yield tuple(Relation(r.left, OPPOSITE[r.op], r.right) for r in way)


# -- counters: n of an ask, k of a level


def _counted(claim: Claim, relations: Relations) -> Iterator[tuple[Claim, Relations]]:
    """(claim at a value of its counter, relations left over); the claim itself where none speaks of the counter."""
    key = QUANTITIES[claim.quantity.name].which if claim.quantity else None
    name = COUNTERS.get(key or "", "")
    about = [r for r in relations if name in free_letters(r.left) | free_letters(r.right)]
    if not about or claim.quantity is None or key is None:
        yield claim, relations
        return
    rest = tuple(r for r in relations if r not in about)
    for n in _counts(name, about, key):
        quantity = Quantity(claim.quantity.name, (*((k, v) for k, v in claim.quantity.keys if k != key), (key, n)))
        yield replace(claim, quantity=quantity, value=value_at(claim.value, {name: number(n)})), rest


def _counts(name: str, about: Sequence[Relation], key: str) -> list[int]:
    """The values of a counter that conditions leave: the one they name, or the first few of a row without an end."""
    named = [rational_value(r.right) for r in about if r.op == "=" and r.left == letter(name)]
    tried = [int(q) for q in named if q is not None and q.denominator == 1] or list(range(1, 2 * FIRST_COUNTED + 1))
    if not named and key != "ask":
        raise NotCovered(f"a condition on {name} names one value here")
    kept = [n for n in tried if all(holds(r, {name: number(n)}, decide) for r in about)]
    if not kept:
        raise NotCovered(f"no {name} was found that meets the conditions on it")
    return kept[:FIRST_COUNTED]


# -- letters that an equation fixes


def placed(setting: Setting, claim: Claim) -> Piece:
    """A claim of the user's with every letter put in that it assumes the value of."""
    return _put_in(Piece(setting, claim))


def at_assumed(setting: Setting) -> tuple[Setting, Pairs]:
    """The setting with every letter put in whose value it assumes, and those values; tau stays."""
    put, solved = _fixed(setting.assume, setting, tau_too=False)
    return (_there(setting, put, solved), tuple(put.items())) if put else (setting, ())


def _put_in(piece: Piece) -> Piece:
    """The claim and its setting with every letter that an equation fixes put in."""
    setting, claim = piece.setting, piece.claim
    tau_too = claim.kind.name in SENSES and setting.interval.length == TAU
    put, solved = _fixed((*setting.assume, *claim.assume), setting, tau_too)
    if not put:
        return piece
    assume = _at(tuple(r for r in claim.assume if r not in solved), put)
    plain = replace(claim, value=value_at(claim.value, put), kind=_kind_at(claim.kind, put), assume=assume)
    return Piece(_there(setting, put, solved), plain, tuple(put.items()), piece.where)


def _there(setting: Setting, put: Put, solved: Sequence[Relation]) -> Setting:
    """The setting with letters put in; their domains stay as relations, the equations that gave them go."""
    domains = setting.domains()
    inside = tuple(r for n, v in put.items() for r in bounds_of(v, domains[n]))
    kept = replace(setting, assume=tuple(r for r in setting.assume if r not in solved))
    return _sized(replace(at_values(kept, put), assume=(*_at(kept.assume, put), *inside)))


def _at(relations: Relations, put: Put) -> Relations:
    return tuple(Relation(put_in(r.left, put), r.op, put_in(r.right, put)) for r in relations)


def _fixed(relations: Sequence[Relation], setting: Setting, tau_too: bool) -> tuple[Put, list[Relation]]:
    """letter -> value, and the equations used up.

    An equation that has tau in it is solved for tau: H does not depend on it.  In a series or a limit tau stays.
    """
    domains = setting.domains()
    put: Put = {}
    solved: list[Relation] = []
    others = frozenset(domains) - {"tau"}
    for r in sorted((r for r in relations if r.op == "="), key=lambda r: "tau" in _letters(r)):
        left, right = put_in(r.left, put), put_in(r.right, put)
        taken = others if "tau" in _letters(r) else frozenset({"tau"})
        found = solve_equation(left, right, {*taken, *put}, domains)
        if found is None or not _may_be_put(*found, tau_too, domains):
            continue
        put = {**{n: put_in(v, dict([found])) for n, v in put.items()}, found[0]: found[1]}
        solved.append(r)
    return put, solved


def _letters(r: Relation) -> frozenset[str]:
    return frozenset(free_letters(r.left) | free_letters(r.right))


def _may_be_put(name: str, value: Formula, tau_too: bool, domains: dict[str, Domain]) -> bool:
    """Whether a letter's value makes sense in place of the letter; if not, the equation stays an assumption."""
    if name == "tau":
        return tau_too
    if name not in domains or not free_letters(value) <= set(domains):
        return False
    if domains[name].is_real and any(node == I_UNIT for node in walk(value)):
        return False
    q = rational_value(value)
    return domains[name].kind != "integer" or (q is not None and q.denominator == 1)


def _sized(setting: Setting) -> Setting:
    """A family without a letter left in its sizes as the graph that it is."""
    space = setting.space
    if not isinstance(space, Family) or any(free_letters(f) for _, f in space.sizes):
        return setting
    try:
        return sized(setting, {})
    except (NotCovered, OutsideValidity):
        return setting


def value_at(value: Value, put: Put) -> Value:
    """A claimed value with letters replaced."""
    if isinstance(value, Formula):
        return put_in(value, put)
    if isinstance(value, Matrix):
        return Matrix(value.size, tuple(_row_at(r, put) for r in value.base),
                      tuple((x, _row_at(r, put)) for x, r in value.patch))
    if isinstance(value, PerRoot):
        return PerRoot(put_in(value.polynomial, put), value.letter, put_in(value.formula, put))
    if isinstance(value, Expansion):
        terms = (value_at(t, put) for t in value.terms)
        return replace(value, terms=tuple(t for t in terms if isinstance(t, (Formula, Matrix))))
    return value


def _row_at(row: Row, put: Put) -> Row:
    return tuple((y, put_in(f, put)) for y, f in row)


def _kind_at(kind: Kind, put: Put) -> Kind:
    fixed, error, within = (None if f is None else put_in(f, put) for f in (kind.fixed, kind.error, kind.within))
    return replace(kind, fixed=fixed, error=error, within=within)


# -- walking the pieces, and one word for all of them


def _walked(road: Road, found: Sequence[Piece], effort: Check) -> dict[Piece, Seen]:
    """Pieces in one setting go together, so that what is measured there is shared; an id stands once in each walk."""
    walks: dict[tuple[Setting, Pairs, int], list[Piece]] = {}
    for piece in found:
        turn = 0
        while any(p.claim.id == piece.claim.id for p in walks.get((piece.setting, piece.put, turn), ())):
            turn += 1
        walks.setdefault((piece.setting, piece.put, turn), []).append(piece)
    said: dict[Piece, Seen] = {}
    for (setting, put, _), mine in walks.items():
        seen = road(setting, tuple(p.claim for p in mine), replace(effort, points=_points(effort, dict(put))))
        said.update((p, seen) for p in mine)
    return said


def _points(effort: Check, put: Put) -> tuple[Pairs, ...]:
    """The user's own points that do not contradict what was put in."""
    return tuple(p for p in effort.points if all(free_letters(put[n]) or put[n] == v for n, v in p if n in put))


def _together(road: str, said: Sequence[tuple[Piece, Finding | None]]) -> Finding | None:
    """One finding for all pieces: the first that refutes, else the worst."""
    for piece, finding in said:
        if finding is not None and finding.verdict == "refuted":
            return _told(piece, finding)
    heard = [(p, f) for p, f in said if f is not None]
    if not heard or (len(heard) < len(said) and road == EXACT):
        return None
    if len(heard) < len(said):
        silent = next(p for p, f in said if f is None)
        return Finding("untested", road, evidence=f"{_where(silent)}this road has nothing to say")
    piece, worst = min(heard, key=lambda pair: VERDICTS.index(pair[1].verdict))
    digits = [f.digits for _, f in heard if f.digits is not None]
    points = [f.points for _, f in heard if f.points is not None]
    said_so = worst.evidence if worst.verdict in ("agrees", "proved") else f"{_where(piece)}{worst.evidence}"
    return replace(worst, digits=min(digits, default=None), points=sum(points) or None, evidence=said_so)


def _where(piece: Piece) -> str:
    return f"{piece.where}: " if piece.where == OTHERWISE else f"where {piece.where}: " if piece.where else ""


def _told(piece: Piece, finding: Finding) -> Finding:
    point = _with_put(finding.point, piece) if finding.point else ()
    return replace(finding, point=point, evidence=f"{_where(piece)}{finding.evidence}")


def _located(found: Number, piece: Piece) -> Number:
    return replace(found, at=_with_put(found.at, piece))


def _with_put(at: tuple[tuple[str, str], ...], piece: Piece) -> tuple[tuple[str, str], ...]:
    """A place with the letters that were put in, those first."""
    known = {n: parse(v) for n, v in at}
    more = tuple((n, text(put_in(v, known))) for n, v in piece.put if n not in known)
    return (*more, *at)
