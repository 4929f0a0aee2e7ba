"""The command `watchpot`.  The only place that prints; everything it says is a plain sentence.

Results go to standard output, messages and progress to standard error.  Exit codes: 0 all proved or agrees, 1
something refuted, 2 bad input, 3 something open, 130 interrupted, 70 a defect of
ours.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING

import click

from derive import __version__
from derive.errors import BadInput, Fault, NotCovered, WatchpotError

if TYPE_CHECKING:
    from derive.problem.setting import Question
    from derive.record.said import Judged, Report
    from derive.worksheet import Sheet

BAD_INPUT, DEFECT, INTERRUPTED = 2, 70, 130


@click.group(context_settings={"help_option_names": ["--help"], "max_content_width": 100})
@click.version_option(__version__, message="watchpot %(version)s")
def commands() -> None:
    """watchpot derives formulas for repeatedly measured quantum systems and checks each by measurement.

    A question is a worksheet, a TOML file.  watchpot new chain writes one to start from; watchpot words lists every
    word it may use.
    """


@commands.command()
@click.argument("files", nargs=-1, required=True, metavar="FILE...")
@click.option("--out", metavar="DIR", help="Write the reports into DIR/<worksheet name>/.")
@click.option("--digits", type=int, help="Digits both roads must share, 10 to 1000.")
@click.option("--jobs", type=int, default=1, help="Processes that check at the same time.", show_default=True)
def run(files: tuple[str, ...], out: str | None, digits: int | None, jobs: int) -> None:
    """Derive, check, and write report.html, derivation.tex, ledger.json, figures and data."""
    _check_range("--digits", digits, 10, 1000)
    _check_range("--jobs", jobs, 1, 256)
    questions = [_with_digits(q, digits) for q in _all_read(files)]
    _run_all(questions, out, jobs)


@commands.command()
@click.argument("file", metavar="FILE")
def read(file: str) -> None:
    """Say what was understood, and derive nothing."""
    from derive.worksheet import survey
    from derive.worksheet.told import told

    sheet = survey(file)
    if sheet.question is None:
        _refuse([(file, sheet)])
        return
    for line in told(sheet.question):
        _print(line)
    for fault in sheet.unserved:
        _print(f"Not served yet: {fault.key}: {fault.message} {fault.mend}")


@commands.command()
@click.argument("file", metavar="FILE")
@click.argument("entry", metavar="ID")
@click.option("--at", metavar="g=1,tau=1/50", help="Print the number at these values.")
@click.option("--as", "form", type=click.Choice(["latex", "worksheet"]), help="One form only.")
@click.option("--digits", type=int, help="Digits of the number; left out, the worksheet's.")
def show(file: str, entry: str, at: str | None, form: str | None, digits: int | None) -> None:
    """Print one entry as LaTeX and in worksheet syntax, or as a number with its digits."""
    from derive.worksheet.showing import entry_forms, entry_numbers, entry_remark, find_entry

    _check_range("--digits", digits, 1, 1000)
    question = _all_read((file,))[0]
    claim = find_entry(question, entry)
    if at is None:
        latex, worksheet = entry_forms(question, claim)
        remark = entry_remark(question, claim)
        latex = f"{latex}\n% {remark}" if remark else latex
        lines = [latex] if form == "latex" else [worksheet] if form == "worksheet" else [latex, "", worksheet]
    else:
        lines = entry_numbers(question, claim, at, digits)
    for line in lines:
        _print(line)


@commands.command()
@click.argument("family", metavar="FAMILY")
def new(family: str) -> None:
    """Write a commented worksheet to start from; never over a file."""
    from derive.worksheet.blank import blank, file_name, is_served
    from derive.worksheet.faults import near
    from derive.worksheet.keys import FAMILY_NAMES

    name = family.replace("_", " ").replace("-", " ")
    if name not in FAMILY_NAMES:
        mend = f"{near(name, FAMILY_NAMES)} Known: {', '.join(FAMILY_NAMES)}."
        raise BadInput([Fault(f"{family!r} is no family of graphs.", mend.strip())])
    place = Path(file_name(name))
    try:
        with place.open("x", encoding="utf-8", newline="\n") as out:
            out.write(blank(name))
    except FileExistsError:
        raise BadInput(
            [Fault(f"{place} is there already and stays as it is.", "Move it, or work elsewhere.")]
        ) from None
    except OSError as fault:
        raise BadInput([Fault(f"{place} cannot be written: {fault.strerror}.", "Work in another folder.")]) from None
    _print(f"{place} is written.  Next:  watchpot {'run' if is_served(name) else 'read'} {place}")


@commands.command()
def words() -> None:
    """List every word a worksheet may use, a line each."""
    from derive.worksheet.words import words as all_words

    for line in all_words():
        _print(line)


# reading ----------------------------------------------------------------------------------------------------


def _all_read(files: tuple[str, ...]) -> list[Question]:
    """Every worksheet's question, all of it served, no two of the same name; or everything that hinders."""
    from derive.worksheet import survey

    sheets = [(file, survey(file)) for file in files]
    if any(sheet.question is None or sheet.unserved for _, sheet in sheets):
        _refuse(sheets)
    by_name: dict[str, str] = {}
    for file, sheet in sheets:
        name = sheet.taken().name
        if name in by_name:
            message = f"{by_name[name]} and {file} would write the same report, {name}."
            raise BadInput([Fault(message, "Rename one of them, or run them one after the other.")])
        by_name[name] = file
    return [sheet.taken() for _, sheet in sheets]


def _refuse(sheets: list[tuple[str, Sheet]]) -> None:
    """Say all faults, then what is not served, then one closing line; leave with 2."""
    from derive.worksheet.faults import say_all

    counts = []
    for file, sheet in sheets:
        for told in (sheet.faults, sheet.unserved):
            if told:
                _complain(say_all(told))
        if sheet.faults:
            counts.append(f"{_count(len(sheet.faults), 'fault')} in {file}")
        if sheet.unserved:
            counts.append(f"{_count(len(sheet.unserved), 'wish', 'wishes')} not served yet in {file}")
    _complain(f"{', '.join(counts)}. Nothing was derived, nothing was written.")
    raise SystemExit(BAD_INPUT)


def _count(n: int, one: str, many: str = "") -> str:
    return f"{n} {one if n == 1 else many or one + 's'}"


def _check_range(option: str, value: int | None, low: int, high: int) -> None:
    if value is not None and not low <= value <= high:
        raise BadInput([Fault(f"{option} is {value}.", f"It goes from {low} to {high}.")])


def _with_digits(question: Question, digits: int | None) -> Question:
    from dataclasses import replace

    return question if digits is None else replace(question, check=replace(question.check, digits=digits))


# running ----------------------------------------------------------------------------------------------------


def _run_all(questions: list[Question], out: str | None, jobs: int) -> None:
    from derive.worksheet.running import answered, check_folder, derived, exit_code, folder_for, put, written

    folders = [folder_for(q.name, out) for q in questions]
    for folder in folders:
        check_folder(folder)
    for question in questions if len(questions) > 1 else ():
        with _named(question):
            derived(question)  # so that nothing is written where one of them cannot be derived
    verdicts = []
    for question, folder in zip(questions, folders, strict=True):
        with _named(question), _progress(question.name if len(questions) > 1 else "") as say:
            report = answered(question, jobs, say)
            say("writing the report")
            files = written(report)
            put(files, folder)
        _say_report(report, folder / ("report.html" if "report.html" in files else "ledger.json"))
        verdicts.append(report.verdict())
    raise SystemExit(exit_code(verdicts))


@contextmanager
def _named(question: Question) -> Iterator[None]:
    """Whatever turns out not to be covered says in which worksheet."""
    try:
        yield
    except NotCovered as fault:
        raise NotCovered(f"{question.name}: {fault}") from None


def _say_report(report: Report, place: Path) -> None:
    if report.question.setting.title:
        _print(" ".join(report.question.setting.title.split()))
    for judged in report.judged:
        if judged.verdict == "refuted" and judged.claim.origin == "user":
            _print(_refuted_line(judged))
            continue
        _print(_verdict_line(judged))
        if judged.diagnosis:
            _print(f"    {judged.diagnosis}")
        elif judged.claim.origin == "user" and judged.claim.valid_for:
            _print(f"    {judged.claim.valid_for}")
    _print(f"The report is {place}")


def _refuted_line(judged: Judged) -> str:
    """claim.mine: refuted: too small by 4; ... is accepted.  Without a diagnosis, one counterexample."""
    seen = [f for f in judged.findings if f.verdict == "refuted"]
    if judged.diagnosis and judged.diagnosis not in {f.evidence for f in seen}:
        return f"{judged.claim.id}: refuted: {judged.diagnosis}"
    first = next((f for f in seen if f.road != "exact"), seen[0] if seen else None)
    if first is None:
        return f"{judged.claim.id}: refuted"
    where = ", ".join(f"{name} = {value}" for name, value in first.point)
    return f"{judged.claim.id}: refuted{' at ' if where else ''}{where}: {first.evidence}"


def _verdict_line(judged: Judged) -> str:
    """generator.2: proved, 45 digits shared at 5 points; whatever does not pass says what was found."""
    from derive.report.prose import finding, shared_digits

    line = f"{judged.claim.id}: {judged.verdict}"
    if judged.verdict in ("proved", "agrees"):
        digits = shared_digits(judged)
        points = max((f.points or 0 for f in judged.findings), default=0)
        shared = f", {digits} digits shared" if digits is not None else ""
        return line + shared + (f" at {_count(points, 'point')}" if shared and points else "")
    told = [finding(f) for f in judged.findings if f.verdict == judged.verdict] or [finding(f) for f in judged.findings]
    return " ".join(f"{line}: {'; '.join(told)}".split()) if told else line


@contextmanager
def _progress(name: str) -> Iterator[Callable[[str], None]]:
    """Tells on a terminal what goes on, in a line that is wiped in the end; says nothing in a pipe."""
    terminal = sys.stderr.isatty()
    wipes = terminal and "NO_COLOR" not in os.environ and os.environ.get("TERM") != "dumb"

    def say(words: str) -> None:
        told = f"{name}: {words}" if name else words
        if wipes:
            sys.stderr.write(f"\r\x1b[K{told[:100]}")
        elif terminal:
            sys.stderr.write(f"{told}\n")
        sys.stderr.flush()

    try:
        yield say
    finally:
        if wipes:
            sys.stderr.write("\r\x1b[K")
            sys.stderr.flush()


# speaking ---------------------------------------------------------------------------------------------------


def _print(line: str) -> None:
    click.echo(_speakable(line, sys.stdout))


def _complain(line: str) -> None:
    click.echo(_speakable(line, sys.stderr), err=True)


def _speakable(line: str, stream: object) -> str:
    """Characters that the terminal's encoding lacks, or that would steer it, are written as escapes."""
    encoding = getattr(stream, "encoding", None) or "utf-8"
    kept = "".join(c if c == "\n" or c.isprintable() else ascii(c)[1:-1] for c in line)
    return kept.encode(encoding, "backslashreplace").decode(encoding)


def main() -> None:
    """Run the command; every ending has its exit code and its plain sentence."""
    try:
        commands.main(prog_name="watchpot", standalone_mode=False)
    except click.exceptions.Exit as leave:
        sys.exit(leave.exit_code)
    except click.UsageError as fault:
        _complain(_usage(fault))
        sys.exit(BAD_INPUT)
    except BadInput as bad:
        from derive.worksheet.faults import say_all

        _complain(say_all(bad.faults))
        sys.exit(BAD_INPUT)
    except NotCovered as fault:
        _complain(f"{fault}. This is not covered; nothing was written.".replace("..", "."))
        sys.exit(BAD_INPUT)
    except WatchpotError as fault:
        _complain(str(fault))
        sys.exit(BAD_INPUT)
    except BrokenPipeError:
        with suppress(OSError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
    except OSError as fault:
        _complain(f"{fault.filename or 'the system'}: {fault.strerror or fault}. The report was not written whole.")
        sys.exit(BAD_INPUT)
    except MemoryError:
        _complain("this question needs more memory than there is. Lower the order, or take a smaller graph.")
        sys.exit(BAD_INPUT)
    except (KeyboardInterrupt, click.Abort):
        _complain("Interrupted. Nothing was left half written.")
        sys.exit(INTERRUPTED)
    except Exception:  # a defect of ours must not end in the exit code that means "refuted"
        import traceback

        _complain(traceback.format_exc().rstrip())
        _complain("This is a defect of watchpot, not of your input; nothing was left half written.")
        sys.exit(DEFECT)


def _usage(fault: click.UsageError) -> str:
    """What is wrong with the command itself, and where to look; a bare `watchpot` is answered by its help."""
    if isinstance(fault, click.exceptions.NoArgsIsHelpError):
        return fault.format_message()
    command = fault.ctx.command_path if fault.ctx is not None else "watchpot"
    said = fault.format_message().replace("Invalid value for", "At")
    said = said.replace("is not a valid integer", "is no whole number")
    return f"{said}\n    {command} --help  says what it takes."
