"""The Python face: a problem, what is derived from it, and what the checks found.

>>> from derive import Problem
>>> p = Problem(graph={"family": "chain", "sites": 9, "hopping": "-g"}, detector={"at": 4}, symbols={"g": "positive"})
>>> d = p.derive("generator", order=3)
>>> d["generator.1"].entries[3, 5]
'-i*g^2/2'

Every keyword is a section of a worksheet and its values are the worksheet's.  `edges` also takes a networkx graph,
whose edges' attribute `hopping` is H_xy, `hamiltonian` and `step` a sympy matrix or a numpy matrix of integers, and a
formula may be a sympy expression.
What cannot be taken raises `BadInput`, whose text names every fault by its key.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from html import escape
from pathlib import Path
from typing import Any

from derive.errors import BadInput, Fault, NotCovered
from derive.formula.text import text
from derive.formula.tree import Formula
from derive.problem.setting import Question, Setting
from derive.record.said import Claim, Derivation, Judged, Number, Step
from derive.worksheet.faults import near, say
from derive.worksheet.incoming import taken
from derive.worksheet.reader import Sheet, survey, understand


class Problem:
    """A measured system, understood.  Keywords are a worksheet's sections: title, assume, symbols, graph, detector,
    start, interval, derive, claim, check."""

    def __init__(self, **sections: Any):
        data = _taken({k: v for k, v in sections.items() if v is not None})
        data.setdefault("title", "A question from Python")
        self._take(understand(data, Path.cwd(), must_ask=False))

    @classmethod
    def read(cls, path: str | Path) -> Problem:
        """The problem a worksheet file states, with everything it asks for and claims."""
        problem = cls.__new__(cls)
        problem._take(survey(path))
        return problem

    def _take(self, sheet: Sheet) -> None:
        if sheet.question is None:
            raise _bad(sheet.faults)
        self.question: Question = sheet.question
        self._unserved, self._uses = sheet.unserved, sheet.uses

    @property
    def setting(self) -> Setting:
        """The measured system as plain data."""
        return self.question.setting

    def derive(self, topic: str, **options: Any) -> Derived:
        """One topic's answer; `options` are the topic's keys in a worksheet."""
        from derive.worksheet.running import derived

        question = self._asking(derive={topic: options}, claim={})
        return Derived(question, derived(question)[0])

    def judge(self, about: str, formula: Any = None, *, name: str = "mine", **keys: Any) -> Verdict:
        """The verdict on a formula of one's own; `keys` are a claim's: which, entry, matrix, holds, assume, source."""
        said = {"about": about, **({} if formula is None else {"formula": formula}), **keys}
        return Checked(self._asking(derive={}, claim={name: said}))[f"claim.{name}"]

    def check(self, digits: int | None = None, jobs: int = 1) -> Checked:
        """Everything asked and claimed in the sections or the worksheet, derived and checked by both roads."""
        self._refuse_unserved(self._unserved)
        return Checked(_with_digits(self.question, digits), jobs)

    def _asking(self, derive: Mapping[str, Any], claim: Mapping[str, Any]) -> Question:
        """This problem with these topics and claims in place of its own."""
        from derive.worksheet.reader import ask

        sheet = ask(self.question, _taken(derive), _taken(claim), self._uses)
        if sheet.question is None:
            raise _bad(sheet.faults)
        self._refuse_unserved(sheet.unserved)
        return sheet.question

    def _refuse_unserved(self, unserved: list[Fault]) -> None:
        if unserved:
            raise NotCovered("\n".join(say(f) for f in unserved))

    def __repr__(self) -> str:
        return "\n".join(self._told())

    def _repr_html_(self) -> str:
        first, *rest = self._told()
        return f"<p>{escape(first)}</p>" + "".join(f"<p>{escape(line)}</p>" for line in rest)

    def _told(self) -> list[str]:
        from derive.worksheet.told import told

        return list(told(self.question))


def _taken(sections: Mapping[str, Any]) -> dict[str, Any]:
    try:
        return dict(taken(sections))
    except BadInput as bad:
        raise _bad(bad.faults) from None


def _with_digits(question: Question, digits: int | None) -> Question:
    if digits is None:
        return question
    if isinstance(digits, bool) or not isinstance(digits, int) or not 10 <= digits <= 1000:
        raise BadInput([Fault(f"digits is {digits!r}.", "It is a whole number from 10 to 1000.", "digits")])
    return replace(question, check=replace(question.check, digits=digits))


def _bad(faults: list[Fault]) -> BadInput:
    """The same faults with what to change in their text, since nobody prints them line by line."""
    return BadInput([replace(f, message=say(f), mend="") for f in faults])


class Entry:
    """One derived or claimed formula: its id, LaTeX, worksheet syntax, numbers."""

    def __init__(self, question: Question, claim: Claim):
        self._question = question
        self.claim = claim

    @property
    def id(self) -> str:
        return self.claim.id

    @property
    def latex(self) -> str:
        """symbol = value, in LaTeX with amsmath."""
        from derive.worksheet.showing import entry_forms

        return entry_forms(self._question, self.claim)[0]

    @property
    def worksheet(self) -> str:
        """The value as a worksheet would say it."""
        from derive.worksheet.showing import entry_forms

        return entry_forms(self._question, self.claim)[1]

    @property
    def formula(self) -> str | None:
        """The formula in worksheet syntax; None for a matrix."""
        said = self._said().get("formula")
        return None if said is None else str(said)

    @property
    def entries(self) -> dict[tuple[int, int], str]:
        """A matrix by its non-zero entries, in worksheet syntax; empty for anything else."""
        rows = self._said().get("matrix")
        return {(int(x), int(y)): str(f) for x, y, f in rows} if isinstance(rows, list) else {}

    def number(self, digits: int | None = None, **at: Any) -> list[str]:
        """Decimal values with their radius at the given letters, one line an entry."""
        from derive.worksheet.showing import entry_numbers

        said = ",".join(f"{name}={_written(value)}" for name, value in at.items())
        return entry_numbers(self._question, self.claim, said, digits)

    def _said(self) -> dict[str, Any]:
        from derive.worksheet.showing import said_of

        return said_of(self._question, self.claim)

    def __repr__(self) -> str:
        return f"{self.id}\n{self.worksheet}"

    def _repr_latex_(self) -> str:
        return f"$\\displaystyle {self.latex}$"

    def _repr_html_(self) -> str:
        from derive.report.context import Context
        from derive.report.emit_mathml import mathml

        box = Context(self._question.setting).claim(self.claim)
        return f'<div title="{escape(self.id)}">{mathml(box)}</div>'


def _written(value: Any) -> str:
    """A number as worksheet text; a decimal that is not text has been rounded and is refused."""
    value = taken(value)
    if isinstance(value, Formula):
        return text(value)
    if isinstance(value, str) and type(value) is str:
        return value
    if isinstance(value, int) and not isinstance(value, bool):
        return str(value)
    raise BadInput([Fault(f"{value!r} is not exact.", 'Give a whole number or text such as "1/50".')])


class Derived:
    """A topic's answer: its steps, and its entries by id."""

    def __init__(self, question: Question, derivation: Derivation):
        self._question = question
        self.derivation = derivation

    @property
    def steps(self) -> tuple[Step, ...]:
        """Reason, lines, what each step earns."""
        return self.derivation.steps

    @property
    def ids(self) -> tuple[str, ...]:
        return tuple(c.id for c in self.derivation.claims)

    def __getitem__(self, entry: str) -> Entry:
        found = next((c for c in self.derivation.claims if c.id == entry), None) or self._measured(entry)
        if found is None:
            hint = near(entry, self.ids) or f"The entries are {', '.join(self.ids)}."
            raise KeyError(f"{entry} is no entry of this answer. {hint}")
        return Entry(self._question, found)

    def _measured(self, entry: str) -> Claim | None:
        """A number that was asked for and for which no formula stands."""
        from derive.worksheet.showing import numbers_asked

        return next((c for c in numbers_asked(self._question) if c.id == entry), None)

    def __iter__(self) -> Iterator[Entry]:
        return (Entry(self._question, c) for c in self.derivation.claims)

    def __len__(self) -> int:
        return len(self.derivation.claims)

    def check(self, digits: int | None = None, jobs: int = 1) -> Checked:
        """Every entry checked by both roads, to this many digits."""
        return Checked(_with_digits(self._question, digits), jobs)

    def __repr__(self) -> str:
        return f"{self.derivation.topic}: {', '.join(self.ids)}"

    def _repr_html_(self) -> str:
        return "".join(entry._repr_html_() for entry in self)


class Verdict:
    """What the roads found about one entry.  It has no truth value: look at `verdict`."""

    def __init__(self, judged: Judged):
        self.judged = judged

    @property
    def verdict(self) -> str:
        """proved, agrees, undecided, untested or refuted."""
        return self.judged.verdict

    @property
    def diagnosis(self) -> str:
        return self.judged.diagnosis

    @property
    def numbers(self) -> tuple[Number, ...]:
        """Decimals with their radius and where they were taken; road "derived": what the formula says there."""
        return self.judged.numbers

    def __bool__(self) -> bool:
        raise TypeError("a verdict is one of five words and has no truth value; compare .verdict with one of them")

    def __repr__(self) -> str:
        from derive.report.prose import verdict_line

        told = f"{self.judged.claim.id}: {verdict_line(self.judged)}"
        return f"{told}\n    {self.diagnosis}" if self.diagnosis else told

    def _repr_html_(self) -> str:
        return "".join(f"<p>{escape(line.strip())}</p>" for line in repr(self).splitlines())


class Checked:
    """A whole answer with its verdicts, by id."""

    def __init__(self, question: Question, jobs: int = 1):
        from derive.worksheet.running import answered

        self.report = answered(question, jobs)
        self._by_id = {j.claim.id: Verdict(j) for j in self.report.judged}

    @property
    def verdict(self) -> str:
        """The worst of all."""
        return self.report.verdict()

    @property
    def ids(self) -> tuple[str, ...]:
        return tuple(self._by_id)

    def __getitem__(self, entry: str) -> Verdict:
        if entry not in self._by_id:
            raise KeyError(f"{entry} is no entry of this answer. {near(entry, self._by_id)}".strip())
        return self._by_id[entry]

    def __iter__(self) -> Iterator[Verdict]:
        return iter(self._by_id.values())

    def __len__(self) -> int:
        return len(self._by_id)

    def __bool__(self) -> bool:
        raise TypeError("a report has verdicts and no truth value; look at .verdict")

    def write(self, folder: str | Path) -> Path:
        """report.html, derivation.tex, ledger.json, figures and data into `folder`, whole or not at all."""
        from derive.worksheet.running import check_folder, put, written

        check_folder(Path(folder))
        put(written(self.report), Path(folder))
        return Path(folder)

    def __repr__(self) -> str:
        return "\n".join(repr(v) for v in self)

    def _repr_html_(self) -> str:
        return "".join(v._repr_html_() for v in self)
