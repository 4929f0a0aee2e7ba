"""The command: exit codes, what is printed where, whole-or-nothing writes, start-up cost.

Exit codes and wording are the product's own definition; that ^C gives 130 is the shell's convention (128 + SIGINT).
"""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import pytest

from derive import __version__, cli
from derive.formula.tree import ONE
from derive.problem.families import FAMILIES, INFINITE
from derive.problem.quantities import Quantity
from derive.record.said import Claim, Finding, Judged, Report
from derive.worksheet import running, served
from derive.worksheet.keys import FAMILY_NAMES

ROOT = Path(__file__).parents[1]
DEMO = ROOT / "worksheets" / "nine-cavities.toml"
SMALL = """title = "Three cavities"
symbols.g = "positive"
graph = { family = "chain", sites = 3, hopping = "-g" }
detector.at = 0
derive.generator.order = 1
"""


def watchpot(*args: str, cwd: Path | None = None, **env: str) -> subprocess.CompletedProcess[str]:
    """The command as a user starts it."""
    return subprocess.run(
        [sys.executable, "-c", "from derive.cli import main; main()", *args],
        capture_output=True,
        text=True,
        cwd=cwd,
        env={**os.environ, "PYTHONPATH": str(ROOT), **env},
        timeout=120,
    )


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "small.toml").write_text(SMALL)
    return tmp_path


def called(monkeypatch, *args: str) -> int:
    """The command in this process; its exit code."""
    monkeypatch.setattr(sys, "argv", ["watchpot", *args])
    try:
        cli.main()
    except SystemExit as left:
        return int(left.code or 0)
    return 0


def stub(monkeypatch, verdicts, files=None):
    """A pipeline that finds these verdicts at once, one list a question."""
    found = iter(verdicts)

    def answered(question, jobs=1, progress=None):
        judged = tuple(
            Judged(Claim(f"generator.{k}", "generator", Quantity("generator"), ONE), v, (Finding(v, "exact"),), (), "")
            for k, v in enumerate(next(found))
        )
        return Report(question, (), judged)

    monkeypatch.setattr(running, "answered", answered)
    monkeypatch.setattr(
        running, "written", lambda report: files or {"report.html": b"<p>", "ledger.json": b"{}", "data/x.csv": b"1"}
    )


# exit codes ---------------------------------------------------------------------------------------------------

CODES = [
    (["proved", "agrees"], 0),
    (["proved"], 0),
    (["agrees"], 0),
    (["undecided", "agrees"], 3),
    (["untested"], 3),
    ([], 3),
    (["refuted", "proved"], 1),
    (["undecided", "refuted", "untested"], 1),
]


@pytest.mark.parametrize(("verdicts", "code"), CODES)
def test_exit_codes(here, monkeypatch, verdicts, code):
    stub(monkeypatch, [verdicts])
    assert called(monkeypatch, "run", "small.toml") == code
    assert (here / "small-report" / "report.html").exists()


def test_the_worst_of_several(here, monkeypatch, capsys):
    (here / "other.toml").write_text(SMALL)
    (here / "third.toml").write_text(SMALL)
    stub(monkeypatch, [["proved"], ["undecided"], ["agrees"]])
    assert called(monkeypatch, "run", "small.toml", "other.toml", "third.toml", "--out", "all") == 3
    assert sorted(p.name for p in (here / "all").iterdir()) == ["other", "small", "third"]
    (here / "all").rename(here / "before")
    stub(monkeypatch, [["undecided"], ["refuted"], ["agrees"]])
    assert called(monkeypatch, "run", "small.toml", "other.toml", "third.toml", "--out", "all") == 1


def test_one_bad_file_and_nothing_is_written(here, monkeypatch, capsys):
    (here / "bad.toml").write_text(SMALL.replace('"-g"', '"-J"'))
    stub(monkeypatch, [["proved"], ["proved"]])
    assert called(monkeypatch, "run", "small.toml", "bad.toml") == 2
    assert sorted(p.name for p in here.iterdir()) == ["bad.toml", "small.toml"]
    told = capsys.readouterr()
    assert told.out == ""
    assert told.err.startswith("bad.toml:3:52: graph.hopping: the letter J is not declared.\n")
    assert told.err.endswith("1 fault in bad.toml. Nothing was derived, nothing was written.\n")


def test_two_of_the_same_name(here, monkeypatch, capsys):
    (here / "sub").mkdir()
    (here / "sub" / "small.toml").write_text(SMALL)
    stub(monkeypatch, [["proved"], ["proved"]])
    assert called(monkeypatch, "run", "small.toml", "sub/small.toml") == 2
    assert "would write the same report" in capsys.readouterr().err
    assert not (here / "small-report").exists()


def test_what_is_not_served_is_refused_after_all_faults(here, monkeypatch, capsys):
    monkeypatch.setattr(served, "TOPICS", {"generator": ()})
    (here / "l.toml").write_text(SMALL.replace("derive.generator.order = 1", "derive.levels.order = 1\nstart.at = 9"))
    assert called(monkeypatch, "run", "l.toml") == 2
    err = capsys.readouterr().err
    assert err.index("site 9 is not on this graph") < err.index("the topic levels is not served yet")
    assert err.endswith(
        "1 fault in l.toml, 1 wish not served yet in l.toml. Nothing was derived, nothing was written.\n"
    )
    (here / "m.toml").write_text(SMALL.replace("derive.generator.order = 1", "derive.levels.order = 1"))
    assert called(monkeypatch, "run", "m.toml") == 2
    assert called(monkeypatch, "read", "m.toml") == 0
    assert "Not served yet: derive.levels" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("args", "words"),
    [
        (("run",), "Missing argument 'FILE...'"),
        (("walk",), "No such command 'walk'"),
        (("run", "small.toml", "--digits", "5"), "--digits is 5.\n    It goes from 10 to 1000."),
        (("run", "small.toml", "--digits", "x"), "'x' is no whole number"),
        (("run", "small.toml", "--jobs", "0"), "--jobs is 0."),
        (("run", "nothing.toml"), "nothing.toml: there is no such file."),
        (("run", "smal.toml"), "Did you mean small.toml?"),
        (("run", "."), "this is a folder."),
        (("show", "small.toml", "generator.7"), "generator.7 is no entry of this worksheet."),
        (("show", "small.toml", "generator.1", "--at", "g"), "gives no letter a value"),
        (("show", "small.toml", "generator.1", "--at", "g=x"), "x is no number"),
        (("show", "small.toml", "generator.1", "--at", "h=1"), "h is no letter of this worksheet"),
        (("show", "small.toml", "generator.1", "--at", "tau=1"), "no value for g"),
        (("show", "small.toml", "generator.1", "--at", "g=1,g=2"), "g stands there twice"),
        (("new", "chian"), "Did you mean chain?"),
    ],
)
def test_what_the_command_refuses(here, monkeypatch, capsys, args, words):
    assert called(monkeypatch, *args) == 2
    told = capsys.readouterr()
    assert words in told.err
    assert told.out == ""
    assert [p.name for p in here.iterdir()] == ["small.toml"]


# what is printed ----------------------------------------------------------------------------------------------


def test_one_line_a_claim_and_where_the_report_is(here, monkeypatch, capsys):
    stub(monkeypatch, [["proved", "refuted"]])
    called(monkeypatch, "run", "small.toml")
    told = capsys.readouterr()
    assert told.out.splitlines() == [
        "Three cavities",
        "generator.0: proved",
        "generator.1: refuted: not zero in exact algebra",
        "The report is small-report/report.html",
    ]
    assert told.err == ""  # quiet in a pipe


def test_hostile_titles_do_not_steer_the_terminal(here, monkeypatch, capsys):
    (here / "small.toml").write_text(SMALL.replace("Three cavities", "a\\u202eb\\nc\\u009b31m"))
    stub(monkeypatch, [["proved"]])
    called(monkeypatch, "run", "small.toml")
    first = capsys.readouterr().out.splitlines()[0]
    assert first == "a\\u202eb c\\x9b31m"


def test_progress_only_on_a_terminal(monkeypatch, capsys):
    with cli._progress("") as say:
        say("deriving")
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.delenv("NO_COLOR", raising=False)
    with cli._progress("x") as say:
        say("deriving")
    assert capsys.readouterr().err == "\r\x1b[Kx: deriving\r\x1b[K"
    monkeypatch.setenv("NO_COLOR", "1")
    with cli._progress("") as say:
        say("deriving")
    assert capsys.readouterr().err == "deriving\n"


def test_read(here, monkeypatch, capsys):
    assert called(monkeypatch, "read", str(DEMO)) == 0
    lines = capsys.readouterr().out.splitlines()
    for line in (
        "Nine coupled cavities, the middle one read out",
        "Graph: a chain of 9 sites, 0 to 8; numbered along the chain.",
        "H_xx: Delta at 4.",
        "Detector: site 4.",
        "Start: site 2.",
        "Letters: g positive, Delta real, tau positive.",
        "Assumed: Delta < 2*g.",
        "To derive: generator, order 4.",
    ):
        assert line in lines


def test_read_tells_the_energies_of_a_lattice(here, monkeypatch, capsys):
    assert called(monkeypatch, "read", str(ROOT / "worksheets" / "asymptotics-detuned-cavity.toml")) == 0
    assert "H_xx: Delta at 0." in capsys.readouterr().out.splitlines()


def test_read_tells_names_and_their_numbers(here, monkeypatch, capsys):
    assert called(monkeypatch, "read", str(ROOT / "worksheets" / "named-resonators.toml")) == 0
    assert "Sites: 0 bus, 1 left, 2 right, 3 readout, 4 storage." in capsys.readouterr().out


def test_words_lists_every_key_and_topic(monkeypatch, capsys):
    from derive.formula.grammar import CONSTANTS, FUNCTIONS
    from derive.problem.quantities import QUANTITIES
    from derive.worksheet import keys

    assert called(monkeypatch, "words") == 0
    told = capsys.readouterr().out
    lines = told.splitlines()
    assert len(lines) == len(set(lines))
    for table, prefix in (
        (keys.TOP, ""),
        (keys.GRAPH, "graph."),
        (keys.DETECTOR, "detector."),
        (keys.START, "start."),
        (keys.INTERVAL, "interval."),
        (keys.CHECK, "check."),
        (keys.CLAIM, "claim.<name>."),
    ):
        for key in table:
            assert any(line.startswith(f"{prefix}{key.name}: ") for line in lines), key
    for topic, spec in keys.TOPICS.items():
        assert any(line.startswith(f"derive.{topic}: ") for line in lines)
        assert all(any(line.startswith(f"derive.{topic}.{o.key.name}: ") for line in lines) for o in spec.options)
    for word in (*FAMILY_NAMES, *QUANTITIES, *keys.SIZES, *CONSTANTS, *FUNCTIONS):
        assert word in told


@pytest.mark.parametrize("family", FAMILY_NAMES)
def test_new_writes_a_worksheet_that_is_read(here, monkeypatch, capsys, family):
    name = f"{family.replace(' ', '-')}.toml"
    assert called(monkeypatch, "new", family) == 0
    assert called(monkeypatch, "read", name) == 0
    before = (here / name).read_bytes()
    assert b"#" in before
    assert called(monkeypatch, "new", family) == 2  # never over a file
    assert (here / name).read_bytes() == before


def test_new_worksheets_of_finite_families_run(here, monkeypatch):
    """As they stand, without a touch: exit 0."""
    run_blanks(here, monkeypatch, FAMILIES)


@pytest.mark.slow
def test_new_worksheets_of_infinite_families_run(here, monkeypatch):
    run_blanks(here, monkeypatch, INFINITE)


def run_blanks(here, monkeypatch, families):
    for family in families:
        assert called(monkeypatch, "new", family) == 0
    files = [f"{family.replace(' ', '-')}.toml" for family in families]
    done = watchpot("run", *files, "--out", "all", cwd=here)
    assert done.returncode == 0, done.stdout + done.stderr


def test_show(here, monkeypatch, capsys):
    assert called(monkeypatch, "show", "small.toml", "generator.1") == 0
    told = capsys.readouterr().out
    assert '    [1, 1, "-i*g^2/2"],' in told and r"\frac" in told
    assert called(monkeypatch, "show", "small.toml", "generator.1", "--at", "g=1/3", "--digits", "12") == 0
    assert capsys.readouterr().out.startswith("[1, 1]  imaginary part -0.05555555555")
    assert called(monkeypatch, "show", "small.toml", "generator.1", "--as", "worksheet") == 0
    assert r"\frac" not in capsys.readouterr().out


# writing ------------------------------------------------------------------------------------------------------


def test_an_interrupted_write_leaves_the_good_report(here, monkeypatch):
    """The disk fails at the third file: what stood there before stands there still, whole, and nothing else."""
    folder = here / "r"
    good = {"report.html": b"old", "ledger.json": b"{}", "data/a.csv": b"1"}
    running.put(good, folder)
    real, calls = Path.write_bytes, []

    def failing(self, data):
        calls.append(self)
        if len(calls) == 3:
            real(self, data[:1])
            raise OSError(28, "No space left on device")
        return real(self, data)

    monkeypatch.setattr(Path, "write_bytes", failing)
    with pytest.raises(OSError, match="No space"):
        running.put(dict.fromkeys((*good, "data/b.csv"), b"new and longer"), folder)
    monkeypatch.undo()
    found = {str(p.relative_to(folder)): p.read_bytes() for p in folder.rglob("*") if p.is_file()}
    assert found == good
    assert sorted(p.name for p in here.iterdir()) == ["r", "small.toml"]


def test_a_broken_disk_is_one_sentence(here, monkeypatch, capsys):
    stub(monkeypatch, [["proved"]])

    def full(files, folder):
        raise OSError(28, "No space left on device", "small-report/report.html")

    monkeypatch.setattr(running, "put", full)
    assert called(monkeypatch, "run", "small.toml") == 2
    assert "small-report/report.html: No space left on device" in capsys.readouterr().err


def test_interrupt_waits_for_the_renames(here, monkeypatch):
    """^C between two renames: all files are the new ones, then the interrupt is heard."""
    folder = here / "r"
    running.put({"report.html": b"old", "ledger.json": b"old"}, folder)
    real = os.replace

    def interrupted(a, b):
        real(a, b)
        os.kill(os.getpid(), signal.SIGINT)

    monkeypatch.setattr(os, "replace", interrupted)
    with pytest.raises(KeyboardInterrupt):
        running.put({"report.html": b"new", "ledger.json": b"new"}, folder)
    assert {p.name: p.read_bytes() for p in folder.iterdir()} == {"report.html": b"new", "ledger.json": b"new"}


def test_left_overs_of_an_earlier_report_go_and_other_files_stay(here):
    folder = here / "r"
    running.put({"report.html": b"1", "ledger.json": b"{}", "data/old.csv": b"1", "data/kept.csv": b"1"}, folder)
    (folder / "notes.txt").write_text("mine")
    running.put({"report.html": b"2", "ledger.json": b"{}", "data/kept.csv": b"2"}, folder)
    found = sorted(str(p.relative_to(folder)) for p in folder.rglob("*") if p.is_file())
    assert found == ["data/kept.csv", "ledger.json", "notes.txt", "report.html"]
    other = here / "mine"
    (other / "data").mkdir(parents=True)
    (other / "data" / "own.csv").write_text("mine")
    running.put({"report.html": b"1", "ledger.json": b"{}"}, other)
    assert (other / "data" / "own.csv").exists()


def test_a_file_where_the_folder_should_be(here, monkeypatch, capsys):
    (here / "small-report").write_text("a file")
    stub(monkeypatch, [["proved"]])
    assert called(monkeypatch, "run", "small.toml") == 2
    assert "is a file, and the report needs a folder there" in capsys.readouterr().err


def test_interrupt_gives_130_and_leaves_nothing(here):
    (here / "long.toml").write_text(SMALL.replace("order = 1", "order = 24").replace("sites = 3", "sites = 60"))
    running_now = subprocess.Popen(
        [sys.executable, "-c", "from derive.cli import main; main()", "run", "long.toml", "--digits", "900"],
        cwd=here,
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    )
    time.sleep(2.5)
    running_now.send_signal(signal.SIGINT)
    out, err = running_now.communicate(timeout=60)
    assert running_now.returncode == 130, err
    assert err.strip().endswith("Interrupted. Nothing was left half written.")
    assert "Traceback" not in err
    assert sorted(p.name for p in here.iterdir()) == ["long.toml", "small.toml"]


# start-up -----------------------------------------------------------------------------------------------------


def test_version_and_help():
    assert watchpot("--version").stdout == f"watchpot {__version__}\n"
    told = watchpot("--help")
    assert told.returncode == 0
    for command in ("run", "read", "show", "new", "words"):
        assert command in told.stdout
        assert watchpot(command, "--help").returncode == 0


HEAVY = ("sympy", "matplotlib", "numpy", "mpmath", "networkx", "scipy")


@pytest.mark.parametrize("args", [("--help",), ("run", "bad.toml"), ("read", "bad.toml"), ("words",)])
def test_help_and_refusals_import_nothing_heavy(here, args):
    """A fresh interpreter lists what was loaded when the command has ended."""
    (here / "bad.toml").write_text(SMALL.replace('"-g"', '"-J"').replace("detector.at = 0", "detector.at = 0.5"))
    code = (
        "import sys\nfrom derive.cli import main\n"
        "try:\n    main()\nexcept SystemExit:\n    pass\n"
        f"print([m for m in {HEAVY!r} if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, *args],
        capture_output=True,
        text=True,
        cwd=here,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    )
    assert done.stdout.splitlines()[-1] == "[]", done.stdout + done.stderr


def test_output_into_a_closed_pipe(here):
    done = subprocess.run(
        f"{sys.executable} -c 'from derive.cli import main; main()' words | head -n 1",
        shell=True,
        capture_output=True,
        text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    )
    assert done.stderr == ""


def test_a_terminal_without_unicode(here):
    (here / "small.toml").write_text(SMALL.replace("Three cavities", "Drei Höhlen"), encoding="utf-8")
    done = watchpot("read", "small.toml", cwd=here, PYTHONIOENCODING="ascii", LC_ALL="C")
    assert done.returncode == 0
    assert done.stdout.startswith("Drei H\\xf6hlen\n")


# the real thing -----------------------------------------------------------------------------------------------


def test_the_demo_from_end_to_end(here):
    """Exit 0, everything proved or agrees, and nothing but the report in the folder."""
    done = watchpot("run", str(DEMO), cwd=here)
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    lines = done.stdout.splitlines()
    assert all(": proved" in line or ": agrees" in line for line in lines[1:-1])
    assert lines[-1] == "The report is nine-cavities-report/report.html"
    assert sorted(p.name for p in here.iterdir()) == ["nine-cavities-report", "small.toml"]


def test_a_wrong_claim_is_refuted_and_exits_1(here):
    wrong = SMALL + 'claim.a = { about = "generator", which = 1, entry = [1, 1], formula = "i*g^2/2" }\n'
    (here / "wrong.toml").write_text(wrong)
    done = watchpot("run", "wrong.toml", cwd=here)
    assert done.returncode == 1
    assert "claim.a: refuted" in done.stdout


def test_digits_reach_the_checks(here):
    from derive.worksheet import read

    question = read(here / "small.toml")
    assert cli._with_digits(question, 50) == replace(question, check=replace(question.check, digits=50))
