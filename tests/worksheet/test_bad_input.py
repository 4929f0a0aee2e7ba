"""Every way to get a worksheet wrong: the place that is named, and words that the message holds.

The rows are the specification: line and column were counted by hand in the text beside them, the words are what a
reader needs (what stands there, what may stand there).  Common practice, no outside source.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from derive.worksheet import survey, survey_bytes
from derive.worksheet.faults import say, say_all

GOOD = """title = "t"
[symbols]
g = "positive"
d = "real"
c = "complex"
L = "integer >= 2"
[graph]
family = "chain"
sites = 5
hopping = "-g"
energies = { 1 = "d" }
[detector]
at = 2
[start]
at = 0
[derive.generator]
order = 2
[claim.mine]
about = "generator"
which = 1
entry = [1, 1]
formula = "-i*g^2/2"
[check]
digits = 20
"""


def faults_of(source: str, folder: Path = Path("/nonexistent")) -> list:
    return survey_bytes(source.encode(), "w.toml", folder).faults


def changed(old: str, new: str) -> str:
    assert old in GOOD
    return GOOD.replace(old, new)


def test_the_good_one_has_no_fault():
    assert faults_of(GOOD) == []


# (what is changed, into what, line, column, words in the message)
ROWS = [
    # letters
    ('hopping = "-g"', 'hopping = "-g*tau"', 10, 15, "tau is the time between two asks"),
    ('g = "positive"', 'g = "positiv"', 3, 5, "positiv is not known as a domain; Did you mean positive?"),
    ('g = "positive"', "g = 1", 3, 5, "1 is no domain"),
    ('g = "positive"', "g = true", 3, 5, "true is no domain"),
    ('d = "real"', 'e = "real"', 4, 1, "e already has a meaning"),
    ('d = "real"', 'pi = "real"', 4, 1, "pi already has a meaning"),
    ('d = "real"', 'sin = "real"', 4, 1, "sin already has a meaning"),
    ('d = "real"', '"a b" = "real"', 4, 1, "a b cannot be a letter"),
    ('d = "real"', '"ä" = "real"', 4, 1, "cannot be a letter"),
    ('d = "real"', "d = { latex = 'x' }", 4, 5, "the letter d has no domain"),
    ('d = "real"', 'd = { domain = "real", latx = "x" }', 4, 24, "no key latx; Did you mean latex?"),
    ('d = "real"', "d = { domain = 'real', latex = '\\input{x}' }", 4, 32, "no letter that can be printed; Greek"),
    ('d = "real"', 'd = "in (1, 0)"', 4, 5, "holds no number"),
    ('d = "real"', 'd = "in (0, g)"', 4, 5, "an end of an interval is a number"),
    ('d = "real"', 'd = "in (0, 1"', 4, 5, "not known as a domain"),
    ('d = "real"', 'd = "integer >= x"', 4, 5, "not known as a domain"),
    ('d = "real"', 'd = "real"\ntau = "real"', 5, 7, "tau is the interval's own letter"),
    # graph
    ('family = "chain"', 'famly = "chain"', 8, 1, "no key famly; Did you mean family?"),
    ('family = "chain"', 'family = "chian"', 8, 10, "chian is no family of graphs; Did you mean chain?"),
    ('family = "chain"', "family = 7", 8, 10, "7 is no family of graphs"),
    ('family = "chain"', 'family = "complete_bipartite"', 8, 10, "Did you mean complete bipartite?"),
    ('family = "chain"', 'family = "chain"\nedges = [[0, 1]]', 9, 1, "given twice, by family and by edges"),
    ('family = "chain"', 'family = "star"', 9, 1, "sites is no size of a star: it has arms and length"),
    ("sites = 5", "site = 5", 9, 1, "no key site; Did you mean sites?"),
    ("sites = 5", "", 7, 2, "a chain needs its sites"),
    ("sites = 5", "sites = 5.0", 9, 9, "5.0 is a decimal without quotes; Write 5."),
    ("sites = 5", "sites = nan", 9, 9, "nan is no number"),
    ("sites = 5", "sites = inf", 9, 9, "inf is no number"),
    ("sites = 5", "sites = true", 9, 9, "true stands here; sites is a whole number"),
    ("sites = 5", "sites = 0", 9, 9, "sites is 0; The least is 1"),
    ("sites = 5", "sites = -3", 9, 9, "sites is -3"),
    ("sites = 5", "sites = 1000000000", 9, 9, "would have 1,000,000,000 sites; At most 200,000 sites"),
    ("sites = 5", f"sites = {10**400}", 9, 9, "a number of more than 30 digits"),
    ("sites = 5", 'sites = "10^100000"', 9, 10, "this power is too large"),
    ("sites = 5", 'sites = "7/2"', 9, 9, "sites is a whole number, and 7/2 is not"),
    ("sites = 5", 'sites = "2*g"', 9, 9, 'g is positive, and sites is a whole number; Declare  g = "integer >= 2"'),
    ("sites = 5", "sites = 2020-01-01", 9, 9, "the date or time 2020-01-01"),
    ("sites = 5", "sites = [5]", 9, 9, "a list stands here"),
    (
        'hopping = "-g"',
        'hopping = "-J"',
        10,
        13,
        'the letter J is not declared; Add  J = "positive"; Declared so far: g, d',
    ),
    (
        'hopping = "-g"',
        "hopping = -0.1",
        10,
        11,
        '-0.1 is a decimal without quotes; Write "-1/10", or "-0.1" in quotes',
    ),
    ('hopping = "-g"', "", 7, 2, "hopping is missing"),
    ('hopping = "-g"', 'hopping = "2g"', 10, 13, "2 and g stand side by side; Write 2*g"),
    ('hopping = "-g"', 'hopping = "(g"', 10, 12, "a parenthesis is opened and not closed"),
    ('hopping = "-g"', 'hopping = "g)"', 10, 13, ") cannot stand here"),
    ('hopping = "-g"', 'hopping = ""', 10, 12, "there is no formula here"),
    ('hopping = "-g"', 'hopping = "g +"', 10, 14, "the formula ends with +"),
    ('hopping = "-g"', 'hopping = "infinity*g"', 10, 12, "infinity is no value here"),
    ('hopping = "-g"', 'hopping = "1/(g-g)"', 10, 15, "this divides by g - g, which is zero"),
    ('hopping = "-g"', 'hopping = "(g+d+c+1)^300"', 10, 11, "multiplied out, this formula has about"),
    ('hopping = "-g"', 'hopping = "(g+d)^50000"', 10, 11, "multiplied out, this formula has numbers of about"),
    ('hopping = "-g"', 'hopping = "sin((g+d+c)^99999)"', 10, 11, "terms"),
    ('hopping = "-g"', 'hopping = "1/0"', 10, 12, "divides by zero"),
    ('hopping = "-g"', 'hopping = "g = 1"', 10, 14, "a formula has no ="),
    ('hopping = "-g"', 'hopping = "sinn(g)"', 10, 12, "sinn is no function; Did you mean sin?"),
    ('hopping = "-g"', 'hopping = "O(g)"', 10, 11, "O(...) belongs in holds"),
    ('hopping = "-g"', 'hopping = "e^2"', 10, 12, "e is no number here"),
    ('hopping = "-g"', 'hopping = "sum(g from 1 to 3: g)"', 10, 11, "g is bound here and already has a meaning"),
    ('hopping = "-g"', "hopping = '''\n\n  J'''", 12, 3, "the letter J is not declared"),
    ('hopping = "-g"', 'hopping = "\\u0067 + J"', 10, 21, "the letter J is not declared"),
    ('hopping = "-g"', "hopping = \"__import__('os').system('x')\"", 10, 12, "has no meaning in a formula"),
    ('hopping = "-g"', 'hopping = "g.__class__"', 10, 13, "a point stands here"),
    ('hopping = "-g"', 'hopping = "9^9^9^9"', 10, 12, "this power is too large"),
    ('hopping = "-g"', f'hopping = "{"(" * 5000}g{")" * 5000}"', 10, 12, "has 10001 characters"),
    ('hopping = "-g"', f'hopping = "{"(" * 3000}g{")" * 3000}"', 10, 212, "more than 200 parentheses"),
    ('hopping = "-g"', f'hopping = "{"g+" * 6000}g"', 10, 12, "has 12001 characters"),
    ('{ 1 = "d" }', '{ 1 = "i*d" }', 11, 18, "i*d is not real, and H_xx is"),
    ('{ 1 = "d" }', '{ 1 = "c" }', 11, 18, "c is not real"),
    (
        '{ 1 = "d" }',
        '{ 5 = "d" }',
        11,
        14,
        'site 5 is not on this graph; its sites are 0 to 4; The last site is 4.  "centre" means 2',
    ),
    ('{ 1 = "d" }', '{ -1 = "d" }', 11, 14, "site -1 is not on this graph; counted from 0"),
    ('{ 1 = "d" }', '{ x = "d" }', 11, 14, "x is no site; the sites here are 0 to 4"),
    ('{ 1 = "d" }', '{ center = "d" }', 11, 14, "center is no site; Did you mean centre?"),
    ('{ 1 = "d" }', '{ root = "d" }', 11, 14, "only a tree has a root"),
    ('{ 1 = "d" }', '{ centre = 1, 2 = "d" }', 11, 26, "site 2 stands here twice"),
    ('{ 1 = "d" }', "{ a.1 = 3 }", 11, 14, 'a.1 reads as two keys; Write a name with a dot in quotes: "a.1"'),
    ('energies = { 1 = "d" }', "energies = [1]", 11, 12, "where energies is a table"),
    ('energies = { 1 = "d" }', 'bonds = [[0, 2, "g"]]', 11, 10, "0 and 2 are not joined"),
    ('energies = { 1 = "d" }', 'bonds = [[0, 0, "g"]]', 11, 10, "joins a site to itself"),
    ('energies = { 1 = "d" }', 'bonds = [[0, 1, "g"], [1, 0, "g"]]', 11, 23, "for the second time"),
    ('energies = { 1 = "d" }', "bonds = [[0, 1]]", 11, 10, "a list is no bond; A bond is [x, y, H_xy]"),
    ('energies = { 1 = "d" }', 'flux = "d"', 11, 8, "only a ring takes its flux without a loop"),
    ('energies = { 1 = "d" }', 'flux = [{ loop = [0, 1, 2], phase = "d" }]', 11, 9, "sites 2 and 0 are not joined"),
    ('energies = { 1 = "d" }', 'flux = [{ loop = [0, 1], phase = "d" }]', 11, 18, "at least three sites"),
    ('energies = { 1 = "d" }', "flux = [{ loop = [0, 1, 2] }]", 11, 9, "this flux has no phase"),
    # detector
    ("[detector]\nat = 2", "", 1, 1, "detector is missing"),
    ("at = 2", "at = 9", 13, 6, "site 9 is not on this graph; its sites are 0 to 4"),
    ("at = 2", "at = [1, 1]", 13, 10, "site 1 stands here twice; Name each site once"),
    ("at = 2", "at = [0, 1, 2, 3, 4]", 13, 1, "the detector covers every site"),
    ("at = 2", "at = []", 13, 6, "the detector stands on no site"),
    ("at = 2", "at = 1.5", 13, 6, "1.5 is no site"),
    ("at = 2", "at = true", 13, 6, "true is no site"),
    ("at = 2", 'at = "middle"', 13, 6, "middle is no site"),
    ("at = 2", 'at = "detector"', 13, 6, '"detector" is no site here'),
    ("at = 2", "efficiency = 1", 12, 2, "where the detector stands is not said"),
    ("at = 2", "at = 2\nstates = [{ 1 = 1 }]", 14, 1, "given twice, by at and by states"),
    ("at = 2", "at = 2\nefficiency = 0.9", 14, 14, 'Write "9/10", or "0.9" in quotes, which is exactly 9/10'),
    ("at = 2", "at = 2\nefficiency = 2", 14, 14, "an efficiency of 2 is no probability"),
    ("at = 2", "at = 2\nefficiency = 0", 14, 14, "an efficiency of 0 is no probability"),
    ("at = 2", "at = 2\neficiency = 1", 14, 1, "no key eficiency; Did you mean efficiency?"),
    ("at = 2", "states = [{ 1 = 1, 2 = 1 }]", 13, 11, "squared length 2, not 1"),
    ("at = 2", 'states = [{ 1 = "sqrt(2)/2" }]', 13, 11, "squared length 1/2, not 1"),
    (
        "at = 2",
        'states = [{ 1 = "3/5", 2 = "4/5" }, { 1 = "4/5", 2 = "3/5" }]',
        13,
        37,
        "states 0 and 1 are not orthogonal: their product is 24/25",
    ),
    ("at = 2", "states = [{ }]", 13, 11, "squared length 0"),
    ("at = 2", "states = []", 13, 10, "the detector has no state"),
    ("at = 2", "states = { 1 = 1 }", 13, 10, "a table stands here, where states is a list"),
    (
        "[detector]\nat = 2",
        "[detector.left]\nat = 2\n[detector.right]\nat = 2",
        14,
        11,
        "the detectors left and right are not orthogonal",
    ),
    # start
    ("[start]\nat = 0", "[start]\nat = 7", 15, 6, "site 7 is not on this graph"),
    ("[start]\nat = 0", "[start]\nat = [0, 1]", 15, 6, "a start is one site"),
    ("[start]\nat = 0", "[start]", 14, 2, "the start is not said"),
    ("[start]\nat = 0", "[start]\nat = 0\nstate = { 1 = 1 }", 16, 1, "given twice, by at and by state"),
    ("[start]\nat = 0", "[start]\nstate = { 1 = 0 }", 15, 9, "this state is zero"),
    ("[start]\nat = 0", '[start]\nstate = { 1 = "g - g" }', 15, 9, "this state is zero"),
    ("[start]\nat = 0", "[start]\nstate = { }", 15, 9, "this state is zero"),
    (
        "[start]\nat = 0",
        "[start]\nmixture = [{ weight = 1, at = 0 }, { weight = 1, at = 1 }]",
        15,
        11,
        "add up to 2, not 1",
    ),
    ("[start]\nat = 0", '[start]\nmixture = [{ weight = "-1", at = 0 }]', 15, 23, "a weight of -1 is no probability"),
    ("[start]\nat = 0", "[start]\nmixture = [{ at = 0 }]", 15, 12, "a part of a mixture has a weight"),
    ("[start]\nat = 0", '[start]\ndistance = "L"', 15, 1, "distance is for a size that is a letter"),
    # interval
    ("[derive.generator]", "[interval]\nlength = 0\n[derive.generator]", 17, 10, "an interval of 0 is not above 0"),
    (
        "[derive.generator]",
        '[interval]\nlength = "d"\n[derive.generator]',
        17,
        10,
        "d is real, and a length is positive",
    ),
    ("[derive.generator]", '[interval]\nlaw = "poisson"\n[derive.generator]', 17, 7, "poisson is not known as a law"),
    ("[derive.generator]", '[interval]\nlaw = "gamma"\n[derive.generator]', 16, 2, "the gamma law needs its shape"),
    ("[derive.generator]", "[interval]\nshape = 2\n[derive.generator]", 17, 1, "shape goes with the gamma law"),
    # topics
    ("[derive.generator]", "[derive.genrator]", 16, 9, "genrator is no topic; Did you mean generator?"),
    ("order = 2", "odrer = 2", 17, 1, "no key odrer; Did you mean order?"),
    ("order = 2", "order = 25", 17, 9, "order 25 is above the limit, 24; limit = 25"),
    ("order = 2", "order = 1000000", 17, 9, "order is 1000000; The most is 100"),
    ("order = 2", "order = -1", 17, 9, "order is -1"),
    ("order = 2", "order = 2.5", 17, 9, "2.5 is a decimal without quotes"),
    ("order = 2", 'order = "two"', 17, 9, "order is a whole number, and two is not"),
    ("order = 2", "set = { x = 0 }", 17, 9, "the letter x is not declared"),
    ("order = 2", "set = { g = -1 }", 17, 13, "-1 is no value of g, which is positive"),
    ("order = 2", 'set = { d = "d + 1" }', 17, 13, "d is set to a formula of itself"),
    ("order = 2", "set = 5", 17, 7, "where set is a table"),
    ("order = 2", "asks = [0]", 17, 9, "an ask is 0; The least is 1"),
    ("order = 2", "asks = 10", 17, 8, "10 stands here, where asks is a list"),
    ("[derive.generator]\norder = 2", "derive = 5", 16, 1, "no key derive"),
    # claims
    ('about = "generator"', 'about = "generater"', 19, 9, "generater is no quantity; Did you mean generator?"),
    ('about = "generator"', "", 18, 8, "what this claim is about is not said"),
    ("which = 1", "which = 1.5", 20, 9, "1.5 is a decimal without quotes"),
    ("which = 1", 'which = "k"', 20, 9, "which is a whole number, and k is not"),
    ("entry = [1, 1]", "entry = [1]", 21, 9, "no entry of a matrix"),
    ("entry = [1, 1]", "entry = [1, 9]", 21, 13, "site 9 is not on this graph"),
    ("entry = [1, 1]", "", 22, 11, "generator is a matrix, and this is one formula"),
    ('formula = "-i*g^2/2"', "", 18, 8, "this claim says nothing"),
    ('formula = "-i*g^2/2"', 'formula = "-i*g^2/2"\nlatex = "x"', 23, 1, "this claim has both formula and latex"),
    ('formula = "-i*g^2/2"', 'formula = "-i*q^2/2"', 22, 15, "the letter q is not declared"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nholds = "roughly"', 23, 10, "roughly says nothing known"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nholds = "up to O(g)"', 23, 10, "a power of tau"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nholds = "as n -> infinity"', 23, 9, "the limit is in n"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nholds = "exactly, for every g"', 23, 9, "no integer letter"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nassume = ["d"]', 23, 12, "this is no comparison"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nassume = "d > 0"', 23, 10, "where assume is a list"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nassume = ["d > q"]', 23, 16, "the letter q is not declared"),
    ('formula = "-i*g^2/2"', 'formula = "g"\nside = "left"', 23, 1, "side goes with a state map"),
    ('formula = "-i*g^2/2"', "matrix = [[1, 1, 2]]", 22, 1, "one entry is meant, and a matrix stands here"),
    ('entry = [1, 1]\nformula = "-i*g^2/2"', "matrix = [[1, 1, 2], [1, 1, 3]]", 21, 22, "this entry stands here twice"),
    ('entry = [1, 1]\nformula = "-i*g^2/2"', "matrix = [[1, 1]]", 21, 11, "no entry of a matrix"),
    ('entry = [1, 1]\nformula = "-i*g^2/2"', "values = [[1, 0.5]]", 21, 15, "0.5 is a decimal without quotes"),
    # check
    ("digits = 20", "digits = 9", 24, 10, "digits is 9; The least is 10"),
    ("digits = 20", "digits = 1001", 24, 10, "digits is 1001; The most is 1,000"),
    ("digits = 20", "samples = 0", 24, 11, "samples is 0"),
    ("digits = 20", "seed = -1", 24, 8, "seed is -1"),
    ("digits = 20", 'seed = "x"', 24, 8, "seed is a whole number, and x is not; Write digits"),
    ("digits = 20", "points = [{ g = 1 }]", 24, 11, "no value for L, c, d, tau"),
    ("digits = 20", 'points = [{ g = 1, d = 0, c = 1, L = 2, tau = "g" }]', 24, 47, "g is no number"),
    ("digits = 20", "points = [{ g = -1, d = 0, c = 1, L = 2, tau = 1 }]", 24, 17, "-1 is no value of g"),
    ("digits = 20", "points = [{ g = 1, d = 0, c = 1, L = 1, tau = 1 }]", 24, 38, "1 is no value of L"),
    ("digits = 20", 'points = [{ g = 1, d = "i", c = 1, L = 2, tau = 1 }]', 24, 24, "i is no value of d"),
    ("digits = 20", "points = [{ h = 1 }]", 24, 13, "the letter h is not declared"),
    ("digits = 20", "points = 3", 24, 10, "where points is a list"),
    ("order = 2", "check.samples = 2", 17, 1, "generator has no key check; write it as [check]"),
    # the whole
    ('title = "t"', 'title = ""', 1, 9, "title is empty"),
    ('title = "t"', "title = 5", 1, 9, "5 stands here, where title is text"),
    ('title = "t"', "titel = 't'", 1, 1, "no key titel; Did you mean title?"),
    ('title = "t"', 'title = "a\\u0000b"', 1, 11, "the control character"),
    ('title = "t"', 'title = "t"\nassume = ["d < 2*g <"]', 2, 21, "there is no formula here"),
    ('title = "t"', 'title = "t"\nassume = [1]', 2, 11, "1 is no comparison"),
    ('title = "t"', 'title = "t"\nassume = ["1 < 2"]', 2, 11, "no letter in it"),
    ('title = "t"', 'title = "é"\nassume = ["é < 2"]', 2, 12, "has no meaning in a formula"),
]


@pytest.mark.parametrize(
    ("old", "new", "line", "column", "words"), ROWS, ids=[f"{k}-{r[1][:30]!r}" for k, r in enumerate(ROWS)]
)
def test_one_fault(old, new, line, column, words):
    found = faults_of(changed(old, new))
    at_place = [f for f in found if (f.line, f.column) == (line, column)]
    assert at_place, "\n" + say_all(found)
    told = "\n".join(say(f) for f in at_place)
    for part in words.split("; "):
        assert part in told, told
    assert all(f.message and not f.message.startswith("Traceback") for f in found)


WHOLE_FILES = [
    ("", 0, 0, "this file is empty"),
    ("   \n\n", 0, 0, "this file is empty"),
    ("a = 1\x00\n", 1, 6, "a NUL character"),
    ("title = \n", 1, 9, "no value here that TOML knows"),
    ("title = -g\n", 1, 9, 'Write it in quotes: "-g"'),
    ("[graph\n", 1, 7, "a section's name is not closed"),
    ('title = "a', 1, 11, "a string is opened and not closed"),
    ("title = 'a'\ntitle = 'b'\n", 2, 1, "stands here twice"),
    ("[graph]\nfamily = 'ring'\n[graph]\nfamily = 'chain'\n", 3, 1, "this section stands here twice"),
    ("graph = { family = 'ring' }\n[graph]\n", 2, 1, "stands here twice"),
    ("x = [1, 2\n", 1, 10, "a list is opened and not closed"),
    ("x = { a = 1\n", 1, 12, "an inline table is opened and not closed"),
    ("x = " + "[" * 5000, 1, 45, "more than 40 brackets"),
    ("x = " + "{a=" * 3000, 1, 125, "more than 40 brackets"),
    (".".join("a" * 3000) + " = 1", 1, 1, "too many dots"),
    ("x = " + "9" * 5000, 1, 5, "too many digits"),
    ('x = "\\q"', 1, 8, "a backslash needs care"),
    ("a b = 3", 1, 3, "a key stands here without its ="),
    ("just words", 1, 6, "a key stands here without its ="),
    ("- a\n- b", 1, 3, "a key stands here without its ="),
    ("{}", 1, 1, "neither key = value nor [section]"),
]


@pytest.mark.parametrize(("source", "line", "column", "words"), WHOLE_FILES, ids=[repr(w[0][:25]) for w in WHOLE_FILES])
def test_no_toml_is_one_fault(source, line, column, words):
    found = faults_of(source)
    assert len(found) == 1
    assert (found[0].line, found[0].column) == (line, column), say(found[0])
    assert words in say(found[0])


def test_not_utf8():
    found = survey_bytes(b"title = '\xff'\n", "w.toml", Path(".")).faults
    assert [(f.line, f.column) for f in found] == [(1, 10)]
    assert "UTF-8" in found[0].message


def test_all_faults_at_once_in_file_order():
    source = (
        changed('hopping = "-g"', 'hopping = "-J"')
        .replace("at = 2", "at = 9\nefficiency = 0.9")
        .replace("order = 2", "order = 99")
    )
    found = faults_of(source)
    assert [(f.line, f.key) for f in found] == [
        (10, "graph.hopping"),
        (13, "detector.at"),
        (14, "detector.efficiency"),
        (18, "derive.generator.order"),
    ]


def test_a_message_reads_like_the_house():
    """The wording promised to users, word for word."""
    source = (
        'title = "t"\n[symbols]\ng = "positive"\nDelta = "real"\n[graph]\nfamily = "chain"\nsites = 9\n'
        'hopping = "-J"\n[detector]\nat = 9\nefficiency = 0.9\n[derive.generator]\n'
    )
    told = say_all(survey_bytes(source.encode(), "cavities.toml", Path(".")).faults)
    assert told == (
        "cavities.toml:8:13: graph.hopping: the letter J is not declared.\n"
        '    Add  J = "positive"  (or "real", "complex") under [symbols]. Declared so far: g, Delta.\n'
        "cavities.toml:10:6: detector.at: site 9 is not on this graph; its sites are 0 to 8.\n"
        '    The last site is 8.  "centre" means 4.\n'
        "cavities.toml:11:14: detector.efficiency: 0.9 is a decimal without quotes, and decimals are rounded.\n"
        '    Write "9/10", or "0.9" in quotes, which is exactly 9/10.'
    )


def test_many_faults_are_counted():
    rows = ", ".join('[0, 1, "q"]' for _ in range(200))
    found = faults_of(f'title = "t"\ngraph.edges = [{rows}]\ndetector.at = 0\nderive.generator = {{}}\n')
    assert len(found) == 200
    assert say_all(found).endswith("and 150 more.")


BRINGS = [
    ("t", "derive.survival = {}", "the topic survival brings it along"),
    ("n", 'claim.a = { about = "detection probability", formula = "1/n^3" }', "the claim a brings it along"),
    ("z", 'claim.a = { about = "generating function", formula = "z" }', "the claim a brings it along"),
    ("k", 'claim.a = { about = "decay rate", which = "k", formula = "k" }', "the claim a brings it along"),
]


@pytest.mark.parametrize(("name", "asked", "words"), BRINGS)
def test_a_letter_that_is_brought_along_is_refused(name, asked, words):
    source = (
        f'title = "t"\nsymbols.{name} = "real"\ngraph = {{ family = "chain", sites = 3, hopping = 1 }}\n'
        f"detector.at = 0\nstart.at = 1\n{asked}\n"
    )
    found = faults_of(source)
    assert [(f.line, f.column) for f in found] == [(2, 9)], say_all(found)
    assert words in found[0].message


def test_a_topic_that_needs_a_start_says_so():
    source = (
        'title = "t"\ngraph = { family = "chain", sites = 3, hopping = 1 }\ndetector.at = 0\nderive.survival = {}\n'
    )
    assert "depends on the start" in faults_of(source)[0].message
    assert faults_of(source + "start.at = 1\n") == []


@pytest.mark.parametrize(
    ("rest", "place"),
    [("derive.generator.set = { g = 1 }", (5, 24)), ("check.points = [{ g = 1, tau = 1 }]", (5, 17))],
)
def test_values_that_divide_by_zero(rest, place):
    source = (
        'title = "t"\nsymbols.g = "positive"\n'
        'graph = { family = "chain", sites = 3, hopping = "1/(g^2 - 1)" }\ndetector.at = 0\n'
    )
    asks = "" if "derive" in rest else "\nderive.generator = {}"
    found = faults_of(f"{source}{rest}{asks}\n")
    assert [(f.line, f.column) for f in found] == [place], say_all(found)
    assert "divides by zero" in found[0].message
    assert faults_of(f"{source}{rest.replace('g = 1', 'g = 2')}{asks}\n") == []


MATRICES = [
    ('[[0, "g"], ["-g", 0]]', 4, 27, 'H is not Hermitian; Write  "g"  here'),
    ('[[0, "i*g"], ["i*g", 0]]', 4, 29, 'not the conjugate of entry (0, 1), i*g; Write  "-i*g"'),
    ('[["i", 0], [0, 0]]', 4, 17, "i is not real"),
    ('[[0, "c"], ["c", 0]]', 4, 27, 'Write  "conj(c)"'),
    ("[[0, 1]]", 4, 16, "row 0 has 2 entries, and hamiltonian has 1 row."),
    ("[[0, 1], 5]", 4, 24, "row 1 is 5"),
    ("[]", 4, 15, "hamiltonian has no rows"),
    ("5", 4, 15, "where hamiltonian is a list of rows"),
    ("[[0, 1], [1, 0.5]]", 4, 28, "0.5 is a decimal without quotes"),
    ("[[5]]", 6, 1, "the detector covers every site"),
    ('[[0, "floor(g)"], ["Gamma(g + 1)/Gamma(g)", 0]]', 4, 34, "could not be decided"),
]


@pytest.mark.parametrize(("matrix", "line", "column", "words"), MATRICES)
def test_matrices(matrix, line, column, words):
    source = (
        'title = "t"\nsymbols = { g = "positive", c = "complex" }\n[graph]\n'
        f"hamiltonian = {matrix}\n[detector]\nat = 0\n[derive.generator]\n"
    )
    found = faults_of(source)
    told = "\n".join(say(f) for f in found if (f.line, f.column) == (line, column))
    assert told, say_all(found)
    for part in words.split("; "):
        assert part in told


@pytest.mark.parametrize("key", ['hopping = "g"', "energies = { 0 = 1 }", "bonds = []", "flux = []", "sites = 2"])
def test_a_matrix_is_complete(key):
    source = (
        'title = "t"\nsymbols.g = "positive"\n[graph]\nhamiltonian = [[0, 1], [1, 0]]\n'
        f"{key}\n[detector]\nat = 0\n[derive.generator]\n"
    )
    found = faults_of(source)
    assert [(f.line, f.column) for f in found] == [(5, 1)]


def test_a_step_is_unitary():
    head = 'title = "t"\nsymbols.phi = "real"\n[graph]\nstep = '
    tail = "\n[detector]\nat = 0\n[derive.generator]\n"
    good = '[["cos(phi)", "-sin(phi)"], ["sin(phi)", "cos(phi)"]]'
    bad = '[["cos(phi)", "sin(phi)"], ["sin(phi)", "cos(phi)"]]'
    assert faults_of(head + good + tail) == []
    found = faults_of(head + bad + tail)
    assert [(f.line, f.column) for f in found] == [(4, 35)]
    assert "rows 0 and 1 are not orthogonal" in found[0].message


PHASES = [('flux = "i"', 5, 8, "i is not real, and a phase is"), ('flux = "c"', 5, 8, "c is not real, and a phase is")]


@pytest.mark.parametrize(("flux", "line", "column", "words"), PHASES)
def test_a_flux_is_an_angle(flux, line, column, words):
    head = 'title = "t"\nsymbols = { g = "positive", c = "complex" }\n[graph]\nfamily = "ring"\n'
    rest = '\nsites = 5\nhopping = "g"\n[detector]\nat = 0\n[derive.generator]\n'
    found = faults_of(head + flux + rest)
    assert [(f.line, f.column) for f in found] == [(line, column)] and words in found[0].message


def test_letters_of_other_quantities_are_not_to_be_declared():
    claim = 'claim.a = { about = "generator", which = 1, matrix = [], holds = "up to O(tau^2) at fixed t*tau" }\n'
    chain = 'graph = { family = "chain", sites = 3, hopping = "g" }\ndetector.at = 0\n'
    told = say_all(faults_of(f'title = "t"\nsymbols.g = "positive"\n{chain}{claim}'))
    assert "t belongs to other quantities (survival probability, for one)" in told and "Add" not in told


NAMES = [("...toml", "worksheet"), ("a..toml", "a"), (".toml", "toml"), ("b.toml", "b")]


@pytest.mark.parametrize(("file", "name"), NAMES)
def test_a_report_stays_where_it_belongs(tmp_path, file, name):
    """A folder named .. would lie elsewhere."""
    sheet = tmp_path / file
    sheet.write_text('title = "t"\nsymbols.g = "positive"\ngraph = { family = "chain", sites = 3, hopping = "g" }\n'
                     "detector.at = 0\nderive.generator = {}\n", encoding="utf-8")
    assert survey(sheet).taken().name == name


def test_roots_of_what_is_not_negative():
    """sqrt(n) with n = 0 allowed; a letter of either sign is told."""
    source = 'title = "t"\nsymbols.n = "nonnegative"\ngraph = { family = "chain", sites = 3, hopping = "-sqrt(n)" }\n'
    rest = "detector.at = 0\nderive.generator = {}\n"
    assert survey_bytes((source + rest).encode(), "w.toml", Path(".")).unserved == []
    signed = source.replace("nonnegative", "real") + rest
    assert "root" in survey_bytes(signed.encode(), "w.toml", Path(".")).unserved[0].message
