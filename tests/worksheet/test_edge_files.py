"""Edge files: the same columns as inline edges, faults with the file's own lines, and the folder as a fence."""

from __future__ import annotations

import os

import pytest

from derive.formula.text import text
from derive.worksheet import survey
from derive.worksheet.faults import say, say_all


def worksheet(tmp_path, csv: str | bytes | None, name: str = "e.csv", at: str = "0", graph: str = 'hopping = "-g"'):
    if csv is not None:
        place = tmp_path / name
        place.write_bytes(csv if isinstance(csv, bytes) else csv.encode())
    source = (
        'title = "t"\nsymbols = { g = "positive", c = "complex" }\n'
        f'graph.edge_file = "{name}"\ngraph.{graph}\ndetector.at = {at}\nderive.generator = {{}}\n'
    )
    (tmp_path / "w.toml").write_text(source)
    return survey(tmp_path / "w.toml")


def test_numbers(tmp_path):
    sheet = worksheet(tmp_path, "0,1\n\n1, 2 ,-2*g\n2,3,\n")
    space = sheet.taken().setting.space
    assert space.names is None and space.size == 4
    assert {(x, y): text(v) for x, row in enumerate(space.rows) for y, v in row if x < y} == {
        (0, 1): "-g",
        (1, 2): "-2*g",
        (2, 3): "-g",
    }


def test_names_quotes_and_a_byte_order_mark(tmp_path):
    sheet = worksheet(tmp_path, '\ufeff"a,1",b\r\nb,"say ""x""","i*g"\r\n', at='"a,1"')
    assert sheet.taken().setting.space.names == ("a,1", "b", 'say "x"')


FAULTS = [
    ("0,1\n1,2,q\n", "e.csv:2:5:", "the letter q is not declared"),
    ("0,1\n1,2, g + q\n", "e.csv:2:10:", "the letter q is not declared"),
    ("0,1\n1,2,2g\n", "e.csv:2:6:", "2 and g stand side by side"),
    ("0,1\n1\n", "e.csv:2:1:", "this line has 1 columns"),
    ("0,1,g,g\n", "e.csv:1:1:", "this line has 4 columns"),
    ("0,1,binomial(4,2)\n", "e.csv:1:1:", "quote a cell with a comma"),
    ("x,y,H\n0,1,g\n", "e.csv:1:1:", "An edge file has no heading"),
    ("x,y,H\na,b,g\nb,c,g\n", "e.csv:1:1:", "this line looks like a heading"),
    ("From,To\na,b\nb,c\n", "e.csv:1:1:", "put it further down"),
    ("mode,mode2,H\na,b,g\nb,c,g\n", "e.csv:1:12:", "take this line out. If it is an edge: Add"),
    ("0,1\na,2\n", "e.csv:2:1:", "a is a name among numbers"),
    ("a,b\nb,2\nb,c\n", "e.csv:2:3:", "2 is a number among names"),
    ("1,2\n2,3\n", "e.csv:1:1:", "Counted from 1?"),
    ("0,1\n1,2\n2,1\n", "e.csv:3:1:", "for the second time"),
    ("0,1\n1,1\n", "e.csv:2:1:", "joins a site to itself"),
    ("a,root\n", "e.csv:1:3:", "the word for a place"),
    ("0,1.0\n", "e.csv:1:1:", "a number among names"),
    ("", "e.csv:1:1:", "there is no edge in this file"),
    ("\n \n", "e.csv:1:1:", "there is no edge in this file"),
    ('"0,1\n', "e.csv:", "a quote is not closed"),
    ("0,1\n1,2\0\n", "e.csv:2:4:", "a NUL character"),
]


@pytest.mark.parametrize(("csv", "place", "words"), FAULTS)
def test_faults_have_the_files_own_places(tmp_path, csv, place, words):
    told = [say(f) for f in worksheet(tmp_path, csv).faults]
    assert any(t.startswith(place) and words in t for t in told), "\n".join(told)


def test_not_utf8(tmp_path):
    assert "is not UTF-8 text (byte 5)" in worksheet(tmp_path, b"0,1\n\xff,2\n").faults[0].message


def test_missing(tmp_path):
    (tmp_path / "edges.csv").write_text("0,1\n")
    (fault,) = worksheet(tmp_path, None, "edge.csv").faults
    assert (fault.line, fault.column, fault.key) == (3, 19, "graph.edge_file")
    assert "there is no file edge.csv" in fault.message and "Did you mean edges.csv?" in fault.mend


@pytest.mark.parametrize("name", ["../out.csv", "/etc/passwd", "sub/../../out.csv", "link.csv", "linked/x.csv"])
def test_the_folder_is_a_fence(tmp_path, name):
    """Also through links: the file exists, and is refused for where it is."""
    inside = tmp_path / "in"
    inside.mkdir()
    (tmp_path / "out.csv").write_text("0,1\n")
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "x.csv").write_text("0,1\n")
    os.symlink(tmp_path / "out.csv", inside / "link.csv")
    os.symlink(tmp_path / "elsewhere", inside / "linked")
    (fault,) = worksheet(inside, None, name).faults
    assert "outside the worksheet's folder" in fault.message


def test_inside_links_and_subfolders_are_fine(tmp_path):
    (tmp_path / "sub").mkdir()
    (tmp_path / "sub" / "x.csv").write_text("0,1\n")
    os.symlink(tmp_path / "sub" / "x.csv", tmp_path / "l.csv")
    assert worksheet(tmp_path, None, "l.csv").question is not None
    assert worksheet(tmp_path, None, "sub/x.csv").question is not None


@pytest.mark.parametrize("name", [".", "sub", "pipe"])
def test_no_ordinary_file(tmp_path, name):
    (tmp_path / "sub").mkdir()
    os.mkfifo(tmp_path / "pipe")
    (fault,) = worksheet(tmp_path, None, name).faults
    assert "is no file" in fault.message


def test_a_hundred_thousand_sites(tmp_path):
    """A ring of 100,000 sites with 7 different elements."""
    size = 100_000
    lines = [f"{x},{(x + 1) % size},-{1 + x % 7}*g" for x in range(size)]
    sheet = worksheet(tmp_path, "\n".join(lines) + "\n")
    assert sheet.question is not None, say_all(sheet.faults)
    assert sheet.question.setting.space.size == size


def test_too_many_sites(tmp_path):
    lines = "\n".join(f"a{2 * k},a{2 * k + 1}" for k in range(100_001))
    (fault,) = worksheet(tmp_path, lines + "\n").faults
    assert "200,002 sites" in fault.message
