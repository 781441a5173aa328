"""The commands: what they take, where they write, and what their exit code says.

Standard output carries what was asked for; standard error carries one sentence for each notice. Exit codes: 0,
nothing at or above the fail level; 1, something; 2, the work could not be done. No input may end in a traceback:
``main`` turns whatever escapes the stages into one sentence that names the stage and the unit.
"""

import dataclasses
import errno
import io
import os
import sys
import traceback
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any, NoReturn, TypeVar

import click
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

from stepring import __version__
from stepring.meaning.models import MODELS
from stepring.places import Notice
from stepring.report.inventory import inventory_lines, print_inventory
from stepring.report.lines import report_lines
from stepring.report.notices import notice_sentences
from stepring.report.printed import print_report
from stepring.report.sarif import page_of, sarif_log
from stepring.report.serialise import to_bytes, write_whole
from stepring.report.text import one_sentence, printable, shown_path
from stepring.report.types import Outcome
from stepring.report.words import VERDICT_WORDS, level_of
from stepring.rule import LEVELS, load_rules

Function = TypeVar("Function", bound=Callable[..., Any])

FOUND_NOTHING, FOUND_SOMETHING, NOT_DONE = 0, 1, 2
DEFAULT_FAIL_LEVEL = "warning"

# Set to anything, it makes an internal failure show its traceback: for those who mend stepring.
TRACEBACK_VARIABLE = "STEPRING_TRACEBACK"


@dataclasses.dataclass(slots=True)
class _Now:
    """What is being worked on, for the sentence of last resort."""

    unit: str = ""


_now = _Now()


def _verdict_list(_context: click.Context, _option: click.Parameter, text: str) -> tuple[str, ...]:
    """The verdicts in a list with commas."""
    words = tuple(dict.fromkeys(word.strip() for word in text.split(",") if word.strip()))
    wrong = [word for word in words if word not in VERDICT_WORDS]
    if wrong or not words:
        named = ", ".join(repr(word) for word in wrong) or "an empty list"
        raise click.BadParameter(f"{named} names no verdict; known are {', '.join(VERDICT_WORDS)}")
    return words


_OPTIONS = (
    click.argument("paths", nargs=-1, metavar="[PATH]...", type=click.Path(path_type=Path)),
    click.option(
        "--compile-commands",
        metavar="FILE",
        type=click.Path(path_type=Path),
        help="The JSON compilation database that says how each file is compiled.",
    ),
    click.option("--sarif", metavar="FILE", help="Write a SARIF 2.1.0 log; - means standard output."),
    click.option(
        "--kind",
        "kinds",
        metavar="LIST",
        callback=_verdict_list,
        default="fail",
        show_default=True,
        help=f"Which verdicts are written: any of {', '.join(VERDICT_WORDS)}, with commas between.",
    ),
    click.option(
        "--report",
        type=click.Choice(("full", "lines", "none")),
        help="The report on standard output: for people, a line each, or none. "
        "The default is full, and none with --sarif -.",
    ),
    click.option(
        "--data-model",
        metavar="NAME",
        type=click.Choice(tuple(MODELS)),
        help=f"The sizes of the C types, whatever a compiler says: {', '.join(MODELS)}.",
    ),
    click.option(
        "--compiler",
        "compilers",
        metavar="NAME",
        multiple=True,
        help="A compiler to preprocess with: a program on the search path, or its absolute path. Can be given several "
        "times, once for each compiler that a database names.",
    ),
    click.option("--no-compiler", is_flag=True, help="Run no compiler; use the built-in preprocessor."),
    click.option(
        "--jobs",
        metavar="N",
        type=click.IntRange(1, 512),
        default=lambda: os.cpu_count() or 1,
        help="How many units are worked on at the same time; the default is one for each processor.",
    ),
    click.option(
        "--no-proofs",
        is_flag=True,
        help="Run no ring's operations and ask no solver: what only they can show stays open. Faster, and finds less.",
    ),
    click.option(
        "--query-limit",
        metavar="N",
        type=click.IntRange(1, 1 << 32),
        help="The most work that one question to the solver may cost, in the solver's own units, which are the same on "
        "every machine. What is not settled by then stays open.",
    ),
    click.option(
        "--time-limit",
        metavar="SECONDS",
        type=click.FloatRange(0.0, 86400.0, min_open=True),
        help="The most time that one obligation may take. It is meant for the worst case only: a run that comes to it "
        "can give another result on a slower machine.",
    ),
)


def _reading_options(function: Function) -> Function:
    """The options that ``inspect`` and ``inventory`` share."""
    for option in reversed(_OPTIONS):
        function = option(function)
    return function


def _fail_level_option(unless_given: str) -> Callable[[Function], Function]:
    return click.option(
        "--fail-level",
        type=click.Choice((*reversed(LEVELS), "none")),
        help=f"The lowest level of a failure that makes the exit code 1; {unless_given}.",
    )


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="stepring")
def commands() -> None:
    """Inspect embedded C for defects in state machines and ring-shaped storage."""


@commands.command()
@_reading_options
@_fail_level_option("the default is that of stepring.toml, else warning")
def inspect(fail_level: str | None, **given: Any) -> int:
    """Run the rules on the C below each PATH and report what they find.

    Without PATH the current folder is inspected. Exit code 0: nothing at or above the fail level; 1: something; 2:
    the work could not be done.
    """
    return _run(fail_level, print_report_kind=_write_report, **given)


@commands.command()
@_reading_options
@_fail_level_option("the default is none")
@click.option(
    "--html", metavar="FILE", type=click.Path(path_type=Path), help="Write one page with tables and drawings."
)
@click.option("--markdown", metavar="FILE", type=click.Path(path_type=Path), help="Write the tables as Markdown.")
def inventory(fail_level: str | None, html: Path | None, markdown: Path | None, **given: Any) -> int:
    """List the state machines and rings of the C below each PATH, with their tables.

    Without PATH the current folder is inspected.
    """
    pages = tuple((kind, target) for kind, target in (("html", html), ("markdown", markdown)) if target is not None)
    return _run(fail_level or "none", print_report_kind=_write_inventory, pages=pages, **given)


@commands.command()
@click.argument("log", metavar="LOG", type=click.Path(path_type=Path))
@click.option(
    "--root",
    metavar="DIR",
    type=click.Path(path_type=Path),
    help="The root of the inspected project; the default is the current folder.",
)
@click.option(
    "--keep",
    metavar="DIR",
    type=click.Path(path_type=Path),
    help="Keep the C programs there: each is a regression test for its finding.",
)
@click.option("--no-programs", is_flag=True, help="Build and run no program: use the interpreter alone.")
@click.option(
    "--compiler",
    metavar="NAME",
    help="The host's C compiler for the programs: a program on the search path, or its absolute path. The default is "
    "the first of cc, gcc and clang that is there.",
)
def replay(log: Path, root: Path | None, keep: Path | None, no_programs: bool, compiler: str | None) -> int:
    """Run the witnesses of a SARIF log again and say whether each shows its finding.

    Each is run in the interpreter. Where the data model is the host's and a C compiler is there, it is also made into
    a C program that includes the inspected source, built with the compiler's checks for addresses, bounds and
    arithmetic; it has to stop at the reported line. This command is the only one that runs anything of the inspected
    project: name only logs and sources that you trust as you trust a build, or use --no-programs.

    Exit code 0: all witnesses show their findings; 1: some do not; 2: the work could not be done.
    """
    if keep is not None and no_programs:
        _refuse("--keep keeps programs, and --no-programs makes none; leave one of them out")
    from stepring import replaying, witness_log  # imported here, as the engines take a while to load
    from stepring.report.replayed import replay_lines, replay_summary

    try:
        read = witness_log.read_log(log)
        place = Path(os.path.normpath(_current_folder() / (root or ".")))
        for sentence in witness_log.changed_files(read, place):
            click.echo(f"stepring: {sentence}", err=True)
        wishes = replaying.Wishes(not no_programs, keep, () if compiler is None else (compiler,))
        judged: list[replaying.Judged] = []
        for number, one in enumerate(replaying.replay_log(read, place, wishes), 1):
            judged.append(one)
            with _writing():
                for line in replay_lines(number, one):
                    click.echo(line)
        with _writing():
            click.echo(replay_summary(judged))
    except witness_log.BadLog as trouble:
        _refuse(str(trouble))
    return FOUND_NOTHING if all(one.replayed for one in judged) else FOUND_SOMETHING


@commands.command()
@click.argument("identity", metavar="[ID]", required=False)
def rule(identity: str | None) -> int:
    """Show a rule's page, or without ID the list of rules."""
    rules = {known.id: known for known in load_rules()}
    if identity is None:
        with _writing():
            for known in rules.values():
                click.echo(f"{known.id}  {known.level:7}  {one_sentence(known.summary)}")
        return FOUND_NOTHING
    chosen = rules.get(identity) or rules.get(identity.upper())
    if chosen is None:
        _refuse(f"there is no rule {printable(identity)!r}; `stepring rule` lists all")
    page = page_of(chosen) or f"# {chosen.id} {chosen.name}\n\n{one_sentence(chosen.summary)}"
    console = _console()
    with _writing():
        if console.is_terminal:
            from rich.markdown import Markdown  # slow to load, and needed here only

            console.print(Markdown(page))
        else:
            click.echo(page.rstrip("\n"))
    return FOUND_NOTHING


def _current_folder() -> Path:
    try:
        return Path.cwd()
    except OSError as error:
        _refuse(f"the current folder cannot be used: {error.strerror or error}")


def _refuse(text: str) -> NoReturn:
    raise click.ClickException(text)


# ---------------------------------------------------------------------------------------------------------- a run


def _run(
    fail_level: str | None,
    print_report_kind: Callable[[Outcome, Console, str, Sequence[str]], None],
    paths: tuple[Path, ...],
    compile_commands: Path | None,
    sarif: str | None,
    kinds: tuple[str, ...],
    report: str | None,
    data_model: str | None,
    compilers: tuple[str, ...],
    no_compiler: bool,
    jobs: int,
    no_proofs: bool,
    query_limit: int | None,
    time_limit: float | None,
    pages: Sequence[tuple[str, Path]] = (),
) -> int:
    # Imported here: the engines take a while to load, and the other commands need none of them.
    from stepring import pipeline

    options = pipeline.Options(
        compile_commands=compile_commands,
        data_model=data_model,
        jobs=jobs,
        compilers=compilers,
        use_compiler=not no_compiler,
        proofs=not no_proofs,
        query_limit=query_limit,
        time_limit=time_limit,
    )
    with _progress() as progress:
        outcome = pipeline.inspect(paths, options, progress)
    code = exit_code(outcome, fail_level or outcome.fail_level or DEFAULT_FAIL_LEVEL)
    troubles = [] if sarif is None else [_write_sarif(outcome, sarif, kinds, code)]
    troubles += [_write_page(outcome, kind, target) for kind, target in pages]
    trouble = next((one for one in troubles if one is not None), None)
    notices = (*outcome.notices, *(one for one in troubles if one is not None))
    for sentence in notice_sentences(notices):
        click.echo(f"stepring: {sentence}", err=True)
    form = report or ("none" if sarif == "-" else "full")
    if form != "none":
        # Standard output belongs to the log if that was sent there.
        with _writing():
            print_report_kind(outcome, _console(stderr=sarif == "-"), form, kinds)
    return code if trouble is None else NOT_DONE


def exit_code(outcome: Outcome, fail_level: str) -> int:
    """0, 1 or 2, whatever verdicts are written: see the module's text."""
    if any(notice.level == "error" for notice in outcome.notices):
        return NOT_DONE
    if fail_level == "none":
        return FOUND_NOTHING
    counted = LEVELS[[str(level) for level in LEVELS].index(fail_level) :]
    found = any(level_of(one) in counted for one in outcome.obligations)
    return FOUND_SOMETHING if found else FOUND_NOTHING


def _write_sarif(outcome: Outcome, target: str, kinds: Sequence[str], code: int) -> Notice | None:
    """Write the log whole or not at all; what stood in the way, if it could not be written."""
    data = to_bytes(sarif_log(outcome, kinds, code))
    if target == "-":
        with _writing():
            if sys.stdout is None:
                raise OSError(errno.EBADF, "it is closed")
            sys.stdout.buffer.write(data)
        return None
    try:
        write_whole(Path(target), data)
    except (OSError, ValueError) as error:
        why = getattr(error, "strerror", None) or str(error)
        return Notice("unwritable", "error", f"The SARIF log could not be written to {target}: {why}")
    return None


def _write_page(outcome: Outcome, kind: str, target: Path) -> Notice | None:
    """Write the inventory as a page, whole or not at all."""
    # Imported here: layout and templates take a while to load.
    from stepring.report.inventory_markdown import inventory_markdown
    from stepring.report.page import inventory_page

    make = {"html": inventory_page, "markdown": inventory_markdown}[kind]
    try:
        write_whole(target, make(outcome, target).encode("utf-8"))
    except (OSError, ValueError) as error:
        why = getattr(error, "strerror", None) or str(error)
        return Notice("unwritable", "error", f"The inventory could not be written to {target}: {why}")
    return None


@contextmanager
def _writing() -> Iterator[None]:
    """Around what writes to standard output: a full disk, say, is no defect of stepring."""
    try:
        yield
        if sys.stdout is not None:
            sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        _silence_output()
        _refuse(f"standard output could not be written: {error.strerror or error}")


def _silence_output() -> None:
    """Let nothing more be written, not even by the interpreter on its way out."""
    if sys.stdout is not None:
        with suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _write_report(outcome: Outcome, console: Console, form: str, kinds: Sequence[str]) -> None:
    if form == "lines":
        _write_lines(console, report_lines(outcome, kinds))
    else:
        _write_printed(console, lambda: print_report(outcome, console, kinds))


def _write_inventory(outcome: Outcome, console: Console, form: str, _: Sequence[str]) -> None:
    if form == "lines":
        _write_lines(console, inventory_lines(outcome))
    else:
        _write_printed(console, lambda: print_inventory(outcome, console))


def _write_lines(console: Console, lines: Sequence[str]) -> None:
    for line in lines:
        click.echo(line, file=console.file)


def _write_printed(console: Console, write: Callable[[], None]) -> None:
    """Print on a terminal as it is; elsewhere without the blanks that fill tables up."""
    if console.is_terminal:
        write()
        return
    with console.capture() as captured:
        write()
    for line in captured.get().splitlines():
        click.echo(line.rstrip(), file=console.file)


def _console(stderr: bool = False) -> Console:
    """A console without any interpretation of the text that it prints."""
    return Console(stderr=stderr, highlight=False, markup=False, emoji=False, soft_wrap=False)


@contextmanager
def _progress() -> Iterator[Callable[[int, int, str], None]]:
    """A progress bar on standard error if that is a terminal; what is reported is remembered in any case."""
    console = _console(stderr=True)
    if not console.is_terminal:
        yield _remember
        return
    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("", total=None)

        def show(done: int, total: int, text: str) -> None:
            _remember(done, total, text)
            bar.update(task, completed=done, total=total, description=printable(text)[-40:])

        yield show


def _remember(_done: int, _total: int, text: str) -> None:
    _now.unit = text


# ---------------------------------------------------------------------------------------------------------- the entry


def main(arguments: Sequence[str] | None = None) -> int:
    """The command ``stepring``; gives the exit code."""
    _now.unit = ""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")
    try:
        result = commands.main(args=arguments, prog_name="stepring", standalone_mode=False)
    except click.exceptions.NoArgsIsHelpError as error:
        click.echo(error.format_message(), err=True)
        return NOT_DONE
    except click.exceptions.Abort:
        return _say("stopped before the work was done.")
    except click.ClickException as error:
        return _say(_lower_first(one_sentence(error.format_message())))
    except KeyboardInterrupt:
        return _say("stopped before the work was done.")
    except BrokenPipeError:
        _silence_output()  # whoever read it has gone
        return NOT_DONE
    except Exception as error:
        if os.environ.get(TRACEBACK_VARIABLE):
            traceback.print_exc()
        return _say(last_resort(error, _now.unit))
    return result if isinstance(result, int) else FOUND_NOTHING


def last_resort(error: BaseException, unit: str) -> str:
    """One sentence on a failure of stepring itself: the stage, the unit and the error."""
    package = Path(__file__).parent
    stages = [
        Path(frame.filename).relative_to(package).parts[0].removesuffix(".py")
        for frame in traceback.extract_tb(error.__traceback__)
        if Path(frame.filename).is_relative_to(package)
    ]
    stage = next(
        (name for name in reversed(stages) if name not in ("cli", "pipeline")), stages[-1] if stages else "start"
    )
    place = f" at {shown_path(unit)}" if unit else ""
    what = printable(" ".join(f"{type(error).__name__}: {error}".split()))[:300]
    return f"the stage {stage} failed{place} by a defect of stepring itself ({what}); please report it."


def _lower_first(text: str) -> str:
    """A sentence without its capital, unless it begins with a name."""
    return text[:1].lower() + text[1:] if text[1:2].islower() else text


def _say(sentence: str) -> int:
    click.echo(f"stepring: {sentence}", err=True)
    return NOT_DONE
