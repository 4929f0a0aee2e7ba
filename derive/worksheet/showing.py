"""One entry of a question's answer by itself: LaTeX, worksheet syntax, or a number with its digits."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from typing import Any, TypeVar

from derive.errors import BadInput, Fault, FormulaFault, NeedsPrecision, OutsideValidity
from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import Formula, free_letters
from derive.problem.setting import Domain, Question
from derive.record.said import Claim, Number
from derive.worksheet.faults import near
from derive.worksheet.letters import lies_outside

T = TypeVar("T")
TOO_FINE = 4  # times the digits asked for, until a number is given up


def entries(question: Question) -> tuple[Claim, ...]:
    """All derived entries, topic by topic, then the user's own claims."""
    from derive.record.own import own_claim
    from derive.worksheet.running import derived

    found = [c for derivation in derived(question) for c in derivation.claims]
    return (*found, *(own_claim(own, question.setting) for own in question.claims))


def find_entry(question: Question, entry: str) -> Claim:
    """The derived or claimed entry of that id.  Nothing is checked."""
    claims = {c.id: c for c in entries(question)}
    if entry not in claims:
        claims |= {c.id: c for c in numbers_asked(question)}
    if entry not in claims:
        mend = f"{near(entry, claims)} The entries are {', '.join(claims)}.".strip()
        raise BadInput([Fault(f"{entry} is no entry of this worksheet.", mend)])
    return claims[entry]


def numbers_asked(question: Question) -> tuple[Claim, ...]:
    """Entries that are numbers at asks: these are measured, where a topic wants any."""
    if not any(w.option("asks") or w.option("times") for w in question.wishes):
        return ()
    from derive.pipeline import numbers_of

    return numbers_of(question)


def entry_forms(question: Question, claim: Claim) -> tuple[str, str]:
    """(LaTeX, worksheet syntax)."""
    from derive.report.context import Context
    from derive.report.emit_latex import latex

    return latex(Context(question.setting).claim(claim)), worksheet_syntax(said_of(question, claim))


def entry_remark(question: Question, claim: Claim) -> str:
    """What the LaTeX of a matrix leaves unsaid: Hermitian; every entry not named is 0."""
    from derive.report.blocks import listed_remark
    from derive.report.context import Context

    return listed_remark(claim, Context(question.setting))


def said_of(question: Question, claim: Claim) -> dict[str, Any]:
    """The value as the ledger says it: formula, or matrix, cases, per_root, number."""
    from derive.report.context import Context
    from derive.report.ledger import value

    return value(claim, Context(question.setting))


def worksheet_syntax(said: dict[str, Any]) -> str:
    """A ledger's value as the lines of a claim."""
    if said.get("formula") is not None:
        return f'formula = "{said["formula"]}"'
    matrix = said.get("matrix")
    if isinstance(matrix, list):
        rows = [f'    [{x}, {y}, "{f}"],' for x, y, f in matrix]
        return "\n".join(["matrix = [", *rows, "]"]) if rows else "matrix = []"
    if said.get("values"):
        return f'values = {json.dumps(said["values"])}'
    cases = said.get("cases")
    if isinstance(cases, list):
        rows = [f'    {{ if = "{c["if"]}", formula = "{c["formula"]}" }},' for c in cases]
        return "\n".join(["cases = [", *rows, "]"])
    root = said.get("per_root")
    if isinstance(root, dict):
        return f"per_root = {{ {', '.join(f'{name} = {json.dumps(value)}' for name, value in root.items())} }}"
    return "this entry is printed and has no worksheet syntax."


def entry_numbers(question: Question, claim: Claim, at: str, digits: int | None) -> list[str]:
    """The entry's value, or those of all its non-zero entries, at a point."""
    point = read_point(at)
    said = said_of(question, claim)
    known = {**question.setting.domains(), **_brought(said, question)}
    for name in point:
        if name not in known:
            mend = f"{near(name, known)} The letters are {', '.join(known)}.".strip()
            raise BadInput([Fault(f"--at: {name} is no letter of this worksheet.", mend)])
        if lies_outside(point[name], known[name]):
            raise BadInput([Fault(f"--at: {text(point[name])} is no value of {name}, which is {known[name].text}.")])
    wanted = digits or question.check.digits
    matrix = said.get("matrix")
    if isinstance(matrix, list):
        return [f"[{x}, {y}]  {number_at(parse(f), point, wanted)}" for x, y, f in matrix] or ["0"]
    root = said.get("per_root")
    if isinstance(root, dict):
        return _at_roots(root, point, wanted)
    if said.get("formula") is None:
        return [_certified(question, claim, point, wanted)]
    return [number_at(parse(str(said["formula"])), point, wanted)]


def _brought(said: dict[str, Any], question: Question) -> dict[str, Domain]:
    """Letters that an entry's formula brings along: n, t, z, k and the like; any number may be put for them."""
    formulas = [f for _, _, f in said.get("matrix") or []] + [said["formula"]] * (said.get("formula") is not None)
    free = {name for f in formulas for name in free_letters(parse(str(f)))}
    if isinstance(root := said.get("per_root"), dict):
        free |= free_letters(parse(root["polynomial"])) | free_letters(parse(root["formula"]))
        free.discard(root["letter"])
    return dict.fromkeys(sorted(free - set(question.setting.domains())), _ANY)


_ANY = Domain("complex", "complex")


def _certified(question: Question, claim: Claim, point: dict[str, Formula], digits: int) -> str:
    """The number of an entry whose derivation states an equation: a road finds it."""
    from derive.pipeline import certified_value

    given = {name for w in question.wishes if w.topic == claim.topic for name, _ in w.set}
    missing = [x.name for x in question.setting.letters if x.name not in point and x.name not in given]
    if missing:
        raise BadInput([Fault(f"--at gives no value for {', '.join(missing)}.", f"Add  {missing[0]}=1.")])
    value = certified_value(question, claim.id, tuple(point.items()), digits)
    if isinstance(value, Number):
        return _with((value.value, value.radius))
    if isinstance(value, Formula):
        return text(value)
    raise BadInput([Fault(f"{claim.id} has no value at a point.", "Show it without --at.")])


def _at_roots(root: dict[str, str], point: dict[str, Formula], digits: int) -> list[str]:
    """The formula at every root of the polynomial, a line each."""
    from derive.numerics.evaluate import Values, enclose
    from derive.numerics.precision import bits_for, retry
    from derive.numerics.roots import enclose_roots

    name, polynomial, f = root["letter"], parse(root["polynomial"]), parse(root["formula"])
    _check_given(free_letters(polynomial) | free_letters(f) - {name}, point, name)

    def compute(bits: int) -> list[str]:
        values = Values.at(point)
        roots = enclose_roots(polynomial, name, values)
        return [_both_parts(_narrow(enclose(f, values.with_letter(name, x)), digits), digits) for x in roots]

    return _bounded(lambda: retry(compute, bits_for(digits, 32), bits_for(TOO_FINE * digits, 200)), digits)


def read_point(at: str) -> dict[str, Formula]:
    """g=1,tau=1/50 as values; commas inside parentheses do not split."""
    point: dict[str, Formula] = {}
    for part in re.split(r",(?![^(]*\))", at):
        name, sign, written = part.partition("=")
        name = name.strip()
        if not sign or not name:
            raise BadInput([Fault(f"--at: {part.strip()!r} gives no letter a value.", "Write  --at g=1,tau=1/50.")])
        try:
            value = parse(written.strip())
        except FormulaFault as fault:
            raise BadInput([Fault(f"--at: {name}: {fault.message}", fault.mend)]) from None
        if free_letters(value):
            raise BadInput([Fault(f"--at: {text(value)} is no number.", "Give each letter a number.")])
        if name in point:
            raise BadInput([Fault(f"--at: {name} stands there twice.", "Keep one of the two.")])
        point[name] = value
    return point


def number_at(f: Formula, point: dict[str, Formula], digits: int) -> str:
    """A decimal with its radius; real and imaginary part where it is not real."""
    _check_given(free_letters(f), point)
    from derive.numerics.evaluate import Values, enclose
    from derive.numerics.precision import bits_for, retry

    def compute(bits: int) -> str:
        return _both_parts(_narrow(enclose(f, Values.at(point)), digits), digits)

    return _bounded(lambda: retry(compute, bits_for(digits, 32), bits_for(TOO_FINE * digits, 200)), digits)


def _check_given(letters: set[str], point: dict[str, Formula], bound: str = "") -> None:
    missing = sorted(letters - set(point) - {bound})
    if missing:
        raise BadInput([Fault(f"--at gives no value for {', '.join(missing)}.", f"Add  {missing[0]}=1.")])


def _narrow(ball: Any, digits: int) -> Any:
    """The ball, or `NeedsPrecision` where it holds fewer digits."""
    from derive.numerics.precision import bits_for

    if ball.rel_accuracy_bits() < bits_for(digits, 0) and not ball.is_exact():
        raise NeedsPrecision("too few digits")
    return ball


def _bounded(compute: Callable[[], T], digits: int) -> T:
    """What is computed, or why there is no such number."""
    try:
        return compute()
    except NeedsPrecision:
        raise BadInput([Fault(f"this value is not bounded to {digits} digits there.", "Move the point.")]) from None
    except OutsideValidity as fault:
        raise BadInput([Fault(f"this formula has no value there: {fault}.", "Move the point.")]) from None


def _both_parts(ball: Any, digits: int) -> str:
    """A complex ball in words; a part that is not told from 0 is left out."""
    from derive.numerics.decimals import with_radius

    real, imag = with_radius(ball.real, digits), with_radius(ball.imag, digits)
    if ball.imag.contains(0):
        return _with(real)
    said = f"imaginary part {_with(imag)}"
    return said if ball.real.contains(0) else f"real part {_with(real)}, {said}"


def _with(part: tuple[str, str]) -> str:
    value, radius = part
    return value if radius == "0" else f"{value} +- {radius}"
