"""What a worksheet says and what is understood: every section, short forms, sites by name, defaults.

The expected values are the language's own definition, written out by hand.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.formula.grammar import parse
from derive.formula.text import text
from derive.formula.tree import ONE
from derive.problem.setting import Family, Finite, Lattice, Unitary
from derive.worksheet import read, served, survey_bytes
from derive.worksheet.faults import say_all

WORKSHEETS = Path(__file__).parents[2] / "worksheets"


@pytest.fixture
def only_generator(monkeypatch):
    """As if nothing but the generator were served: these tests are about the refusal, not about the list."""
    monkeypatch.setattr(served, "TOPICS", {"generator": ("set", "mixture")})
    monkeypatch.setattr(served, "QUANTITIES", ("generator",))


def sheet(source: str, folder: Path = Path("/nonexistent")):
    found = survey_bytes(source.encode(), "w.toml", folder)
    assert found.question is not None, say_all(found.faults)
    return found


def question(source: str, folder: Path = Path("/nonexistent")):
    return sheet(source, folder).question


def small(graph: str, rest: str = "detector.at = 0", letters: str = "") -> str:
    """Line by line: top-level keys come first, sections after."""
    symbols = f'symbols = {{ g = "positive", d = "real", c = "complex", phi = "real", L = "integer >= 2"{letters} }}'
    return f'title = "t"\n{symbols}\n{rest}\nderive.generator = {{}}\n[graph]\n{graph}\n'


def matrix(space) -> dict[tuple[int, int], str]:
    return {(x, y): text(v) for x, row in enumerate(space.rows) for y, v in row}


@pytest.mark.parametrize("path", sorted(WORKSHEETS.glob("*.toml")), ids=lambda p: p.stem)
def test_the_worksheets_here_are_read(path):
    assert read(path).name == path.stem


LONG = """
title = "t"
[symbols]
g = "positive"
[graph]
family = "ring"
sites = 6
hopping = "-g"
[detector]
at = 0
[start]
at = 3
[derive.generator]
order = 2
"""
SHORT = """
title = "t"
symbols.g = "positive"
graph = { family = "ring", sites = 6, hopping = "-g" }
detector.at = 0
start.at = 3
derive.generator.order = 2
"""


def test_long_and_short_forms_say_the_same():
    assert question(LONG) == question(SHORT)


def test_defaults():
    q = question(small('family = "chain"\nsites = 3\nhopping = 1'))
    assert dict(q.wishes[0].options) == {"order": 3}
    assert (q.check.digits, q.check.samples, q.check.seed, q.check.points) == (30, 4, 1, ())
    assert text(q.setting.interval.length) == "tau"
    assert q.setting.interval.law == "fixed"
    assert q.setting.start is None
    assert q.setting.detectors[0].efficiency == ONE


def test_defaults_of_the_other_topics(only_generator):
    topics = {
        "levels": {"order": 3},
        "survival": {"order": 1},
        "asymptotics": {"order": 1},
        "renewal": {"terms": 4},
        "moments": {"highest": 2},
        "absorber": {"cascade": 2},
        "classical": {"walk": "continuous"},
        "validity": {"order": 3, "tolerance": None, "time": None},
        "detection": {"dark_basis": False},
        "exceptional": {"window": None},
    }
    for topic, options in topics.items():
        source = small('family = "chain"\nsites = 3\nhopping = 1', "detector.at = 0\nstart.at = 1")
        found = sheet(source.replace("derive.generator", f"derive.{topic}"))
        assert options.items() <= dict(found.question.wishes[0].options).items()
        assert [f.key for f in found.unserved] == [f"derive.{topic}"]


def test_absorber_takes_no_order():
    source = small('family = "chain"\nsites = 3\nhopping = 1').replace(
        "derive.generator = {}", "derive.absorber.order = 2"
    )
    faults = survey_bytes(source.encode(), "w.toml", Path(".")).faults
    assert [f.message for f in faults] == ["absorber has no key order."]


def test_the_order_limit_can_be_raised():
    source = small('family = "chain"\nsites = 3\nhopping = 1').replace(
        "generator = {}", "generator = { order = 30, limit = 30 }"
    )
    assert dict(question(source).wishes[0].options) == {"order": 30}


def test_numbers_are_exact():
    q = question(small('family = "chain"\nsites = 3\nhopping = "0.02"'))
    assert matrix(q.setting.space)[0, 1] == "1/50"


@pytest.mark.parametrize("written", ["-3", "0", "1/3", "-7/21", "0.125", "-0.50", "10/4", "007", "1/010"])
def test_plain_numbers_read_as_the_grammar_reads_them(written):
    """The short way past the grammar must not differ from it."""
    q = question(small(f'family = "chain"\nsites = 2\nhopping = 1\nenergies = {{ 0 = "{written}" }}'))
    found = dict(q.setting.space.rows[0]).get(0, parse("0"))
    assert found == parse(written)


def test_a_formula_may_take_several_lines():
    q = question(small('family = "chain"\nsites = 2\nhopping = """\ng\n + d"""'))
    assert matrix(q.setting.space)[0, 1] == "g + d"


def test_bonds_energies_and_the_other_triangle():
    q = question(
        small(
            'family = "chain"\nsites = 4\nhopping = "c"\nenergies = { 0 = "d", centre = 1 }'.replace("centre", "1")
            + '\nbonds = [[2, 1, "i*g"]]'
        )
    )
    assert matrix(q.setting.space) == {
        (0, 0): "d",
        (0, 1): "c",
        (1, 0): "conj(c)",
        (1, 1): "1",
        (1, 2): "-i*g",
        (2, 1): "i*g",
        (2, 3): "c",
        (3, 2): "conj(c)",
    }


def test_a_bond_of_zero_cuts():
    q = question(small('family = "chain"\nsites = 3\nhopping = "g"\nbonds = [[0, 1, 0]]'))
    assert matrix(q.setting.space) == {(1, 2): "g", (2, 1): "g"}


def test_flux_of_a_ring_sits_on_its_closing_edge():
    q = question(small('family = "ring"\nsites = 4\nhopping = "-g"\nflux = "phi"'))
    assert q.setting.space.gauge == ((3, 0, parse("phi")),)
    assert matrix(q.setting.space)[3, 0] == "-g*exp(i*phi)"
    assert matrix(q.setting.space)[0, 3] == "-g*exp(-i*phi)"


def test_names_are_numbered_by_first_appearance():
    q = question(
        small('edges = [["b", "a"], ["a", "c", "2*g"]]\nhopping = "-g"\nenergies = { c = 1 }', 'detector.at = "c"')
    )
    assert q.setting.space.names == ("b", "a", "c")
    assert q.setting.detectors[0].vectors == (((2, ONE),),)
    assert matrix(q.setting.space)[1, 2] == "2*g"
    assert (
        question(small('edges = [["b", "a"]]\nhopping = 1', "detector.at = 1")).setting.detectors[0].vectors[0][0][0]
        == 1
    )


def test_names_with_dots_and_commas():
    q = question(
        small('edges = [["a.1", "b,2"]]\nhopping = 1\nenergies = { "b,2" = 3, "a.1" = 4 }', 'detector.at = "b,2"')
    )
    assert matrix(q.setting.space)[1, 1] == "3"


EDGE_FAULTS = [
    ('[[0, 1], [1, "a"]]', "(1, 1)", "a is a name among numbers"),
    ('[["a", "b"], ["b", 1]]', "(1, 1)", "1 is a number among names"),
    ("[[1, 2], [2, 3]]", "(0, 0)", "Counted from 1? Write names in quotes"),
    ("[[0, 1], [1, 3]]", "(1, 1)", "no edge has site 2"),
    ("[[0, 1], [-1, 1]]", "(1, 0)", "sites are counted from 0"),
    ('[["1", "2"]]', "(0, 0)", "it is a number in quotes"),
    ('[["a", "centre"]]', "(0, 1)", "the word for a place"),
    ('[["a", "detector"]]', "(0, 1)", "the word for a place"),
    ('[["a", " b"]]', "(0, 1)", "a blank"),
    ('[["a", ""]]', "(0, 1)", "empty"),
    ("[[0, 0], [0, 1]]", "(0,)", "joins a site to itself"),
    ("[[0, 1], [1, 0]]", "(1,)", "for the second time"),
    ("[[0, 1.0]]", "(0, 1)", "1.0 is no site"),
    ("[[0, true]]", "(0, 1)", "true is no site"),
    ("[[0]]", "(0,)", "An edge is [x, y], or [x, y, H_xy]"),
    ("[]", "()", "there is no edge"),
    ("5", "()", "where edges is a list"),
]


@pytest.mark.parametrize(("edges", "where", "words"), EDGE_FAULTS)
def test_edge_faults(edges, where, words):
    source = small(f"edges = {edges}\nhopping = 1").replace("derive.generator = {}", "derive.generator = {}")
    found = survey_bytes(source.encode(), "w.toml", Path(".")).faults
    index = "".join(f"[{k}]" for k in eval(where))  # noqa: S307 (a literal of this file)
    told = [f"{f.message} {f.mend}" for f in found if f.key == f"graph.edges{index}"]
    assert told, say_all(found)
    assert words in told[0]


def test_detector_vectors_and_start_states():
    rest = 'detector.states = [{ 0 = "3/5", 1 = "4*i/5" }]\nstart.state = { 2 = 3, 1 = "4*i" }'
    q = question(small('family = "chain"\nsites = 3\nhopping = "g"', rest))
    (vector,) = q.setting.detectors[0].vectors
    assert [(x, text(a)) for x, a in vector] == [(0, "3/5"), (1, "4*i/5")]
    ((weight, start),) = q.setting.start.mixture
    assert weight == ONE
    assert [(x, text(a)) for x, a in start] == [(1, "4*i/5"), (2, "3/5")]  # normalised by 1/5


def test_a_start_with_letters_is_normalised():
    q = question(
        small('family = "chain"\nsites = 3\nhopping = "g"', 'detector.at = 0\nstart.state = { 1 = "g", 2 = "i*d" }')
    )
    ((_, start),) = q.setting.start.mixture
    assert [(x, text(a)) for x, a in start] == [(1, "g/sqrt(g^2 + d^2)"), (2, "i*d/sqrt(g^2 + d^2)")]


def test_start_on_the_detector():
    rest = 'detector.states = [{ 0 = "3/5", 1 = "4/5" }]\nstart.at = "detector"'
    q = question(small('family = "chain"\nsites = 3\nhopping = "g"', rest))
    assert q.setting.start.mixture[0][1] == q.setting.detectors[0].vectors[0]
    faults = survey_bytes(
        small('family = "chain"\nsites = 3\nhopping = "g"', 'detector.at = [0, 1]\nstart.at = "detector"').encode(),
        "w",
        Path("."),
    ).faults
    assert "this detector has several" in faults[0].message


CENTRES = [
    ('family = "chain"\nsites = 4\nhopping = 1', "centre", "no single site of least eccentricity"),
    ('family = "ring"\nsites = 5\nhopping = 1', "end", "single neighbour"),
    ('family = "ring"\nsites = 5\nhopping = 1', "root", "only a tree has a root"),
]


@pytest.mark.parametrize(("graph", "word", "words"), CENTRES)
def test_words_that_name_no_site(graph, word, words):
    faults = survey_bytes(small(graph, f'detector.at = "{word}"').encode(), "w.toml", Path(".")).faults
    assert words in faults[0].message


PLACES = [
    ('family = "chain"\nsites = 5\nhopping = 1', "centre", 2),
    ('family = "chain"\nsites = 5\nhopping = 1', "end", 0),
    ('family = "star"\narms = 3\nlength = 2\nhopping = 1', "centre", 0),
    ('family = "star"\narms = 3\nlength = 2\nhopping = 1', "end", 2),
    ('family = "tree"\nbranching = 2\ndepth = 2\nhopping = 1', "root", 0),
    ('family = "tree"\nbranching = 2\ndepth = 2\nhopping = 1', "end", 3),
    ('family = "grid"\nrows = 3\ncolumns = 3\nhopping = 1', "centre", 4),
    ('family = "chain"\nsites = 5\nhopping = 1', "1 + 2", 3),
]


@pytest.mark.parametrize(("graph", "word", "site"), PLACES)
def test_words_that_name_a_site(graph, word, site):
    assert question(small(graph, f'detector.at = "{word}"')).setting.detectors[0].vectors == (((site, ONE),),)


def test_sizes_that_are_letters(only_generator):
    found = sheet(
        small(
            'family = "chain"\nsites = "2*L + 1"\nhopping = "-g"\nenergies = { L = "d" }',
            'detector.at = "centre"\nstart.distance = "L"',
        )
    )
    space = found.question.setting.space
    assert isinstance(space, Family)
    assert [(k, text(v)) for k, v in space.sizes] == [("sites", "2*L + 1")]
    assert [(text(x), text(v)) for x, v in space.energies] == [("L", "d")]
    assert found.question.setting.detectors[0].place == "centre"
    assert text(found.question.setting.start.distance) == "L"
    assert [f.key for f in found.unserved] == ["graph.sites"]
    star = question(small('family = "star"\nlengths = [3, 5, "L"]\nhopping = "-g"')).setting.space
    assert [text(v) for _, v in star.sizes] == ["3", "5", "L"]


def test_infinite_graphs(only_generator):
    for name, at in (("line", "0"), ("line", "-3"), ("half line", "0"), ("square lattice", '"1,-2"')):
        found = sheet(small(f'family = "{name}"\nhopping = "-g"', f"detector.at = {at}\nstart.at = {at}"))
        assert isinstance(found.question.setting.space, Lattice)
        assert [f.key for f in found.unserved] == ["graph.family"]
    source = (
        small('family = "density"', "detector.at = 0")
        + '[[graph.singular]]\nenergy = "-2*g"\npower = "-1/2"\nside = "above"\n'
        + "[[graph.singular]]\nenergy = 0\npower = 0\nlogs = 1\n"
    )
    space = question(source).setting.space
    assert [(text(s.energy), text(s.power), text(s.logs), s.side) for s in space.singular] == [
        ("-2*g", "-1/2", "0", "above"),
        ("0", "0", "1", "both"),
    ]
    assert survey_bytes(small('family = "half line"\nhopping = 1', "detector.at = -1").encode(), "w", Path(".")).faults
    assert survey_bytes(
        small('family = "square lattice"\nhopping = 1', "detector.at = 0").encode(), "w", Path(".")
    ).faults


def test_a_unitary_step(only_generator):
    found = sheet(small('step = [["cos(phi)", "-sin(phi)"], ["sin(phi)", "cos(phi)"]]'))
    assert isinstance(found.question.setting.space, Unitary)
    assert [f.key for f in found.unserved] == ["graph.step"]


NOT_SERVED = [
    ("detector.at = 0\ndetector.efficiency = '1/2'", "detector.efficiency"),
    ("detector.at = 0\ndetector.efficiency = 'g/(1+g)'", "detector.efficiency"),
    ("detector.at = 0\ninterval.law = 'exponential'", "interval.law"),
    ("detector.at = 0\ninterval.law = 'gamma'\ninterval.shape = 2", "interval.law"),
    ("detector.left.at = 0\ndetector.right.at = 1", "detector.right"),
    ("detector.at = 0\nstart.state = { 1 = 1, 2 = 'floor(g)' }", "start.state.2"),
    ("detector.at = 0\nclaim.a = { about = 'decay rate', which = 1, formula = 'g' }", "claim.a.about"),
    (
        "detector.at = 0\nclaim.a = { about = 'generator', which = 1, entry = [1, 1], values = [['1', '0.5']] }",
        "claim.a.values",
    ),
    (
        "detector.at = 0\nclaim.a = { about = 'generator', entry = [1, 1], formula = 'g', holds = 'as L -> infinity' }",
        "claim.a.holds",
    ),
    (
        "detector.at = 0\n"
        "claim.a = { about = 'generator', entry = [1, 1], formula = 'g', holds = 'exactly, for every L' }",
        "claim.a.holds",
    ),
]


@pytest.mark.parametrize(("rest", "key"), NOT_SERVED)
def test_well_formed_and_not_served_yet(only_generator, rest, key):
    """Accepted when read, one message each, never ignored."""
    found = sheet(small('family = "chain"\nsites = 3\nhopping = "g"', rest))
    assert [f.key for f in found.unserved] == [key]
    assert any(words in found.unserved[0].message for words in ("not served yet", "no exact algebra"))


def test_a_feature_that_another_topic_serves(only_generator, monkeypatch):
    """Efficiency that one topic uses and another would leave out: refused by name for the other, not ignored."""
    monkeypatch.setitem(served.TOPICS, "moments", ("efficiency",))
    rest = "detector = { at = 0, efficiency = '1/2' }\nstart.at = 1"
    source = small('family = "chain"\nsites = 3\nhopping = "g"', rest)
    (fault,) = sheet(source).unserved
    assert (fault.message, fault.mend) == (
        "an efficiency other than 1: not served with generator yet.",
        "Served with moments.",
    )
    assert sheet(source.replace("derive.generator", "derive.moments")).unserved == []


def test_mixtures_are_read():
    q = question(
        small(
            'family = "chain"\nsites = 3\nhopping = "g"',
            "detector.at = 0\n"
            "start.mixture = [{ weight = '1/3', at = 1 }, { weight = '2/3', state = { 1 = 1, 2 = 1 } }]",
        )
    )
    assert [text(w) for w, _ in q.setting.start.mixture] == ["1/3", "2/3"]
    assert [text(a) for _, a in q.setting.start.mixture[1][1]] == ["1/sqrt(2)", "1/sqrt(2)"]


def test_what_is_served_is_what_is_derived():
    """The reading's own list and the registry of derivations name the same topics."""
    from derive.derivations.registry import DERIVATIONS
    from derive.worksheet import served
    from derive.worksheet.keys import TOPICS

    assert set(served.TOPICS) == set(DERIVATIONS)
    assert set(DERIVATIONS) <= set(TOPICS)


def test_a_space_is_finite_or_says_so():
    assert isinstance(
        question(small('family = "chain"\nsites = 1\nhopping = 1\n'.replace("1\nh", "2\nh"))).setting.space, Finite
    )
