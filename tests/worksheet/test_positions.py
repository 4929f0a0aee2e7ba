"""Places in a TOML text, against Python's own tomllib and by hand counting."""

from __future__ import annotations

import tomllib

from hypothesis import given
from hypothesis import strategies as st

from derive.worksheet.positions import Positions, spot, string_places

SOURCE = '''title = "é" # c
symbols.g = "positive"
x."a.b".c = [1, [2, "s"], # hello
 {y=1, z.w = 2}]
[derive.generator] # more
order = 4
[[graph.singular]]
energy = """
ab\\
   c\\u00e9d"""
[[graph.singular]]
energy = 'x'
[graph.singular.q]
z=1.5
'''


def test_keys_and_values():
    at = Positions(SOURCE)
    assert at.value(("title",)) == (1, 9)
    assert (at.key(("symbols", "g")), at.value(("symbols", "g"))) == ((2, 9), (2, 13))
    assert at.value(("x", "a.b", "c", 1, 1)) == (3, 21)
    assert at.value(("x", "a.b", "c", 2, "z", "w")) == (4, 14)
    assert at.key(("derive", "generator")) == (5, 9)
    assert at.value(("graph", "singular", 1, "energy")) == (12, 10)
    assert at.key(("graph", "singular", 1, "q", "z")) == (14, 1)


def test_characters_inside_strings():
    """The value is "abcéd": a line end that is skipped, an escape, and what follows it."""
    at = Positions(SOURCE)
    value = tomllib.loads(SOURCE)["graph"]["singular"][0]["energy"]
    assert value == "abcéd"
    path = ("graph", "singular", 0, "energy")
    assert [at.value(path, k) for k in range(5)] == [(9, 1), (9, 2), (10, 4), (10, 5), (10, 11)]


def test_what_is_not_written_stands_where_it_should_be():
    at = Positions(SOURCE)
    assert at.value(("derive", "generator", "limit")) == (5, 9)
    assert at.value(("nothing",)) == (1, 1)


def test_columns_count_characters_not_bytes():
    at = Positions('a = "ééé"\n"ß" = { "é" = "x", k = 1 }\n')
    assert at.value(("ß", "k")) == (2, 24)
    assert at.value(("a",), 2) == (1, 8)


@given(st.text(alphabet=st.characters(exclude_characters="\x00\r", exclude_categories=("Cs", "Cc")), max_size=30))
def test_every_character_of_a_basic_string_is_found(value):
    """tomllib says what the string holds; the place of each character must show that character."""
    written = '"' + value.replace("\\", "\\\\").replace('"', '\\"') + '"'
    assert tomllib.loads(f"k = {written}")["k"] == value
    places = string_places(written)
    assert len(places) == len(value) + 1
    for c, at in zip(value, places, strict=False):
        assert written[at] == c or written[at : at + 2] == "\\" + c


@given(st.text(max_size=60), st.integers(0, 60))
def test_spot_counts_lines_and_columns(source, at):
    at = min(at, len(source))
    line, column = spot(source, at)
    before = source[:at]
    assert line == before.count("\n") + 1
    assert column == at - (before.rfind("\n") + 1) + 1
