"""Nothing a file may hold ends in a traceback: every text gives a question or faults with a place.

Common practice, no outside source.  Random bytes, mutilated good worksheets, and random values under known keys.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from derive.worksheet import survey, survey_bytes, understand
from derive.worksheet.faults import say, say_all
from derive.worksheet.keys import CHECK, CLAIM, DETECTOR, GRAPH, INTERVAL, SIZES, START, TOP, TOPICS
from derive.worksheet.told import told

WORKSHEETS = sorted((Path(__file__).parents[2] / "worksheets").glob("*.toml"))
NOWHERE = Path("/nonexistent")


def sound(sheet) -> None:
    """Either a question that can be told in words, or faults that can be said."""
    if sheet.question is None:
        assert sheet.faults
    else:
        assert not sheet.faults
        assert list(told(sheet.question))
    for fault in (*sheet.faults, *sheet.unserved):
        said = say(fault)
        assert fault.message.strip()
        assert "Traceback" not in said and "object at 0x" not in said
    say_all(sheet.faults)


@given(st.binary(max_size=400))
def test_any_bytes(raw):
    sound(survey_bytes(raw, "w.toml", NOWHERE))


@given(st.text(alphabet="[]{}=\"'\\.,#\n \tagx-+^*/()0123456789:_é\x00", max_size=200))
def test_any_text_of_toml_signs(source):
    sound(survey_bytes(source.encode(), "w.toml", NOWHERE))


@given(st.data())
@settings(max_examples=300)
def test_mutilated_worksheets(data):
    source = data.draw(st.sampled_from(WORKSHEETS)).read_text()
    for _ in range(data.draw(st.integers(1, 3))):
        at = data.draw(st.integers(0, len(source)))
        cut = data.draw(st.integers(0, 6))
        put = data.draw(
            st.one_of(st.text(max_size=3), st.sampled_from(['"', "[", "]", "{", "}", "=", "0.5", "i", "^", "-"]))
        )
        source = source[:at] + put + source[at + cut :]
    sound(survey_bytes(source.encode("utf-8", "surrogatepass"), "w.toml", WORKSHEETS[0].parent))


@given(st.data())
@settings(max_examples=200)
def test_lines_of_one_worksheet_in_another(data):
    lines = [line for w in WORKSHEETS for line in w.read_text().splitlines() if line.strip()]
    source = "\n".join(data.draw(st.lists(st.sampled_from(lines), min_size=5, max_size=40)))
    sound(survey_bytes(source.encode(), "w.toml", WORKSHEETS[0].parent))


_formulas = st.one_of(
    st.sampled_from(
        ["g", "-g", "i*g", "1/3", "2*L+1", "sqrt(2)", "1/sqrt(2)", "exp(i*d)", "0", "conj(c)", "g-g", "1/(g-g)"]
    ),
    st.sampled_from(
        ["floor(g)", "infinity", "1/0", "(", "9^9^9", "sum(k from 1 to 3: k)", "O(g)", "centre", "end", "root"]
    ),
    st.text(max_size=8),
)
_values = st.recursive(
    st.one_of(st.integers(-3, 12), st.booleans(), st.floats(), _formulas, st.none(), st.just(10**40)),
    lambda inner: st.one_of(
        st.lists(inner, max_size=4),
        st.dictionaries(
            st.one_of(st.sampled_from(["0", "1", "at", "loop", "phase", "weight", "g"]), st.text(max_size=3)),
            inner,
            max_size=3,
        ),
    ),
    max_leaves=8,
)


def _table(keys):
    return st.dictionaries(st.sampled_from([k.name for k in keys]), _values, max_size=5)


_topics = st.dictionaries(st.sampled_from([*TOPICS, "nothing"]), st.one_of(_values, st.just({})), max_size=2)
_SECTIONS = {
    "title": _values,
    "assume": st.one_of(_values, st.just(["g < d"])),
    "symbols": st.just({"g": "positive", "d": "real", "c": "complex", "L": "integer >= 2"}),
    "graph": st.one_of(
        _table(GRAPH),
        st.just({"family": "chain", "sites": 4, "hopping": "-g"}),
        st.just({"family": "chain", "sites": "L", "hopping": "-g"}),
        st.just({"family": "square lattice", "hopping": "-g"}),
        st.builds(
            lambda a, b: {**a, **b}, _table(GRAPH), st.dictionaries(st.sampled_from(sorted(SIZES)), st.integers(0, 5))
        ),
    ),
    "detector": st.one_of(_table(DETECTOR), st.just({"at": 0}), _values),
    "start": st.one_of(_table(START), _values),
    "interval": _table(INTERVAL),
    "derive": _topics,
    "claim": st.dictionaries(st.sampled_from(["a", "b"]), _table(CLAIM), max_size=1),
    "check": _table(CHECK),
}
assert {k.name for k in TOP} == set(_SECTIONS)


@given(st.fixed_dictionaries({}, optional=_SECTIONS))
@settings(max_examples=400)
def test_any_values_under_known_keys(data):
    sound(understand(data, NOWHERE))


@pytest.mark.parametrize(
    "name", ["", "nothing.toml", "folder", "a\x00b.toml", "x" * 5000, "/dev/null", "/proc/self/mem"]
)
def test_files_that_are_no_worksheet(name, tmp_path):
    (tmp_path / "folder").mkdir()
    sheet = survey(tmp_path / name)
    assert sheet.question is None and len(sheet.faults) == 1
    sound(sheet)
