"""ledger.json: keys, verdicts, exact numbers, the same bytes twice; every formula in it reads back."""

from __future__ import annotations

import json

import pytest

from derive.formula.grammar import parse
from derive.formula.text import text
from derive.problem.quantities import Quantity
from derive.problem.setting import Finite, Question, Shape
from derive.record.said import Claim, Expansion, Kind, Matrix, Report
from derive.report.context import Context
from derive.report.ledger import ledger

from . import gallery
from .sample import chain, demo, every_verdict, proved, setting


def no_float(text: str) -> None:
    raise AssertionError(f"{text} is a floating point number")


def written(report: Report) -> bytes:
    return ledger(report, Context(report.question.setting))


def read(report: Report) -> dict:
    return json.loads(written(report), parse_float=no_float)


def test_keys_of_an_entry() -> None:
    data = read(demo())
    assert list(data) == ["watchpot", "title", "symbols", "seed", "verdict", "entries", "notes"]
    assert data["symbols"] == {"g": "positive", "Delta": "real"} and data["verdict"] == "proved"
    entry = next(e for e in data["entries"] if e["id"] == "generator.2")
    assert list(entry) == [
        "id", "topic", "quantity", "key", "kind", "assume", "formula", "matrix", "latex", "valid_for", "remainder",
        "source", "verdict", "numbers", "findings",
    ]
    assert entry["key"] == {"which": 2} and entry["kind"] == "exactly" and entry["formula"] is None
    assert [3, 5, "-Delta*g^2/6"] in entry["matrix"]
    assert entry["findings"][1] == {"verdict": "agrees", "road": "coefficient", "digits": 41, "points": 4}


def test_truncated_is_one_matrix_in_tau() -> None:
    entry = next(e for e in read(demo())["entries"] if e["id"] == "generator.truncated")
    assert entry["remainder"] == "O(tau^3)" and entry["kind"] == "up to O(tau^3)" and entry["key"] == {}
    both = next(f for x, y, f in entry["matrix"] if (x, y) == (3, 5))
    assert both == "(-1/2)*i*g^2*tau - Delta*g^2*tau^2/6" or both == "-i*g^2*tau/2 - Delta*g^2*tau^2/6"


def test_words_are_listed_letter_by_letter() -> None:
    entry = next(e for e in read(demo())["entries"] if e["id"] == "generator.universal.2")
    assert entry["quantity"] is None and entry["formula"] is None and "matrix" not in entry
    assert entry["latex"] == r"\frac{1}{12}(AB_0 + B_0A) - \frac{1}{6}B_1"
    assert sorted(entry["words"]) == [["-1/6", "B_1"], ["1/12", "A B_0"], ["1/12", "B_0 A"]]


def test_worst_verdict_and_diagnosis() -> None:
    data = read(every_verdict())
    assert data["verdict"] == "refuted"
    refuted = next(e for e in data["entries"] if e["id"] == "claim.refuted-one")
    assert refuted["diagnosis"] and refuted["findings"][0]["point"] == {"g": "1", "Delta": "1/3", "tau": "1/50"}
    assert refuted["key"] == {"which": 1, "entry": [3, 5]}


def test_other_shapes_of_values() -> None:
    entries = {e["id"]: e for e in read(gallery.report())["entries"]}
    assert entries["levels.1.energy"]["cases"][0] == {"if": "Delta > 0", "formula": "g^2/Delta"}
    assert entries["levels.k.rate"]["per_root"]["letter"] == "E" and entries["levels.k.rate"]["key"] == {"which": "k"}


@pytest.mark.parametrize("report", [demo(), every_verdict(), gallery.report()], ids=["demo", "verdicts", "gallery"])
def test_every_formula_reads_back(report: Report) -> None:
    found = 0
    for entry in read(report)["entries"]:
        formulas = [entry["formula"]] if entry["formula"] else []
        formulas += [f for _, _, f in entry.get("matrix", [])]
        formulas += [piece["formula"] for piece in entry.get("cases", [])]
        for source in formulas:
            assert text(parse(source)) == source
            found += 1
    assert found > 3


def test_same_bytes() -> None:
    assert written(every_verdict()) == written(every_verdict())


def large(size: int) -> Report:
    graph = chain(size)
    free = Matrix(size, graph.rows, ((size // 2, ()),))
    series = Expansion("tau", (0,), (free,), 1)
    claims = (
        Claim("generator.0", "generator", Quantity("generator", (("order", 0),)), free),
        Claim("generator.truncated", "generator", Quantity("generator"), series, Kind("order", "up to O(tau)", 1)),
    )
    here = setting(space=Finite(graph.rows, Shape("chain")))
    return Report(Question(here), (), tuple(proved(c) for c in claims), version="0.1.0")


def test_a_large_graph_costs_its_entries_and_is_folded() -> None:
    """The entries are all there; the LaTeX does not grow with the graph."""
    entries = []
    for size in (2_000, 20_000):
        entries.append(json.loads(written(large(size)))["entries"][0])
        assert len(entries[-1]["matrix"]) == 2 * (size - 1) - 4 + 2
    assert len(entries[1]["latex"]) < 500
